package ode

// stagesOfTwo is stages for two equations, with everything in registers: one
// swinging part is the commonest model of all.
func (s *Solver) stagesOfTwo(h float64) {
	t, rhs := s.t, s.rhs
	y0, y1 := s.y[0], s.y[1]
	w := s.w[:2]
	k1, k2, k3, k4, k5, k6 := s.k1[:2], s.k2[:2], s.k3[:2], s.k4[:2], s.k5[:2], s.k6[:2]
	k7, k8, k9, k10, k11, k12 := s.k7[:2], s.k8[:2], s.k9[:2], s.k10[:2], s.k11[:2], s.k12[:2]
	s.stats.Evaluations += 11
	w[0] = y0 + h*(a2x1*k1[0])
	w[1] = y1 + h*(a2x1*k1[1])
	rhs(t+c2*h, w, k2)
	w[0] = y0 + h*(a3x1*k1[0]+a3x2*k2[0])
	w[1] = y1 + h*(a3x1*k1[1]+a3x2*k2[1])
	rhs(t+c3*h, w, k3)
	w[0] = y0 + h*(a4x1*k1[0]+a4x3*k3[0])
	w[1] = y1 + h*(a4x1*k1[1]+a4x3*k3[1])
	rhs(t+c4*h, w, k4)
	w[0] = y0 + h*(a5x1*k1[0]+a5x3*k3[0]+a5x4*k4[0])
	w[1] = y1 + h*(a5x1*k1[1]+a5x3*k3[1]+a5x4*k4[1])
	rhs(t+c5*h, w, k5)
	w[0] = y0 + h*(a6x1*k1[0]+a6x4*k4[0]+a6x5*k5[0])
	w[1] = y1 + h*(a6x1*k1[1]+a6x4*k4[1]+a6x5*k5[1])
	rhs(t+c6*h, w, k6)
	w[0] = y0 + h*(a7x1*k1[0]+a7x4*k4[0]+a7x5*k5[0]+a7x6*k6[0])
	w[1] = y1 + h*(a7x1*k1[1]+a7x4*k4[1]+a7x5*k5[1]+a7x6*k6[1])
	rhs(t+c7*h, w, k7)
	w[0] = y0 + h*(a8x1*k1[0]+a8x4*k4[0]+a8x5*k5[0]+a8x6*k6[0]+a8x7*k7[0])
	w[1] = y1 + h*(a8x1*k1[1]+a8x4*k4[1]+a8x5*k5[1]+a8x6*k6[1]+a8x7*k7[1])
	rhs(t+c8*h, w, k8)
	w[0] = y0 + h*(a9x1*k1[0]+a9x4*k4[0]+a9x5*k5[0]+a9x6*k6[0]+a9x7*k7[0]+a9x8*k8[0])
	w[1] = y1 + h*(a9x1*k1[1]+a9x4*k4[1]+a9x5*k5[1]+a9x6*k6[1]+a9x7*k7[1]+a9x8*k8[1])
	rhs(t+c9*h, w, k9)
	w[0] = y0 + h*(a10x1*k1[0]+a10x4*k4[0]+a10x5*k5[0]+a10x6*k6[0]+a10x7*k7[0]+a10x8*k8[0]+a10x9*k9[0])
	w[1] = y1 + h*(a10x1*k1[1]+a10x4*k4[1]+a10x5*k5[1]+a10x6*k6[1]+a10x7*k7[1]+a10x8*k8[1]+a10x9*k9[1])
	rhs(t+c10*h, w, k10)
	w[0] = y0 + h*(a11x1*k1[0]+a11x4*k4[0]+a11x5*k5[0]+a11x6*k6[0]+a11x7*k7[0]+a11x8*k8[0]+a11x9*k9[0]+a11x10*k10[0])
	w[1] = y1 + h*(a11x1*k1[1]+a11x4*k4[1]+a11x5*k5[1]+a11x6*k6[1]+a11x7*k7[1]+a11x8*k8[1]+a11x9*k9[1]+a11x10*k10[1])
	rhs(t+c11*h, w, k11)
	w[0] = y0 + h*(a12x1*k1[0]+a12x4*k4[0]+a12x5*k5[0]+a12x6*k6[0]+a12x7*k7[0]+a12x8*k8[0]+a12x9*k9[0]+a12x10*k10[0]+a12x11*k11[0])
	w[1] = y1 + h*(a12x1*k1[1]+a12x4*k4[1]+a12x5*k5[1]+a12x6*k6[1]+a12x7*k7[1]+a12x8*k8[1]+a12x9*k9[1]+a12x10*k10[1]+a12x11*k11[1])
	rhs(t+h, w, k12)
	s.yNew[0] = y0 + h*(b1*k1[0]+b6*k6[0]+b7*k7[0]+b8*k8[0]+b9*k9[0]+b10*k10[0]+b11*k11[0]+b12*k12[0])
	s.yNew[1] = y1 + h*(b1*k1[1]+b6*k6[1]+b7*k7[1]+b8*k8[1]+b9*k9[1]+b10*k10[1]+b11*k11[1]+b12*k12[1])
}
