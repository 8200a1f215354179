package series

import (
	"context"
	"errors"
	"fmt"
	"math"

	"lodeswing/analyze/lsq"
	"lodeswing/track"
)

// prior is what the rig says about a circle; a U of 0 means nothing is known.
type prior struct {
	x, z, ux, uz float64
	r, ur        float64
}

// circle is a fitted circle with the covariance of (X, Z, R), row-major.
type circle struct {
	x, z, r float64
	cov     [9]float64
	scatter float64 // r.m.s. of the distance's residual
	chi2Red float64
}

// errShortArc says that the samples do not bend enough to show a centre.
var errShortArc = errors.New("the bob's path is too short an arc to show its pivot")

// fitCircle fits a circle to samples by weighted geometric distance from
// Taubin's algebraic start (G. Taubin, IEEE Trans. PAMI 13, 1991; in the Newton
// form of N. Chernov, "Circular and Linear Regression", 2010, section 5.8),
// with what is known beforehand. Its covariance is widened by the residuals'
// scatter and their correlation from sample to sample.
func fitCircle(samples []track.Sample, pr prior) (circle, error) {
	n := len(samples)
	if n < minSamples {
		return circle{}, fmt.Errorf("it was seen in %d frames only; at least %d are needed", n, minSamples)
	}
	start, ok := taubin(samples)
	if !ok {
		if pr.ux > 0 && pr.uz > 0 {
			start.x, start.z = pr.x, pr.z
			start.r = meanDistance(samples, start.x, start.z)
		} else {
			return circle{}, errShortArc
		}
	}
	if pr.ur > 0 && math.Abs(start.r-pr.r) > 0.5*pr.r {
		// A nearly straight path: put the centre at the known distance, on the side
		// that the algebraic fit found.
		mx, mz := mean(samples)
		d := math.Hypot(start.x-mx, start.z-mz)
		if d > 0 {
			start.x, start.z = mx+(start.x-mx)*pr.r/d, mz+(start.z-mz)*pr.r/d
		}
		start.r = pr.r
	}
	var priors []lsq.Prior
	if pr.ux > 0 {
		priors = append(priors, lsq.Prior{Parameter: 0, Value: pr.x, U: pr.ux})
	}
	if pr.uz > 0 {
		priors = append(priors, lsq.Prior{Parameter: 1, Value: pr.z, U: pr.uz})
	}
	if pr.ur > 0 {
		priors = append(priors, lsq.Prior{Parameter: 2, Value: pr.r, U: pr.ur})
	}
	u := make([]float64, n)
	radial := func(x, z float64) {
		for i, s := range samples {
			dx, dz := s.X-x, s.Z-z
			d2 := dx*dx + dz*dz
			v := (dx*dx*s.Plane.AA + 2*dx*dz*s.Plane.AB + dz*dz*s.Plane.BB) / d2
			u[i] = math.Sqrt(v)
			if !(u[i] > 0) {
				u[i] = 1e-4 // a sample without covariance: a tenth of a millimetre, rescaled below
			}
		}
	}
	radial(start.x, start.z)
	problem := func(widen float64) lsq.Problem {
		return lsq.Problem{
			N: 3, M: n, Names: []string{"pivot x", "pivot z", "radius"},
			Scale: []float64{start.r, start.r, start.r}, Prior: priors,
			Residuals: func(p, r []float64) error {
				for i, s := range samples {
					r[i] = (math.Hypot(s.X-p[0], s.Z-p[1]) - p[2]) / (u[i] * widen)
				}
				return nil
			},
			Jacobian: func(p, j []float64) error {
				for i, s := range samples {
					d := math.Hypot(s.X-p[0], s.Z-p[1])
					w := 1 / (u[i] * widen)
					j[3*i], j[3*i+1], j[3*i+2] = (p[0]-s.X)/d*w, (p[1]-s.Z)/d*w, -w
				}
				return nil
			},
		}
	}
	at := []float64{start.x, start.z, start.r}
	widen := 1.0
	var sum *lsq.Summary
	var chi2 float64
	// Twice: the second time with the scatter that the first found, so that
	// priors are weighed against the noise as it is.
	for range 2 {
		var err error
		sum, err = lsq.Solve(context.Background(), problem(widen), at, lsq.Options{SigmaKnown: true})
		if err != nil {
			return circle{}, fmt.Errorf("the circle fit failed: %w", err)
		}
		if sum.Rank < 3 || math.Abs(sum.P[2]) > 1e4*extent(samples) {
			return circle{}, errShortArc
		}
		at = sum.P
		radial(at[0], at[1])
		ss := 0.0
		for _, r := range sum.Residuals {
			ss += r * r * widen * widen
		}
		chi2 = ss / float64(max(1, n-3))
		widen = math.Sqrt(math.Max(1, chi2) * correlationTime(sum.Residuals))
	}
	c := circle{x: at[0], z: at[1], r: at[2], chi2Red: chi2}
	copy(c.cov[:], sum.Cov)
	for _, s := range samples {
		d := math.Hypot(s.X-c.x, s.Z-c.z) - c.r
		c.scatter += d * d
	}
	c.scatter = math.Sqrt(c.scatter / float64(n))
	return c, nil
}

// correlationTime is 1 + 2Σρ over the first run of positive autocorrelations
// (Geyer's initial positive sequence, Statistical Science 7, 1992): by how much
// the variance of a mean exceeds that of independent residuals. Never below 1.
func correlationTime(r []float64) float64 {
	n := len(r)
	m := 0.0
	for _, x := range r {
		m += x
	}
	m /= float64(n)
	c := func(lag int) float64 {
		s := 0.0
		for i := 0; i+lag < n; i++ {
			s += (r[i] - m) * (r[i+lag] - m)
		}
		return s
	}
	c0 := c(0)
	if !(c0 > 0) {
		return 1
	}
	sum := 1.0
	for lag := 1; lag+1 < n/4; lag += 2 {
		pair := (c(lag) + c(lag+1)) / c0
		if pair < 4/math.Sqrt(float64(n)) {
			break
		}
		sum += 2 * pair
	}
	return sum
}

// taubin is the algebraic start; ok is false where the samples lie on a line.
func taubin(samples []track.Sample) (circle, bool) {
	n := float64(len(samples))
	mx, mz := mean(samples)
	var mxx, mzz, mxz, mxy, mzy, myy float64
	for _, s := range samples {
		x, z := s.X-mx, s.Z-mz
		y := x*x + z*z
		mxx += x * x
		mzz += z * z
		mxz += x * z
		mxy += x * y
		mzy += z * y
		myy += y * y
	}
	mxx, mzz, mxz, mxy, mzy, myy = mxx/n, mzz/n, mxz/n, mxy/n, mzy/n, myy/n
	m := mxx + mzz
	cov := mxx*mzz - mxz*mxz
	a3 := 4 * m
	a2 := -3*m*m - myy
	a1 := myy*m + 4*cov*m - mxy*mxy - mzy*mzy - m*m*m
	a0 := mxy*mxy*mzz + mzy*mzy*mxx - myy*cov - 2*mxy*mzy*mxz + m*m*cov
	x := 0.0
	for range 99 {
		y := a0 + x*(a1+x*(a2+x*a3))
		dy := a1 + x*(2*a2+3*a3*x)
		next := x - y/dy
		if math.Abs(next-x) <= 1e-14*math.Abs(next) || math.IsNaN(next) {
			break
		}
		x = next
	}
	det := x*x - x*m + cov
	if !(math.Abs(det) > 1e-14*m*m) {
		return circle{}, false
	}
	cx := (mxy*(mzz-x) - mzy*mxz) / det / 2
	cz := (mzy*(mxx-x) - mxy*mxz) / det / 2
	c := circle{x: cx + mx, z: cz + mz, r: math.Sqrt(cx*cx + cz*cz + m)}
	return c, !math.IsNaN(c.r) && !math.IsInf(c.r, 0)
}

func mean(samples []track.Sample) (x, z float64) {
	for _, s := range samples {
		x += s.X
		z += s.Z
	}
	n := float64(len(samples))
	return x / n, z / n
}

func meanDistance(samples []track.Sample, x, z float64) float64 {
	d := 0.0
	for _, s := range samples {
		d += math.Hypot(s.X-x, s.Z-z)
	}
	return d / float64(len(samples))
}

// extent is the diagonal of the box around the samples.
func extent(samples []track.Sample) float64 {
	lx, hx, lz, hz := math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)
	for _, s := range samples {
		lx, hx, lz, hz = math.Min(lx, s.X), math.Max(hx, s.X), math.Min(lz, s.Z), math.Max(hz, s.Z)
	}
	return math.Hypot(hx-lx, hz-lz)
}
