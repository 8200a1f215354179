package main

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"github.com/pelletier/go-toml/v2"

	"lodeswing/analyze/record"
	"lodeswing/plots"
)

// visitor writes a visitor's page of a record, with the museum's words if there
// are any.
func visitor(rec *record.Record, path, wordsPath string) error {
	words := plots.VisitorWords(rec)
	if wordsPath != "" {
		text, err := os.ReadFile(wordsPath)
		if err != nil {
			return fmt.Errorf("the words cannot be read from %s: %w", wordsPath, err)
		}
		d := toml.NewDecoder(bytes.NewReader(text))
		d.DisallowUnknownFields()
		words = plots.Words{}
		if err := d.Decode(&words); err != nil {
			var strict *toml.StrictMissingError
			var at *toml.DecodeError
			switch {
			case errors.As(err, &strict):
				return fmt.Errorf("%s has a key that the page does not know; it knows title, figure, under, lines and foot:\n%s", wordsPath, strict.String())
			case errors.As(err, &at):
				line, _ := at.Position()
				return fmt.Errorf("%s, line %d is not as a words file wants it: write each as key = \"text\", and lines = [\"one\", \"two\"]", wordsPath, line)
			}
			return fmt.Errorf("%s: %w", wordsPath, err)
		}
	}
	page, err := plots.Visitor(rec, words)
	if err != nil {
		return err
	}
	return writeWhole(path, page)
}

// writeWhole writes a file whole or not at all.
func writeWhole(path string, data []byte) error {
	part, err := os.CreateTemp(filepath.Dir(path), ".part-*")
	if err != nil {
		return fmt.Errorf("%s cannot be written: %w", path, err)
	}
	defer os.Remove(part.Name()) // after the renaming there is nothing left to remove
	_, err = part.Write(data)
	for _, step := range []func() error{func() error { return part.Chmod(0o644) }, part.Sync} {
		if err == nil {
			err = step()
		}
	}
	if e := part.Close(); err == nil {
		err = e
	}
	if err == nil {
		err = os.Rename(part.Name(), path)
	}
	if err != nil {
		return fmt.Errorf("%s cannot be written: %w", path, err)
	}
	return nil
}
