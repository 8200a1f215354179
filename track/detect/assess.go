package detect

import "math"

// agreeReach is over how many px residuals are taken to agree, at most: a codec's
// block.
const agreeReach = 6.0

// assess compares the scatter of the sectors' pulls on the centre with what
// white residuals would give, and remembers the ratio: the clustered sandwich
// of Liang & Zeger (Biometrika 73, 1986, 13–22), averaged over frames because
// one frame has too few clusters.
func (f *Fitter) assess(m *model, inv *matrix, acc *sums, on *[pCount]bool) {
	var pulls [sectors][2]float64
	used, free := 0.0, 0.0
	for _, yes := range on {
		if yes {
			free++
		}
	}
	for k := range sectors {
		if acc.all[k] == 0 {
			continue
		}
		used++
		for i := range pCount {
			pulls[k][0] += inv[pU][i] * acc.score[k][i]
			pulls[k][1] += inv[pV][i] * acc.score[k][i]
		}
	}
	if used < sectors*2/3 {
		return
	}
	// Residuals agree over some pixels (a codec's blocks, a wall's grain): nearby
	// sectors' pulls are multiplied as well, with Bartlett's weights (Newey & West,
	// Econometrica 55, 1987, 703–708).
	lags := min(int(agreeReach*sectors/(2*math.Pi*m.r)+0.5), sectors/6)
	meat, expected := 0.0, 0.0
	for l := 0; l <= lags; l++ {
		w := 1 - float64(l)/float64(lags+1)
		if l > 0 {
			w *= 2
		}
		sum := 0.0
		for k := range sectors {
			o := (k + l) % sectors
			sum += pulls[k][0]*pulls[o][0] + pulls[k][1]*pulls[o][1]
		}
		meat += w * sum
		// The fit zeroes the residuals' sum around the outline and their first and
		// second harmonics; so much is left of white ones.
		c := math.Cos(2 * math.Pi * float64(l) / sectors)
		left := -(1 + 2*c + 2*(2*c*c-1)) / sectors
		if l == 0 {
			left++
		}
		expected += w * c * left
	}
	scale := acc.chi / math.Max(acc.n-free, 1)
	white := (inv[pU][pU] + inv[pV][pV]) * scale
	ratio := math.Max(meat/white/expected, 0) * sectors / used
	// One wild frame must not spoil the average.
	if f.agreeN >= 5 {
		ratio = math.Min(ratio, 5*f.agree+0.5)
	}
	f.agreeN = math.Min(f.agreeN+1, 40)
	f.agree += (ratio - f.agree) / f.agreeN
}
