package decay

import (
	"context"
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"

	"lodeswing/analyze/series"
)

// shared finds the folder of outside data beside the project's root, and skips
// the test where it is absent.
func shared(t *testing.T, name string) string {
	t.Helper()
	p := filepath.Join("..", "..", "..", "shared", "data", name)
	if _, err := os.Stat(p); err != nil {
		t.Skipf("the outside data ../shared/data/%s are not here", name)
	}
	return p
}

func readTable(t *testing.T, path string) (ts, ys []float64) {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer func() { _ = f.Close() }()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range rows[1:] {
		x, err1 := strconv.ParseFloat(r[0], 64)
		y, err2 := strconv.ParseFloat(r[1], 64)
		if err1 != nil || err2 != nil {
			t.Fatalf("bad row %v", r)
		}
		ts, ys = append(ts, x), append(ys, y)
	}
	return ts, ys
}

// A real pendulum on an optical encoder: K. Kaheman et al., "The Experimental
// Multi-Arm Pendulum on a Cart" (2022). The authors' own estimate, with viscous
// friction alone, gives ω₀² = 64.219 s⁻² and 0.067227 s⁻¹.
func TestEncoderPendulum(t *testing.T) {
	ts, ys := readTable(t, shared(t, "pendulum-encoder/free-swing.csv"))
	a, err := series.FromTable("arm", ts, ys, nil)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("noise of a sample %.3g rad, rate window ±%.3g s", a.UAngle[0], a.WindowS)
	res, err := Analyze(context.Background(), a, Options{FromS: math.NaN(), ToS: math.NaN()})
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range res.Findings {
		t.Logf("%-24s %.7g ± %.2g %s [%.6g %.6g] %s %s %v", f.Key, f.Value, f.U, f.Unit, f.Lo, f.Hi, f.Kind, f.Text, f.Method)
	}
	for _, l := range res.Laws {
		t.Logf("%-24s BIC %.1f w %.3g ω² %.5f±%.2g c1 %.5f±%.2g c2 %.5f±%.2g τ %.5f±%.2g ζ %.6f±%.2g", l.Law, l.BIC, l.Weight, l.Omega2, l.UOmega2, l.Viscous, l.UViscous, l.Drag, l.UDrag, l.Dry, l.UDry, l.ZetaAtAmplitude, l.U)
	}
	t.Log(res.FromS, res.ToS, res.Swings, res.AmplitudeStart/deg, res.AmplitudeEnd/deg, res.Cautions)
	t.Log(res.Fits[0])
}
