package match

import (
	"math"
)

// seen adds what the camera, the clock and the bobs' places leave open.
func (b *builder) seen() {
	byBob := map[string]bool{}
	for c := range b.f.clips {
		k := &b.f.clips[c]
		same := false
		for o := range c {
			same = same || sameCamera(&b.f.clips[o], k)
		}
		if len(k.tables) > 0 {
			for i, o := range k.watched {
				if o.bob < 0 {
					b.add(param{
						address: o.name + ".zero", unit: "rad", source: "the zero of the angles", role: byTurn, clip: c, which: i, nuisance: true,
						prior: true, u: 0.02, scale: 1e-5,
					})
				}
			}
			b.clock(c, k.uClock, same)
			continue
		}
		b.add(param{address: k.place("x"), unit: "m", source: "the pivot in the picture", role: byShiftX, clip: c, prior: true, u: wideShift, scale: 1e-5, nuisance: true})
		b.add(param{address: k.place("z"), unit: "m", source: "the pivot in the picture", role: byShiftZ, clip: c, prior: true, u: wideShift, scale: 1e-5, nuisance: true})
		for _, o := range k.watched {
			if byBob[o.name] {
				continue
			}
			byBob[o.name] = true
			if !k.model.OneAxis(o.part) {
				b.add(param{address: o.name + ".at.z", unit: "m", source: "the bobs' places on their parts", role: byBobZ, clip: -1, bob: o.name, prior: true, u: uBobPlace, scale: 1e-5, nuisance: true})
				continue
			}
			b.add(param{address: o.name + ".at.x", unit: "m", source: "the bobs' places on their parts", role: byBobX, clip: -1, bob: o.name, prior: true, u: uBobPlace, scale: 1e-5, nuisance: true})
			b.add(param{address: o.name + ".at.z", unit: "m", source: "the bobs' places on their parts", role: byBobZ, clip: -1, bob: o.name, prior: true, u: uBobPlace, scale: 1e-5, nuisance: true})
		}
		b.clock(c, k.uClock, same)
		if same {
			continue
		}
		cal := &k.track.Cal
		if k.camera != nil {
			for i, s := range cal.Lens.Unsure {
				b.add(param{address: k.its(s.Source), unit: "1", source: s.Source, role: byCamera, clip: c, which: i, prior: true, u: 1, scale: 0.1, nuisance: true})
			}
		} else {
			u := cal.UScale
			if u == 0 {
				u = 1e-3
			}
			b.add(param{address: k.its("the scale"), unit: "1", source: "the scale", role: byScale, clip: c, prior: true, u: u, scale: 1e-5, nuisance: true})
			u = cal.UVertical
			if u == 0 {
				u = math.Pi / 180
			}
			b.add(param{address: k.its("the vertical"), unit: "rad", source: "the vertical", role: byTurn, clip: c, prior: true, u: u, scale: 1e-5, nuisance: true})
		}
		if u := cal.UReadoutS; u > 0 {
			b.add(param{address: k.its("the read-out"), unit: "s", source: "the shutter's read-out", role: byRowTime, clip: c, prior: true, u: u, scale: 1e-4, nuisance: true})
		}
	}
	// A second clip by the same camera shares its numbers.
	for i := range b.out {
		p := &b.out[i]
		if p.role < byCamera || p.clip < 0 || len(b.f.clips[p.clip].tables) > 0 {
			continue
		}
		p.clip = b.f.clips[p.clip].cameraOf
	}
}

func (b *builder) clock(c int, u float64, same bool) {
	if same || !(u > 0) {
		return
	}
	b.add(param{address: b.f.clips[c].its("the clock"), unit: "1", source: "the camera's clock", role: byClock, clip: c, prior: true, u: u, scale: 1e-6, nuisance: true})
}
