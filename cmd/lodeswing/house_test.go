package main

import (
	"os/exec"
	"slices"
	"strings"
	"testing"
)

// road is the one way through the house: a package imports only packages that
// stand on an earlier line of its own column or in the columns before it.
// DEVELOPERS.md draws the same map.
var road = []string{
	"track/rig", "analyze/finding", "analyze/lsq", "analyze/ode", "analyze/magnet",
	"track", "track/clip", "track/camera", "track/board", "track/shake", "track/detect", "track/link", "track/follow",
	"analyze/series", "analyze/decay", "analyze/spectrum", "analyze/modes", "analyze/toy", "analyze/recurrence",
	"analyze/chaos", "analyze/match", "analyze/kick", "analyze/compare", "analyze/claim", "analyze/lot", "analyze/record", "analyze",
	"plots", "samples", "cmd/internal/progress", "cmd/internal/store", "cmd/internal/job", "cmd/internal/desk", "cmd/lodeswing",
}

// free are the packages that import nothing of ours.
var free = []string{"track/rig", "analyze/finding", "analyze/lsq", "analyze/ode", "analyze/magnet"}

// opencv are the only packages that may import the OpenCV binding.
var opencv = []string{"track/clip", "track/shake", "track/board"}

func TestTheHouseStandsAsDesigned(t *testing.T) {
	out, err := exec.Command("go", "list", "-tags=gocv_specific_modules,gocv_videoio,gocv_calib3d,gocv_features2d",
		"-f", `{{.ImportPath}} {{join .Imports " "}}`, "lodeswing/...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	seen := 0
	for line := range strings.Lines(string(out)) {
		words := strings.Fields(line)
		pkg := strings.TrimPrefix(words[0], "lodeswing/")
		seen++
		own := place(pkg)
		if own < 0 {
			t.Errorf("%s has no place on the road; give it one in this test and in DEVELOPERS.md", pkg)
			continue
		}
		for _, imported := range words[1:] {
			if strings.HasPrefix(imported, "gocv.io/") && !slices.Contains(opencv, pkg) {
				t.Errorf("%s imports OpenCV; only %s may", pkg, strings.Join(opencv, ", "))
			}
			to, ours := strings.CutPrefix(imported, "lodeswing/")
			if !ours {
				continue
			}
			if slices.Contains(free, pkg) {
				t.Errorf("%s imports %s, and must import nothing of ours", pkg, to)
			}
			if place(to) > own {
				t.Errorf("%s imports %s, which stands later on the road", pkg, to)
			}
			if strings.HasPrefix(pkg, "analyze") && strings.HasPrefix(to, "track") &&
				to != "track" && to != "track/rig" && to != "track/camera" {
				t.Errorf("%s imports %s: analysis opens no clip", pkg, to)
			}
			if pkg == "plots" && strings.HasPrefix(to, "analyze/") && to != "analyze/record" && to != "analyze/finding" {
				t.Errorf("plots imports %s: it draws what a record holds and computes nothing", to)
			}
			if strings.HasPrefix(pkg, "cmd") == false && strings.HasPrefix(to, "samples") && !strings.HasPrefix(pkg, "samples") {
				t.Errorf("%s imports %s: samples are for the commands and for tests", pkg, to)
			}
		}
	}
	if seen < 10 {
		t.Fatalf("go list named only %d packages", seen)
	}
}

// place is the line on the road of a package or of the nearest folder above it
// that has one, −1 for none.
func place(pkg string) int {
	for {
		if i := slices.Index(road, pkg); i >= 0 {
			return i
		}
		cut := strings.LastIndexByte(pkg, '/')
		if cut < 0 {
			return -1
		}
		pkg = pkg[:cut]
	}
}
