// Package samples holds the demo workshop's toys as rigs and films them. The
// maker, Saltmarsh Toyworks, and every number of its harbour set are invented;
// they serve the demo and the tests only.
//
// What comes in: a sample's name or a rig file with [film] and [[start]]. What
// goes out: a clip, the rig as its owner would write it, and the truth: where
// every bob was in every frame (metres and pixels) and every number of the
// model that moved it. SI units inside; the files name theirs.
package samples

import (
	"embed"
	"fmt"
	"os"
	"path"
	"sort"
	"strings"

	"lodeswing/track/rig"
)

//go:embed *.toml
var files embed.FS

// Names lists the samples, sorted.
func Names() []string {
	entries, err := files.ReadDir(".")
	if err != nil {
		panic(err) // the files are part of the program
	}
	var out []string
	for _, e := range entries {
		out = append(out, strings.TrimSuffix(e.Name(), ".toml"))
	}
	sort.Strings(out)
	return out
}

// Text is a sample's rig file as it stands.
func Text(name string) ([]byte, error) {
	data, err := files.ReadFile(name + ".toml")
	if err != nil {
		return nil, fmt.Errorf("there is no sample %q; the samples are %s", name, strings.Join(Names(), ", "))
	}
	return data, nil
}

// Open reads a rig: a sample by its name, anything else from a file.
func Open(nameOrPath string) (*rig.Rig, error) {
	if data, err := Text(nameOrPath); err == nil {
		return rig.Parse(nameOrPath+".toml", data)
	} else if _, missing := os.Stat(nameOrPath); missing != nil && !strings.ContainsAny(nameOrPath, `/\.`) {
		return nil, err
	}
	return rig.Load(nameOrPath)
}

// Stem is the name that films of a rig carry: the file's without its ending.
func Stem(r *rig.Rig) string {
	return strings.TrimSuffix(path.Base(strings.ReplaceAll(r.Path, `\`, "/")), ".toml")
}
