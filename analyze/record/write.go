package record

import (
	"bufio"
	"context"
	"crypto/rand"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"time"
)

// Write writes the record as the folder dir, whole or not at all: beside it
// first, synced to disk, then put in its place in one step. A result folder
// that is there is replaced only when the new one is complete; files in it that
// are not the program's stay. Anything else that is there is left alone, with
// an error. When ctx ends early nothing is changed.
func Write(ctx context.Context, dir string, r *Record) error {
	target, err := place(dir)
	if err != nil {
		return err
	}
	all, err := contents(r)
	if err != nil {
		return err
	}
	strangers, err := strangers(target)
	if err != nil {
		return err
	}
	for _, name := range strangers {
		for _, c := range all {
			if strings.EqualFold(c.Path, name) {
				return fmt.Errorf("%s holds a file %s that lodeswing did not write and now would; move it or choose another folder", dir, name)
			}
		}
		all = append(all, content{resource: resource{Path: name}, from: filepath.Join(target, filepath.FromSlash(name))})
	}
	parent := filepath.Dir(target)
	if err := os.MkdirAll(parent, 0o777); err != nil {
		return cannot("make the folder "+parent, err)
	}
	clearStale(target)
	partial, err := mkdirBeside(target)
	if err != nil {
		return cannot("write in "+parent, err)
	}
	// After the swap this name holds the old folder. What cannot be removed is
	// hidden, and removed by a later Write.
	defer os.RemoveAll(partial)
	if err := fill(ctx, partial, r, all, len(all)-len(strangers)); err != nil {
		return fmt.Errorf("the result %s was not written and nothing was changed: %w", dir, err)
	}
	if err := ctx.Err(); err != nil {
		return err
	}
	if err := swap(partial, target); err != nil {
		return cannot("put the result in its place "+dir, err)
	}
	return syncDir(parent)
}

// CheckTarget tells whether Write could put a result at dir, before the work
// begins: the place is free, or holds a result folder, and can be written.
func CheckTarget(dir string) error {
	target, err := place(dir)
	if err != nil {
		return err
	}
	parent := filepath.Dir(target)
	for {
		info, err := os.Stat(parent)
		if err == nil && !info.IsDir() {
			return fmt.Errorf("cannot write %s: %s is a file, not a folder; choose another place", dir, parent)
		}
		if err == nil {
			break
		}
		up := filepath.Dir(parent)
		if !errors.Is(err, fs.ErrNotExist) || up == parent {
			return cannot("write in "+parent, err)
		}
		parent = up
	}
	probe, err := mkdirBeside(filepath.Join(parent, filepath.Base(target)))
	if err != nil {
		return cannot("write in "+parent, err)
	}
	return os.Remove(probe)
}

// place resolves dir to the absolute place where the result shall stand and
// refuses one that holds something that is not ours.
func place(dir string) (string, error) {
	if dir == "" {
		return "", errors.New("the result folder has no name")
	}
	target, err := filepath.Abs(dir)
	if err != nil {
		return "", cannot("find "+dir, err)
	}
	if real, err := filepath.EvalSymlinks(target); err == nil {
		target = real // a link stays a link to the new folder
	}
	if filepath.Dir(target) == target {
		return "", fmt.Errorf("%s cannot be a result folder; name a new one", dir)
	}
	info, err := os.Lstat(target)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return target, nil
	case errors.Is(err, syscall.ENOTDIR):
		return "", fmt.Errorf("cannot write %s: a part of that path is a file, not a folder; choose another place", dir)
	case err != nil:
		return "", cannot("look at "+dir, err)
	case info.Mode()&fs.ModeSymlink != 0:
		return "", fmt.Errorf("%s is a link that leads nowhere; remove it or choose another folder", dir)
	case !info.IsDir():
		return "", fmt.Errorf("%s is a file; a result is a folder, choose another name", dir)
	}
	entries, err := os.ReadDir(target)
	if err != nil {
		return "", cannot("look into "+dir, err)
	}
	if len(entries) > 0 && !IsResult(target) {
		return "", fmt.Errorf("%s holds other files and is not a result of lodeswing; it was left alone, choose another folder", dir)
	}
	return target, nil
}

// strangers lists the files in an old result that are not on its list.
func strangers(target string) ([]string, error) {
	fsys := os.DirFS(target)
	p, ours, err := readPack(fsys)
	if err != nil || !ours {
		return nil, err
	}
	listed := map[string]bool{packName: true}
	for _, r := range p.Resources {
		listed[r.Path] = true
	}
	var names []string
	err = fs.WalkDir(fsys, ".", func(name string, d fs.DirEntry, err error) error {
		if err == nil && !d.IsDir() && !listed[name] {
			names = append(names, name)
		}
		return err
	})
	if err != nil {
		return nil, cannot("look through "+target, err)
	}
	return names, nil
}

// fill writes the files and then the list, which covers the first n of them.
func fill(ctx context.Context, folder string, r *Record, all []content, n int) error {
	p := &pack{
		Profile: "data-package", Name: FileName(r.Run.Rig.Name), Title: r.Run.Rig.Name, Description: r.Headline,
		Created: time.Now().UTC().Format(time.RFC3339), Lodeswing: &mark{format, r.Run.Version},
	}
	if !r.Run.Started.IsZero() {
		p.Created = r.Run.Started.UTC().Format(time.RFC3339)
	}
	folders := map[string]bool{folder: true}
	for i := range all {
		if err := ctx.Err(); err != nil {
			return err
		}
		c := &all[i]
		to := filepath.Join(folder, filepath.FromSlash(c.Path))
		if err := os.MkdirAll(filepath.Dir(to), 0o777); err != nil {
			return cannot("make a folder for "+c.Path, err)
		}
		folders[filepath.Dir(to)] = true
		if err := c.put(to); err != nil {
			return cannot("write "+c.Path, err)
		}
		if i < n {
			p.Resources = append(p.Resources, c.resource)
		}
	}
	data, err := p.bytes()
	if err != nil {
		return err
	}
	list := content{write: func(w io.Writer) error { _, err := w.Write(data); return err }}
	if err := list.put(filepath.Join(folder, packName)); err != nil {
		return cannot("write "+packName, err)
	}
	for f := range folders {
		if err := syncDir(f); err != nil {
			return cannot("bring the result to disk", err)
		}
	}
	return nil
}

// put makes the file and notes its size and hash.
func (c *content) put(to string) (err error) {
	if c.from != "" {
		info, err := os.Lstat(c.from)
		if err != nil {
			return err
		}
		if info.Mode()&fs.ModeSymlink != 0 {
			link, err := os.Readlink(c.from)
			if err != nil {
				return err
			}
			return os.Symlink(link, to)
		}
		if !info.Mode().IsRegular() {
			return errors.New("it is neither a file nor a link and cannot be carried along; move it away")
		}
	}
	f, err := os.OpenFile(to, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return err
	}
	defer func() {
		if e := f.Close(); err == nil {
			err = e
		}
	}()
	s := newSum(f)
	if c.from != "" {
		from, err := os.Open(c.from)
		if err != nil {
			return err
		}
		defer from.Close()
		if _, err := io.Copy(s, from); err != nil {
			return err
		}
	} else {
		b := bufio.NewWriterSize(s, 1<<16)
		if err := c.write(b); err != nil {
			return err
		}
		if err := b.Flush(); err != nil {
			return err
		}
	}
	c.Bytes, c.Hash = s.bytes, s.text()
	return f.Sync()
}

// partialPrefix is how the names begin under which Write works beside target.
func partialPrefix(target string) string { return "." + filepath.Base(target) + ".partial-" }

func mkdirBeside(target string) (string, error) {
	for range 100 {
		var b [6]byte
		rand.Read(b[:]) // never fails
		name := filepath.Join(filepath.Dir(target), partialPrefix(target)+hex.EncodeToString(b[:]))
		err := os.Mkdir(name, 0o777)
		if err == nil || !errors.Is(err, fs.ErrExist) {
			return name, err
		}
	}
	return "", fs.ErrExist
}

// clearStale removes what a killed Write left beside target. A day is longer
// than any Write takes, so that one at work in another process is not disturbed.
func clearStale(target string) {
	entries, err := os.ReadDir(filepath.Dir(target))
	if err != nil {
		return
	}
	for _, e := range entries {
		if !e.IsDir() || !strings.HasPrefix(e.Name(), partialPrefix(target)) {
			continue
		}
		if info, err := e.Info(); err == nil && time.Since(info.ModTime()) > 24*time.Hour {
			os.RemoveAll(filepath.Join(filepath.Dir(target), e.Name()))
		}
	}
}

// swap puts partial in target's place. Where target exists the two change
// places in one step if the system can, and in two steps, with a way back, if not.
func swap(partial, target string) error {
	if _, err := os.Lstat(target); errors.Is(err, fs.ErrNotExist) {
		return os.Rename(partial, target)
	}
	err := exchange(partial, target)
	if !errors.Is(err, errors.ErrUnsupported) {
		return err
	}
	old := partial + "-old"
	if err := os.Rename(target, old); err != nil {
		return err
	}
	if err := os.Rename(partial, target); err != nil {
		return errors.Join(err, os.Rename(old, target))
	}
	return os.RemoveAll(old)
}

func syncDir(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	defer d.Close()
	err = d.Sync()
	if errors.Is(err, syscall.EINVAL) || errors.Is(err, errors.ErrUnsupported) {
		return nil // a file system whose folders cannot be synced
	}
	return err
}

// cannot says in plain words what could not be done and what to do about it.
func cannot(what string, err error) error {
	switch {
	case errors.Is(err, context.Canceled), errors.Is(err, context.DeadlineExceeded):
		return err
	case errors.Is(err, syscall.ENOSPC), errors.Is(err, syscall.EDQUOT):
		return fmt.Errorf("cannot %s: the disk is full; make room or choose another place (%w)", what, err)
	case errors.Is(err, fs.ErrPermission):
		return fmt.Errorf("cannot %s: not allowed; choose a folder that you may write (%w)", what, err)
	case errors.Is(err, syscall.EROFS):
		return fmt.Errorf("cannot %s: the place is read-only; choose another one (%w)", what, err)
	}
	return fmt.Errorf("cannot %s: %w", what, err)
}
