package link

import (
	"math"
	"math/rand/v2"
	"testing"

	"lodeswing/track"
)

// total is the cost of an assignment.
func total(cost [][]float64, to []int, alone float64) (sum float64) {
	for i, j := range to {
		if j < 0 {
			sum += alone
		} else {
			sum += cost[i][j]
		}
	}
	return sum
}

// cheapest tries every assignment.
func cheapest(cost [][]float64, alone float64) float64 {
	best := math.Inf(1)
	used := map[int]bool{}
	var try func(i int, sum float64)
	try = func(i int, sum float64) {
		if i == len(cost) {
			best = math.Min(best, sum)
			return
		}
		try(i+1, sum+alone)
		for j, c := range cost[i] {
			if !used[j] && !math.IsInf(c, 1) && !math.IsNaN(c) {
				used[j] = true
				try(i+1, sum+c)
				used[j] = false
			}
		}
	}
	try(0, 0)
	return best
}

// Every assignment of small random problems is tried: no other costs less.
func TestAssignIsCheapest(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for n := range 3000 {
		rows, cols := 1+rng.IntN(5), rng.IntN(6)
		alone := 10 * rng.Float64()
		cost := make([][]float64, rows)
		for i := range cost {
			cost[i] = make([]float64, cols)
			for j := range cost[i] {
				switch rng.IntN(8) {
				case 0:
					cost[i][j] = math.Inf(1)
				case 1:
					cost[i][j] = math.NaN()
				case 2:
					cost[i][j] = float64(rng.IntN(3)) // ties
				default:
					cost[i][j] = 10 * rng.Float64()
				}
			}
		}
		to := Assign(cost, alone)
		seen := map[int]bool{}
		for i, j := range to {
			if j < 0 {
				continue
			}
			if seen[j] {
				t.Fatalf("case %d: column %d is given twice", n, j)
			}
			seen[j] = true
			if math.IsInf(cost[i][j], 1) || math.IsNaN(cost[i][j]) {
				t.Fatalf("case %d: row %d got a forbidden column", n, i)
			}
		}
		if got, want := total(cost, to, alone), cheapest(cost, alone); math.Abs(got-want) > 1e-9 {
			t.Fatalf("case %d: cost %g, the cheapest is %g (%v, alone %g)", n, got, want, cost, alone)
		}
	}
	if Assign(nil, 1) != nil {
		t.Error("no rows give something")
	}
}

// The worked example of Kuhn (Naval Research Logistics Quarterly 2, 1955,
// 83–97), turned from gains to costs: the best total of the gains is 22 (from
// memory; checked by the exhaustive search above as well).
func TestAssignTextbook(t *testing.T) {
	gain := [][]float64{{8, 7, 9, 9}, {5, 2, 7, 8}, {6, 1, 4, 9}, {2, 3, 2, 6}}
	cost := make([][]float64, 4)
	for i := range gain {
		for _, g := range gain[i] {
			cost[i] = append(cost[i], 10-g)
		}
	}
	to := Assign(cost, 1e3)
	if got, want := total(cost, to, 1e3), cheapest(cost, 1e3); got != want {
		t.Errorf("cost %g, want %g", got, want)
	}
}

// A swing is predicted to a fraction of a pixel, its speed too, and a sudden kick
// is met within two frames; the stated prediction is honest.
func TestFilterFollowsASwing(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	const dt, sigma = 1.0 / 60, 0.02
	u := func(t float64) float64 { return 200 * math.Sin(6*t) }
	c := track.Cov{AA: sigma * sigma, BB: sigma * sigma}
	f := NewFilter(0, u(0), 0, c, 2000)
	var nis, worst, speed float64
	n := 0
	for i := 1; i < 600; i++ {
		at := dt * float64(i)
		p := f.Predict(at)
		zu, zv := u(at)+sigma*rng.NormFloat64(), sigma*rng.NormFloat64()
		if i > 60 {
			nis += p.Cost(zu, zv, c, 0) / 2
			n++
			worst = math.Max(worst, math.Abs(p.U-u(at)))
			speed = math.Max(speed, math.Abs(p.DU-1200*math.Cos(6*at)))
		}
		f.Update(at, zu, zv, c)
	}
	nis /= float64(n)
	t.Logf("predictions off by at most %.3f px, %.1f px/s; normalised innovation %.2f", worst, speed, nis)
	if worst > 0.6 || speed > 40 || nis < 0.4 || nis > 1.8 {
		t.Errorf("worst %.3f px, speed %.1f px/s, innovation %.2f", worst, speed, nis)
	}
	// A kick: the speed changes by 600 px/s at once.
	last := 600 * dt
	u0, v0 := u(last-dt), 1200*math.Cos(6*(last-dt))+600
	for k := range 4 {
		at := last + dt*float64(k)
		p := f.Predict(at)
		z := u0 + v0*dt*float64(k+1)
		if k == 3 && math.Abs(p.U-z) > 2 {
			t.Errorf("three frames after a kick the prediction is off by %.2f px", p.U-z)
		}
		f.Update(at, z, 0, c)
	}
}

// A gap lets the uncertainty grow as the gap does.
func TestFilterInAGap(t *testing.T) {
	f := NewFilter(0, 0, 0, track.Cov{AA: 1e-4, BB: 1e-4}, 1000)
	for i := 1; i < 100; i++ {
		f.Update(float64(i)/60, float64(i), 0, track.Cov{AA: 1e-4, BB: 1e-4})
	}
	near, far := f.Predict(100.0/60), f.Predict(130.0/60)
	if !(far.Sigma() > 20*near.Sigma()) || math.Abs(far.U-130) > 5*far.Sigma() {
		t.Errorf("one frame ahead ± %.3f, half a second ahead %.1f ± %.3f", near.Sigma(), far.U, far.Sigma())
	}
}
