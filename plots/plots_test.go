package plots

import (
	"flag"
	"os"
	"path/filepath"
	"testing"
)

var keep = flag.String("keep", "", "folder in which the figures and the report of the sample record are left, to be looked at")

func TestDraw(t *testing.T) {
	r := swing()
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	if *keep != "" {
		for _, f := range r.Figures {
			os.WriteFile(filepath.Join(*keep, f.Name+".svg"), f.SVG, 0o644)
			os.WriteFile(filepath.Join(*keep, f.Name+".png"), f.PNG, 0o644)
		}
		os.WriteFile(filepath.Join(*keep, "report.html"), r.Report, 0o644)
	}
}
