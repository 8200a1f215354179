// Package odetest runs a reference computation in SciPy for tests: a Python
// script comes in, what it prints goes out.
package odetest

import (
	"os/exec"
	"strings"
	"testing"
)

// SciPy runs the script with the system's Python, where Debian's python3-scipy
// lives, and skips the test where there is none.
func SciPy(t *testing.T, script string) string {
	t.Helper()
	python := "/usr/bin/python3"
	if err := exec.Command(python, "-c", "import scipy.integrate").Run(); err != nil {
		t.Skip("no Python with SciPy here (Debian package python3-scipy): the reference computation is left out")
	}
	out, err := exec.Command(python, "-c", strings.TrimSpace(script)).Output()
	if err != nil {
		t.Fatalf("the reference computation failed: %v", err)
	}
	return string(out)
}
