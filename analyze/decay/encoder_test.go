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
	res, err := Analyze(context.Background(), a, Options{})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%.2f s to %.2f s, %.1f swings, from %.1f° to %.1f°", res.FromS, res.ToS, res.Swings, res.AmplitudeStart/deg, res.AmplitudeEnd/deg)
	if res.Swings < 60 || res.AmplitudeStart < 92*deg || res.AmplitudeEnd > 16*deg {
		t.Errorf("the whole record is one free decay; used %.1f swings from %.1f° to %.1f°", res.Swings, res.AmplitudeStart/deg, res.AmplitudeEnd/deg)
	}
	const authors = 64.219
	k := byKey(t, res, "decay.omega_squared")
	t.Logf("ω₀² = %.3f ± %.3f s⁻², %.2f %% from the authors' %.3f s⁻²", k.Value, k.U, 100*(k.Value/authors-1), authors)
	if math.Abs(k.Value/authors-1) > 0.01 {
		t.Errorf("ω₀² = %g, authors %g", k.Value, authors)
	}
	t.Log(byKey(t, res, "decay.law").Text)
	best, viscousAlone := res.Laws[0], res.Laws[0]
	for _, l := range res.Laws {
		t.Logf("%-22s BIC %9.1f  ω₀² %.3f s⁻²  c₁ %.5f s⁻¹  c₂ %.5f rad⁻¹  τ₀ %.5f rad s⁻²", l.Law, l.BIC, l.Omega2, l.Viscous, l.Drag, l.Dry)
		if l.BIC < best.BIC {
			best = l
		}
	}
	if best.Law != "drag + dry" || viscousAlone.Law != "viscous" || viscousAlone.BIC-best.BIC < 500 {
		t.Errorf("the data prefer %s by %.0f over viscous friction alone", best.Law, viscousAlone.BIC-best.BIC)
	}
	// The authors' viscous coefficient is of the size that viscous friction alone
	// gives here; they fitted other swings too.
	t.Logf("viscous friction alone: %.4f s⁻¹, authors 0.067227 s⁻¹", viscousAlone.Viscous)
	if viscousAlone.Viscous < 0.04 || viscousAlone.Viscous > 0.08 {
		t.Errorf("viscous friction alone: %g s⁻¹", viscousAlone.Viscous)
	}
	// The period against amplitude, measured between turning points, against the
	// elliptic integral with the fitted ω₀².
	for _, c := range res.Curves {
		if c.Key != "decay-period" {
			continue
		}
		m, p := model{sine: true}, []float64{0, 0, 0, k.Value}
		worst := 0.0
		for i, x := range c.Lines[0].X {
			o, err := m.orbitAt(p, x)
			if err != nil {
				t.Fatal(err)
			}
			d := c.Lines[0].Y[i]/o.period - 1
			worst = math.Max(worst, math.Abs(d))
			if i%16 == 0 {
				t.Logf("period at %5.1f°: %.4f s measured, %.4f s by the elliptic integral", x/deg, c.Lines[0].Y[i], o.period)
			}
		}
		t.Logf("worst of %d swings: %.2f %%", len(c.Lines[0].X), 100*worst)
		if worst > 0.01 || len(c.Lines[0].X) < 100 {
			t.Errorf("period against amplitude: worst %.3g of %d", worst, len(c.Lines[0].X))
		}
	}
}
