package lsq

import (
	"bufio"
	"context"
	"fmt"
	"math"
	"math/cmplx"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

// The models of the NIST Statistical Reference Datasets for nonlinear
// regression (www.itl.nist.gov/div898/strd/nls), in complex numbers so that the
// test can take derivatives by a complex step, exact to the last digits
// (W. Squire and G. Trapp, SIAM Review 40 (1998) 110).
var nistModels = map[string]func(b []complex128, x []float64) complex128{
	"Bennett5": func(b []complex128, x []float64) complex128 { return b[0] * cmplx.Pow(b[1]+c(x), -1/b[2]) },
	"BoxBOD":   func(b []complex128, x []float64) complex128 { return b[0] * (1 - cmplx.Exp(-b[1]*c(x))) },
	"Chwirut1": chwirut, "Chwirut2": chwirut,
	"DanWood": func(b []complex128, x []float64) complex128 { return b[0] * cmplx.Pow(c(x), b[1]) },
	"ENSO": func(b []complex128, x []float64) complex128 {
		w := 2 * math.Pi * c(x)
		return b[0] + b[1]*cmplx.Cos(w/12) + b[2]*cmplx.Sin(w/12) +
			b[4]*cmplx.Cos(w/b[3]) + b[5]*cmplx.Sin(w/b[3]) +
			b[7]*cmplx.Cos(w/b[6]) + b[8]*cmplx.Sin(w/b[6])
	},
	"Eckerle4": func(b []complex128, x []float64) complex128 {
		z := (c(x) - b[2]) / b[1]
		return b[0] / b[1] * cmplx.Exp(-0.5*z*z)
	},
	"Gauss1": gauss, "Gauss2": gauss, "Gauss3": gauss,
	"Hahn1": rational(3, 3), "Thurber": rational(3, 3), "Kirby2": rational(2, 2),
	"Lanczos1": lanczos, "Lanczos2": lanczos, "Lanczos3": lanczos,
	"MGH09": func(b []complex128, x []float64) complex128 {
		z := c(x)
		return b[0] * (z*z + z*b[1]) / (z*z + z*b[2] + b[3])
	},
	"MGH10": func(b []complex128, x []float64) complex128 { return b[0] * cmplx.Exp(b[1]/(c(x)+b[2])) },
	"MGH17": func(b []complex128, x []float64) complex128 {
		return b[0] + b[1]*cmplx.Exp(-c(x)*b[3]) + b[2]*cmplx.Exp(-c(x)*b[4])
	},
	"Misra1a": func(b []complex128, x []float64) complex128 { return b[0] * (1 - cmplx.Exp(-b[1]*c(x))) },
	"Misra1b": func(b []complex128, x []float64) complex128 {
		z := 1 + b[1]*c(x)/2
		return b[0] * (1 - 1/(z*z))
	},
	"Misra1c": func(b []complex128, x []float64) complex128 { return b[0] * (1 - 1/cmplx.Sqrt(1+2*b[1]*c(x))) },
	"Misra1d": func(b []complex128, x []float64) complex128 { return b[0] * b[1] * c(x) / (1 + b[1]*c(x)) },
	"Nelson": func(b []complex128, x []float64) complex128 {
		return b[0] - b[1]*complex(x[0], 0)*cmplx.Exp(-b[2]*complex(x[1], 0))
	},
	"Rat42": func(b []complex128, x []float64) complex128 { return b[0] / (1 + cmplx.Exp(b[1]-b[2]*c(x))) },
	"Rat43": func(b []complex128, x []float64) complex128 {
		return b[0] / cmplx.Pow(1+cmplx.Exp(b[1]-b[2]*c(x)), 1/b[3])
	},
	"Roszman1": func(b []complex128, x []float64) complex128 {
		return b[0] - b[1]*c(x) - atan(b[2]/(c(x)-b[3]))/math.Pi
	},
}

func c(x []float64) complex128 { return complex(x[0], 0) }

// atan is the arctangent for a complex step; cmplx.Atan loses so small a part.
func atan(z complex128) complex128 {
	x := real(z)
	return complex(math.Atan(x), imag(z)/(1+x*x))
}

func chwirut(b []complex128, x []float64) complex128 {
	return cmplx.Exp(-b[0]*c(x)) / (b[1] + b[2]*c(x))
}

func gauss(b []complex128, x []float64) complex128 {
	z1, z2 := (c(x)-b[3])/b[4], (c(x)-b[6])/b[7]
	return b[0]*cmplx.Exp(-b[1]*c(x)) + b[2]*cmplx.Exp(-z1*z1) + b[5]*cmplx.Exp(-z2*z2)
}

func lanczos(b []complex128, x []float64) complex128 {
	return b[0]*cmplx.Exp(-b[1]*c(x)) + b[2]*cmplx.Exp(-b[3]*c(x)) + b[4]*cmplx.Exp(-b[5]*c(x))
}

// lanczosResidual takes the largest terms away first: the certified residuals of
// Lanczos1 are 1e-13, of observations near 2.
func lanczosResidual(p []float64, x, y float64) float64 {
	a, b, c := p[0]*math.Exp(-p[1]*x), p[2]*math.Exp(-p[3]*x), p[4]*math.Exp(-p[5]*x)
	return (c - y) + b + a
}

func rational(top, bottom int) func(b []complex128, x []float64) complex128 {
	return func(b []complex128, x []float64) complex128 {
		num, den := complex128(0), complex128(0)
		for i := top; i >= 0; i-- {
			num = num*c(x) + b[i]
		}
		for i := bottom; i >= 1; i-- {
			den = (den + b[top+i]) * c(x)
		}
		return num / (1 + den)
	}
}

type nistSet struct {
	name         string
	starts       [2][]float64
	p, sd        []float64
	sumOfSquares float64
	y            []float64
	x            [][]float64
	certifiedDoF int
}

func nistFolder(t testing.TB) string {
	dir := filepath.Join("..", "..", "..", "shared", "data", "nist-strd")
	if _, err := os.Stat(dir); err != nil {
		t.Skip("the NIST StRD sets are not here: nothing checked against them")
	}
	return dir
}

var nistRow = regexp.MustCompile(`^\s*b\d+\s*=\s*(\S+)\s+(\S+)\s+(\S+)\s+(\S+)`)

func readNIST(t testing.TB, path string) nistSet {
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	set := nistSet{name: strings.TrimSuffix(filepath.Base(path), ".dat")}
	num := func(w string) float64 {
		v, err := strconv.ParseFloat(w, 64)
		if err != nil {
			t.Fatalf("%s: %v", path, err)
		}
		return v
	}
	sc := bufio.NewScanner(f)
	inData := false
	for sc.Scan() {
		line := sc.Text()
		if inData {
			w := strings.Fields(line)
			if len(w) < 2 {
				continue
			}
			set.y = append(set.y, num(w[0]))
			var x []float64
			for _, v := range w[1:] {
				x = append(x, num(v))
			}
			set.x = append(set.x, x)
			continue
		}
		if m := nistRow.FindStringSubmatch(line); m != nil {
			set.starts[0] = append(set.starts[0], num(m[1]))
			set.starts[1] = append(set.starts[1], num(m[2]))
			set.p, set.sd = append(set.p, num(m[3])), append(set.sd, num(m[4]))
		}
		if rest, ok := strings.CutPrefix(line, "Residual Sum of Squares:"); ok {
			set.sumOfSquares = num(strings.TrimSpace(rest))
		}
		if rest, ok := strings.CutPrefix(line, "Degrees of Freedom:"); ok {
			set.certifiedDoF = int(num(strings.TrimSpace(rest)))
		}
		inData = strings.HasPrefix(line, "Data:") && !strings.Contains(line, "Response") && strings.Contains(line, "x")
	}
	if set.name == "Nelson" {
		for i, y := range set.y {
			set.y[i] = math.Log(y)
		}
	}
	return set
}

func (set *nistSet) problem(withJacobian bool) Problem {
	model := nistModels[set.name]
	b := make([]complex128, len(set.p))
	lanczosSet := strings.HasPrefix(set.name, "Lanczos")
	load := func(p []float64) {
		for i, v := range p {
			b[i] = complex(v, 0)
		}
	}
	pr := Problem{N: len(set.p), M: len(set.y), Residuals: func(p, r []float64) error {
		load(p)
		for i, y := range set.y {
			r[i] = real(model(b, set.x[i])) - y
			if lanczosSet {
				r[i] = lanczosResidual(p, set.x[i][0], y)
			}
		}
		return nil
	}}
	if withJacobian {
		pr.Jacobian = func(p, j []float64) error {
			load(p)
			for k := range p {
				h := 1e-20 * max(math.Abs(p[k]), 1e-10)
				b[k] = complex(p[k], h)
				for i := range set.y {
					j[i*len(p)+k] = imag(model(b, set.x[i])) / h
				}
				b[k] = complex(p[k], 0)
			}
			return nil
		}
	}
	return pr
}

// digits is the number of correct significant digits, at most the 11 that are
// certified.
func digits(got, want float64) float64 {
	if got == want {
		return 11
	}
	return min(11, -math.Log10(math.Abs(got-want)/math.Abs(want)))
}

// TestNIST holds the search to all 27 sets from both starts, with differences
// and with exact derivatives.
func TestNIST(t *testing.T) {
	dir := nistFolder(t)
	files, err := filepath.Glob(filepath.Join(dir, "*.dat"))
	if err != nil || len(files) != 27 {
		t.Fatalf("%d sets in %s, want 27 (%v)", len(files), dir, err)
	}
	var table strings.Builder
	fmt.Fprintf(&table, "%-10s %-6s %-12s %8s %8s %8s %6s %6s\n", "set", "start", "derivatives", "digits p", "digits s", "digits χ²", "iter", "eval")
	for _, path := range files {
		set := readNIST(t, path)
		if len(set.y) != set.certifiedDoF+len(set.p) && set.name != "Rat43" {
			t.Fatalf("%s: read %d observations, certified are %d", set.name, len(set.y), set.certifiedDoF+len(set.p))
		}
		for st, start := range set.starts {
			for _, exact := range []bool{false, true} {
				sum, err := Solve(context.Background(), set.problem(exact), start, Options{})
				if err != nil {
					t.Errorf("%s from start %d: %v", set.name, st+1, err)
					continue
				}
				dp, ds := 11.0, 11.0
				for i := range set.p {
					dp, ds = min(dp, digits(sum.P[i], set.p[i])), min(ds, digits(sum.U[i], set.sd[i]))
				}
				how := map[bool]string{false: "differences", true: "exact"}[exact]
				fmt.Fprintf(&table, "%-10s %-6d %-12s %8.1f %8.1f %8.1f %6d %6d\n", set.name, st+1, how, dp, ds,
					digits(sum.ChiSquare, set.sumOfSquares), sum.Iterations, sum.Evaluations)
				wantS := 4.0
				if set.name == "Lanczos1" {
					wantS = 3 // residuals of 1e-13: float64 gives no more
				}
				if dp < 6 || ds < wantS || !sum.Converged {
					t.Errorf("%s from start %d, %s: %.1f digits of the parameters, %.1f of their deviations, converged %v\n%v", set.name, st+1, how, dp, ds, sum.Converged, sum)
				}
			}
		}
	}
	t.Log("\n" + table.String())
}
