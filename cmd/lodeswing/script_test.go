package main

import (
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
)

// TestMain lets the scripts run this very program as "lodeswing".
func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"lodeswing": main})
}

// Each file in testdata/script runs commands and says what must exist afterwards.
func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{Dir: "testdata/script"})
}
