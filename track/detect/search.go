package detect

import (
	"image"
	"math"
	"slices"

	"lodeswing/track/clip"
)

// Candidate is something round that looks like a bob.
type Candidate struct {
	U, V, R float64 // px
	// Round is the share of directions in which it ends at the same distance.
	Round            float64
	Alike            float64 // how well its pixels match the look, 0 to 1
	Blue, Green, Red float64 // means inside
}

// Score orders candidates: 1 is a perfect disc of the right look.
func (c *Candidate) Score() float64 { return c.Round * c.Alike }

// Search looks for round things in patches. It keeps its memory between calls.
type Search struct {
	Look       Look
	RMin, RMax float64 // px; RMax 0: up to a third of the picture

	w, h, step int
	mask       []float32 // score of each cell
	in, tmp    []bool
	dist       []float32
	stack      []int32
	lumas      []float64
}

// Find returns candidates inside area, best first. Only every step-th pixel is
// looked at; 0 chooses the step. Where wall is not nil, what looks as the wall
// does there is no candidate. before, if not nil, are pictures of the same place
// at other times: with look ByMotion, only what differs from all of them counts.
func (s *Search) Find(p *clip.Patch, area image.Rectangle, step int, wall *Wall, before []*clip.Patch) []Candidate {
	area = area.Intersect(p.Rect)
	if area.Empty() {
		return nil
	}
	if step <= 0 {
		step = s.ChooseStep(area)
	}
	s.step = step
	s.w, s.h = (area.Dx()+step-1)/step, (area.Dy()+step-1)/step
	n := s.w * s.h
	s.mask, s.in, s.dist = grow(s.mask, n), grow(s.in, n), grow(s.dist, n)
	s.paint(p, area, wall, before)
	// A rod or a string in front cuts a bob in two: gaps narrower than a part of
	// its radius are closed. Without a known size several widths are tried.
	widths := []int{1, 3, 6}
	if s.RMin > 3 {
		widths = []int{max(int(0.22*s.RMin/float64(step)+0.5), 1)}
	}
	var found []Candidate
	for _, k := range widths {
		for i, m := range s.mask {
			s.in[i] = m >= 0.5
		}
		s.close(k)
		s.fillHoles()
		s.distances()
		found = append(found, s.peaks(p, area)...)
	}
	return best(found)
}

// close closes gaps of up to 2k cells: a dilation followed by an erosion with a
// square. Beyond the area counts as what is next to it.
func (s *Search) close(k int) {
	s.tmp = grow(s.tmp, len(s.in))
	s.spread(k, true)
	s.spread(k, false)
}

// spread makes every cell want where any cell within k, along rows and then
// along columns, is want.
func (s *Search) spread(k int, want bool) {
	w, h := s.w, s.h
	pass := func(src, dst []bool, n, lines, step, line int) {
		for l := range lines {
			o := l * line
			last := -k - 1 // latest position of want
			for i := range n {
				if src[o+i*step] == want {
					last = i
				}
				dst[o+i*step] = want == (i-last <= k)
			}
			last = n + k
			for i := n - 1; i >= 0; i-- {
				if src[o+i*step] == want {
					last = i
				}
				if last-i <= k {
					dst[o+i*step] = want
				}
			}
		}
	}
	pass(s.in, s.tmp, w, h, 1, w)
	pass(s.tmp, s.in, h, w, w, 1)
}

// ChooseStep returns the step that leaves a bob of the least expected radius at
// least three cells of radius.
func (s *Search) ChooseStep(area image.Rectangle) int {
	step := 1
	if s.RMin > 0 {
		step = min(int(s.RMin/3), 6)
	} else {
		step = min(area.Dx(), area.Dy()) / 300
	}
	return min(max(step, 1), 8)
}

func grow[T any](v []T, n int) []T {
	if cap(v) < n {
		return make([]T, n)
	}
	return v[:n]
}

// paint scores every cell by its pixel.
func (s *Search) paint(p *clip.Patch, area image.Rectangle, wall *Wall, before []*clip.Patch) {
	step := s.step
	var dark, middle, light float64
	if s.Look.Kind == ByDark || s.Look.Kind == ByLight {
		dark, middle, light = s.lightness(p, area)
	}
	taste := newTaster(s.Look, dark, middle, light)
	moving := s.Look.Kind == ByMotion
	for y := range s.h {
		v := area.Min.Y + y*step
		row := p.BGR[3*(v-p.Rect.Min.Y)*p.W:]
		for x := range s.w {
			u := area.Min.X + x*step
			o := 3 * (u - p.Rect.Min.X)
			b, g, r := float64(row[o]), float64(row[o+1]), float64(row[o+2])
			score := 1.0
			if !moving {
				score = taste.score(b, g, r)
			}
			if score == 0 {
				s.mask[y*s.w+x] = 0
				continue
			}
			if score > 0 && wall != nil {
				if wb, wg, wr, ok := wall.at(u, v); ok {
					score = math.Min(score, unlike(b, g, r, wb, wg, wr))
				} else if moving && len(before) == 0 {
					score = 0
				}
			}
			for _, q := range before {
				if score == 0 {
					break
				}
				if !image.Pt(u, v).In(q.Rect) {
					continue
				}
				k := 3 * ((v-q.Rect.Min.Y)*q.W + u - q.Rect.Min.X)
				score = math.Min(score, unlike(b, g, r, float64(q.BGR[k]), float64(q.BGR[k+1]), float64(q.BGR[k+2])))
			}
			s.mask[y*s.w+x] = float32(score)
		}
	}
}

// unlike is 1 where two pixels plainly differ and 0 where they do not.
func unlike(b, g, r, wb, wg, wr float64) float64 {
	d := math.Abs(b-wb) + math.Abs(g-wg) + math.Abs(r-wr)
	return clamp01((d - 24) / 36)
}

// lightness returns the 1st, 50th and 99th percentile of luma.
func (s *Search) lightness(p *clip.Patch, area image.Rectangle) (dark, middle, light float64) {
	s.lumas = s.lumas[:0]
	every := max(min(area.Dx(), area.Dy())/120, 1)
	for v := area.Min.Y; v < area.Max.Y; v += every {
		for u := area.Min.X; u < area.Max.X; u += every {
			o := 3 * ((v-p.Rect.Min.Y)*p.W + u - p.Rect.Min.X)
			s.lumas = append(s.lumas, lumaB*float64(p.BGR[o])+lumaG*float64(p.BGR[o+1])+lumaR*float64(p.BGR[o+2]))
		}
	}
	slices.Sort(s.lumas)
	n := len(s.lumas)
	return s.lumas[n/100], s.lumas[n/2], s.lumas[n-1-n/100]
}

// fillHoles takes holes (a highlight, a hub) into what surrounds them: cells
// outside that cannot be reached from the border.
func (s *Search) fillHoles() {
	const out = -1
	s.stack = s.stack[:0]
	push := func(i int) {
		if !s.in[i] && s.dist[i] != out {
			s.dist[i] = out
			s.stack = append(s.stack, int32(i))
		}
	}
	for i := range s.dist {
		s.dist[i] = 0
	}
	for x := range s.w {
		push(x)
		push((s.h-1)*s.w + x)
	}
	for y := range s.h {
		push(y * s.w)
		push(y*s.w + s.w - 1)
	}
	for len(s.stack) > 0 {
		i := int(s.stack[len(s.stack)-1])
		s.stack = s.stack[:len(s.stack)-1]
		x := i % s.w
		if x > 0 {
			push(i - 1)
		}
		if x < s.w-1 {
			push(i + 1)
		}
		if i >= s.w {
			push(i - s.w)
		}
		if i < (s.h-1)*s.w {
			push(i + s.w)
		}
	}
	for i := range s.in {
		s.in[i] = s.dist[i] != out
	}
}

// distances fills dist with each cell's distance to the nearest cell outside,
// by two chamfer passes (G. Borgefors, Computer Vision, Graphics, and Image
// Processing 34 (1986) 344–371). Beyond the picture's edge counts as inside, so
// that what is cut by it is still found.
func (s *Search) distances() {
	const straight, across = 1, 1.3507 // Borgefors' optimal pair, scaled
	far := float32(s.w + s.h)
	w, h := s.w, s.h
	d := s.dist
	at := func(x, y int) float32 {
		if x < 0 || y < 0 || x >= w || y >= h {
			return far
		}
		return d[y*w+x]
	}
	for y := range h {
		for x := range w {
			i := y*w + x
			if !s.in[i] {
				d[i] = 0
				continue
			}
			m := min(at(x-1, y)+straight, at(x, y-1)+straight, at(x-1, y-1)+across, at(x+1, y-1)+across)
			d[i] = min(m, far)
		}
	}
	for y := h - 1; y >= 0; y-- {
		for x := w - 1; x >= 0; x-- {
			i := y*w + x
			if d[i] > 0 {
				d[i] = min(d[i], at(x+1, y)+straight, at(x, y+1)+straight, at(x+1, y+1)+across, at(x-1, y+1)+across)
			}
		}
	}
}

// peaks turns local maxima of the distance into candidates.
func (s *Search) peaks(p *clip.Patch, area image.Rectangle) []Candidate {
	step := float64(s.step)
	most := s.RMax
	if most <= 0 {
		most = float64(min(p.Rect.Dx(), p.Rect.Dy())) / 3
	}
	least := math.Max(s.RMin, 2.5)
	var tops []int32
	w, h := s.w, s.h
	for y := range h {
		for x := range w {
			i := y*w + x
			d := s.dist[i]
			if float64(d)*step < 0.6*least || float64(d)*step > 1.6*most {
				continue
			}
			top := true
			for dy := -1; dy <= 1 && top; dy++ {
				for dx := -1; dx <= 1; dx++ {
					xx, yy := x+dx, y+dy
					if xx >= 0 && yy >= 0 && xx < w && yy < h && s.dist[yy*w+xx] > d {
						top = false
						break
					}
				}
			}
			if top {
				tops = append(tops, int32(i))
			}
		}
	}
	slices.SortFunc(tops, func(a, b int32) int {
		switch da, db := s.dist[a], s.dist[b]; {
		case da > db:
			return -1
		case da < db:
			return 1
		}
		return int(a - b)
	})
	if len(tops) > 400 {
		tops = tops[:400]
	}
	var found []Candidate
	for _, i := range tops {
		x, y := float64(int(i)%w), float64(int(i)/w)
		taken := false
		for k := range found {
			c := &found[k]
			cx, cy := (c.U-float64(area.Min.X))/step, (c.V-float64(area.Min.Y))/step
			if math.Hypot(x-cx, y-cy) < 0.8*c.R/step {
				taken = true
				break
			}
		}
		if taken {
			continue
		}
		cx, cy, r, round, ok := s.circle(x, y, float64(s.dist[i]))
		if !ok || r*step < 0.8*least || r*step > 1.25*most || round < 0.3 {
			continue
		}
		c := Candidate{U: float64(area.Min.X) + cx*step, V: float64(area.Min.Y) + cy*step, R: r * step, Round: round}
		s.describe(p, area, &c, cx, cy, r)
		found = append(found, c)
	}
	return found
}

// best sorts candidates by their score and keeps the better of two that are the
// same thing.
func best(found []Candidate) []Candidate {
	slices.SortStableFunc(found, func(a, b Candidate) int {
		switch sa, sb := a.Score(), b.Score(); {
		case sa > sb:
			return -1
		case sa < sb:
			return 1
		}
		return 0
	})
	var out []Candidate
	for _, c := range found {
		double := false
		for _, o := range out {
			if math.Hypot(c.U-o.U, c.V-o.V) < 0.8*math.Max(c.R, o.R) {
				double = true
				break
			}
		}
		if !double {
			out = append(out, c)
		}
	}
	return out
}

const rays = 48

var rayDirections = func() (d [rays][2]float64) {
	for k := range d {
		s, c := math.Sincos(2 * math.Pi * float64(k) / rays)
		d[k] = [2]float64{c, s}
	}
	return d
}()
