package match

import (
	"math"
	"strings"
)

// gauge keeps near its start what may be determined only together with others: one
// of several free moments that act by their products alone, and an inertia that
// nobody knows.
func (b *builder) gauge() {
	scale := b.scaleFree()
	for i := range b.out {
		p := &b.out[i]
		if !p.asked || p.prior || p.value == 0 {
			continue
		}
		switch {
		case i == scale:
			p.prior, p.gauge, p.mean, p.u = true, true, p.value, tightGauge*math.Abs(p.value)
		case strings.HasSuffix(p.address, ".inertia"):
			p.prior, p.gauge, p.mean, p.u = true, true, p.value, math.Abs(p.value)
		}
	}
}

// tightGauge is the relative width of a gauge's prior while the optimum is sought;
// for the uncertainties it is 1.
const tightGauge = 1e-3

// scaleFree is a free moment that may be multiplied by any number while others are
// divided by it, with no effect: all pairs that act are of two free groups of
// magnets, and the groups fall into two camps. −1 where there is none.
func (b *builder) scaleFree() int {
	of := map[string]int{}
	for i := range b.out {
		if b.out[i].moment() && b.out[i].asked {
			for _, a := range b.out[i].tied {
				owner, _ := split(a)
				of[owner] = i
			}
		}
	}
	camp := map[int]int{}
	first := -1
	type edge struct{ a, b int }
	var edges []edge
	for i := range b.r.Magnets {
		for k := range b.r.Magnets[:i] {
			p, q := &b.r.Magnets[i], &b.r.Magnets[k]
			if p.Part == q.Part {
				continue
			}
			x, okX := of[p.Name]
			y, okY := of[q.Name]
			if !okX && !okY {
				continue
			}
			if !okX || !okY || x == y {
				return -1 // one is known, or both are the same
			}
			edges = append(edges, edge{x, y})
			if first < 0 {
				first = min(x, y)
			}
		}
	}
	if first < 0 {
		return -1
	}
	camp[first] = 1
	for range edges {
		for _, e := range edges {
			for _, f := range []edge{e, {e.b, e.a}} {
				if camp[f.a] == 0 {
					continue
				}
				if camp[f.b] == camp[f.a] {
					return -1
				}
				camp[f.b] = -camp[f.a]
			}
		}
	}
	return first
}
