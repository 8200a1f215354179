package match

import (
	"math"

	"lodeswing/analyze/toy"
	"lodeswing/track/camera"
)

// viewer is how a clip sees the toy, for one set of parameters.
type viewer struct {
	k           *clipData
	camera      *camera.Camera
	at          [][3]float64 // of each watched bob on its part
	shift       [3]float64
	scale, turn float64
	zero        []float64 // of each angle table
	row, clock  float64   // s, and relative
}

func (f *fitter) viewer(c int, p []float64) viewer {
	k := &f.clips[c]
	v := viewer{k: k, at: make([][3]float64, len(k.watched)), zero: make([]float64, len(k.watched))}
	for w := range k.watched {
		v.at[w] = k.watched[w].at
	}
	var by []float64
	for j := range f.params {
		q := &f.params[j]
		if q.role == byModel || !f.concerns(j, c) {
			continue
		}
		x := p[j]
		switch q.role {
		case byBobX, byBobZ:
			for w := range k.watched {
				if k.watched[w].name != q.bob {
					continue
				}
				if q.role == byBobX {
					v.at[w][0] += x
				} else {
					v.at[w][2] += x
				}
			}
		case byShiftX:
			v.shift[0] = x
		case byShiftZ:
			if k.above {
				v.shift[1] = x
			} else {
				v.shift[2] = x
			}
		case byCamera:
			for len(by) <= q.which {
				by = append(by, 0)
			}
			by[q.which] = x
		case byScale:
			v.scale = x
		case byTurn:
			v.turn = x
			if k.tables != nil {
				v.zero[q.which] = x
			}
		case byRowTime:
			v.row = x
		case byClock:
			v.clock = x
		}
	}
	if k.camera != nil {
		v.camera = k.camera
		if by != nil {
			v.camera = k.camera.Moved(by)
		}
	}
	return v
}

// concerns tells whether parameter j acts on clip c.
func (f *fitter) concerns(j, c int) bool {
	q := &f.params[j]
	switch {
	case q.role == byModel:
		return len(q.targets[c]) > 0
	case q.clip < 0:
		return true
	case q.role >= byCamera:
		return q.clip == f.clips[c].cameraOf
	}
	return q.clip == c
}

// pose is a part's pivot and rotation; of an angle table the angle alone.
type pose struct {
	at   [3]float64
	turn [3][3]float64
}

func (k *clipData) pose(m *toy.Model, y []float64, w int) pose {
	o := &k.watched[w]
	if o.bob < 0 {
		a, _ := m.Angle(y, o.part)
		return pose{at: [3]float64{a}}
	}
	var p pose
	p.at, p.turn = m.Pose(y, o.part)
	return p
}

// world is where watched thing w is, m; of an angle table its angle.
func (v *viewer) world(p *pose, w int) [3]float64 {
	if v.k.watched[w].bob < 0 {
		return p.at
	}
	at := v.at[w]
	var x [3]float64
	for i := range 3 {
		x[i] = p.at[i] + p.turn[i][0]*at[0] + p.turn[i][1]*at[1] + p.turn[i][2]*at[2] + v.shift[i]
	}
	return x
}

// project is how the clip sees the place x of watched thing w.
func (v *viewer) project(w int, x [3]float64) (a, b float64) {
	o := &v.k.watched[w]
	if o.bob < 0 {
		return x[0] + v.zero[w], 0
	}
	if v.camera != nil {
		return v.camera.BobToPixel(x[0], x[1]-o.depth, x[2], o.radius)
	}
	z := x[2]
	if v.k.above {
		z = x[1]
	}
	s, c := math.Sincos(v.turn)
	return (1 + v.scale) * (c*x[0] - s*z), (1 + v.scale) * (s*x[0] + c*z)
}
