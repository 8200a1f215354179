package spectrum

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"strings"
	"testing"
)

// The same series through SciPy's welch, periodogram and lombscargle (Debian
// package python3-scipy).
func TestSciPy(t *testing.T) {
	const python = "/usr/bin/python3"
	if _, err := os.Stat(python); err != nil {
		t.Skip("no Debian python3 here: not compared with SciPy")
	}
	const script = `
import sys, json
try:
    import numpy as np
    from scipy import signal
except ImportError:
    print("absent"); sys.exit()
d = json.load(sys.stdin)
y = np.array(d["y"]); dt = d["dt"]
f, hann = signal.welch(y, 1/dt, window="hann", nperseg=256)
_, black = signal.welch(y, 1/dt, window="blackman", nperseg=256)
_, box = signal.periodogram(y, 1/dt, window="boxcar")
_, spec = signal.periodogram(y, 1/dt, window="hann", scaling="spectrum")
t = np.array(d["t"]); z = np.array(d["z"]); w = 2*np.pi*np.array(d["f"])
ls = signal.lombscargle(t - t[0], z, w, precenter=True, normalize=True)
json.dump({"f": list(f), "hann": list(hann), "blackman": list(black), "boxcar": list(box), "spectrum": list(spec), "ls": list(ls)}, sys.stdout)
`
	rng := rand.New(rand.NewPCG(18, 19))
	const n, dt = 2000, 1. / 60
	even := even(n, dt)
	y := make([]float64, n)
	for i, x := range even {
		y[i] = 5 + math.Sin(2*math.Pi*1.3*x) + 0.2*rng.NormFloat64()
	}
	odd := uneven(rng, 2000)
	z := make([]float64, len(odd))
	for i, x := range odd {
		z[i] = math.Sin(2*math.Pi*1.3*x) + 0.2*rng.NormFloat64()
	}
	opt := Options{MaxFreq: 12}
	d, err := prepare(odd, z, nil, &opt)
	if err != nil {
		t.Fatal(err)
	}
	df := 0.25 / d.span
	power := d.lombScargle(d.y, df, int(12/df))
	var hz []float64
	for k := 8; k < len(power); k++ { // from two over the duration up
		hz = append(hz, float64(k)*df)
	}
	in, err := json.Marshal(map[string]any{"y": y, "dt": dt, "t": odd, "z": z, "f": hz})
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(python, "-c", script)
	cmd.Stdin = strings.NewReader(string(in))
	raw, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	if strings.HasPrefix(string(raw), "absent") {
		t.Skip("no SciPy here: not compared with it")
	}
	var want struct{ F, Hann, Blackman, Boxcar, Spectrum, LS []float64 }
	if err := json.Unmarshal(raw, &want); err != nil {
		t.Fatal(err)
	}
	same := func(what string, got, want []float64, tol float64) {
		t.Helper()
		if len(got) != len(want) {
			t.Errorf("%s: %d values, SciPy has %d", what, len(got), len(want))
			return
		}
		top := 0.0
		for _, v := range want {
			top = max(top, v)
		}
		for i := range got {
			if e := math.Abs(got[i] - want[i]); e > tol*top && e > 1e-6*want[i] {
				t.Errorf("%s: value %d is %v, SciPy says %v", what, i, got[i], want[i])
				return
			}
		}
	}
	h, err := Welch(even, y, 256*dt, Options{})
	if err != nil {
		t.Fatal(err)
	}
	same("frequencies", h.Freq, want.F, 1e-9)
	same("Welch, Hann", h.PSD, want.Hann, 1e-11)
	b, err := Welch(even, y, 256*dt, Options{Window: Blackman})
	if err != nil {
		t.Fatal(err)
	}
	same("Welch, Blackman", b.PSD, want.Blackman, 1e-11)

	eopt := Options{}
	ed, err := prepare(even, y, nil, &eopt)
	if err != nil {
		t.Fatal(err)
	}
	m := n/2 + 1
	box := ed.periodogram(ed.y, Boxcar, 1/(n*dt), m)
	box.psd[m-1] /= 2
	same("periodogram", box.psd, want.Boxcar, 1e-11)
	spec := ed.periodogram(ed.y, Hann, 1/(n*dt), m)
	for k, a := range spec.amplitude {
		spec.amplitude[k] = a * a / 2
		if k == 0 {
			spec.amplitude[k] = a * a
		}
	}
	spec.amplitude[m-1] /= 2
	same("power spectrum", spec.amplitude, want.Spectrum, 1e-11)
	// SciPy's periodogram takes the plain mean out beforehand instead of fitting it:
	// alike to about one over the number of samples.
	same("Lomb–Scargle", power[8:], want.LS, 2e-3)
}

// The intervals of a Welch spectrum of noise hold its true density 95 times in
// 100.
func TestWelchIntervals(t *testing.T) {
	rng := rand.New(rand.NewPCG(20, 21))
	held, count := 0, 0
	for range 60 {
		y := make([]float64, 1000)
		for i := range y {
			y[i] = rng.NormFloat64()
		}
		a, err := Welch(even(1000, 0.1), y, 12.8, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if a.Segments != 14 {
			t.Fatalf("%d segments, want 14", a.Segments)
		}
		for k := 4; k < 60; k++ {
			if a.Lo[k] < 0.2 && 0.2 < a.Hi[k] {
				held++
			}
			count++
		}
	}
	share := float64(held) / float64(count)
	t.Logf("intervals hold the density in %.1f %%", 100*share)
	if share < 0.93 || share > 0.97 {
		t.Errorf("intervals hold the density in %.1f %%", 100*share)
	}
}

func BenchmarkCompute3000(b *testing.B) {
	rng := rand.New(rand.NewPCG(22, 23))
	at := uneven(rng, 3000)
	y := make([]float64, len(at))
	for i, x := range at {
		y[i] = math.Exp(-x/20)*math.Sin(6*x) + 0.3*math.Sin(9*x) + 0.01*rng.NormFloat64()
	}
	for b.Loop() {
		if _, err := Compute(at, y, nil, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
