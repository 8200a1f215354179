package plots

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"math/rand/v2"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"gonum.org/v1/plot/vg"

	"lodeswing/analyze/finding"
	"lodeswing/track"
)

// wellFormed reads an SVG to its end.
func wellFormed(t *testing.T, name string, svg []byte) (texts []string) {
	t.Helper()
	d := xml.NewDecoder(bytes.NewReader(svg))
	in := ""
	for {
		token, err := d.Token()
		if errors.Is(err, io.EOF) {
			return texts
		}
		if err != nil {
			t.Fatalf("%s is no well-formed SVG: %v", name, err)
		}
		switch token := token.(type) {
		case xml.StartElement:
			in = token.Name.Local
			if in == "script" || in == "foreignObject" || in == "style" {
				t.Errorf("%s holds a <%s>", name, in)
			}
		case xml.CharData:
			if in == "text" {
				texts = append(texts, string(token))
			}
		case xml.EndElement:
			in = ""
		}
	}
}

func TestEveryCurveBecomesAFigure(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	line := func(role finding.Role, x, y []float64) finding.Line {
		return finding.Line{Name: "l", Role: role, X: x, Y: y}
	}
	for name, c := range map[string]finding.Curve{
		"no line":       {},
		"empty line":    {Lines: []finding.Line{{}}},
		"one point":     {Lines: []finding.Line{line(finding.Data, []float64{3}, []float64{4})}},
		"all NaN":       {Lines: []finding.Line{line(finding.Data, []float64{1, 2}, []float64{nan, nan})}},
		"infinite":      {Lines: []finding.Line{line(finding.Model, []float64{1, 2, 3}, []float64{1, inf, -inf})}},
		"constant":      {Lines: []finding.Line{line(finding.Data, []float64{1, 2}, []float64{5, 5})}},
		"zero":          {Lines: []finding.Line{line(finding.Residual, []float64{0, 0}, []float64{0, 0})}},
		"unequal":       {Lines: []finding.Line{{X: []float64{1, 2, 3}, Y: []float64{1}, Lo: []float64{0}, Hi: []float64{2, 3, 4}}}},
		"log of minus":  {Y: finding.Axis{Log: true}, Lines: []finding.Line{line(finding.Data, []float64{1, 2}, []float64{-1, 0})}},
		"log, one":      {Y: finding.Axis{Log: true}, Lines: []finding.Line{line(finding.Data, []float64{1, 2}, []float64{2, 2})}},
		"huge and tiny": {Y: finding.Axis{Unit: "J"}, Lines: []finding.Line{line(finding.Data, []float64{1e-300, 1e300}, []float64{-1e300, 1e-300})}},
		"bad factor":    {Y: finding.Axis{Unit: "J", ShowUnit: "x", ShowFactor: -2}, Lines: []finding.Line{line(finding.Data, []float64{1, 2}, []float64{1, 2})}},
		"equal axes":    {X: finding.Axis{Unit: "m"}, Y: finding.Axis{Unit: "m"}, Lines: []finding.Line{line(finding.Data, []float64{0, 1e-3}, []float64{0, 8})}},
		"no role":       {Title: strings.Repeat("Donaudampfschiff", 30), Lines: []finding.Line{{X: []float64{1}, Y: []float64{1}}}},
	} {
		svg, picture, err := Curve(&c)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		wellFormed(t, name, svg)
		if bytes.Contains(svg, []byte("NaN")) || bytes.Contains(svg, []byte("Inf")) {
			t.Errorf("%s: a coordinate is no number", name)
		}
		img, err := png.Decode(bytes.NewReader(picture))
		if err != nil {
			t.Errorf("%s: %v", name, err)
		} else if img.Bounds().Dx() != 1000 {
			t.Errorf("%s: the picture is %d pixels wide, want 4 inches at 250 dpi", name, img.Bounds().Dx())
		}
	}
}

func TestHostileNamesStayNames(t *testing.T) {
	r := swing()
	evil := `"><script>alert(1)</script><img src=x onerror=alert(2)>&amp;`
	r.Run.Rig.Name, r.Run.Rig.Text, r.Run.Clip.File = evil, evil, evil
	r.Headline, r.Cautions = evil, []string{evil}
	r.Track.Bobs[0].Name, r.Track.Bobs[0].Part = evil, evil
	r.Run.Options = map[string]string{evil: evil}
	r.Run.Clip.Facts = map[string]any{evil: evil}
	for i := range r.Findings {
		r.Findings[i].Subject, r.Findings[i].Method = evil, evil
	}
	for i := range r.Curves {
		c := &r.Curves[i]
		c.Subject, c.Caption, c.X.Label = evil, evil, evil
		for k := range c.Lines {
			c.Lines[k].Name = evil
		}
	}
	for i := range r.Fits {
		r.Fits[i].Subject, r.Fits[i].Candidates[0].Name = evil, evil
	}
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	tags := regexp.MustCompile(`(?i)<\s*(script|img)|<[^>]*\son\w+\s*=`)
	if m := tags.Find(r.Report); m != nil {
		t.Errorf("the report holds %q", m)
	}
	for _, f := range r.Figures {
		wellFormed(t, f.Name, f.SVG)
		if m := tags.Find(f.SVG); m != nil {
			t.Errorf("%s holds %q", f.Name, m)
		}
		if strings.ContainsAny(f.Name, `"<>&/ `) {
			t.Errorf("a figure is called %q", f.Name)
		}
	}
}

func TestNothingIsFetched(t *testing.T) {
	r := swing()
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	page := string(r.Report)
	for _, name := range []string{"http://www.w3.org/2000/svg", "http://www.w3.org/1999/xlink"} {
		page = strings.ReplaceAll(page, name, "") // names, not places
	}
	for _, word := range []string{"http:", "https:", "src=", "@import", "url(", "<link", "<script", "<iframe"} {
		if strings.Contains(page, word) {
			t.Errorf("the report holds %q", word)
		}
	}
}

func TestThinningKeepsEveryPeak(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	pts := make([]vg.Point, 100_000)
	for i := range pts {
		pts[i] = vg.Point{X: vg.Length(i) * 250 / 100_000, Y: vg.Length(rng.NormFloat64())}
	}
	pts[54_321].Y, pts[77_777].Y = 50, -40
	out := thin(pts)
	if len(out) > 4*int(250/column)+8 {
		t.Errorf("%d points are left of %d", len(out), len(pts))
	}
	if !slices.Contains(out, pts[54_321]) || !slices.Contains(out, pts[77_777]) || out[0] != pts[0] || out[len(out)-1] != pts[len(pts)-1] {
		t.Error("a peak or an end is lost")
	}
	if !slices.IsSortedFunc(out, func(a, b vg.Point) int {
		switch {
		case a.X < b.X:
			return -1
		case a.X > b.X:
			return 1
		}
		return 0
	}) {
		t.Error("the line runs back")
	}
	// A curve that turns round keeps its shape to half a pixel.
	for i := range pts {
		s, c := math.Sincos(float64(i) / 3000)
		pts[i] = vg.Point{X: vg.Length(100 * c), Y: vg.Length(100 * s)}
	}
	out = thin(pts)
	if len(out) > 20_000 {
		t.Errorf("%d points are left of a circle", len(out))
	}
	for i := 1; i < len(out); i++ {
		if d := math.Hypot(float64(out[i].X-out[i-1].X), float64(out[i].Y-out[i-1].Y)); d > 2*float64(column) {
			t.Fatalf("a gap of %v points opened", d)
		}
	}
}

func TestALongClipGivesASmallFigure(t *testing.T) {
	r := swing()
	c := &r.Curves[0]
	for i := range c.Lines {
		l := &c.Lines[i]
		l.X, l.Y = nil, nil
		for k := range 200_000 {
			l.X = append(l.X, float64(k)/60)
			l.Y = append(l.Y, math.Sin(float64(k)/10))
		}
	}
	cloud := finding.Line{Role: finding.Mark}
	rng := rand.New(rand.NewPCG(4, 4))
	for range 300_000 {
		cloud.X, cloud.Y = append(cloud.X, rng.Float64()*100), append(cloud.Y, rng.Float64()*100)
	}
	r.Curves = append(r.Curves[:1], finding.Curve{Key: "recurrence", X: finding.Axis{Label: "time", Unit: "s"}, Y: finding.Axis{Label: "time", Unit: "s"}, Lines: []finding.Line{cloud}})
	began := time.Now()
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	t.Logf("drawn in %v", time.Since(began))
	for _, f := range r.Figures {
		if len(f.SVG) > 1<<20 {
			t.Errorf("%s takes %d bytes as SVG", f.Name, len(f.SVG))
		}
	}
}

func TestTicksAreRoundAndFew(t *testing.T) {
	for _, c := range []struct {
		lo, hi float64
		n      int
		want   string
	}{
		{0, 20, 7, "0 5 10 15 20"},
		{-0.7, 0.7, 5, "−0.5 0.0 0.5"},
		{-0.044, 0.044, 5, "−0.04 −0.02 0.00 0.02 0.04"},
		{1.06, 1.065, 6, "1.060 1.061 1.062 1.063 1.064 1.065"},
		{3, 3, 6, "3.000"},
	} {
		var got []string
		for _, tick := range linearTicks(c.lo, c.hi, c.n) {
			got = append(got, tick.Label)
		}
		if s := strings.Join(got, " "); s != c.want {
			t.Errorf("from %v to %v: %s, want %s", c.lo, c.hi, s, c.want)
		}
	}
	for _, c := range []struct {
		lo, hi float64
		want   string
	}{
		{1e-7, 1, "10⁻⁷ 10⁻⁶ 10⁻⁵ 10⁻⁴ 10⁻³ 10⁻² 10⁻¹ 10⁰"},
		{0.9, 12, "1 2 5 10"},
		{1e-12, 1e12, "10⁻¹² 10⁻⁸ 10⁻⁴ 10⁰ 10⁴ 10⁸ 10¹²"},
	} {
		var got []string
		for _, tick := range logTicks(math.Log10(c.lo), math.Log10(c.hi), 8) {
			if tick.Label != "" {
				got = append(got, tick.Label)
			}
		}
		if s := strings.Join(got, " "); s != c.want {
			t.Errorf("from %v to %v: %s, want %s", c.lo, c.hi, s, c.want)
		}
	}
}

func TestExponentsAreDrawnThoughTheFaceLacksThem(t *testing.T) {
	c := finding.Curve{
		Key: "s", Y: finding.Axis{Label: "power", Unit: "rad²/Hz", Log: true},
		Lines: []finding.Line{{Name: "漢字", Role: finding.Data, X: []float64{1, 2, 3}, Y: []float64{1e-9, 1e-5, 1}}, {Name: "b", Role: finding.Guide}},
	}
	svg, _, err := Curve(&c)
	if err != nil {
		t.Fatal(err)
	}
	texts := wellFormed(t, "s", svg)
	for _, want := range []string{"−9", "10", "2", "Power (rad", "漢字"} {
		if !slices.Contains(texts, want) {
			t.Errorf("%q is not drawn; there is %q", want, texts)
		}
	}
	if m := regexp.MustCompile(`textLength="[^"]*"[^>]*>漢字`).Find(svg); m != nil {
		t.Error("letters that the face lacks are pressed into its width")
	}
	if !bytes.Contains(svg, []byte("sans-serif")) || !bytes.Contains(svg, []byte(`role="img"`)) || !bytes.Contains(svg, []byte("<title")) {
		t.Error("no face to fall back on, or nothing for a screen reader")
	}
}

func TestThePathStandsWithoutAStillToo(t *testing.T) {
	r := swing()
	r.Still = nil
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	if r.Figures[0].Name != "path" {
		t.Errorf("the first figure is %q", r.Figures[0].Name)
	}
	for i := range r.Track.Bobs[0].Samples {
		s := &r.Track.Bobs[0].Samples[i]
		s.State, s.X, s.Z, s.U, s.V = track.Missing, math.NaN(), math.NaN(), math.NaN(), math.NaN()
	}
	for _, picture := range [][]byte{nil, still()} {
		r.Still = picture
		if err := Draw(t.Context(), r); err != nil {
			t.Fatal(err)
		}
		if r.Figures[0].Name == "path" {
			t.Error("a path was drawn of a bob that was never seen")
		}
	}
	r.Still = []byte("no picture")
	if err := Draw(t.Context(), r); err == nil || !strings.Contains(err.Error(), "still of the clip") {
		t.Errorf("error: %v", err)
	}
}

func TestFiguresOfOnePartStandTogether(t *testing.T) {
	r := swing()
	c := func(key, subject string) finding.Curve { return finding.Curve{Key: key, Subject: subject} }
	r.Curves = []finding.Curve{c("angle", "a"), c("angle", "b"), c("spectrum", "a"), c("spectrum", "b"), c("decay-fit", "b"), c("decay-residuals", "b"), c("angle", "a")}
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, f := range r.Figures {
		got = append(got, f.Name)
	}
	if s := strings.Join(got, " "); s != "path angle-a spectrum-a angle-a-2 angle-b spectrum-b decay-fit-b" {
		t.Errorf("the figures are %s", s)
	}
}

func TestANumberThatIsNotKnownSaysSo(t *testing.T) {
	r := swing()
	f := finding.Normal("x", "arm", "Mystery", math.NaN(), math.NaN(), "s", "how")
	r.Findings = []finding.Finding{f}
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(string(r.Report), `<span class="value">not known</span>`) || strings.Contains(string(r.Report), "NaN") {
		t.Error("an unknown number is not called so")
	}
}
