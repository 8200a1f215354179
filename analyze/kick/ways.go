package kick

import (
	"fmt"
	"math"

	"lodeswing/analyze/finding"
)

// ways reports how the kick differs from pass to pass: by direction, over the
// clip, with speed, at random.
func (l *ledger) ways(res *Result) {
	lo, hi, speed, n := math.Inf(1), math.Inf(-1), 0.0, 0.0
	least, most := math.Inf(1), 0.0
	for i := range l.rows {
		if r := &l.rows[i]; r.state.share() > 0 {
			lo, hi = math.Min(lo, r.t), math.Max(hi, r.t)
			speed += r.speed
			least, most = math.Min(least, r.speed), math.Max(most, r.speed)
			n++
		}
	}
	speed /= n
	side := extra{"direction", func(r *row) float64 { return r.side }}
	time := extra{"time", func(r *row) float64 { return (r.t - (lo+hi)/2) / (hi - lo) }}
	faster := extra{"speed", func(r *row) float64 { return r.speed/speed - 1 }}
	tell := func(e extra, factor float64, key, name, unlike string) *finding.Finding {
		s, ok := l.fit(l.best.law, []extra{e}, -1)
		if !ok || s.kicks == 0 || s.dof < 1 {
			return nil
		}
		v, u, unit := factor*s.beta[1], factor*math.Sqrt(s.cov[s.size+1]*s.widen()), l.unit
		if res.Separated {
			// A share of the kick: its own scale cancels.
			k := res.Kick
			v, u, unit = v/k, math.Hypot(u/k, v/k*res.UKick/k), "1"
		}
		f := finding.Normal(key, l.part(), name, v, u, unit, method)
		if math.Abs(v) > 3*u {
			f.Cautions = append(f.Cautions, unlike)
		}
		res.Findings = append(res.Findings, f)
		return &res.Findings[len(res.Findings)-1]
	}
	share := "Difference"
	if res.Separated {
		share = "Relative difference"
	}
	if l.free == nil {
		tell(side, 2, "kick.by_direction", share+" of kicks to the right and to the left",
			"Kicks to the right and to the left differ: the coil stands beside the lowest point, or senses late on one side.")
	}
	if f := tell(time, 1, "kick.fading", "Change of the kick over the clip",
		"The kick, or the friction at the same amplitude, changed while the phone ran: a cell that gives out, a coil that warms, or a bearing that runs in."); f != nil && f.Value < -3*f.U {
		res.Cautions = append(res.Cautions, "The kick fades over the clip.")
	}
	if res.Separated && res.How == CoilOff && most > 1.1*least {
		tell(faster, 1, "kick.by_speed", "Relative change of the kick per relative change of speed",
			"The kick depends on speed: it is stated for the mean speed of the kicked passes.")
	}
	if res.Separated {
		const key, name, how = "kick.scatter", "Relative scatter of the kicks from pass to pass", "the likeliest scatter beyond the pictures' noise"
		v := 0.0
		for _, x := range l.best.varRes {
			v += x / float64(len(l.best.varRes))
		}
		// The variance of a variance of v from n passes is 2v²/n.
		most := math.Sqrt(sq(l.best.sigma)+1.645*v*math.Sqrt(2/math.Max(1, n))) / res.Kick
		u := l.best.sigma / math.Sqrt(2*math.Max(1, n-1)) / res.Kick
		f := finding.Normal(key, l.part(), name, l.best.sigma/res.Kick, u, "1", how)
		if f.Value < 2*u || l.best.sigma == 0 {
			f = finding.Finding{Key: key, Subject: l.part(), Name: name, Kind: finding.UpperLimit, Value: most, Hi: most, Unit: "1", Method: how}
		}
		res.Findings = append(res.Findings, f)
	}
}

// steady finds the amplitude at which kick and loss are equal.
func (l *ledger) steady(res *Result) {
	s := l.best
	net := func(a float64) (v, variance float64) {
		w := l.workAt(a)
		g := s.kickVector()
		for i, x := range s.lossVector(w) {
			g[i] -= x
		}
		v, variance = s.of(g, g)
		return v, variance * s.widen()
	}
	lo, hi := math.Inf(1), 0.0
	for i := range l.rows {
		if r := &l.rows[i]; r.state.share() > 0 {
			lo, hi = math.Min(lo, r.amp), math.Max(hi, r.amp)
		}
	}
	// It is looked for no farther than a third beyond what was filmed.
	from, to := lo/1.33, math.Min(hi*1.33, 3)
	a, _ := net(from)
	b, _ := net(to)
	const key, name = "kick.steady_amplitude", "Amplitude at which kick and loss are equal"
	if !(a > 0 && b < 0) {
		res.Findings = append(res.Findings, finding.Finding{
			Key: key, Subject: l.part(), Name: name, Kind: finding.Undecided, Unit: "rad", Method: method,
			Text: fmt.Sprintf("Between %.3g° and %.3g° kick and loss are equal nowhere; let the unit run until its amplitude is steady and film it then.", from/degree, to/degree),
		})
		return
	}
	for range 60 {
		mid := (from + to) / 2
		if v, _ := net(mid); v > 0 {
			from = mid
		} else {
			to = mid
		}
	}
	at := (from + to) / 2
	h := 0.01 * at
	up, _ := net(at + h)
	down, _ := net(at - h)
	_, variance := net(at)
	slope := (up - down) / (2 * h)
	g := s.kickVector()
	for i, x := range s.lossVector(l.workAt(at)) {
		g[i] -= x
	}
	rest := l.budget(g, 0)
	u := math.Hypot(math.Sqrt(variance), rss(rest)) / math.Abs(slope)
	f := finding.Normal(key, l.part(), name, at, u, "rad", method)
	if at < lo || at > hi {
		f.Cautions = append(f.Cautions, "It was not filmed: it follows from kick and loss at other amplitudes.")
	}
	res.Findings = append(res.Findings, f)
}

// beginning reports from which speed and amplitude the coil kicks.
func (l *ledger) beginning(res *Result) {
	const key, name = "kick.starts_at", "Amplitude from which it starts by itself"
	slow, kicked := 0.0, math.Inf(1)
	for i := range l.rows {
		r := &l.rows[i]
		switch {
		case r.clip == 0 && r.state == Slow:
			slow = math.Max(slow, r.amp)
		case r.clip == 0 && r.state == Kicked && r.net() > 3*math.Sqrt(r.vFrom+r.vTo):
			kicked = math.Min(kicked, r.amp)
		}
	}
	if math.IsInf(kicked, 1) {
		return
	}
	if slow > 0 && slow < kicked {
		f := finding.Normal(key, l.part(), name, (slow+kicked)/2, (kicked-slow)/math.Sqrt(12), "rad", "between the largest amplitude without a kick and the smallest with one")
		f.Lo, f.Hi = slow, kicked
		res.Findings = append(res.Findings, f)
		return
	}
	res.Findings = append(res.Findings, finding.Finding{
		Key: key, Subject: l.part(), Name: name, Kind: finding.UpperLimit, Value: kicked, Hi: kicked, Unit: "rad",
		Method: "the smallest amplitude at which it was seen to gain energy",
	})
}

// perDay reports the mechanical energy per day and, where the rig has the coil's
// data, how long its battery lasts.
func (l *ledger) perDay(res *Result) {
	if !res.Separated || l.unit != "J" {
		return
	}
	// Kicks per second over the stretch in which the coil was on.
	count, time := 0.0, 0.0
	for i := range l.rows {
		r := &l.rows[i]
		if r.state == Off || r.clip != 0 {
			continue
		}
		count += r.state.share() * r.gain
		time += r.span
	}
	const day = 86400
	perDay := count / time * day
	var kick *finding.Finding
	for i := range res.Findings {
		if res.Findings[i].Key == "kick.energy" {
			kick = &res.Findings[i]
		}
	}
	f := finding.Normal("kick.energy_per_day", l.part(), "Mechanical energy that the coil gives per day", kick.Value*perDay, kick.U*perDay, "J", "kick times kicks per day, as filmed")
	f.Cautions = kick.Cautions
	for _, s := range kick.Budget {
		f.Budget = append(f.Budget, finding.Share{Source: s.Source, U: s.U * perDay})
	}
	res.Findings = append(res.Findings, f)
	l.battery(res, kick, perDay)
}
