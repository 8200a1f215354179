package record

import (
	"path/filepath"
	"strings"
	"syscall"
	"testing"
)

func TestAFullDiskLeavesTheOldResult(t *testing.T) {
	disk := t.TempDir()
	if err := syscall.Mount("tmpfs", disk, "tmpfs", 0, "size=256k"); err != nil {
		t.Skipf("a small disk cannot be mounted here (%v); run as root to check what a full disk does", err)
	}
	t.Cleanup(func() { _ = syscall.Unmount(disk, 0) })
	dir := filepath.Join(disk, "res")
	r := sampleRecord()
	if err := Write(t.Context(), dir, r); err != nil {
		t.Fatal(err)
	}
	before := listing(t, disk)
	r.Report = make([]byte, 1<<20)
	err := Write(t.Context(), dir, r)
	if err == nil || !strings.Contains(err.Error(), "the disk is full") || !strings.Contains(err.Error(), "report.html") {
		t.Errorf("error: %v", err)
	}
	if !equalFiles(before, listing(t, disk)) {
		t.Error("the old result changed, or something was left beside it")
	}
}
