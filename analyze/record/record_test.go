package record

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"reflect"
	"regexp"
	"strings"
	"testing"
	"time"

	"lodeswing/analyze/finding"
	"lodeswing/track"
)

// fillAll sets every exported field below v to something that is not zero, so
// that a field which a writer forgets is noticed.
func fillAll(v reflect.Value, rng *rand.Rand) {
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			fillAll(v.Field(i), rng)
		}
	case reflect.Slice:
		n := 2
		s := reflect.MakeSlice(v.Type(), n, n)
		for i := range n {
			fillAll(s.Index(i), rng)
		}
		v.Set(s)
	case reflect.Array:
		for i := range v.Len() {
			fillAll(v.Index(i), rng)
		}
	case reflect.Float64:
		v.SetFloat(rng.NormFloat64() * math.Pow(10, float64(rng.IntN(12)-6)))
	case reflect.String:
		v.SetString("word <&> \"" + string(rune('a'+rng.IntN(26))) + "\" µ")
	case reflect.Bool:
		v.SetBool(true)
	case reflect.Int:
		v.SetInt(int64(1 + rng.IntN(1000)))
	default:
		panic("fillAll does not know " + v.Kind().String())
	}
}

// sample is a record in which every field is set, with gaps and infinities.
func sampleRecord() *Record {
	rng := rand.New(rand.NewPCG(3, 1))
	nan := math.NaN()
	r := &Record{
		Run: Run{
			Version: "v1-test", Started: time.Date(2026, 5, 4, 3, 2, 1, 0, time.UTC),
			Rig:     Rig{"Lantern 07", "lantern.toml", "name = \"Lantern 07\"\n"},
			Clip:    &Clip{"swing.mp4", strings.Repeat("ab", 32), 12345, map[string]any{"codec": "h264", "width": 1280.0, "tags": []any{"a", "b"}}},
			Options: map[string]string{"rig": "lantern.toml", "out": "x"}, Durations: []Duration{{"track", 1.25}},
		},
		Headline: "It swings.", Cautions: []string{"The clip is short."}, Safety: []string{"Magnets."},
		Passes:    []Pass{{"arm", 0.5, 1e-3, 1e-5, nan, nan, 2e-5, 1e-6}},
		FittedRig: "name = \"fitted\"\n", Still: []byte("\x89PNG"), Report: []byte("<!doctype html>"),
		Figures: []Figure{{"angle-arm", []byte("<svg/>"), []byte("\x89PNG1")}},
	}
	tr := &track.Track{BrokeAt: 7.5, BrokeBy: "the file ends", Cautions: []string{"dark"}}
	fillAll(reflect.ValueOf(&tr.Cal).Elem(), rng)
	for i, name := range []string{"zulu", "alpha"} {
		b := track.Bob{Name: name, Part: []string{"arm", ""}[i]}
		for k := range 30 {
			s := track.Sample{
				Frame: k, T: float64(k) / 29.97, State: track.Seen, X: rng.NormFloat64(), Z: rng.NormFloat64(), U: 1, V: 2,
				Plane: track.Cov{AA: rng.Float64(), AB: rng.NormFloat64(), BB: rng.Float64()}, Pixel: track.Cov{AA: rng.Float64(), AB: 0.1, BB: 3},
			}
			if k == 7 {
				s.State, s.X, s.Z, s.U, s.V, s.Plane, s.Pixel = track.Missing, nan, nan, nan, nan, track.Cov{AA: nan, AB: nan, BB: nan}, track.Cov{AA: nan, AB: nan, BB: nan}
			}
			b.Samples = append(b.Samples, s)
		}
		tr.Bobs = append(tr.Bobs, b)
	}
	r.Track = tr
	for _, part := range []string{"arm", "second"} {
		a := Angles{Part: part}
		for k := range 20 {
			a.T = append(a.T, float64(k)/30)
			a.Angle, a.U = append(a.Angle, rng.NormFloat64()), append(a.U, 1e-4)
			a.Rate, a.URate = append(a.Rate, nan), append(a.URate, nan)
		}
		r.Angles = append(r.Angles, a)
	}
	f := finding.Normal("decay.period_zero", "arm", "Period", 1.0634, 1e-4, "s", "from the fit")
	f.Cautions, f.Budget = []string{"short"}, []finding.Share{{Source: "clock", U: 5e-5}}
	r.Findings = []finding.Finding{
		f,
		{Key: "x", Kind: finding.Undecided, Text: "why", Value: nan, U: nan, Lo: nan, Hi: nan, Unit: "1"},
		{Key: "y", Kind: finding.UpperLimit, Hi: 3, Lo: math.Inf(-1), Value: nan, U: nan, Unit: "1"},
	}
	r.Fits = []finding.Fit{{
		Key: "decay", Free: []finding.Parameter{{Name: "a", Value: 1, U: nan, Unit: "1"}}, Correlation: [][]float64{{1, nan}, {nan, 1}},
		ChiSquare: 12, DegreesOf: 10, Converged: true, Why: "small step", Candidates: []finding.Candidate{{Name: "viscous", BIC: -3, Weight: 1}},
	}}
	r.Curves = []finding.Curve{
		{
			Key: "spectrum", Subject: "arm", Title: "Spectrum", Caption: "Peaks, \"quoted\".",
			X: finding.Axis{Label: "frequency", Unit: "Hz"}, Y: finding.Axis{Label: "power", Unit: "rad²/Hz", Log: true, ShowUnit: "deg²/Hz", ShowFactor: 3282.8},
			Lines: []finding.Line{
				{Name: "data", Role: finding.Data, X: []float64{1, 2, 3}, Y: []float64{1e-9, nan, 5e300}},
				{Name: "data", Role: finding.Data, X: []float64{4}, Y: []float64{math.Inf(1)}, Lo: []float64{1}, Hi: []float64{2}},
			},
		},
		{Key: "spectrum", Subject: "ARM!", Title: "Same file name", Lines: []finding.Line{{Role: finding.Mark, X: []float64{0}, Y: []float64{0}}}},
	}
	return r
}

// plain makes NaN comparable.
func plain(v reflect.Value) string {
	var b bytes.Buffer
	var walk func(v reflect.Value)
	walk = func(v reflect.Value) {
		switch v.Kind() {
		case reflect.Pointer, reflect.Interface:
			if v.IsNil() {
				b.WriteString("nil;")
				return
			}
			walk(v.Elem())
		case reflect.Struct:
			if t, ok := v.Interface().(time.Time); ok {
				b.WriteString(t.UTC().String())
				return
			}
			for i := range v.NumField() {
				b.WriteString(v.Type().Field(i).Name + ":")
				walk(v.Field(i))
			}
		case reflect.Slice, reflect.Array:
			b.WriteString("[")
			for i := range v.Len() {
				walk(v.Index(i))
			}
			b.WriteString("]")
		case reflect.Map:
			data, _ := json.Marshal(v.Interface())
			b.Write(data)
		case reflect.Float64:
			b.WriteString(number(v.Float()) + ";")
		default:
			b.WriteString(v.String() + v.Type().String() + ";")
			if v.CanInt() {
				b.WriteString(number(float64(v.Int())))
			}
			if v.Kind() == reflect.Bool && v.Bool() {
				b.WriteString("true")
			}
		}
	}
	walk(v)
	return b.String()
}

func TestARecordReadsBackExactly(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "new", "lantern-07")
	r := sampleRecord()
	if err := Write(t.Context(), dir, r); err != nil {
		t.Fatal(err)
	}
	back, err := Read(dir)
	if err != nil {
		t.Fatal(err)
	}
	if a, b := plain(reflect.ValueOf(r)), plain(reflect.ValueOf(back)); a != b {
		i := 0
		for i < len(a) && i < len(b) && a[i] == b[i] {
			i++
		}
		t.Fatalf("the record differs after reading, first here:\nwrote %.300s\nread  %.300s", a[max(0, i-80):], b[max(0, i-80):])
	}
	for _, name := range []string{
		"datapackage.json", "track.csv", "angles.csv", "findings.json", "ledger.csv", "fitted.toml", "curves/spectrum-arm.csv",
		"still.png", "figures/angle-arm.svg", "figures/angle-arm.png", "report.html", "run.json",
	} {
		if _, err := os.Stat(filepath.Join(dir, name)); err != nil {
			t.Errorf("%s is not in the folder", name)
		}
	}
}

func TestAPartialRecordIsARecord(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "t")
	full := sampleRecord()
	for _, r := range []*Record{{}, {Track: full.Track}, {Angles: full.Angles}} {
		if err := Write(t.Context(), dir, r); err != nil {
			t.Fatal(err)
		}
		back, err := Read(dir)
		if err != nil {
			t.Fatal(err)
		}
		if a, b := plain(reflect.ValueOf(r.Track)), plain(reflect.ValueOf(back.Track)); a != b {
			t.Error("the track differs after reading")
		}
		if len(back.Angles) != len(r.Angles) {
			t.Error("the angles differ after reading")
		}
	}
}

// The rules are those of the Data Package, Data Resource and Table Schema
// specifications, version 1 (specs.frictionlessdata.io).
func TestTheFolderIsADataPackage(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "t")
	if err := Write(t.Context(), dir, sampleRecord()); err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(filepath.Join(dir, packName))
	if err != nil {
		t.Fatal(err)
	}
	var p struct {
		Profile, Name string
		Resources     []struct {
			Name, Path, Profile, Hash string
			Bytes                     int64
			Schema                    *struct {
				Fields []struct{ Name, Type, Unit, Description string }
			}
		}
	}
	if err := json.Unmarshal(data, &p); err != nil {
		t.Fatal(err)
	}
	nameRule := regexp.MustCompile(`^[-a-z0-9._]+$`)
	if !nameRule.MatchString(p.Name) || p.Profile != "data-package" {
		t.Errorf("package name %q, profile %q", p.Name, p.Profile)
	}
	seen, tables := map[string]bool{}, 0
	for _, r := range p.Resources {
		if !nameRule.MatchString(r.Name) || seen[r.Name] {
			t.Errorf("resource name %q is not allowed or stands twice", r.Name)
		}
		seen[r.Name] = true
		text, err := os.ReadFile(filepath.Join(dir, r.Path))
		if err != nil {
			t.Fatal(err)
		}
		if int64(len(text)) != r.Bytes {
			t.Errorf("%s: %d bytes are stated, %d are there", r.Path, r.Bytes, len(text))
		}
		if filepath.Ext(r.Path) != ".csv" {
			continue
		}
		tables++
		rows, err := csv.NewReader(bytes.NewReader(text)).ReadAll()
		if err != nil {
			t.Fatal(err)
		}
		if r.Profile != "tabular-data-resource" || r.Schema == nil || len(rows[0]) != len(r.Schema.Fields) {
			t.Errorf("%s: profile %q, schema %+v", r.Path, r.Profile, r.Schema)
			continue
		}
		for i, f := range r.Schema.Fields {
			if f.Name != rows[0][i] {
				t.Errorf("%s: column %d is %q in the file and %q in the list", r.Path, i, rows[0][i], f.Name)
			}
			if f.Type != "number" && f.Type != "string" && f.Type != "integer" {
				t.Errorf("%s: %s has type %q", r.Path, f.Name, f.Type)
			}
		}
	}
	if tables != 5 {
		t.Errorf("%d tables, want 5", tables)
	}
	for name, want := range map[string]string{"track": "m", "angles": "rad"} {
		found := false
		for _, r := range p.Resources {
			if r.Name == name {
				for _, f := range r.Schema.Fields {
					found = found || f.Unit == want && f.Description != ""
				}
			}
		}
		if !found {
			t.Errorf("%s states no column in %s", name, want)
		}
	}
}

func TestFileNamesAreGoodEverywhere(t *testing.T) {
	for _, c := range []struct {
		parts []string
		want  string
	}{
		{[]string{"decay.fit", "arm"}, "decay.fit-arm"},
		{[]string{"a b", ""}, "a-b"},
		{[]string{"../../etc/passwd"}, "etc-passwd"},
		{[]string{"größe", "§"}, "gr-e"},
		{[]string{"", ".."}, "unnamed"},
		{[]string{strings.Repeat("x", 500)}, strings.Repeat("x", 80)},
	} {
		if got := FileName(c.parts...); got != c.want {
			t.Errorf("FileName(%q) = %q, want %q", c.parts, got, c.want)
		}
	}
}

func TestAnAngleTableIsReadOrRefusedInPlainWords(t *testing.T) {
	a, err := ReadAngles(strings.NewReader("t_s,angle_rad\n0,-1.6\n0.004,\n0.008,-1.5\n"), "swing.csv", "arm")
	if err != nil || len(a) != 1 || a[0].Part != "arm" || len(a[0].T) != 3 || !math.IsNaN(a[0].Angle[1]) || !math.IsNaN(a[0].U[0]) {
		t.Errorf("read %+v, %v", a, err)
	}
	for text, want := range map[string]string{
		"":                        "is empty",
		"t_s\n1\n":                "has no column angle_rad",
		"t_s,angle_rad\n":         "no rows",
		"t_s,angle_rad\n1,x\n":    `line 2: angle_rad is "x"`,
		"t_s,angle_rad\n1,1\n1,1": "line 3: the time 1 s does not come after 1 s",
		"t_s,angle_rad\n,1\n":     "line 2: t_s is empty",
		"t_s,angle_rad\n1\n":      "line 2",
	} {
		if _, err := ReadAngles(strings.NewReader(text), "swing.csv", "arm"); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: error %v, want one with %q", text, err, want)
		}
	}
}

func TestFactsAreLinesForPeople(t *testing.T) {
	type facts struct {
		Codec string            `json:"codec"`
		Rate  float64           `json:"true_rate_per_s"`
		Turn  int               `json:"rotation_deg"`
		W     int               `json:"width_px"`
		Empty string            `json:"empty"`
		Tags  map[string]string `json:"tags"`
		Words []string          `json:"warnings"`
		Lost  []struct{ T float64 }
		NaN   float64 `json:"unknown_s"`
	}
	c := Clip{Facts: &facts{"h264", 59.94005994, 90, 1080, "", map[string]string{"maker": "x"}, []string{"a", "b"}, []struct{ T float64 }{{1}, {2}}, math.NaN()}}
	got := map[string]string{}
	for _, f := range c.List() {
		got[f.Name] = f.Value
	}
	want := map[string]string{
		"codec": "h264", "true rate": "59.94006/s", "rotation": "90°", "width": "1080 px", "tags: maker": "x", "warnings": "a; b", "Lost": "2 entries",
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
	if (&Clip{}).List() != nil {
		t.Error("no facts gave lines")
	}
}
