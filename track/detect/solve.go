package detect

import "math"

// The fit's parameters, in this order. Positions and lengths in px, levels in
// the projection's own units; the wall's plane and the bob's shading are per
// radius.
const (
	pU     = iota // centre
	pV            //
	pR            // mean radius
	pSmear        // length of the smear
	pF0           // bob: level
	pFx           // bob: shading to the right ...
	pFy           // ... downwards ...
	pFz           // ... and towards the camera, as a matt ball is lit
	pLit          // bob: how far beyond the lamp's horizon light reaches
	pB0           // wall: level, on top of what is known of it
	pBx           // wall: slope
	pBy           //
	pBlur         // edge blur
	pE1           // ellipse: longer along u (−) or v (+)
	pE2           // ellipse: longer along the diagonals
	pCount
)

// levels are the parameters from pF0 to pBy.
const levels = pBy - pF0 + 1

type (
	vector [pCount]float64
	matrix [pCount][pCount]float64 // symmetric, upper triangle in use
)

// invert replaces the symmetric positive definite leading part of m that on
// marks by its inverse, in the upper and lower triangle; other rows and columns
// become zero. ok is false when m is not positive definite there.
func invert(m *matrix, on *[pCount]bool) (inv matrix, ok bool) {
	var at [pCount]int
	n := 0
	for i, yes := range on {
		if yes {
			at[n] = i
			n++
		}
	}
	// Cholesky with the diagonal scaled to one: the levels and the positions
	// differ by orders of magnitude.
	var l, li matrix
	var scale vector
	for i := range n {
		d := m[at[i]][at[i]]
		if !(d > 0) {
			return inv, false
		}
		scale[i] = 1 / math.Sqrt(d)
	}
	for i := range n {
		for j := 0; j <= i; j++ {
			s := m[at[j]][at[i]] * scale[i] * scale[j]
			for k := range j {
				s -= l[i][k] * l[j][k]
			}
			if i == j {
				if !(s > 1e-12) {
					return inv, false
				}
				l[i][i] = math.Sqrt(s)
			} else {
				l[i][j] = s / l[j][j]
			}
		}
	}
	for i := range n {
		li[i][i] = 1 / l[i][i]
		for j := range i {
			s := 0.0
			for k := j; k < i; k++ {
				s -= l[i][k] * li[k][j]
			}
			li[i][j] = s / l[i][i]
		}
	}
	for i := range n {
		for j := 0; j <= i; j++ {
			s := 0.0
			for k := i; k < n; k++ {
				s += li[k][i] * li[k][j]
			}
			s *= scale[i] * scale[j]
			inv[at[i]][at[j]], inv[at[j]][at[i]] = s, s
		}
	}
	return inv, true
}

// median returns the middle of v, which it reorders; 0 when v is empty.
func median(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	k := len(v) / 2
	lo, hi := 0, len(v)-1
	for lo < hi { // Hoare's selection
		p := v[(lo+hi)/2]
		i, j := lo, hi
		for i <= j {
			for v[i] < p {
				i++
			}
			for v[j] > p {
				j--
			}
			if i <= j {
				v[i], v[j] = v[j], v[i]
				i++
				j--
			}
		}
		if k <= j {
			hi = j
		} else if k >= i {
			lo = i
		} else {
			break
		}
	}
	return v[k]
}
