package camera

import (
	"encoding/json"
	"math"
	"strings"
	"testing"

	"lodeswing/track"
	"lodeswing/track/rig"
)

// load reads a rig; a bob is added so that it is one that may be followed.
func load(t testing.TB, text string) *rig.Rig {
	t.Helper()
	r, err := rig.Parse("test.toml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func solve(t testing.TB, text string, seen *Sighting) *Camera {
	t.Helper()
	c, err := New(load(t, text), 1280, 720, seen)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s is %.12g, want %.12g ± %g", what, got, want, tol)
	}
}

// A level camera square on the plane: everything by hand. 100 mm over 100 px is
// 1 mm/px; from 1.2 m that is a focal length of 1200 px.
func TestSquareCameraByHand(t *testing.T) {
	c := solve(t, "[camera]\ndistance_mm = 1200\nreadout_ms = 20\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]\norigin_px = [639.5, 159.5]", nil)
	near(t, "focal length", c.cal.Lens.FocalPX, 1200, 1e-9)
	near(t, "distance", c.cal.DistanceM, 1.2, 1e-12)
	near(t, "scale", c.cal.MetresPerPixel, 1e-3, 1e-15)
	x, z, j := c.ToPlane(739.5, 259.5)
	near(t, "x", x, 0.1, 1e-12)
	near(t, "z", z, -0.1, 1e-12)
	near(t, "∂x/∂u", j[0][0], 1e-3, 1e-15)
	near(t, "∂z/∂v", j[1][1], -1e-3, 1e-15)
	// A point 0.2 m nearer to the camera is magnified by 1.2/1.0 about the picture's middle (639.5, 359.5).
	u, v := c.ToPixel(0.1, -0.2, -0.1)
	near(t, "u of a nearer point", u, 639.5+100*1.2, 1e-9)
	near(t, "v of a nearer point", v, 359.5+(-100)*1.2, 1e-9)
	x, z, _ = c.BobToPlane(u, v, 0, 0.2)
	near(t, "x of a nearer bob", x, 0.1, 1e-12)
	near(t, "z of a nearer bob", z, -0.1, 1e-12)
	// Perspective offset of a ball: R = 0.018 m, Z = 1.2 m, R²/Z² = 2.25e-4; its
	// centre is 500 px off the axis, its outline's centre 500/(1 − 2.25e-4) = 500.1125 px.
	u, _ = c.BobToPixel(0.5, 0, -0.2, 0.018)
	near(t, "outline's centre", u-639.5, 500/(1-2.25e-4), 1e-9)
	x, z, _ = c.BobToPlane(u, 359.5, 0.018, 0)
	near(t, "ball's x", x, 0.5, 1e-12)
	near(t, "ball's z", z, -0.2, 1e-12)
	// Rows: 20 ms over 719 rows, counted from the middle.
	near(t, "first row", c.RowTime(3, 0), -0.010, 1e-15)
	near(t, "last row", c.RowTime(3, 719), 0.010, 1e-15)
	// A picture that was turned 90° clockwise has its first sensor row at its right edge.
	near(t, "first row of a turned picture", c.Rotated(90).RowTime(1279, 5), -0.010, 1e-15)
	near(t, "first row, 270°", c.Rotated(-90).RowTime(0, 5), -0.010, 1e-15)
	near(t, "first row, 180°", c.Rotated(180).RowTime(0, 719), -0.010, 1e-15)
}

// The outline of a ball is where lines of sight touch it: fit an ellipse's
// centre to such lines, found without the closed form.
func TestOutlineOfABall(t *testing.T) {
	c := solve(t, "[camera]\ndistance_mm = 900\ntilt_deg = 12\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [720, 310]]", nil)
	centre, radius := vec{0.31, -0.05, 0.2}, 0.03
	d := centre.plus(-1, c.eye)
	dist := d.length()
	axis := d.unit()
	a := axis.cross(vec{0, 0, 1}).unit()
	b := axis.cross(a)
	// Tangent points form a circle of radius R·cos α, R·sin α nearer than the centre.
	sin := radius / dist
	cos := math.Sqrt(1 - sin*sin)
	minU, maxU, minV, maxV := math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)
	for i := range 200000 {
		s, k := math.Sincos(2 * math.Pi * float64(i) / 200000)
		p := centre.plus(-radius*sin, axis).plus(radius*cos*k, a).plus(radius*cos*s, b)
		u, v := c.ToPixel(p[0], p[1], p[2])
		minU, maxU, minV, maxV = math.Min(minU, u), math.Max(maxU, u), math.Min(minV, v), math.Max(maxV, v)
	}
	// An ellipse's centre is the middle of its bounding box.
	u, v := c.BobToPixel(centre[0], centre[1], centre[2], radius)
	near(t, "u of the outline's centre", u, (minU+maxU)/2, 1e-6)
	near(t, "v of the outline's centre", v, (minV+maxV)/2, 1e-6)
	cu, cv := c.ToPixel(centre[0], centre[1], centre[2])
	if off := math.Hypot(u-cu, v-cv); off < 0.3 || off > 2 {
		t.Errorf("the offset is %.3f px; this check is void", off)
	}
	x, z, _ := c.BobToPlane(u, v, radius, 0.05)
	near(t, "x back", x, centre[0], 1e-9)
	near(t, "z back", z, centre[2], 1e-9)
}

// On the row through the picture's middle the outline's axes are level and
// upright, so that its box gives them.
func TestRadiusOfABall(t *testing.T) {
	c := solve(t, "[camera]\ndistance_mm = 900\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [720, 310]]", nil)
	x, z, _ := c.ToPlane(1200, 359.5)
	d := vec{x, 0, z}.plus(-1, c.eye)
	axis, radius := d.unit(), 0.03
	a, sin := axis.cross(vec{0, 0, 1}).unit(), 0.03/d.length()
	b := axis.cross(a)
	box := [4]float64{math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)}
	for i := range 100000 {
		s, k := math.Sincos(2 * math.Pi * float64(i) / 100000)
		p := vec{x, 0, z}.plus(-radius*sin, axis).plus(radius*math.Sqrt(1-sin*sin)*k, a).plus(radius*math.Sqrt(1-sin*sin)*s, b)
		u, v := c.ToPixel(p[0], p[1], p[2])
		box = [4]float64{math.Min(box[0], u), math.Max(box[1], u), math.Min(box[2], v), math.Max(box[3], v)}
	}
	u, v := c.BobToPixel(x, 0, z, radius)
	near(t, "radius", c.RadiusPX(u, v, radius, 0), math.Sqrt((box[1]-box[0])*(box[3]-box[2]))/2, 1e-4)
}

// Whatever the rig says, plane → pixel → plane comes back, and the Jacobian is
// that of differences.
func TestRoundTrips(t *testing.T) {
	for name, text := range map[string]string{
		"bare":        "[scale]\nlength_mm = 100\nends_px = [[100, 300], [350, 310]]",
		"distance":    "[camera]\ndistance_mm = 1200\n[scale]\nlength_mm = 100\ndepth_mm = 30\nends_px = [[100, 300], [350, 310]]",
		"tilt":        "[camera]\ndistance_mm = 1200\ntilt_deg = 20\nplumb_px = [[90, 40], [99, 430]]\n[scale]\nlength_mm = 100\nends_px = [[100, 300], [350, 310]]",
		"lens":        "[camera]\nfocal_px = 1000\nlens = [-0.08, 0.02]\nplumb_px = [[90, 40], [92, 430], [93, 500]]\n[scale]\nlength_mm = 100\nends_px = [[100, 300], [350, 310]]",
		"above":       "[camera]\nfrom_above = true\ntilt_deg = 70\ndistance_mm = 800\n[scale]\nlength_mm = 100\nends_px = [[100, 300], [350, 310]]\norigin_px = [600, 300]\n[[part]]\nname = \"arm\"\njoint = \"ball\"\npivot_mm = [0, 0]\n[[bob]]\nname = \"lamp\"\ncolour = \"#ff0000\"\npart = \"arm\"\nat_mm = [0, -280]",
		"everything ": "[camera]\nfocal_px = 1100\ntilt_deg = -15\nlens = [0.05]\n[scale]\nlength_mm = 100\ndepth_mm = -20\nu_depth_mm = 2\nends_px = [[100, 300], [350, 310]]\norigin_px = [600, 300]",
	} {
		c := solve(t, text, nil)
		if x, z, _ := c.ToPlane(c.cal.OriginU, c.cal.OriginV); math.Hypot(x, z) > 1e-12 {
			t.Errorf("%s: the origin's pixel is at %g, %g m", name, x, z)
		}
		for _, p := range [][2]float64{{5, 7}, {640, 360}, {1200, 90}, {300, 700}} {
			x, z, j := c.ToPlane(p[0], p[1])
			place := vec{x, 0, z}
			if c.cal.Lens.FromAbove {
				place = vec{x, z, -0.28}
			}
			u, v := c.ToPixel(place[0], place[1], place[2])
			near(t, name+": u", u, p[0], 1e-8)
			near(t, name+": v", v, p[1], 1e-8)
			for k, d := range [][2]float64{{1e-3, 0}, {0, 1e-3}} {
				x1, z1, _ := c.ToPlane(p[0]+d[0], p[1]+d[1])
				x0, z0, _ := c.ToPlane(p[0]-d[0], p[1]-d[1])
				near(t, name+": Jacobian", j[0][k], (x1-x0)/2e-3, 1e-9*c.cal.MetresPerPixel*1e3)
				near(t, name+": Jacobian", j[1][k], (z1-z0)/2e-3, 1e-9*c.cal.MetresPerPixel*1e3)
			}
		}
		// The length itself comes back.
		s := c.cal.Lens
		depth := 0.0
		if strings.Contains(text, "depth_mm = 30") {
			depth = 0.03
		} else if strings.Contains(text, "depth_mm = -20") {
			depth = -0.02
		}
		x1, z1, _ := c.BobToPlane(100, 300, 0, depth)
		x2, z2, _ := c.BobToPlane(350, 310, 0, depth)
		near(t, name+": length", math.Hypot(x2-x1, z2-z1), 0.1, 1e-10)
		// A track gives its camera back.
		data, err := json.Marshal(c.Calibration())
		if err != nil {
			t.Fatal(err)
		}
		var cal track.Calibration
		if err := json.Unmarshal(data, &cal); err != nil {
			t.Fatal(err)
		}
		again, err := Restore(cal)
		if err != nil {
			t.Fatal(err)
		}
		a, b := c.ToPixel(0.05, 0.02, -0.2)
		a2, b2 := again.ToPixel(0.05, 0.02, -0.2)
		if a != a2 || b != b2 {
			t.Errorf("%s: the restored camera differs", name)
		}
		if len(s.Unsure) == 0 || c.cal.UScale <= 0 || c.cal.UVertical <= 0 {
			t.Errorf("%s: no uncertainty: %+v", name, c.cal)
		}
	}
}

// A barrel lens may lose a picture's corners: they are NaN, never a wrong place.
func TestLostCorners(t *testing.T) {
	c := solve(t, "[camera]\nfocal_px = 678\nlens = [-0.133]\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", nil)
	if x, _, _ := c.ToPlane(0, 0); !math.IsNaN(x) {
		t.Errorf("a corner that the lens does not reach is at x = %g m", x)
	}
	if x, _, _ := c.ToPlane(0, 359.5); !(x < -0.6) {
		t.Errorf("the picture's edge is at x = %g m", x)
	}
}

// A vertical line in space lies on the plumb line of the rig, tilt and lens or not.
func TestPlumbLineIsVertical(t *testing.T) {
	for _, cam := range []string{"", "tilt_deg = 15\n", "focal_px = 900\nlens = [-0.1, 0.02]\n", "tilt_deg = -8\nfocal_px = 900\n"} {
		c := solve(t, "[camera]\n"+cam+"plumb_px = [[200, 40], [215, 600]]\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", nil)
		x1, z1, _ := c.ToPlane(200, 40)
		x2, z2, _ := c.ToPlane(215, 600)
		near(t, cam+"plumb line's x", x2, x1, 1e-12)
		if !(z1 > z2) || !c.cal.VerticalKnown || !strings.Contains(c.cal.VerticalFrom, "plumb") {
			t.Errorf("%s: up is down, or the vertical is not told: %g, %g", cam, z1, z2)
		}
	}
	// Two points read to 0.7 px, 560 px apart: 0.7·√2/560 rad.
	c := solve(t, "[camera]\nplumb_px = [[639.5, 40], [639.5, 600]]\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", nil)
	near(t, "vertical's uncertainty", c.cal.UVertical, 0.7*math.Sqrt2/560, 2e-4)
	if c := solve(t, "[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", nil); c.cal.VerticalKnown || c.cal.VerticalFrom != "" {
		t.Error("a vertical out of nothing")
	}
	if c := solve(t, "[camera]\nvertical = \"picture\"\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", nil); !c.cal.VerticalKnown {
		t.Error("the rig says that the picture is upright")
	}
}

// The budget's shares by hand, for a square camera 1.2 m away and 100 mm over 100 px.
func TestBudgetByHand(t *testing.T) {
	c := solve(t, "[camera]\ndistance_mm = 1200\nu_distance_mm = 20\n[scale]\nlength_mm = 100\nu_length_mm = 0.2\ndepth_mm = 40\nu_depth_mm = 2\nends_px = [[589.5, 359.5], [689.5, 359.5]]", nil)
	want := map[string]float64{
		"the scale's length":       0.002,
		"reading the scale's ends": 0.5 * math.Sqrt2 / 100,
		"the scale's depth":        0.002 / (1.2 - 0.04),        // d ln(D/(D−d)) / dd = 1/(D−d)
		"the camera's distance":    0.020 * 0.04 / (1.2 * 1.16), // d/(D(D−d))
	}
	var sum float64
	for _, s := range c.cal.ScaleShares {
		sum += s.U * s.U
		if w, ok := want[s.Source]; ok {
			near(t, s.Source, s.U, w, 0.025*w) // second order
			delete(want, s.Source)
		}
	}
	if len(want) > 0 {
		t.Errorf("shares missing: %v, got %v", want, c.cal.ScaleShares)
	}
	near(t, "UScale", c.cal.UScale, math.Sqrt(sum), 1e-6)
	near(t, "scale", c.cal.MetresPerPixel, 1e-3*1.2/1.16, 1e-9)
}

func TestWhatIsWrong(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"", "there is no scale"},
		{"[scale]\nlength_mm = 100", "not where it is"},
		{"[scale]\nlength_mm = 100\nmark_look = \"dark\"", "marks of the scale were not found"},
		{"[scale]\nlength_mm = 100\nends_px = [[600, 300], [1700, 300]]", "lies outside the picture"},
		{"[scale]\nlength_mm = 100\nends_px = [[600, 300], [603, 300]]\nends_reading_px = 2", "too near"},
		{"[camera]\nlens = [0.1]\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", "add focal_px or distance_mm"},
		{"[camera]\nfocal_px = 1000\nlens = [-0.9]\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", "folds the picture"},
		{"[camera]\ntilt_deg = 90\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", "does not look at the plane"},
		{"[scale]\ntarget = \"x\"", "was not found in the picture"},
		{"[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]\norigin_px = [1e6, 0]", "origin_px"},
	} {
		if _, err := New(load(t, c.text), 1280, 720, nil); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%q: got %v, want %q", c.text, err, c.want)
		}
	}
	if _, err := Restore(track.Calibration{}); err == nil {
		t.Error("a camera out of nothing")
	}
	if _, err := New(load(t, ""), 0, 0, nil); err == nil {
		t.Error("a camera for no picture")
	}
	c := solve(t, "[camera]\nfocal_px = 900\ndistance_mm = 3000\n[scale]\nlength_mm = 100\nends_px = [[600, 300], [700, 300]]", nil)
	if s := strings.Join(c.Cautions(), " "); !strings.Contains(s, "one of them is wrong") || !strings.Contains(s, "readout_ms") {
		t.Errorf("cautions: %s", s)
	}
	for ends, far := range map[string]bool{"[[20, 60], [20, 600]]": true, "[[600, 100], [600, 600]]": false} {
		c := solve(t, "[camera]\ndistance_mm = 800\n[scale]\nlength_mm = 300\nu_length_mm = 0.2\nends_px = "+ends, nil)
		if said := strings.Contains(strings.Join(c.Cautions(), " "), "off square"); said != far {
			t.Errorf("ends %s: caution %t, scale %v", ends, said, c.cal.ScaleShares)
		}
	}
	if u, _ := c.ToPixel(0, -100, 0); !math.IsNaN(u) {
		t.Error("a point behind the camera has a pixel")
	}
}
