package kick

import (
	"context"
	"errors"
	"math"
	"math/bits"
	"slices"
)

// settle finds the vertical, what the coil did at each pass, and the fits.
func (l *ledger) settle(ctx context.Context) error {
	rounds := 4 // the last leaves the vertical where the turning points were measured
	if l.free != nil {
		rounds = 0 // energies were measured already, and the vertical with them
	} else {
		l.setAside()
	}
	for n := range rounds {
		if err := ctx.Err(); err != nil {
			return err
		}
		if n >= 2 {
			l.sharpen()
		}
		s, ok := l.fit(l.plain, nil, -1)
		if !ok {
			return errors.New("kick: the balance of the passes cannot be solved; look at the turning points in the angle's figure")
		}
		if n < rounds-1 {
			l.upright(s)
		}
	}
	l.measureNoise()
	if l.free != nil {
		if err := l.blunt(ctx); err != nil {
			return err
		}
	}
	if l.unknown() {
		l.findOff(ctx)
	}
	unknown := l.unknown()
	l.findOdd()
	if unknown {
		l.runsOff()
	}
	l.measureNoise()
	if err := l.timeAgain(); err != nil {
		return err
	}
	if err := ctx.Err(); err != nil {
		return err
	}
	return l.weigh()
}

// setAside makes Odd, for the time being, of passes whose gain is far from that
// of the passes before and after in the same direction: a push would bend every
// fit that holds it.
func (l *ledger) setAside() {
	var off, all []float64
	for i := range l.rows {
		var near []float64
		for _, d := range [...]int{-4, -2, 0, 2, 4} {
			if j := i + d; j >= 0 && j < len(l.rows) && l.rows[j].clip == l.rows[i].clip {
				near = append(near, l.rows[j].net())
			}
		}
		slices.Sort(near)
		d := math.Abs(l.rows[i].net() - near[len(near)/2])
		off, all = append(off, d), append(all, d)
	}
	slices.Sort(all)
	usual := 1.4826 * all[len(all)/2]
	hand := func(i int) bool {
		r := &l.rows[i]
		return off[i] > 40*math.Max(usual, math.Sqrt(r.vFrom+r.vTo)) && off[i] > 0.1*(r.before+r.after)
	}
	hands := 0
	for i := range l.rows {
		if hand(i) {
			hands++
		}
	}
	const few = 3 // more are not a hand but a strong coil that fires now and then
	for i := range l.rows {
		r := &l.rows[i]
		if !r.fixed && off[i] > 8*math.Max(usual, math.Sqrt(r.vFrom+r.vTo)) && off[i] > 0.002*(r.before+r.after) {
			r.state = Odd
			// A hand bends the turning points on both sides as well.
			if hands < few && hand(i) {
				for j := max(0, i-1); j <= min(len(l.rows)-1, i+1); j++ {
					if l.rows[j].clip == r.clip && !l.rows[j].fixed {
						l.rows[j].state, l.rows[j].fixed = Odd, true
					}
				}
			}
		}
	}
}

// takeBack gives passes that were set aside the state that fits them.
func (l *ledger) takeBack() {
	s, ok := l.fit(l.plain, nil, -1)
	if !ok || s.kicks == 0 || !(s.beta[0] > 0) {
		return
	}
	k := s.beta[0]
	for i := range l.rows {
		r := &l.rows[i]
		if r.state != Odd || r.fixed {
			continue
		}
		for _, to := range [...]State{Kicked, Missed, Double} {
			if math.Abs(s.resid[i]-to.share()*k) < math.Max(0.25*k, 4*math.Sqrt(r.vFrom+r.vTo)) {
				r.state = to
				break
			}
		}
	}
}

// measureNoise finds by how much the turning points scatter more than the series'
// noise lets expect: errors of neighbouring frames that are alike do not average
// out over a swing. It is the likeliest factor; an error of a turning point takes
// from one pass what it gives to the next, which a kick that varies does not, so
// that the two are told apart.
func (l *ledger) measureNoise() {
	for c := range l.noise {
		best, at := math.Inf(-1), 1.0
		for _, x := range [...]float64{1, 1.2, 1.45, 1.75, 2.1, 2.5, 3, 3.6, 4.3, 5.2} {
			l.noise[c] = x
			l.enter()
			if s, ok := l.fit(l.plain, nil, -1); ok && s.logL > best {
				best, at = s.logL, x
			}
		}
		l.noise[c] = at
		l.enter()
	}
}

// upright moves each clip's vertical to where the fit puts it. What is known of
// it beforehand then holds for the sum of both steps, so it is only moved as far
// as the data ask for well within that.
func (l *ledger) upright(s *solution) {
	moved := false
	for c := range l.clips {
		j := s.size - len(l.clips) + c
		d := -s.beta[j]
		if math.Abs(d) > 1e-7 && math.Abs(l.rest[c]+d) < 3*l.uRest[c] && math.Sqrt(s.cov[j*s.size+j]) < 0.5*l.uRest[c] {
			l.rest[c] += d
			moved = true
		}
	}
	if moved {
		l.enter()
	}
}

// timeAgain measures the rate of small swings again, and the turning points with it,
// now that kicked passes and kick are known.
func (l *ledger) timeAgain() error {
	if !l.pendulum || l.opt.PushOver == 0 {
		return nil
	}
	for range 2 {
		s, ok := l.fit(l.plain, nil, -1)
		if !ok || s.kicks == 0 || !(s.beta[0] > 8*math.Sqrt(s.cov[0]*s.widen())) {
			return nil
		}
		l.measureOmega(s.beta[0])
		if err := l.balance(); err != nil {
			return err
		}
		l.sharpen()
	}
	return nil
}

// unknown tells whether nobody said where the coil was off.
func (l *ledger) unknown() bool {
	return !slices.ContainsFunc(l.rows, func(r row) bool { return r.state == Off })
}

// leastOff is how many passes without a kick make a stretch with the coil off.
const leastOff = 6

// findOff looks for a stretch at either end of the first clip in which the coil
// gave nothing: the battery was taken out, or put in, while the phone ran.
func (l *ledger) findOff(ctx context.Context) {
	n := 0
	for n < len(l.rows) && l.rows[n].clip == 0 {
		n++
	}
	if n < 2*leastOff {
		return
	}
	all, ok := l.fit(l.plain, nil, -1)
	if !ok {
		return
	}
	was := make([]State, n)
	for i := range was {
		was[i] = l.rows[i].state
	}
	set := func(from, to int) {
		for i := range n {
			l.rows[i].state = was[i]
			if i >= from && i < to && !l.rows[i].fixed {
				l.rows[i].state = Off
			}
		}
	}
	type cut struct{ from, to int }
	best, bestCut := all.logL, cut{}
	try := func(c cut) {
		loses, open := 0.0, 0
		for i := c.from; i < c.to; i++ {
			loses += l.rows[i].net()
			if !l.rows[i].fixed {
				open++
			}
		}
		if loses >= 0 || open < leastOff || ctx.Err() != nil {
			return
		}
		set(c.from, c.to)
		if s, ok := l.fit(l.plain, nil, -1); ok && s.kicks == 1 && s.logL > best && s.beta[0] > 5*math.Sqrt(s.cov[0]*s.widen()) {
			best, bestCut = s.logL, c
		}
	}
	stride := max(1, n/40)
	for j := leastOff; j <= n-leastOff; j += stride {
		try(cut{0, j})
		try(cut{j, n})
	}
	if stride > 1 && bestCut != (cut{}) {
		for d := -stride + 1; d < stride; d++ {
			c := bestCut
			if c.from == 0 {
				c.to = min(max(c.to+d, leastOff), n-leastOff)
			} else {
				c.from = min(max(c.from+d, leastOff), n-leastOff)
			}
			try(c)
		}
	}
	const sure = 12 // in log likelihood, for one more unknown and the choice among n places
	if best-all.logL < sure+math.Log(float64(2*n)) {
		bestCut = cut{}
	}
	set(bestCut.from, bestCut.to)
}

// findOdd looks for single passes that gained much less or more than the others.
func (l *ledger) findOdd() {
	l.takeBack()
	for range 10 {
		s, ok := l.fit(l.plain, nil, -1)
		if !ok || s.kicks == 0 {
			return
		}
		// A robust scale of the kicked passes' residuals.
		var abs []float64
		for i := range l.rows {
			if l.rows[i].state == Kicked {
				abs = append(abs, math.Abs(s.resid[i]))
			}
		}
		if len(abs) < leastPasses {
			return
		}
		slices.Sort(abs)
		scale := 1.4826 * abs[len(abs)/2]
		worst, at := 0.0, -1
		for i := range l.rows {
			r := &l.rows[i]
			if r.state != Kicked || r.fixed {
				continue
			}
			u := math.Sqrt(r.vFrom + r.vTo)
			if z := math.Abs(s.resid[i]) / math.Max(scale, u); z > math.Max(6, worst) {
				worst, at = z, i
			}
		}
		if at < 0 {
			break
		}
		// All that are nearly as far out on the same side are taken together.
		side := math.Copysign(1, s.resid[at])
		limit := 0.6 * math.Abs(s.resid[at])
		for i := range l.rows {
			if r := &l.rows[i]; r.state == Kicked && !r.fixed && s.resid[i]*side > math.Max(limit, 5*scale) {
				if side < 0 {
					r.state = Missed
				} else {
					r.state = Double
				}
			}
		}
		l.confirm()
	}
	l.splitTwo()
	l.turnOver()
	l.takeBack()
}

// runsOff makes a stretch with the coil off of many passes in a row without a kick: a
// coil does not miss so many one after the other and then none.
func (l *ledger) runsOff() {
	for i := 0; i < len(l.rows); {
		j := i
		for j < len(l.rows) && l.rows[j].clip == l.rows[i].clip && (l.rows[j].state == Missed || l.rows[j].state == Odd && !l.rows[j].fixed && l.rows[j].net() < 0) {
			j++
		}
		if j-i >= leastOff {
			for k := i; k < j; k++ {
				l.rows[k].state = Off
			}
		}
		i = max(j, i+1)
	}
}

// turnOver looks for a coil that fires at so few passes that those without a kick
// were taken for the usual ones.
func (l *ledger) turnOver() {
	was := make([]State, len(l.rows))
	high := 0
	for i := range l.rows {
		was[i] = l.rows[i].state
		if s := was[i]; (s == Odd || s == Double) && !l.rows[i].fixed && l.rows[i].net() > 0 {
			high++
		}
	}
	old, ok := l.fit(l.plain, nil, -1)
	if high < 3 || !ok {
		return
	}
	for i := range l.rows {
		switch r := &l.rows[i]; {
		case r.fixed:
		case r.state == Kicked:
			r.state = Missed
		case (r.state == Odd || r.state == Double) && r.net() > 0:
			r.state = Kicked
		}
	}
	s, ok := l.fit(l.plain, nil, -1)
	if ok && s.kicks == 1 && s.beta[0] > 0 && s.sigma < 0.4*s.beta[0] && (old.kicks == 0 || old.beta[0] < 0.6*s.beta[0]) {
		// Those without a kick must agree on the loss.
		ss, n := 0.0, 0.0
		for i := range l.rows {
			if l.rows[i].state == Missed {
				ss, n = ss+sq(s.resid[i]), n+1
			}
		}
		if math.Sqrt(ss/n) < 0.1*s.beta[0] {
			return
		}
	}
	for i := range l.rows {
		l.rows[i].state = was[i]
	}
}

// confirm makes Odd of passes that are neither without a kick nor with two.
func (l *ledger) confirm() {
	for range 3 {
		s, ok := l.fit(l.plain, nil, -1)
		if !ok || s.kicks == 0 {
			return
		}
		k := s.beta[0]
		changed := false
		for i := range l.rows {
			r := &l.rows[i]
			if (r.state == Missed || r.state == Double) && math.Abs(s.resid[i]) > math.Max(0.3*k, 4*math.Sqrt(r.vFrom+r.vTo)) {
				r.state, changed = Odd, true
			}
		}
		if !changed {
			return
		}
	}
}

// splitTwo looks for a coil that fires at some passes only, in no order: the
// changes then fall into two heaps, and no middle one is the usual.
func (l *ledger) splitTwo() {
	one, ok := l.fit(l.plain, nil, -1)
	if !ok || one.kicks == 0 {
		return
	}
	was := make([]State, len(l.rows))
	for i := range l.rows {
		was[i] = l.rows[i].state
	}
	s := one
	for range 12 {
		changed := false
		for i := range l.rows {
			r := &l.rows[i]
			if r.fixed || r.state != Kicked && r.state != Missed {
				continue
			}
			// what this pass gained beyond a pass without a kick
			gain := s.resid[i] + r.state.share()*s.beta[0]
			mid := s.beta[0] / 2
			if s == one {
				gain, mid = s.resid[i], 0 // first: below or above the mean
			}
			to := Kicked
			if gain < mid {
				to = Missed
			}
			if to != r.state {
				r.state, changed = to, true
			}
		}
		next, ok := l.fit(l.plain, nil, -1)
		if !ok || next.kicks == 0 {
			break
		}
		s = next
		if !changed {
			break
		}
	}
	kicked := 0
	for i := range l.rows {
		if l.rows[i].state == Kicked {
			kicked++
		}
	}
	clear := s.kicks == 1 && kicked >= 3 && s.sigma < 0.15*s.beta[0]
	if !clear || s.logL-one.logL < 10+float64(len(l.rows))*math.Ln2 {
		for i := range l.rows {
			l.rows[i].state = was[i]
		}
	}
}

// weigh fits the mixtures of frictions and weighs them by the Bayesian
// information criterion (G. Schwarz, Annals of Statistics 6, 1978). Mixtures of
// fewer than two frictions are left out where the rig allows more: a friction too
// small to be seen is still large enough to draw the kick aside by more than its
// uncertainty. Frictions that would plainly give energy are left out.
func (l *ledger) weigh() error {
	l.laws, l.weighs = nil, nil
	allowed := 0
	for _, no := range l.opt.Absent {
		if !no {
			allowed++
		}
	}
	for few := min(2, allowed); few > 0 && len(l.laws) == 0; few-- {
		for w := viscous; w <= viscous|drag|dry; w++ {
			if l.absent(w) || bits.OnesCount8(uint8(w)) < few {
				continue
			}
			if s, ok := l.fit(w, nil, -1); ok && !s.gives() {
				l.laws = append(l.laws, s)
			}
		}
	}
	if len(l.laws) == 0 {
		return errors.New("kick: no friction that takes energy explains the passes; look whether the part was touched")
	}
	least := math.Inf(1)
	for _, s := range l.laws {
		if b := l.bic(s); b < least {
			least, l.best = b, s
		}
	}
	sum := 0.0
	for _, s := range l.laws {
		w := math.Exp(-(l.bic(s) - least) / 2)
		l.weighs = append(l.weighs, w)
		sum += w
	}
	for i := range l.weighs {
		l.weighs[i] /= sum
	}
	return nil
}

func (l *ledger) bic(s *solution) float64 {
	return -2*s.logL + float64(s.size)*math.Log(float64(len(l.rows)))
}

// gives tells whether a friction plainly gives energy.
func (s *solution) gives() bool {
	for j := range 3 {
		if k := s.frictionAt(j); s.law.has(j) && s.beta[k] < -3*math.Sqrt(s.cov[k*s.size+k]*s.widen()) {
			return true
		}
	}
	return false
}

// absent tells whether a mixture holds a friction that the rig says is not there.
func (l *ledger) absent(w law) bool {
	for j, no := range l.opt.Absent {
		if no && w.has(j) {
			return true
		}
	}
	return false
}
