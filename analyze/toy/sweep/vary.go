package sweep

import (
	"context"
	"fmt"

	"lodeswing/track/rig"
)

// Table is what a sweep found: one or two ranges and the answers at each of
// their values, the first range running fastest. A nil entry was not done.
type Table struct {
	Ranges  []Range
	Parts   []string
	Answers []*Answers
	Done    int
}

// Vary asks the rig's toy at every value of one range, or at every pair of
// values of two. When ctx ends early the table holds what was done; the error is
// then ctx's.
func Vary(ctx context.Context, r *rig.Rig, ranges []Range, opt Options) (*Table, error) {
	if len(ranges) < 1 || len(ranges) > 2 {
		return nil, fmt.Errorf("one or two numbers can be varied at once, not %d", len(ranges))
	}
	m, _, err := build(r)
	if err != nil {
		return nil, err
	}
	n := 1
	for i, g := range ranges {
		n *= len(g.Values)
		for _, a := range g.Addresses {
			if i == 1 && contains(ranges[0].Addresses, a) {
				return nil, fmt.Errorf("%q is varied twice", a)
			}
		}
	}
	t := &Table{Ranges: ranges, Parts: m.Parts(), Answers: make([]*Answers, n)}
	t.Done = each(ctx, n, opt, func(i int) bool {
		c, left := r, i
		for _, g := range ranges {
			var err error
			if c, err = g.With(c, left%len(g.Values)); err != nil {
				t.Answers[i] = &Answers{Problem: err.Error(), EndsAt: -1}
				return true
			}
			left /= len(g.Values)
		}
		a, err := Ask(ctx, c, opt)
		if err != nil {
			return false // cut short
		}
		t.Answers[i] = a
		return true
	})
	return t, ctx.Err()
}

func contains(all []string, s string) bool {
	for _, a := range all {
		if a == s {
			return true
		}
	}
	return false
}
