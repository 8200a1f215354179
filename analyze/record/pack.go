package record

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/track"
)

const (
	packName = "datapackage.json"
	format   = 1 // of the folder; a reader refuses a higher one
)

// pack is datapackage.json.
type pack struct {
	Profile     string     `json:"profile"`
	Name        string     `json:"name"`
	Title       string     `json:"title,omitempty"`
	Description string     `json:"description,omitempty"`
	Created     string     `json:"created"`
	Lodeswing   *mark      `json:"lodeswing,omitempty"` // makes the folder ours
	Resources   []resource `json:"resources"`
}

type mark struct {
	Format  int    `json:"format"`
	Version string `json:"version"`
}

// resource is one file of the folder.
type resource struct {
	Name        string     `json:"name"`
	Path        string     `json:"path"`
	Profile     string     `json:"profile,omitempty"`
	Title       string     `json:"title,omitempty"`
	Description string     `json:"description,omitempty"`
	Mediatype   string     `json:"mediatype,omitempty"`
	Encoding    string     `json:"encoding,omitempty"`
	Bytes       int64      `json:"bytes"`
	Hash        string     `json:"hash"`
	Dialect     *dialect   `json:"dialect,omitempty"`
	Schema      *schema    `json:"schema,omitempty"`
	Curve       *curveHead `json:"curve,omitempty"`
	Cells       *gridHead  `json:"cells,omitempty"` // of the curve listed before it
	Kept        bool       `json:"kept,omitempty"`
}

type dialect struct {
	Delimiter      string `json:"delimiter"`
	LineTerminator string `json:"lineTerminator"`
	QuoteChar      string `json:"quoteChar"`
	DoubleQuote    bool   `json:"doubleQuote"`
	Header         bool   `json:"header"`
}

type schema struct {
	Fields        []field  `json:"fields"`
	MissingValues []string `json:"missingValues"`
}

type field struct {
	Name        string `json:"name"`
	Type        string `json:"type"`
	Unit        string `json:"unit,omitempty"`
	Description string `json:"description"`
}

// curveHead is a curve without its lines, which are in its table.
type curveHead struct {
	Key     string       `json:"key"`
	Subject string       `json:"subject,omitempty"`
	Title   string       `json:"title"`
	Caption string       `json:"caption"`
	X       finding.Axis `json:"x"`
	Y       finding.Axis `json:"y"`
}

var mediatypes = map[string]string{
	".csv": "text/csv", ".json": "application/json", ".toml": "application/toml", ".html": "text/html",
	".svg": "image/svg+xml", ".png": "image/png", ".mp4": "video/mp4",
}

// FileName makes a file name without ending from parts such as a key and a
// subject: lower-case letters, digits, dots and dashes only, so that it is good
// on every system and as a resource's name. Empty parts are left out.
func FileName(parts ...string) string {
	var b strings.Builder
	for _, part := range parts {
		word := strings.Map(func(r rune) rune {
			switch {
			case r >= 'a' && r <= 'z', r >= '0' && r <= '9', r == '.':
				return r
			case r >= 'A' && r <= 'Z':
				return r + 'a' - 'A'
			}
			return '-'
		}, part)
		for strings.Contains(word, "--") {
			word = strings.ReplaceAll(word, "--", "-")
		}
		word = strings.Trim(word, "-.")
		if word == "" {
			continue
		}
		if b.Len() > 0 {
			b.WriteByte('-')
		}
		b.WriteString(word[:min(len(word), 80)])
	}
	if b.Len() == 0 {
		return "unnamed"
	}
	return b.String()
}

// contents is what will be in the folder: a resource and how its bytes are made.
type content struct {
	resource
	write func(io.Writer) error
	from  string // a file to carry along, instead of write
}

// contents lists the files of a record in the order in which a reader meets them.
func contents(r *Record) ([]content, error) {
	var all []content
	names, paths := map[string]bool{}, map[string]bool{packName: true}
	add := func(c content) {
		base, ext := strings.TrimSuffix(c.Path, path.Ext(c.Path)), path.Ext(c.Path)
		for n := 2; paths[strings.ToLower(c.Path)]; n++ {
			c.Path = fmt.Sprintf("%s-%d%s", base, n, ext)
		}
		paths[strings.ToLower(c.Path)] = true
		c.Name = FileName(strings.ReplaceAll(strings.TrimSuffix(c.Path, path.Ext(c.Path)), "/", "-"))
		for stem, n := c.Name, 2; names[c.Name]; n++ {
			c.Name = fmt.Sprintf("%s-%d", stem, n) // the PNG beside the SVG
		}
		names[c.Name] = true
		c.Mediatype = mediatypes[path.Ext(c.Path)]
		if c.Schema != nil {
			c.Profile, c.Encoding = "tabular-data-resource", "utf-8"
			c.Dialect = &dialect{",", "\n", `"`, true, true}
		}
		all = append(all, c)
	}
	file := func(path, title string, data []byte) {
		if data != nil {
			add(content{resource: resource{Path: path, Title: title}, write: func(w io.Writer) error {
				_, err := w.Write(data)
				return err
			}})
		}
	}
	file("report.html", "The report", r.Report)
	if r.Track != nil {
		add(content{
			resource: resource{Path: "track.csv", Title: "Positions", Description: "One row per bob and frame.", Schema: schemaOf(track.TableColumns)},
			write:    func(w io.Writer) error { return track.WriteTable(w, r.Track) },
		})
	}
	if len(r.Angles) > 0 {
		add(content{
			resource: resource{Path: "angles.csv", Title: "Angles", Description: "One row per part and time.", Schema: schemaOf(angleColumns)},
			write:    func(w io.Writer) error { return writeAngles(w, r.Angles) },
		})
	}
	if len(r.Passes) > 0 {
		add(content{
			resource: resource{Path: "ledger.csv", Title: "Energy ledger", Description: "One row per pass.", Schema: schemaOf(passColumns)},
			write:    func(w io.Writer) error { return writePasses(w, r.Passes) },
		})
	}
	add(content{
		resource: resource{Path: "findings.json", Title: "Findings", Description: "The findings, and for each fit what was free, held, and not separable. SI units."},
		write:    func(w io.Writer) error { return WriteFindings(w, r) },
	})
	if r.FittedRig != "" {
		file("fitted.toml", "The rig with the fitted values", []byte(r.FittedRig))
	}
	for i := range r.Curves {
		c := &r.Curves[i]
		add(content{
			resource: resource{
				Path: "curves/" + FileName(c.Key, c.Subject) + ".csv", Title: c.Title, Description: c.Caption, Schema: schemaOf(curveColumns(c)),
				Curve: &curveHead{c.Key, c.Subject, c.Title, c.Caption, c.X, c.Y},
			},
			write: func(w io.Writer) error { return writeCurve(w, c) },
		})
		if c.Grid != nil {
			add(gridContent(c))
		}
	}
	file("still.png", "One picture of the clip", r.Still)
	for _, f := range r.Figures {
		if !fs.ValidPath(f.Name) || strings.Contains(f.Name, "/") {
			return nil, fmt.Errorf("a figure cannot be called %q", f.Name)
		}
		file("figures/"+f.Name+".svg", "Figure", f.SVG)
		file("figures/"+f.Name+".png", "Figure", f.PNG)
	}
	add(content{
		resource: resource{Path: "run.json", Title: "Provenance", Description: "Version, rig, clip, options, durations and calibration."},
		write:    func(w io.Writer) error { return encode(w, ran{r.Run, beside(r.Track)}) },
	})
	for _, k := range r.Kept {
		if !fs.ValidPath(k.Name) || k.Name == "." {
			return nil, fmt.Errorf("a file of a result cannot be called %q", k.Name)
		}
		if paths[strings.ToLower(k.Name)] {
			return nil, fmt.Errorf("%s cannot be kept in the result: the program writes a file of that name itself", k.Name)
		}
		add(content{resource: resource{Path: k.Name, Kept: true}, from: k.Path})
	}
	return all, nil
}

func schemaOf(columns []track.Column) *schema {
	s := &schema{MissingValues: []string{""}}
	for _, c := range columns {
		s.Fields = append(s.Fields, field{c.Name, c.Type, c.Unit, c.Meaning})
	}
	return s
}

// readPack reads the folder's list. ours is false, with no error, for a folder
// that holds no list of ours.
func readPack(fsys fs.FS) (p *pack, ours bool, err error) {
	data, err := fs.ReadFile(fsys, packName)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, false, nil
	}
	if err != nil {
		return nil, false, err
	}
	p = &pack{}
	if decode(data, p) != nil || p.Lodeswing == nil {
		return nil, false, nil
	}
	return p, true, nil
}

// sum counts and hashes what passes to a file.
type sum struct {
	to    io.Writer
	bytes int64
	hash  interface {
		io.Writer
		Sum([]byte) []byte
	}
}

func newSum(to io.Writer) *sum { return &sum{to: to, hash: sha256.New()} }

func (s *sum) Write(p []byte) (int, error) {
	n, err := s.to.Write(p)
	s.bytes += int64(n)
	s.hash.Write(p[:n])
	return n, err
}

func (s *sum) text() string { return "sha256:" + hex.EncodeToString(s.hash.Sum(nil)) }

// IsResult tells whether dir is a result folder of ours.
func IsResult(dir string) bool {
	if info, err := os.Stat(dir); err != nil || !info.IsDir() {
		return false
	}
	_, ours, err := readPack(os.DirFS(dir))
	return ours && err == nil
}

// json of the list itself, which holds every other file's sum.
func (p *pack) bytes() ([]byte, error) {
	var b bytes.Buffer
	err := encode(&b, p)
	return b.Bytes(), err
}
