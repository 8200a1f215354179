package plots

import (
	"bytes"
	"image"
	"image/color"
	"image/png"
	"math"
	"strings"
	"testing"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/track"
)

// visited is a record of a swing about (100, 20) px, 80 px long, in front of a
// green crowd.
func visited(t *testing.T) *record.Record {
	t.Helper()
	img := image.NewRGBA(image.Rect(0, 0, 300, 200))
	for y := range 200 {
		for x := range 300 {
			img.Set(x, y, color.RGBA{0, 200, 0, 255})
		}
	}
	var b bytes.Buffer
	if err := png.Encode(&b, img); err != nil {
		t.Fatal(err)
	}
	bob := track.Bob{Name: "gull", RadiusPX: 10}
	for i := range 60 {
		a := 0.4 * math.Sin(float64(i)/5)
		bob.Samples = append(bob.Samples, track.Sample{U: 100 + 80*math.Sin(a), V: 20 + 80*math.Cos(a), State: track.Seen})
	}
	r := &record.Record{Still: b.Bytes(), Track: &track.Track{Bobs: []track.Bob{bob}, Cal: track.Calibration{OriginU: 100, OriginV: 20}}, Safety: []string{"magnets"}}
	r.Run.Rig.Name = "Gull"
	r.Findings = []finding.Finding{
		finding.Normal("spectrum.line1.frequency", "swing", "", 4.0/3, 1e-4, "Hz", ""),
		finding.Normal("kick.energy", "swing", "", 1.1e-4, 1e-6, "J", ""),
		finding.Normal("kick.energy_per_day", "swing", "", 1.1e-4*230400, 0.1, "J", ""),
		{Key: "claim.1", Kind: finding.Statement, Name: "It swings far.", Text: "No longer true. It swung by 8.6° (± 0.1°) to each side."},
	}
	return r
}

// No bystander shows: nothing of the picture is left farther from the toy than a
// bob and a half, 15 px.
func TestVisitorsPictureShowsTheToyAlone(t *testing.T) {
	r := visited(t)
	img, err := png.Decode(bytes.NewReader(r.Still))
	if err != nil {
		t.Fatal(err)
	}
	cut := cutOut(img, r.Track)
	if cut == nil || cut.Bounds().Dx() > 2*(32+16) || cut.Bounds().Dy() > 80+2*16 {
		t.Fatalf("cut %v", cut.Bounds())
	}
	left := int(100 - 80*math.Sin(0.4) - 15)
	green := 0
	for y := range cut.Bounds().Dy() {
		for x := range cut.Bounds().Dx() {
			_, g, b, _ := cut.At(x, y).RGBA()
			if g > b { // green, not white
				green++
				px, py := float64(x+left), float64(y+5)
				if d := math.Hypot(px-100, py-20); d > 80+17 || math.Abs(math.Atan2(px-100, py-20)) > 0.42 && nearLine(px, py, 100, 20, 100-80*math.Sin(0.4), 20+80*math.Cos(0.4)) > 17 && nearLine(px, py, 100, 20, 100+80*math.Sin(0.4), 20+80*math.Cos(0.4)) > 17 {
					t.Fatalf("the crowd shows at %.0f, %.0f", px, py)
				}
			}
		}
	}
	if green < 2000 {
		t.Errorf("only %d pixels of the toy are left", green)
	}
	if cutOut(img, &track.Track{}) != nil {
		t.Error("a picture without a toy")
	}
}

func TestVisitorsWords(t *testing.T) {
	r := visited(t)
	w := VisitorWords(r)
	if w.Figure != "80" || w.Title != "Gull" {
		t.Errorf("%+v", w)
	}
	page, err := Visitor(r, w)
	if err != nil {
		t.Fatal(err)
	}
	s := string(page)
	for _, want := range []string{"lift a paper clip by 11 millimetres", "230,000 such pushes in a day", "today it is not so", "data:image/png;base64,", "never swallow a magnet"} {
		if !strings.Contains(s, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	// Symbols that a child does not read; the style sheet's own are no text.
	_, body, _ := strings.Cut(s, "<body>")
	body = body[:strings.Index(body, "<img")] + body[strings.Index(body, "alt="):]
	for _, bad := range []string{"±", "°", "%", "σ", "mJ", "Hz", "×"} {
		if strings.Contains(body, bad) {
			t.Errorf("the page shows %q", bad)
		}
	}
	// The museum's words are shown as they are, and as text.
	w.Title = "Our <gull>"
	if page, err = Visitor(r, w); err != nil || !strings.Contains(string(page), "Our &lt;gull&gt;") {
		t.Errorf("%v", err)
	}
	r.Still = []byte("no picture")
	if _, err := Visitor(r, w); err == nil {
		t.Error("a broken still goes unsaid")
	}
}
