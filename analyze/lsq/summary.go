package lsq

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"
)

// summary computes what is told about the place where the search stopped.
func (s *search) summary() (*Summary, error) {
	n, m, full := s.n, s.m, s.pr.N
	sum := &Summary{
		Names: s.pr.Names, P: s.p, U: make([]float64, full), Cov: make([]float64, full*full),
		Residuals: s.r[:s.pr.M:s.pr.M], Jacobian: make([]float64, s.pr.M*full),
		ChiSquare: Loss{}.cost(s.r, 1), Cost: s.cost, Held: s.pr.Hold, Scatter: 1,
		Converged: s.done, Reason: s.why, Iterations: s.iters, Evaluations: s.evals, prior: s.pr.Prior,
	}
	if s.weight != nil {
		sum.LossScale = s.k / s.opt.Loss.tuning()
		s.reweigh()
		sum.Weights = make([]float64, s.pr.M)
		for i := range sum.Weights {
			sum.Weights[i] = sq(s.weight[i])
		}
	}
	for _, j := range s.free {
		if s.p[j] <= s.pr.Lo[j] || s.p[j] >= s.pr.Hi[j] {
			sum.AtBound = append(sum.AtBound, j)
		}
	}
	if n == 0 {
		sum.DoF = m
		return sum, nil
	}
	if s.ctx.Err() == nil {
		if err := s.jacobian(); err != nil {
			return sum, err
		}
	}
	for c, j := range s.free {
		for i := range s.pr.M {
			sum.Jacobian[i*full+j] = s.jac[c*m+i]
		}
	}
	s.factor()
	inv := s.invert(sum)
	sum.DoF = m - sum.Rank
	scale := s.scatter(sum)
	sum.unscale = scale
	for a, j := range s.free {
		for b, k := range s.free {
			sum.Cov[j*full+k] = inv[a*n+b] * scale
		}
	}
	for _, j := range s.free {
		sum.U[j] = math.Sqrt(sum.Cov[j*full+j])
		for _, co := range sum.Inseparable {
			if slices.Contains(co.Parameters, j) {
				sum.U[j] = math.Inf(1)
			}
		}
	}
	for i := range sum.Inseparable {
		sum.tell(&sum.Inseparable[i], "cannot be told apart")
	}
	for i := range sum.Weak {
		sum.tell(&sum.Weak[i], "are hard to tell apart")
	}
	return sum, nil
}

// invert returns (JᵀWJ)⁻¹ over the free parameters, as a pseudo-inverse where
// the rank is short, and sets Rank, Singular and the combinations.
func (s *search) invert(sum *Summary) []float64 {
	n := s.n
	norm := make([]float64, n)
	d := newSVD(n, n)
	for c := range n {
		norm[c] = s.colNorm[c]
		if norm[c] == 0 {
			norm[c] = 1
		}
		for i := range n {
			d.us[c*n+i] = s.tri[i*n+c] / norm[c]
		}
	}
	d.factor(n, n)
	top := d.s[d.perm[0]]
	kept := make([]int, 0, n)
	for _, a := range d.perm {
		sum.Singular = append(sum.Singular, d.s[a])
		if d.s[a] > s.opt.RankTol*top {
			kept = append(kept, a)
			continue
		}
		sum.Inseparable = append(sum.Inseparable, s.combination(d, a, norm, top))
	}
	sum.Rank = len(kept)
	inv := make([]float64, n*n)
	for _, a := range kept {
		v := d.v[a*n : (a+1)*n]
		f := 1 / sq(d.s[a])
		for i := range n {
			for j := range n {
				inv[i*n+j] += f * v[i] * v[j]
			}
		}
	}
	s.weak(sum, d, kept, norm, inv)
	for i := range n {
		for j := range n {
			inv[i*n+j] /= norm[i] * norm[j]
		}
	}
	return inv
}

// weak finds the directions that are determined badly although the rank is
// full: condition index above 30 with two or more parameters that owe it more
// than half of their variance (D. A. Belsley, E. Kuh and R. E. Welsch,
// "Regression Diagnostics", 1980, ch. 3).
func (s *search) weak(sum *Summary, d *svd, kept []int, norm, inv []float64) {
	n := s.n
	top := d.s[d.perm[0]]
	for i := len(kept) - 1; i >= 0; i-- {
		a := kept[i]
		if d.s[a]*30 > top {
			break
		}
		owing := 0
		for j := range n {
			if sq(d.v[a*n+j]/d.s[a]) > 0.5*inv[j*n+j] {
				owing++
			}
		}
		if owing > 1 {
			sum.Weak = append(sum.Weak, s.combination(d, a, norm, top))
		}
	}
}

// combination describes right singular vector a of the Jacobian with columns of
// unit length.
func (s *search) combination(d *svd, a int, norm []float64, top float64) Combination {
	n := s.n
	change := make([]float64, n)
	share := make([]int, n)
	largest := 0.0
	for c := range n {
		change[c] = d.v[a*n+c] / norm[c] / s.size(s.free[c])
		largest = max(largest, math.Abs(change[c]))
		share[c] = c
	}
	// A parameter takes part by its share in what the residuals see: |v|.
	slices.SortStableFunc(share, func(x, y int) int {
		return -cmp.Compare(math.Abs(d.v[a*n+x]), math.Abs(d.v[a*n+y]))
	})
	co := Combination{}
	if top > 0 {
		co.Singular = d.s[a] / top
	}
	sign := 1.0
	for _, c := range share {
		if math.Abs(d.v[a*n+c]) < 0.05*math.Abs(d.v[a*n+share[0]]) {
			break
		}
		if len(co.Parameters) == 0 {
			sign = math.Copysign(1, change[c])
		}
		co.Parameters = append(co.Parameters, s.free[c])
		co.Change = append(co.Change, sign*change[c]/largest)
	}
	return co
}

// size is what a change of parameter j is told in: its value, or its Scale
// when the caller gave one or the value is 0.
func (s *search) size(j int) float64 {
	if v := math.Abs(s.p[j]); v > 0 {
		return v
	}
	return s.pr.Scale[j]
}

// scatter returns the factor on (JᵀWJ)⁻¹ and sets Scatter. For a robust loss it
// is Huber's K²·[Σψ²/(m−n)]/[Σψ'/m]² (Huber 1981, eq. 7.6.5) with (JᵀJ)⁻¹
// approximated through the weighted one times the mean weight.
func (s *search) scatter(sum *Summary) float64 {
	m, dof := float64(s.pr.M), float64(sum.DoF)
	if s.weight == nil {
		if s.opt.SigmaKnown {
			return 1
		}
		if dof <= 0 {
			return math.Inf(1)
		}
		sum.Scatter = math.Sqrt(sum.ChiSquare / dof)
		return sq(sum.Scatter)
	}
	if dof <= 0 {
		return math.Inf(1)
	}
	loss := s.loss()
	var psi2, slope, slope2, weight float64
	for i, x := range sum.Residuals {
		u := sq(x / s.k)
		psi2 += sq(x * sum.Weights[i])
		g := loss.psiSlope(u)
		slope += g
		slope2 += g * g
		weight += sum.Weights[i]
	}
	slope /= m
	weight /= m
	spread := max(slope2/m-slope*slope, 0)
	if !(slope > 0) {
		return math.Inf(1)
	}
	k := 1 + float64(sum.Rank)/m*spread/(slope*slope)
	v := k * k * (psi2 / dof) / (slope * slope)
	sum.Scatter = math.Sqrt(v)
	return v * weight
}

// tell puts a combination into words, and finds the product of two parameters
// that stays determined.
func (sum *Summary) tell(co *Combination, verb string) {
	if len(co.Parameters) == 1 {
		co.Text = fmt.Sprintf("%s has no effect on the residuals that could be seen", sum.Names[co.Parameters[0]])
		return
	}
	list, names := make([]string, len(co.Parameters)), make([]string, len(co.Parameters))
	for i, j := range co.Parameters {
		list[i] = sum.Names[j]
		names[i] = fmt.Sprintf("%s by %+.2g", sum.Names[j], co.Change[i])
	}
	co.Text = fmt.Sprintf("%s %s: moving %s (relative to their sizes) together leaves the fit as it is",
		join(list), verb, join(names))
	if len(co.Parameters) != 2 {
		return
	}
	i, j := co.Parameters[0], co.Parameters[1]
	a, b := co.Change[0], co.Change[1]
	if a == 0 || b == 0 || sum.P[i] == 0 || sum.P[j] == 0 {
		return
	}
	// Along the direction d ln p_i = a, d ln p_j = b; p_i^b·p_j^−a stays. Signs and
	// size are chosen so that the larger exponent is +1.
	ea, eb := b, -a
	top := ea
	if math.Abs(eb) > math.Abs(ea) {
		top = eb
	}
	co.Kept = []float64{ea / top, eb / top}
	grad := make([]float64, len(sum.P))
	grad[i], grad[j] = co.Kept[0]/sum.P[i], co.Kept[1]/sum.P[j]
	co.UKept = sum.Of(grad)
	co.Text += fmt.Sprintf("; what is determined is %s^%.2g × %s^%.2g, to %.2g %%",
		sum.Names[i], co.Kept[0], sum.Names[j], co.Kept[1], 100*co.UKept)
}

func join(words []string) string {
	if len(words) < 2 {
		return strings.Join(words, "")
	}
	return strings.Join(words[:len(words)-1], ", ") + " and " + words[len(words)-1]
}

// Of returns the standard uncertainty of a function of the parameters with the
// gradient grad (length N). Along directions that could not be separated it
// counts nothing: the caller must know that the function does not depend on them.
func (sum *Summary) Of(grad []float64) float64 {
	n := len(sum.P)
	v := 0.0
	for i, gi := range grad {
		if gi == 0 {
			continue
		}
		for j, gj := range grad {
			v += gi * gj * sum.Cov[i*n+j]
		}
	}
	return math.Sqrt(max(v, 0))
}

// Correlation returns the N×N correlation matrix, row-major; 0 with held
// parameters, 1 on the diagonal.
func (sum *Summary) Correlation() []float64 {
	n := len(sum.P)
	out := make([]float64, n*n)
	for i := range n {
		for j := range n {
			if d := math.Sqrt(sum.Cov[i*n+i]) * math.Sqrt(sum.Cov[j*n+j]); d > 0 {
				out[i*n+j] = sum.Cov[i*n+j] / d
			}
		}
		out[i*n+i] = 1
	}
	return out
}

// String tells the summary in plain lines.
func (sum *Summary) String() string {
	var b strings.Builder
	state := "converged"
	if !sum.Converged {
		state = "NOT converged"
	}
	fmt.Fprintf(&b, "%s after %d iterations, %d evaluations: %s\n", state, sum.Iterations, sum.Evaluations, sum.Reason)
	fmt.Fprintf(&b, "χ² %.6g with %d degrees of freedom, rank %d\n", sum.ChiSquare, sum.DoF, sum.Rank)
	for j, name := range sum.Names {
		note := ""
		switch {
		case sum.Held[j]:
			note = "  (held)"
		case slices.Contains(sum.AtBound, j):
			note = "  (on its bound)"
		}
		fmt.Fprintf(&b, "  %s = %.8g ± %.2g%s\n", name, sum.P[j], sum.U[j], note)
	}
	for _, co := range sum.Inseparable {
		fmt.Fprintf(&b, "  not separable: %s\n", co.Text)
	}
	for _, co := range sum.Weak {
		fmt.Fprintf(&b, "  weak: %s\n", co.Text)
	}
	return b.String()
}
