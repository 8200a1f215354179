package spectrum

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/integrate/quad"
)

// sums returns Σⱼ cⱼ·exp(−2πi·k·df·tⱼ) for k = 0 … n−1, for times t ≥ 0 in any
// order and spacing. It is a nonuniform fast Fourier transform with the
// "exponential of semicircle" kernel (A. H. Barnett, J. Magland and L. af
// Klinteberg, SIAM J. Scientific Computing 41 (2019) C479), right to about 1e-12
// of Σ|c|.
func sums(t, c []float64, df float64, n int) []complex128 {
	const (
		width = 14 // grid points under the kernel
		beta  = 2.3 * width
	)
	size := smooth(max(4*n, 4*width))
	grid := make([]float64, size)
	for j, tj := range t {
		x := df * tj
		x -= math.Floor(x)
		at := x * float64(size)
		first := int(math.Ceil(at - width/2.))
		for l := first; l < first+width; l++ {
			z := (float64(l) - at) / (width / 2.)
			a := 1 - z*z
			if a < 0 {
				continue
			}
			i := l
			if i < 0 {
				i += size
			} else if i >= size {
				i -= size
			}
			grid[i] += c[j] * math.Exp(beta*(math.Sqrt(a)-1))
		}
	}
	coeff := fourier.NewFFT(size).Coefficients(nil, grid)
	node, weight := make([]float64, 2*width+30), make([]float64, 2*width+30)
	quad.Legendre{}.FixedLocations(node, weight, 0, 1)
	for i, z := range node {
		weight[i] *= width * math.Exp(beta*(math.Sqrt(1-z*z)-1))
	}
	out := coeff[:n]
	hat := make([]float64, n)
	for i, z := range node {
		turn := math.Pi * width / float64(size) * z
		step := cmplx.Rect(1, turn)
		var e complex128
		for k := range hat {
			if k%64 == 0 { // anew, before rounding adds up
				e = cmplx.Rect(weight[i], turn*float64(k))
			}
			hat[k] += real(e)
			e *= step
		}
	}
	for k := range out {
		out[k] /= complex(hat[k], 0)
	}
	return out
}

// smooth returns the least number from n upwards that has no prime factor above
// 5 and is even.
func smooth(n int) int {
	for ; ; n++ {
		if n%2 != 0 {
			continue
		}
		m := n
		for _, p := range []int{2, 3, 5} {
			for m%p == 0 {
				m /= p
			}
		}
		if m == 1 {
			return n
		}
	}
}
