package plots

import (
	"bytes"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html/template"
	"image"
	"image/color"
	"image/png"
	"math"
	"strings"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/track"
)

//go:embed visitor.html.tmpl
var visitorTemplate string

var visitorPage = template.Must(template.New("visitor").Parse(visitorTemplate))

// Words are what a visitor's page says. They are the museum's to edit.
type Words struct {
	Title  string   `toml:"title"`
	Figure string   `toml:"figure" comment:"the one large figure, and what stands under it"`
	Under  string   `toml:"under"`
	Lines  []string `toml:"lines" comment:"one sentence each; leave out what visitors need not know"`
	Foot   string   `toml:"foot" comment:"small, at the bottom"`
}

// VisitorWords puts what a record holds in words that a child reads, without
// symbols.
func VisitorWords(r *record.Record) Words {
	w := Words{Title: r.Run.Rig.Name}
	if w.Title == "" {
		w.Title = "How it swings"
	}
	if t, ok := swingTime(r); ok {
		switch perMinute := 60 / t; {
		case perMinute >= 10:
			w.Figure, w.Under = fmt.Sprintf("%.0f", perMinute), "swings every minute, there and back"
		default:
			w.Figure, w.Under = fmt.Sprintf("%.0f", t), "seconds for one swing, there and back"
		}
	}
	if f := r.Find("kick.energy", ""); f != nil && f.Kind == finding.Measured && f.Unit == "J" {
		// A gram (a paper clip, nearly) lifted: energy over 1 g × 9.8 m/s².
		mm := f.Value / (1e-3 * 9.8) * 1e3
		height := fmt.Sprintf("%.0f millimetres", mm)
		if mm < 1.5 {
			height = "one millimetre"
		}
		w.Lines = append(w.Lines, "Each time it passes the middle, a hidden coil gives it a tiny push. One push could lift a paper clip by "+height+".")
	}
	if f := r.Find("kick.energy_per_day", ""); f != nil {
		w.Lines = append(w.Lines, fmt.Sprintf("It gets %s such pushes in a day.", thousands(f.Value/r.Find("kick.energy", "").Value)))
	}
	if f := r.Find("decay.log_decrement", ""); f != nil && f.Kind == finding.Measured && f.Value > 0 {
		w.Lines = append(w.Lines, fmt.Sprintf("Left alone, its swing is half as wide after about %s swings.", count(math.Ln2/f.Value)))
	}
	for i := 1; ; i++ {
		f := r.Find(fmt.Sprintf("claim.%d", i), "")
		if f == nil {
			break
		}
		answer := "This time we could not tell."
		switch {
		case strings.HasPrefix(f.Text, "Still true"):
			answer = "We measured it: this is true today."
		case strings.HasPrefix(f.Text, "No longer"):
			answer = "We measured it: today it is not so. We are looking after it."
		}
		w.Lines = append(w.Lines, fmt.Sprintf("The label says: “%s” %s", strings.TrimSpace(f.Name), answer))
	}
	w.Foot = "Measured from a film of this very toy."
	if len(r.Safety) > 0 {
		w.Foot += " Its magnets are strong: never swallow a magnet, and keep them away from pacemakers."
	}
	return w
}

// swingTime is the time of one full swing, s, as the record tells it best.
func swingTime(r *record.Record) (float64, bool) {
	if f := r.Find("decay.period_zero", ""); f != nil && f.Kind == finding.Measured && f.Value > 0 {
		return f.Value, true
	}
	if f := r.Find("spectrum.line1.frequency", ""); f != nil && f.Kind == finding.Measured && f.Value > 0 {
		return 1 / f.Value, true
	}
	return 0, false
}

// count is a whole number, rounded as one speaks.
func count(x float64) string {
	if x >= 100 {
		step := math.Pow(10, math.Floor(math.Log10(x))-1)
		return thousands(math.Round(x/step) * step)
	}
	return fmt.Sprintf("%.0f", math.Max(1, x))
}

func thousands(x float64) string {
	step := math.Max(1, math.Pow(10, math.Floor(math.Log10(math.Max(x, 1)))-1))
	s := fmt.Sprintf("%.0f", math.Round(x/step)*step)
	for i := len(s) - 3; i > 0; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	return s
}

// Visitor makes a visitor's page: one HTML file that needs nothing else. The
// picture is cut to where the toy moves, so that no bystander shows.
func Visitor(r *record.Record, w Words) ([]byte, error) {
	page := struct {
		Words
		Picture template.URL
	}{Words: w}
	if r.Track != nil && len(r.Still) > 0 {
		img, err := png.Decode(bytes.NewReader(r.Still))
		if err != nil {
			return nil, fmt.Errorf("the still of the clip cannot be read: %w", err)
		}
		if cut := cutOut(img, r.Track); cut != nil {
			var b bytes.Buffer
			if err := png.Encode(&b, cut); err != nil {
				return nil, fmt.Errorf("the picture cannot be written: %w", err)
			}
			page.Picture = template.URL("data:image/png;base64," + base64.StdEncoding.EncodeToString(b.Bytes()))
		}
	}
	var b bytes.Buffer
	if err := visitorPage.Execute(&b, page); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}

// cutOut is the still where the toy moves: within a bob and a half of a line from
// the point that it swings about to anywhere that a bob was. All else is white. nil where no bob was
// seen.
func cutOut(img image.Image, t *track.Track) image.Image {
	type line struct{ x0, y0, x1, y1 float64 }
	var lines []line
	lo, hi := [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
	radius := 0.0
	for i := range t.Bobs {
		b := &t.Bobs[i]
		radius = math.Max(radius, b.RadiusPX)
		use := b.Usable()
		step := max(1, len(use)/150)
		hubU, hubV, swings := hub(use)
		for k := 0; k < len(use); k += step {
			u, v := use[k].U, use[k].V
			if math.IsNaN(u) || math.IsNaN(v) {
				continue
			}
			l := line{u, v, u, v}
			if swings {
				l.x0, l.y0 = hubU, hubV
			}
			lines = append(lines, l)
			for _, p := range [][2]float64{{l.x0, l.y0}, {l.x1, l.y1}} {
				for j := range 2 {
					lo[j], hi[j] = math.Min(lo[j], p[j]), math.Max(hi[j], p[j])
				}
			}
		}
	}
	if len(lines) == 0 {
		return nil
	}
	if radius == 0 { // a track read from its table does not say
		radius = math.Max(20, 0.1*math.Max(hi[0]-lo[0], hi[1]-lo[1]))
	}
	reach := 1.5 * radius
	box := image.Rect(int(lo[0]-reach), int(lo[1]-reach), int(hi[0]+reach)+1, int(hi[1]+reach)+1).Intersect(img.Bounds())
	if box.Empty() {
		return nil
	}
	out := image.NewRGBA(image.Rect(0, 0, box.Dx(), box.Dy()))
	for y := range box.Dy() {
		for x := range box.Dx() {
			px, py := float64(x+box.Min.X), float64(y+box.Min.Y)
			inside := false
			for _, l := range lines {
				if nearLine(px, py, l.x0, l.y0, l.x1, l.y1) < reach {
					inside = true
					break
				}
			}
			if inside {
				out.Set(x, y, img.At(x+box.Min.X, y+box.Min.Y))
			} else {
				out.Set(x, y, color.White)
			}
		}
	}
	return out
}

// hub is the point of the picture that a bob swings about, by the algebraic circle
// through its path (I. Kåsa, IEEE Trans. Instrum. Meas. 25, 1976); ok is false where
// the path is no piece of a circle.
func hub(path []track.Sample) (u, v float64, ok bool) {
	n := float64(len(path))
	if n < 20 {
		return 0, 0, false
	}
	mu, mv := 0.0, 0.0
	for _, s := range path {
		mu, mv = mu+s.U/n, mv+s.V/n
	}
	var uu, uv, vv, ru, rv float64
	for _, s := range path {
		x, y := s.U-mu, s.V-mv
		r := x*x + y*y
		uu, uv, vv, ru, rv = uu+x*x, uv+x*y, vv+y*y, ru+r*x, rv+r*y
	}
	det := 2 * (uu*vv - uv*uv)
	if !(det > 0) {
		return 0, 0, false
	}
	x, y := (ru*vv-rv*uv)/det, (rv*uu-ru*uv)/det
	radius := math.Sqrt(x*x + y*y + (uu+vv)/n)
	off := 0.0
	for _, s := range path {
		off += math.Abs(math.Hypot(s.U-mu-x, s.V-mv-y)-radius) / n
	}
	return mu + x, mv + y, off < 0.02*radius && radius < 20*math.Sqrt((uu+vv)/n)
}

// nearLine is the distance of a point from a stretch between two points.
func nearLine(x, y, x0, y0, x1, y1 float64) float64 {
	dx, dy := x1-x0, y1-y0
	k := 0.0
	if d := dx*dx + dy*dy; d > 0 {
		k = math.Max(0, math.Min(1, ((x-x0)*dx+(y-y0)*dy)/d))
	}
	return math.Hypot(x-x0-k*dx, y-y0-k*dy)
}
