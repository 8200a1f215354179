package detect

import (
	"image"
	"math"

	"lodeswing/track"
	"lodeswing/track/clip"
)

const (
	sectors    = 24   // of the outline, for what is hidden and for neighbouring residuals that agree
	mostSteps  = 20   // of Gauss–Newton; from a good prediction it takes one or two
	mostEdge   = 5000 // pixels at the edge; of more, every second, third … is taken
	enoughFlat = 400  // pixels that show bob or wall alone
	// A step from this near ends closer to the minimum than half the centre's
	// uncertainty (TestOneStepIsEnough), which a second one would not better by much.
	closeEnough = 0.12 // px
	leastBlur   = 0.3  // px; a pixel's own width is √(1/12) = 0.29
)

// Fitter fits one bob in one projection of the colours, frame after frame. It
// remembers what it has learnt of the bob: size, shape, blur and light.
type Fitter struct {
	// Weights of blue, green and red in the projection that is fitted.
	Weights [3]float64
	Shape   Shape
	Active  image.Rectangle // where there is picture (black bars left out)
	// Blocks says that 2 × 2 pixels share one sample (colour stored at half
	// resolution): each block is taken once, at its middle.
	Blocks bool

	// slow is what is remembered of Fx, Fy, Fz, Lit, Bx and By.
	slow          [6]memory
	onWall        bool    // the last fit used the wall's picture
	known         int     // good fits so far
	stale         int     // frames since the last good fit
	uneven        float64 // how far the bob's outline is off an ellipse, px r.m.s.
	bob, bobNoise float64 // usual F0 and scatter around it
	ball          float64 // +1: its far side gets no light, as a ball's; −1: the same where light counts negative in the projection; 0: a flat thing's even shading
	agree         float64 // mean factor by which sectors' residuals exceed white noise's
	agreeN        float64
	frames        int
	unlit         bool    // no shading is fitted (while closing in, and of what no lit ball explains)
	rough         float64 // residuals that the model's known faults leave, over the contrast

	px                  []pixel
	odd                 []int32 // pixels (indices of px) that fitted badly in the last pass
	flag                []bool  // of the patch: within oddReach of such a pixel
	flagW, flagU, flagV int     // the patch's width and corner
	marked              bool    // some pixels are near odd ones
	sec                 [sectors]sectorSums
	around              [sectors]ringMean // residuals outside the outline in the last pass
	dimNow, dimBefore   uint32            // sectors, as bits, with a shadow outside, in this frame and the last
	sums                [2]sums
	most                float64    // a residual² counts no more than this in a step's cost
	oddAt               [][2]int16 // places that fitted badly in the last frame, px from the middle
	ring                []float64
	back                float64 // mean of the wall's picture behind the band, 0 where none is used
	wallWrong           bool    // the wall's picture is of another place
}

// Shape is what is known of a bob's outline: px, with standard uncertainties.
// R's uncertainty is that of predicting the next frame.
type Shape struct {
	R, UR       float64
	Blur, UBlur float64
	E1, E2, UE  float64 // ellipse: half the relative difference of the axes, and its diagonal part
}

// pixel is one pixel of the band around the outline.
type pixel struct {
	x, y float32 // from the middle of the gathering, px
	v    float32 // its value in the projection
	wall float32 // what the wall would show there, same projection
	sec  int16
	near bool  // next to pixels that fit badly: a rod, another thing's edge
	at   int32 // where it lies in the patch
}

// NewFitter returns a Fitter for a bob of about radius r px that is seen in the
// projection weights of blue, green and red.
func NewFitter(weights [3]float64, r, ur float64, active image.Rectangle) *Fitter {
	f := &Fitter{
		Weights: weights,
		Shape:   Shape{R: r, UR: ur, Blur: 1, UBlur: 0.4, UE: 0.05},
		Active:  active, agree: 1, rough: faults,
	}
	f.forget()
	return f
}

// forget sets the slow quantities to what is known before anything is seen: that
// they stay within the range of a byte.
func (f *Fitter) forget() {
	for i := range f.slow {
		f.slow[i] = memory{u: 80, walk: 1}
	}
	f.known = 0
	f.slow[3].u = 15
	f.slow[4].u, f.slow[5].u = 30, 30
}

// Agreement returns the factor, averaged over frames, by which the variance of
// the centre exceeds what white residuals would give.
func (f *Fitter) Agreement() float64 { return f.agree }

// Fit fits the bob near the guess. wall may be nil. Pixels within covers (other
// bobs) are left out. free says that the blur is to be fitted as well.
func (f *Fitter) Fit(p *clip.Patch, wall *Wall, g Guess, covers []Disc, free bool) Fit {
	r0, s0 := f.Shape.R, math.Max(f.Shape.Blur, leastBlur)
	smear := math.Hypot(g.SmearU, g.SmearV)
	if !(r0 > 1) || math.IsNaN(g.U+g.V+smear) {
		return Fit{Why: "no usable guess"}
	}
	m := model{r: r0, s: s0, e1: f.Shape.E1, e2: f.Shape.E2, cu: g.U, cv: g.V, skew: g.Skew}
	m.mu, m.mv = 1, 0
	if smear > 0 {
		m.mu, m.mv = g.SmearU/smear, g.SmearV/smear
	}
	m.l = smear
	for i, k := range slowly {
		m.level[k-pF0] = f.slow[i].mean
	}
	m.dim(f)

	var on [pCount]bool
	for i := range on {
		on[i] = i < pBlur
	}
	on[pSmear] = g.USmear > 0 && smear > 0.6*s0
	on[pBlur] = free
	on[pE1], on[pE2] = r0 >= 6, r0 >= 6
	if r0 < 6 || f.unlit {
		on[pFx], on[pFy], on[pFz], on[pLit] = false, false, false, false
		m.level = [levels]float64{}
	}
	on[pLit] = on[pFz] && f.ball != 0

	var out Fit
	reach := math.Min(2.5*g.UPos, 0.4*r0)
	f.gather(p, wall, &m, covers, reach)
	if len(f.px) < 40 {
		return Fit{Why: "too few pixels in the picture"}
	}
	prior := f.priors(g, smear)
	f.recallOdd(&m)
	f.oddAt = f.oddAt[:0] // a fit that fails leaves nothing that the next should trust
	noise := f.startLevels(&m)
	third := (m.at(pF0) - m.at(pB0) - f.back) / 3
	f.most = 36*math.Max(noise.bob, noise.wall) + third*third
	loose := math.Max(math.Hypot(g.UPos, math.Min(f.Shape.UR, 0.1*r0)), 0.05)
	var inv matrix
	from := [2]float64{m.cu, m.cv} // middle of the gathering
	var back model                 // where the last step was taken from ...
	acc := &f.sums[1]              // ... and the sums there
	cost, damp := math.Inf(1), 0.0
	var d vector
	shift := 0.0
	for step := 0; step < mostSteps; step++ {
		out.Steps = step + 1
		// Beside the sums of the last step that was taken, so that those stay
		// however many steps are refused.
		next := &f.sums[0]
		if next == acc {
			next = &f.sums[1]
		}
		*next = sums{}
		if m.quick() {
			f.passQuick(&m, next, &noise, loose, from)
		} else {
			f.pass(&m, next, &noise, loose, from, &on)
		}
		m.addPriors(next, &prior, &on)
		odd := false
		if next.cost > 1.03*cost && damp < 1e4 {
			// Worse than before the step: go back and take a shorter one
			// (Levenberg 1944, Marquardt 1963).
			m, damp = back, math.Max(8*damp, 0.05)
		} else {
			if next.n < 30 {
				return Fit{Why: "hardly any of the outline agrees"}
			}
			acc, cost = next, next.cost
			if damp /= 8; damp < 1e-3 {
				damp = 0
			}
			if odd = f.markNear(m.at(pF0) - m.at(pB0) - f.back); odd {
				cost = math.Inf(1) // of other pixels from now on
			} else {
				noise.update(acc)
			}
		}
		a := acc.a
		for i := range a {
			a[i][i] *= 1 + damp
		}
		var ok bool
		inv, ok = invert(&a, &on)
		if !ok {
			return Fit{Why: "the outline does not determine the centre"}
		}
		d = vector{}
		for i := range d {
			for j := range d {
				d[i] += inv[i][j] * acc.g[j]
			}
		}
		back = m
		shift = m.apply(&d, r0)
		loose = math.Max(math.Max(0.5*shift, 0.03), f.uneven)
		if math.Hypot(m.cu-from[0], m.cv-from[1]) > 0.75+reach {
			f.gather(p, wall, &m, covers, 0.5)
			from = [2]float64{m.cu, m.cv}
			if len(f.px) < 40 {
				return Fit{Why: "too few pixels in the picture"}
			}
			cost = math.Inf(1)
			continue
		}
		if damp == 0 && (shift < 0.04 && step > 0 || shift < closeEnough && !odd) {
			break
		}
	}
	f.dimBefore = f.dimNow
	out.fill(&m, &inv, acc, &noise, &on, f.back)
	out.Cut = f.cut(&m)
	out.WallWrong = f.wallWrong
	switch {
	case back.quick():
		f.afterStep(&back, acc, &d)
		f.assess(&m, &inv, acc, &on)
	case shift < 0.02:
		f.assess(&m, &inv, acc, &on)
	}
	f.frames++
	// What the model cannot follow of a lit outline is no noise, and the same in
	// all frames: rendered balls are off by half of this (TestFollowedFilm in
	// track/follow).
	// Part of an outline has nothing to check it on the other side.
	less := 1 + 2*(1-out.Visible)
	faulty := m.s * (0.006 + 0.03*f.shading()/math.Max(math.Abs(out.Contrast), 1))
	grow := f.agree * less * less
	out.Cov.AA = out.Cov.AA*grow + faulty*faulty
	out.Cov.AB *= grow
	out.Cov.BB = out.Cov.BB*grow + faulty*faulty
	out.judge(f, &m)
	if out.OK {
		f.keepOdd(&m, from)
	}
	f.remember(&m, &inv, &on, &noise, acc, &out)
	return out
}

// model is one state of the fit.
type model struct {
	cu, cv, r, s, l, e1, e2 float64
	mu, mv                  float64 // direction of the smear
	skew                    [2][2]float64
	level                   [levels]float64 // from pF0 on
	lamp                    lamp
}

// at returns one of the levels.
func (m *model) at(p int) float64 { return m.level[p-pF0] }

// slowly lists the parameters that Fitter.slow remembers.
var slowly = [6]int{pFx, pFy, pFz, pLit, pBx, pBy}

// remember learns the slow quantities from a fit.
func (f *Fitter) remember(m *model, inv *matrix, on *[pCount]bool, noise *scatter, acc *sums, out *Fit) {
	good := out.OK && !out.Cut && out.Visible > 0.7
	f.stale++
	if good {
		f.stale = 0
		f.known++
		k := 1 / math.Min(float64(f.known), 10)
		f.bob += k * (m.at(pF0) - f.bob)
		if acc.edgeSteep > 0 {
			over := math.Sqrt(math.Max(acc.edgeOver/acc.edgeSteep, 0))
			f.uneven += k * (math.Min(over, 0.05*m.r) - f.uneven)
		}
		if out.Visible > 0.9 || f.known < 3 {
			f.bobNoise += k * (math.Sqrt(noise.bob) - f.bobNoise)
		}
	}
	for i, k := range slowly {
		if on[k] && good {
			f.slow[i].learn(m.at(k), math.Sqrt(inv[k][k]))
		} else {
			f.slow[i].pass()
		}
	}
}

func (m *model) get() (v vector) {
	v[pU], v[pV], v[pR], v[pSmear] = m.cu, m.cv, m.r, m.l
	copy(v[pF0:], m.level[:])
	v[pBlur], v[pE1], v[pE2] = m.s, m.e1, m.e2
	return v
}

// apply takes a step, held within what the local model can vouch for, and
// returns how far the outline moved at most, px.
func (m *model) apply(d *vector, r0 float64) float64 {
	move := math.Hypot(d[pU], d[pV])
	k := 1.0
	if lim := 1.5*m.s + 0.15*m.r + 0.5*m.l; move > lim {
		k = lim / move
	}
	if lim := 0.2 * m.r; math.Abs(d[pR])*k > lim {
		k = lim / math.Abs(d[pR])
	}
	from := *m
	m.cu += k * d[pU]
	m.cv += k * d[pV]
	m.r = math.Min(math.Max(m.r+k*d[pR], 0.4*r0), 2.5*r0)
	m.l = math.Max(m.l+k*d[pSmear], 0)
	for i := range m.level {
		m.level[i] += d[pF0+i]
	}
	// A distant lamp lights at least half of a ball; less, and the fit could hide
	// all light behind the horizon, from where it does not come back.
	if lit := &m.level[pLit-pF0]; *lit*m.lamp.sign < -2 {
		*lit = -2 * m.lamp.sign
	}
	m.s = math.Min(math.Max(m.s+k*d[pBlur], math.Max(leastBlur, 0.5*m.s)), 2*m.s)
	m.e1 = math.Min(math.Max(m.e1+k*d[pE1], -0.5), 0.5)
	m.e2 = math.Min(math.Max(m.e2+k*d[pE2], -0.5), 0.5)
	return math.Max(k*move, math.Max(math.Abs(m.r-from.r), 0.3*math.Abs(m.l-from.l)))
}

// prior is what is known of each parameter before the frame is looked at.
type prior struct{ mean, weight vector }

func (f *Fitter) priors(g Guess, smear float64) (p prior) {
	set := func(i int, mean, u float64) { p.mean[i], p.weight[i] = mean, 1/(u*u) }
	set(pR, f.Shape.R, math.Max(f.Shape.UR, 1e-3))
	if g.USmear > 0 {
		set(pSmear, smear, g.USmear)
	}
	if used := f.back != 0; used != f.onWall {
		// The slope behind the bob is that of the wall, or what the wall's picture
		// leaves of it.
		f.onWall = used
		f.slow[4], f.slow[5] = memory{u: 30, walk: 1}, memory{u: 30, walk: 1}
	}
	for i, k := range slowly {
		set(k, f.slow[i].mean, f.slow[i].before())
	}
	// Where all is lit, how far light would reach shows nowhere, and goes back to
	// what a distant lamp does.
	set(pLit, 0, 10)
	set(pBlur, f.Shape.Blur, math.Max(f.Shape.UBlur, 0.02))
	set(pE1, f.Shape.E1, math.Max(f.Shape.UE, 1e-3))
	set(pE2, f.Shape.E2, math.Max(f.Shape.UE, 1e-3))
	return p
}

func (m *model) addPriors(acc *sums, p *prior, on *[pCount]bool) {
	v := m.get()
	for i, w := range p.weight {
		if on[i] && w > 0 {
			acc.a[i][i] += w
			acc.g[i] += w * (p.mean[i] - v[i])
		}
	}
}

// scatter is the noise of bob and wall, levels squared.
type scatter struct {
	bob, wall           float64
	leastBob, leastWall float64
	mostBob             float64 // 0: no limit
}

func (s *scatter) update(acc *sums) {
	if acc.inN > 25 {
		s.bob = math.Max(acc.inSum/acc.inN, s.leastBob)
		if s.mostBob > 0 {
			s.bob = math.Min(s.bob, s.mostBob)
		}
	}
	if acc.outN > 25 {
		s.wall = math.Max(acc.outSum/acc.outN, s.leastWall)
	}
}

// sums is what one pass over the pixels adds up.
type sums struct {
	a                   matrix
	g                   vector
	chi, n              float64
	cost                float64 // residuals², each at most f.most: what a step must not raise
	inSum, inN          float64 // residuals² and pixels well inside the outline
	outSum, outN        float64
	edgeOver, edgeSteep float64          // at the outline: residuals² beyond the noise, and the steepness² per px
	kept, all           [sectors]float64 // information on the outline that agrees, and all of it
	score               [sectors]vector  // gradient by sector, for assess
}

// fill writes what the last step found.
func (out *Fit) fill(m *model, inv *matrix, acc *sums, n *scatter, on *[pCount]bool, back float64) {
	p := 0.0
	for _, yes := range on {
		if yes {
			p++
		}
	}
	scale := acc.chi / math.Max(acc.n-p, 1)
	out.U, out.V = m.cu, m.cv
	out.Cov = track.Cov{AA: inv[pU][pU] * scale, AB: inv[pU][pV] * scale, BB: inv[pV][pV] * scale}
	out.R, out.UR = m.r, math.Sqrt(inv[pR][pR])
	out.Smear, out.Blur = m.l, m.s
	if on[pSmear] {
		out.USmear = math.Sqrt(inv[pSmear][pSmear])
	}
	if on[pBlur] {
		out.UBlur = math.Sqrt(inv[pBlur][pBlur])
	}
	if on[pE1] {
		out.UE = math.Sqrt(math.Max(inv[pE1][pE1], inv[pE2][pE2]))
	}
	out.E1, out.E2 = m.e1, m.e2
	out.Level = m.at(pF0) + m.shade(0.9*m.r, 0)/2 + m.shade(-0.9*m.r, 0)/2
	out.Contrast = out.Level - m.at(pB0) - back
	out.Noise = math.Sqrt(math.Max((n.bob+n.wall)/2*scale, 0))
	out.Pixels = int(acc.n)
	seen, most := 0.0, 0.0
	for k := range sectors {
		most = math.Max(most, acc.all[k])
	}
	for k := range sectors {
		if acc.all[k] > 0.1*most && acc.kept[k] > 0.5*acc.all[k] {
			seen++
		}
	}
	out.Visible = seen / sectors
}

// judge decides whether the fit is to be believed.
func (out *Fit) judge(f *Fitter, m *model) {
	switch {
	case math.IsNaN(out.U + out.V + out.Cov.AA + out.Cov.BB + out.Level + out.Noise + out.UR):
		out.Why = "the fit broke down"
	case math.Abs(out.Contrast) < 3*out.Noise*math.Sqrt(1/math.Max(m.r, 1)) || math.Abs(out.Contrast) < 4:
		out.Why = "no contrast between bob and wall"
	case out.Visible < 0.15 || out.Visible < 0.3 && !out.Cut:
		out.Why = "too little of the outline is seen"
	case out.sigma() > 0.25*m.r+0.5:
		out.Why = "the centre is not determined"
	default:
		out.OK = true
	}
}

// cut tells whether the outline reaches the edge of the picture.
func (f *Fitter) cut(m *model) bool {
	du := m.r*(1+math.Abs(m.e1)) + m.l/2*math.Abs(m.mu)
	dv := m.r*(1+math.Abs(m.e1)) + m.l/2*math.Abs(m.mv)
	a := f.Active
	return m.cu-du < float64(a.Min.X) || m.cv-dv < float64(a.Min.Y) ||
		m.cu+du > float64(a.Max.X-1) || m.cv+dv > float64(a.Max.Y-1)
}
