package follow

import (
	"fmt"
	"math"
	"slices"

	"lodeswing/track"
	"lodeswing/track/shake"
)

// finish turns the samples' pixels into metres and gathers what is to be said.
func (f *follower) finish() *track.Track {
	out := &track.Track{Cal: f.cam.Calibration(), BrokeAt: math.NaN()}
	out.BrokeAt, out.BrokeBy = f.src.Damage()
	out.Cautions = append(out.Cautions, f.facts.Warnings...)
	out.Cautions = append(out.Cautions, f.cam.Cautions()...)
	report := f.watch.Report()
	out.Cautions = append(out.Cautions, report.Cautions...)
	if f.opt.Shake != nil {
		f.opt.Shake(report)
	}
	if f.expo.n >= 10 || f.expo.given {
		out.Cal.ExposureS = f.expo.tau
	}
	steady := !reliable(report) || report.MovePX < 3*report.UMovePX || report.MovePX < 0.1
	moved := 0.0
	corrected, uncorrected := 0, 0
	for _, b := range f.bobs {
		if out.Cal.ExposureS > 0 {
			toMidExposure(b.samples, out.Cal.ExposureS)
		}
		raiseToScatter(b.samples)
		radius := 0.0
		if b.rig.Ball && b.rig.DiameterM.Set {
			radius = b.rig.DiameterM.V / 2
		}
		for i := range b.samples {
			s := &b.samples[i]
			if math.IsNaN(s.U) {
				continue
			}
			u, v := s.U, s.V
			if !steady {
				if u2, v2, ok := report.Correct(s.T, u, v); ok {
					u, v = u2, v2
					corrected++
				} else {
					uncorrected++
				}
			}
			var j [2][2]float64
			s.X, s.Z, j = f.cam.BobToPlane(u, v, radius, b.rig.DepthM.Or(0))
			s.Plane = s.Pixel.Through(j)
		}
		out.Bobs = append(out.Bobs, track.Bob{Name: b.rig.Name, Part: b.rig.Part, RadiusPX: b.radius, Samples: b.samples})
		moved = math.Max(moved, spread(b.samples))
		out.Cautions = append(out.Cautions, b.cautions()...)
	}
	if corrected > 0 && uncorrected == 0 {
		out.Cautions = append(out.Cautions, fmt.Sprintf("The camera moved by %.2g px; the positions are put where a still camera would have seen them.", report.MovePX))
	}
	ratio, words := report.RockCaution(moved)
	out.Cal.StandDriftRatio = ratio
	if words != "" {
		out.Cautions = append(out.Cautions, words)
	}
	return out
}

// reliable tells whether the camera's motion was seen well enough to be taken
// out: in nearly all frames, by patches that agree.
func reliable(r *shake.Report) bool {
	if r.Patches < 6 || 10*r.Lost > r.Seen || len(r.Motions) < 3 {
		return false
	}
	var spread []float64
	for i := range r.Motions {
		spread = append(spread, r.Motions[i].Spread)
	}
	return median(spread) < 0.3
}

// toMidExposure takes out the way by which the middle of a smear lies off the
// place at mid exposure: aτ²/24 for a steady acceleration a over an exposure τ.
// The acceleration is that of a parabola through seven neighbouring samples.
func toMidExposure(s []track.Sample, tau float64) {
	const half = 3
	shift := make([][2]float64, len(s))
	for i := range s {
		var n, s2, s3, s4, t1 float64
		var y0, y1, y2 [2]float64
		for j := max(i-half, 0); j <= min(i+half, len(s)-1); j++ {
			if !s[j].State.Usable() {
				continue
			}
			t := s[j].T - s[i].T
			n++
			t1 += t
			s2 += t * t
			s3 += t * t * t
			s4 += t * t * t * t
			for k, p := range [2]float64{s[j].U - s[i].U, s[j].V - s[i].V} {
				y0[k] += p
				y1[k] += t * p
				y2[k] += t * t * p
			}
		}
		if n < 5 || math.IsNaN(s[i].U) {
			continue
		}
		det := n*(s2*s4-s3*s3) - t1*(t1*s4-s3*s2) + s2*(t1*s3-s2*s2)
		if !(det > 0) {
			continue
		}
		for k := range 2 {
			c := (n*(s2*y2[k]-s3*y1[k]) - t1*(t1*y2[k]-s3*y0[k]) + s2*(t1*y1[k]-s2*y0[k])) / det
			shift[i][k] = 2 * c * tau * tau / 24
		}
	}
	for i := range s {
		s[i].U -= shift[i][0]
		s[i].V -= shift[i][1]
	}
}

// spread is the r.m.s. distance of the samples from their mean, px.
func spread(s []track.Sample) float64 {
	var n, u, v, q float64
	for i := range s {
		if s[i].State.Usable() {
			n++
			u += s[i].U
			v += s[i].V
		}
	}
	for i := range s {
		if s[i].State.Usable() {
			du, dv := s[i].U-u/n, s[i].V-v/n
			q += du*du + dv*dv
		}
	}
	return math.Sqrt(q / math.Max(n, 1))
}

// cautions says what was not seen of a bob.
func (b *bob) cautions() (out []string) {
	var count [4]int
	for i := range b.samples {
		count[b.samples[i].State]++
	}
	n := float64(len(b.samples))
	if k := count[track.Missing]; float64(k) > 0.01*n {
		out = append(out, fmt.Sprintf("%s was not seen in %d of %d frames.", b.rig.Name, k, len(b.samples)))
	}
	if k := count[track.AtEdge]; float64(k) > 0.01*n {
		out = append(out, fmt.Sprintf("%s touches the picture's edge in %d of %d frames; these are left out of the fits. Film from farther away.", b.rig.Name, k, len(b.samples)))
	}
	if k := count[track.PartlyHidden]; float64(k) > 0.1*n {
		out = append(out, fmt.Sprintf("%s was partly hidden, or not told from its surroundings all round, in %d of %d frames.", b.rig.Name, k, len(b.samples)))
	}
	return out
}

func median(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	slices.Sort(v)
	return v[len(v)/2]
}
