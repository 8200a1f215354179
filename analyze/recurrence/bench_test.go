package recurrence

import (
	"fmt"
	"math"
	"os"
	"os/exec"
	"strconv"
	"strings"
	"testing"
	"time"
)

// lorenz is the x component of Lorenz's system (E. N. Lorenz, Journal of the
// Atmospheric Sciences 20 (1963) 130) at steps of 0.05, by Runge and Kutta's
// fourth order.
func lorenz(n int) []float64 {
	s := [3]float64{1, 1, 20}
	f := func(s [3]float64) [3]float64 {
		return [3]float64{10 * (s[1] - s[0]), s[0]*(28-s[2]) - s[1], s[0]*s[1] - 8./3*s[2]}
	}
	add := func(a, b [3]float64, h float64) [3]float64 {
		return [3]float64{a[0] + h*b[0], a[1] + h*b[1], a[2] + h*b[2]}
	}
	out := make([]float64, n)
	for i := -500; i < n; i++ {
		for range 5 {
			const h = 0.01
			k1 := f(s)
			k2 := f(add(s, k1, h/2))
			k3 := f(add(s, k2, h/2))
			k4 := f(add(s, k3, h))
			for q := range s {
				s[q] += h / 6 * (k1[q] + 2*k2[q] + 2*k3[q] + k4[q])
			}
		}
		if i >= 0 {
			out[i] = s[0]
		}
	}
	return out
}

func lorenzStates(t testing.TB, n int) Vectors {
	v, err := Embed(0, 0.05, 3, 3, lorenz(n+6))
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func benchmark(b *testing.B, n int, opt Options) {
	v := lorenzStates(b, n)
	b.ReportAllocs()
	for b.Loop() {
		p, err := Auto(v, opt)
		if err != nil {
			b.Fatal(err)
		}
		b.ReportMetric(100*p.Measures.RR.V, "%RR")
	}
}

func BenchmarkMeasures10000(b *testing.B) { benchmark(b, 10000, Options{Rate: 0.05}) }

func BenchmarkMeasures10000Euclidean(b *testing.B) {
	benchmark(b, 10000, Options{Rate: 0.05, Norm: Euclidean})
}

func BenchmarkMeasures10000Map(b *testing.B) { benchmark(b, 10000, Options{Rate: 0.05, Map: 600}) }

func BenchmarkMeasures100000(b *testing.B) { benchmark(b, 100000, Options{Rate: 0.02, Map: 600}) }

func BenchmarkMeasures200000(b *testing.B) { benchmark(b, 200000, Options{Rate: 0.02, Map: 600}) }

// BenchmarkNumPy runs the same measures, without uncertainties, by whole matrices
// in NumPy (Debian's python3-numpy) and reports how many times faster this
// package is, both in one run.
func BenchmarkNumPy(b *testing.B) {
	const python = "/usr/bin/python3"
	if _, err := os.Stat(python); err != nil {
		b.Skip("no Debian python3 here")
	}
	const n = 10000
	v := lorenzStates(b, n)
	probe, err := Auto(v, Options{Rate: 0.05})
	if err != nil {
		b.Fatal(err)
	}
	eps := probe.Threshold[0]
	file := b.TempDir() + "/states.txt"
	var text strings.Builder
	for i := range n {
		fmt.Fprintln(&text, strings.Trim(fmt.Sprint(v.State(i)), "[]"))
	}
	if err := os.WriteFile(file, []byte(text.String()), 0o600); err != nil {
		b.Fatal(err)
	}
	const script = `
import sys, time
try:
    import numpy as np
except ImportError:
    print("absent"); sys.exit()
x = np.loadtxt(sys.argv[1]); eps = float(sys.argv[2]); n = len(x)
t0 = time.perf_counter()
r = np.ones((n, n), dtype=bool)
for k in range(x.shape[1]):
    r &= np.abs(x[:, k][:, None] - x[:, k][None, :]) <= eps
np.fill_diagonal(r, False)
def runs(line):
    d = np.diff(np.concatenate(([0], line.view(np.int8), [0])))
    a, e = np.flatnonzero(d == 1), np.flatnonzero(d == -1)
    return a, e - a
diag = np.concatenate([runs(np.diagonal(r, k).copy())[1] for k in range(1, n)])
vert, t1, t2 = [], [], []
for j in range(n):
    for part in (r[:j, j], r[j+1:, j]):
        part = part.copy()
        a, l = runs(part)
        vert.append(l); t2.append(np.diff(a)); t1.append(np.diff(np.flatnonzero(part)))
vert, t1, t2 = map(np.concatenate, (vert, t1, t2))
def lines(l):
    q = l[l >= 2]; c = np.bincount(q); p = c[c > 0] / len(q)
    return q.sum() / l.sum(), q.mean(), q.max(), -(p * np.log(p)).sum()
out = (r.sum() / (n * (n - 1.0)),) + lines(diag) + lines(vert)[:3] + (t1.mean(), t2.mean())
print(time.perf_counter() - t0, *out)
`
	raw, err := exec.Command(python, "-c", script, file, strconv.FormatFloat(eps, 'g', 17, 64)).Output()
	if err != nil {
		b.Fatal(err)
	}
	if strings.HasPrefix(string(raw), "absent") {
		b.Skip("no NumPy here")
	}
	var got [11]float64
	for i, w := range strings.Fields(string(raw)) {
		if got[i], err = strconv.ParseFloat(w, 64); err != nil {
			b.Fatal(err)
		}
	}
	var spent time.Duration
	rounds := 0
	for b.Loop() {
		t0 := time.Now()
		p, err := Auto(v, Options{Threshold: eps})
		if err != nil {
			b.Fatal(err)
		}
		spent += time.Since(t0)
		rounds++
		m := p.Measures
		h := p.Step
		want := []float64{m.RR.V, m.DET.V, m.L.V / h, m.LMax.V / h, m.ENTR.V, m.LAM.V, m.TT.V / h, m.VMax.V / h, m.T1.V / h, m.T2.V / h}
		for i, x := range append(got[1:5:5], got[5:]...) {
			if math.Abs(x-want[i]) > 1e-9*math.Abs(x) {
				b.Fatalf("measure %d is %v here and %v in NumPy", i, want[i], x)
			}
		}
	}
	b.ReportMetric(got[0]/(spent.Seconds()/float64(rounds)), "×NumPy")
	b.ReportMetric(got[0], "s/NumPy")
}
