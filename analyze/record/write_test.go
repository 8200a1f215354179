package record

import (
	"context"
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// listing is every file under dir with its contents.
func listing(t *testing.T, dir string) map[string]string {
	t.Helper()
	all := map[string]string{}
	err := filepath.WalkDir(dir, func(name string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := os.ReadFile(name)
		rel, _ := filepath.Rel(dir, name)
		all[rel] = string(data)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return all
}

func equalFiles(a, b map[string]string) bool {
	if len(a) != len(b) {
		return false
	}
	for name, data := range a {
		if other, ok := b[name]; !ok || other != data {
			return false
		}
	}
	return true
}

// stopAfter is a context that is cancelled once it has been asked n times.
type stopAfter struct {
	context.Context
	n int
}

func (c *stopAfter) Err() error {
	if c.n--; c.n < 0 {
		return context.Canceled
	}
	return nil
}

func TestStoppedAnywhereNothingIsLostAndNothingIsLeft(t *testing.T) {
	parent := t.TempDir()
	dir := filepath.Join(parent, "res")
	old := sampleRecord()
	old.Headline = "old"
	if err := Write(t.Context(), dir, old); err != nil {
		t.Fatal(err)
	}
	before := listing(t, parent)
	next := sampleRecord()
	next.Headline = "new"
	stops := 0
	for n := 0; ; n++ {
		err := Write(&stopAfter{t.Context(), n}, dir, next)
		if err == nil {
			break
		}
		stops++
		if !errors.Is(err, context.Canceled) {
			t.Fatalf("stopped at %d: %v", n, err)
		}
		if !equalFiles(before, listing(t, parent)) {
			t.Fatalf("stopped at %d, the folder changed or something was left beside it", n)
		}
	}
	if stops < 10 {
		t.Errorf("the writing could be stopped in %d places only", stops)
	}
	r, err := Read(dir)
	if err != nil || r.Headline != "new" {
		t.Errorf("after all: %v, %v", r, err)
	}
	if entries, _ := os.ReadDir(parent); len(entries) != 1 {
		t.Errorf("beside the result there is %v", entries)
	}
}

func TestOnlyOurOwnFoldersAreReplaced(t *testing.T) {
	parent := t.TempDir()
	r := sampleRecord()
	in := func(name string) string { return filepath.Join(parent, name) }
	must := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	must(os.Mkdir(in("photos"), 0o755))
	must(os.WriteFile(in("photos/cat.jpg"), []byte("cat"), 0o644))
	must(os.Mkdir(in("package"), 0o755))
	must(os.WriteFile(in("package/datapackage.json"), []byte(`{"name":"other","resources":[]}`), 0o644))
	must(os.WriteFile(in("file"), []byte("x"), 0o644))
	must(os.Symlink(in("nowhere"), in("dangling")))
	must(os.Mkdir(in("empty"), 0o755))
	before := listing(t, in("photos"))
	for name, want := range map[string]string{
		"photos": "is not a result of lodeswing", "package": "is not a result of lodeswing", "file": "is a file",
		"file/below": "is a file, not a folder", "dangling": "leads nowhere",
	} {
		if err := CheckTarget(in(name)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("CheckTarget(%s): %v, want %q", name, err, want)
		}
		if err := Write(t.Context(), in(name), r); err == nil {
			t.Errorf("%s was written over", name)
		}
	}
	if err := CheckTarget("/"); err == nil {
		t.Error("the root of the disk may be a result")
	}
	if !equalFiles(before, listing(t, in("photos"))) {
		t.Error("a foreign folder was changed")
	}
	for _, name := range []string{"empty", "deep/er/still", "empty"} {
		if err := CheckTarget(in(name)); err != nil {
			t.Error(err)
		}
		if err := Write(t.Context(), in(name), r); err != nil {
			t.Error(err)
		}
	}
	must(os.Symlink(in("empty"), in("link")))
	must(Write(t.Context(), in("link"), r))
	if info, err := os.Lstat(in("link")); err != nil || info.Mode()&fs.ModeSymlink == 0 {
		t.Error("a link to a result became a folder")
	}
}

func TestAFolderThatCannotBeWritten(t *testing.T) {
	if os.Geteuid() == 0 {
		// Permissions do not bind the superuser; the kernel's own tree binds everyone.
		err := CheckTarget("/proc/lodeswing-result")
		if err == nil || !strings.Contains(err.Error(), "cannot write in /proc") {
			t.Errorf("error: %v", err)
		}
		return
	}
	parent := t.TempDir()
	if err := os.Chmod(parent, 0o500); err != nil {
		t.Fatal(err)
	}
	err := CheckTarget(filepath.Join(parent, "res"))
	if err == nil || !strings.Contains(err.Error(), "not allowed") {
		t.Errorf("error: %v", err)
	}
}

func TestAPersonsOwnFilesStayInTheFolder(t *testing.T) {
	parent := t.TempDir()
	dir := filepath.Join(parent, "res")
	r := sampleRecord()
	overlay := filepath.Join(parent, "made.mp4")
	if err := os.WriteFile(overlay, []byte("film"), 0o644); err != nil {
		t.Fatal(err)
	}
	r.Kept = []Kept{{"overlay.mp4", overlay}}
	if err := Write(t.Context(), dir, r); err != nil {
		t.Fatal(err)
	}
	if err := os.MkdirAll(filepath.Join(dir, "mine"), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "mine", "notes.txt"), []byte("remember"), 0o644); err != nil {
		t.Fatal(err)
	}
	back, err := Read(dir)
	if err != nil {
		t.Fatal(err)
	}
	back.Report = []byte("newer")
	for range 2 {
		if err := Write(t.Context(), dir, back); err != nil {
			t.Fatal(err)
		}
	}
	for name, want := range map[string]string{"mine/notes.txt": "remember", "overlay.mp4": "film", "report.html": "newer"} {
		if data, _ := os.ReadFile(filepath.Join(dir, name)); string(data) != want {
			t.Errorf("%s holds %q, want %q", name, data, want)
		}
	}
	// A new measurement does not keep the old one's overlay, but the notes.
	if err := Write(t.Context(), dir, sampleRecord()); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(filepath.Join(dir, "overlay.mp4")); err == nil {
		t.Error("the old overlay lies beside the new track")
	}
	if _, err := os.Stat(filepath.Join(dir, "mine", "notes.txt")); err != nil {
		t.Error("the notes are gone")
	}
	// A file of theirs under a name that is now needed is not written over.
	if err := Write(t.Context(), dir, &Record{}); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "ledger.csv"), []byte("my own"), 0o644); err != nil {
		t.Fatal(err)
	}
	err = Write(t.Context(), dir, sampleRecord())
	if err == nil || !strings.Contains(err.Error(), "ledger.csv that lodeswing did not write") {
		t.Errorf("error: %v", err)
	}
	if data, _ := os.ReadFile(filepath.Join(dir, "ledger.csv")); string(data) != "my own" {
		t.Error("their ledger.csv is gone")
	}
}

func TestWhatAKilledRunLeftIsClearedAfterADay(t *testing.T) {
	parent := t.TempDir()
	stale, fresh, other := filepath.Join(parent, ".res.partial-0a"), filepath.Join(parent, ".res.partial-0b"), filepath.Join(parent, ".resort.partial-0c")
	for _, d := range []string{stale, fresh, other} {
		if err := os.Mkdir(d, 0o755); err != nil {
			t.Fatal(err)
		}
	}
	long := time.Now().Add(-25 * time.Hour)
	for _, d := range []string{stale, other} {
		if err := os.Chtimes(d, long, long); err != nil {
			t.Fatal(err)
		}
	}
	if err := Write(t.Context(), filepath.Join(parent, "res"), &Record{}); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(stale); err == nil {
		t.Error("a day-old leftover stays")
	}
	for _, d := range []string{fresh, other} {
		if _, err := os.Stat(d); err != nil {
			t.Errorf("%s was removed", d)
		}
	}
}

func TestWhatCanBeDrawnAgainMayBeMissing(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "res")
	if err := Write(t.Context(), dir, sampleRecord()); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"report.html", "figures/angle-arm.svg"} {
		if err := os.Remove(filepath.Join(dir, name)); err != nil {
			t.Fatal(err)
		}
	}
	r, err := Read(dir)
	if err != nil {
		t.Fatal(err)
	}
	if r.Report != nil || len(r.Figures) != 1 || r.Figures[0].SVG != nil || r.Figures[0].PNG == nil {
		t.Errorf("report %q, figures %+v", r.Report, r.Figures)
	}
}

func TestADamagedFolderIsRefusedInPlainWords(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "res")
	for _, c := range []struct {
		name string
		harm func() error
		want string
	}{
		{"missing", func() error { return os.Remove(filepath.Join(dir, "curves/spectrum-arm.csv")) }, "curves/spectrum-arm.csv is on its list but not there"},
		{"json", func() error { return os.WriteFile(filepath.Join(dir, "findings.json"), []byte("{"), 0o644) }, "findings.json is damaged"},
		{"run", func() error { return os.WriteFile(filepath.Join(dir, "run.json"), []byte("[]"), 0o644) }, "run.json is damaged"},
		{"cell", func() error {
			return os.WriteFile(filepath.Join(dir, "angles.csv"), []byte("t_s,part,angle_rad\n0,a,zero\n"), 0o644)
		}, `line 2: angle_rad is "zero"`},
		{"list", func() error { return os.Remove(filepath.Join(dir, packName)) }, "is not a result folder"},
		{"newer", func() error {
			return os.WriteFile(filepath.Join(dir, packName), []byte(`{"lodeswing":{"format":2,"version":"v9"},"resources":[]}`), 0o644)
		}, "newer lodeswing (v9"},
		{"outside", func() error {
			return os.WriteFile(filepath.Join(dir, packName), []byte(`{"lodeswing":{"format":1},"resources":[{"path":"../secret.toml"}]}`), 0o644)
		}, "cannot read"},
		{"gone", func() error { return os.RemoveAll(dir) }, "there is no folder"},
	} {
		if err := os.RemoveAll(dir); err != nil {
			t.Fatal(err)
		}
		if err := Write(t.Context(), dir, sampleRecord()); err != nil {
			t.Fatal(err)
		}
		if err := c.harm(); err != nil {
			t.Fatal(err)
		}
		if _, err := Read(dir); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want one with %q", c.name, err, c.want)
		}
	}
}

// A reader at any moment sees one whole result.
func TestAReaderNeverSeesHalfAResult(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "res")
	r := sampleRecord()
	if err := Write(t.Context(), dir, r); err != nil {
		t.Fatal(err)
	}
	done := make(chan error, 1)
	go func() {
		for range 20 {
			if err := Write(context.Background(), dir, r); err != nil {
				done <- err
				return
			}
		}
		done <- nil
	}()
	reads := 0
	for {
		select {
		case err := <-done:
			if err != nil {
				t.Error(err)
			}
			if reads == 0 {
				t.Error("nothing was read meanwhile")
			}
			return
		default:
		}
		if _, err := os.Stat(filepath.Join(dir, packName)); err != nil {
			t.Fatalf("for a moment there was no result: %v", err)
		}
		reads++
	}
}
