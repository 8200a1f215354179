package ode

import "math"

// stages runs the stages of one step of size h and leaves the new state in
// s.yNew. s.k1 holds f(t, y).
func (s *Solver) stages(h float64) {
	if s.n == 2 {
		s.stagesOfTwo(h)
		return
	}
	n, t := s.n, s.t
	y, w := s.y[:n], s.w[:n]
	k1, k2, k3, k4, k5, k6, k7, k8, k9, k10, k11, k12 := s.k1[:n], s.k2[:n], s.k3[:n], s.k4[:n], s.k5[:n], s.k6[:n], s.k7[:n], s.k8[:n], s.k9[:n], s.k10[:n], s.k11[:n], s.k12[:n]
	for i := range w {
		w[i] = y[i] + h*(a2x1*k1[i])
	}
	s.f(t+c2*h, w, k2)
	for i := range w {
		w[i] = y[i] + h*(a3x1*k1[i]+a3x2*k2[i])
	}
	s.f(t+c3*h, w, k3)
	for i := range w {
		w[i] = y[i] + h*(a4x1*k1[i]+a4x3*k3[i])
	}
	s.f(t+c4*h, w, k4)
	for i := range w {
		w[i] = y[i] + h*(a5x1*k1[i]+a5x3*k3[i]+a5x4*k4[i])
	}
	s.f(t+c5*h, w, k5)
	for i := range w {
		w[i] = y[i] + h*(a6x1*k1[i]+a6x4*k4[i]+a6x5*k5[i])
	}
	s.f(t+c6*h, w, k6)
	for i := range w {
		w[i] = y[i] + h*(a7x1*k1[i]+a7x4*k4[i]+a7x5*k5[i]+a7x6*k6[i])
	}
	s.f(t+c7*h, w, k7)
	for i := range w {
		w[i] = y[i] + h*(a8x1*k1[i]+a8x4*k4[i]+a8x5*k5[i]+a8x6*k6[i]+a8x7*k7[i])
	}
	s.f(t+c8*h, w, k8)
	for i := range w {
		w[i] = y[i] + h*(a9x1*k1[i]+a9x4*k4[i]+a9x5*k5[i]+a9x6*k6[i]+a9x7*k7[i]+a9x8*k8[i])
	}
	s.f(t+c9*h, w, k9)
	for i := range w {
		w[i] = y[i] + h*(a10x1*k1[i]+a10x4*k4[i]+a10x5*k5[i]+a10x6*k6[i]+a10x7*k7[i]+a10x8*k8[i]+a10x9*k9[i])
	}
	s.f(t+c10*h, w, k10)
	for i := range w {
		w[i] = y[i] + h*(a11x1*k1[i]+a11x4*k4[i]+a11x5*k5[i]+a11x6*k6[i]+a11x7*k7[i]+a11x8*k8[i]+a11x9*k9[i]+a11x10*k10[i])
	}
	s.f(t+c11*h, w, k11)
	for i := range w {
		w[i] = y[i] + h*(a12x1*k1[i]+a12x4*k4[i]+a12x5*k5[i]+a12x6*k6[i]+a12x7*k7[i]+a12x8*k8[i]+a12x9*k9[i]+a12x10*k10[i]+a12x11*k11[i])
	}
	s.f(t+h, w, k12)
	yNew := s.yNew[:n]
	for i := range yNew {
		yNew[i] = y[i] + h*(b1*k1[i]+b6*k6[i]+b7*k7[i]+b8*k8[i]+b9*k9[i]+b10*k10[i]+b11*k11[i]+b12*k12[i])
	}
}

// errorOf returns the error of the step just tried in units of the tolerance:
// the step is good when it is at most 1. Hairer et al., equation (10.17).
func (s *Solver) errorOf(h float64) float64 {
	n := s.n
	y, yNew := s.y[:n], s.yNew[:n]
	k1, k6, k7, k8, k9, k10, k11, k12 := s.k1[:n], s.k6[:n], s.k7[:n], s.k8[:n], s.k9[:n], s.k10[:n], s.k11[:n], s.k12[:n]
	var sum5, sum3 float64
	for i := range y {
		scale := 1 / s.scale(i, y[i], yNew[i])
		five := (e5x1*k1[i] + e5x6*k6[i] + e5x7*k7[i] + e5x8*k8[i] + e5x9*k9[i] + e5x10*k10[i] + e5x11*k11[i] + e5x12*k12[i]) * scale
		three := ((b1-e3x1)*k1[i] + b6*k6[i] + b7*k7[i] + b8*k8[i] + (b9-e3x9)*k9[i] + b10*k10[i] + b11*k11[i] + (b12-e3x12)*k12[i]) * scale
		sum5 += five * five
		sum3 += three * three
	}
	below := sum5 + 0.01*sum3
	if below == 0 {
		return 0
	}
	return math.Abs(h) * sum5 / math.Sqrt(below*float64(n))
}

// prepareDense runs the three further stages of the dense output for the step
// from (tOld, yOld) to (t, y) and stores its eight coefficient vectors.
// k1 to k12 are those of the step, s.kNew its final derivative.
func (s *Solver) prepareDense() {
	if s.dense {
		return
	}
	n, t, h := s.n, s.tOld, s.t-s.tOld
	y, yNew, w := s.yOld[:n], s.y[:n], s.w[:n]
	k1 := s.kOld[:n] // the first stage of the step that was taken
	k6, k7, k8, k9, k10, k11, k12, k14, k15, k16 := s.k6[:n], s.k7[:n], s.k8[:n], s.k9[:n], s.k10[:n], s.k11[:n], s.k12[:n], s.k14[:n], s.k15[:n], s.k16[:n]
	k13 := s.k1[:n] // the derivative at its end is the first stage of the next
	for i := range w {
		w[i] = y[i] + h*(a14x1*k1[i]+a14x7*k7[i]+a14x8*k8[i]+a14x9*k9[i]+a14x10*k10[i]+a14x11*k11[i]+a14x12*k12[i]+a14x13*k13[i])
	}
	s.f(t+c14*h, w, k14)
	for i := range w {
		w[i] = y[i] + h*(a15x1*k1[i]+a15x6*k6[i]+a15x7*k7[i]+a15x8*k8[i]+a15x11*k11[i]+a15x12*k12[i]+a15x13*k13[i]+a15x14*k14[i])
	}
	s.f(t+c15*h, w, k15)
	for i := range w {
		w[i] = y[i] + h*(a16x1*k1[i]+a16x6*k6[i]+a16x7*k7[i]+a16x8*k8[i]+a16x9*k9[i]+a16x13*k13[i]+a16x14*k14[i]+a16x15*k15[i])
	}
	s.f(t+c16*h, w, k16)
	for i := range w {
		diff := yNew[i] - y[i]
		bspl := h*k1[i] - diff
		c := s.coef[8*i : 8*i+8 : 8*i+8]
		c[0] = y[i]
		c[1] = diff
		c[2] = bspl
		c[3] = diff - h*k13[i] - bspl
		c[4] = h * (d4x1*k1[i] + d4x6*k6[i] + d4x7*k7[i] + d4x8*k8[i] + d4x9*k9[i] + d4x10*k10[i] + d4x11*k11[i] + d4x12*k12[i] + d4x13*k13[i] + d4x14*k14[i] + d4x15*k15[i] + d4x16*k16[i])
		c[5] = h * (d5x1*k1[i] + d5x6*k6[i] + d5x7*k7[i] + d5x8*k8[i] + d5x9*k9[i] + d5x10*k10[i] + d5x11*k11[i] + d5x12*k12[i] + d5x13*k13[i] + d5x14*k14[i] + d5x15*k15[i] + d5x16*k16[i])
		c[6] = h * (d6x1*k1[i] + d6x6*k6[i] + d6x7*k7[i] + d6x8*k8[i] + d6x9*k9[i] + d6x10*k10[i] + d6x11*k11[i] + d6x12*k12[i] + d6x13*k13[i] + d6x14*k14[i] + d6x15*k15[i] + d6x16*k16[i])
		c[7] = h * (d7x1*k1[i] + d7x6*k6[i] + d7x7*k7[i] + d7x8*k8[i] + d7x9*k9[i] + d7x10*k10[i] + d7x11*k11[i] + d7x12*k12[i] + d7x13*k13[i] + d7x14*k14[i] + d7x15*k15[i] + d7x16*k16[i])
	}
	s.dense = true
}
