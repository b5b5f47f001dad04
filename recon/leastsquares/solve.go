package leastsquares

import (
	"math"

	"torrloom/recon/nufft"
)

// Point is one point of the curve of convergence of one delay. Both are shares of what an image of zeros has.
type Point struct {
	Objective float64 `json:"objective"` // what is minimised, penalty included; never rises
	Residual  float64 `json:"residual"`  // root of the data term: the part of the measured signal that the image does not explain
}

// solver runs conjugate gradients for a group of delays in step. Vectors are [supported voxel][column].
//
// The step lengths of a delay are worked out from its own image and applied to its noise as well: it sees the
// same polynomial in the same operator, which is all that happens to noise in the image as long as it is too weak to change
// the steps.
type solver struct {
	p      *problem
	delays int
	width  int
	rule   rule
	work   *nufft.Work[float32]
	box    []float32
	energy []float64 // [delay]

	right, image, residual, direction, applied []float32
	square                                     []float64 // [delay] |residual|²
}

func newSolver(p *problem, right []float32, energy []float64, rule rule) *solver {
	s := &solver{p: p, delays: len(energy), width: p.columns(len(energy)), rule: rule, energy: energy, right: right}
	s.work = p.operator.NewWork(s.width / 2)
	s.box = make([]float32, p.n[0]*p.n[1]*p.n[2]*s.width)
	s.image = append([]float32(nil), right...)
	s.residual, s.direction, s.applied = make([]float32, len(right)), make([]float32, len(right)), make([]float32, len(right))
	return s
}

// begin renews the rule and starts afresh from the image so far.
func (s *solver) begin() {
	s.rule.renew(s.image)
	s.apply(s.image, nil)
	for i, v := range s.right {
		s.residual[i] = v - s.applied[i]
	}
	copy(s.direction, s.residual)
	s.square = s.p.dot(s.residual, s.residual, s.delays)
}

// apply puts (E*wE + λR) f into applied.
func (s *solver) apply(f []float32, progress func(float64)) {
	s.p.scatter(s.box, f, s.width)
	s.work.Apply(s.box, progress)
	s.p.gather(s.applied, s.box, s.width)
	s.rule.add(s.applied, f)
}

// step does one iteration.
func (s *solver) step(progress func(float64)) {
	s.apply(s.direction, progress)
	length := s.perColumn(ratio(s.square, s.p.dot(s.direction, s.applied, s.delays)))
	s.addScaled(s.image, s.direction, length, 1)
	s.addScaled(s.residual, s.applied, length, -1)
	square := s.p.dot(s.residual, s.residual, s.delays)
	turn := s.perColumn(ratio(square, s.square))
	for at := 0; at < len(s.direction); at += s.width {
		d, r := s.direction[at:at+s.width], s.residual[at:at+s.width]
		for c, t := range turn {
			d[c] = r[c] + t*d[c]
		}
	}
	s.square = square
}

// ratio returns a/b per delay, and 0 where there is nothing left to divide.
func ratio(a, b []float64) []float64 {
	out := make([]float64, len(a))
	for d := range a {
		if b[d] > 0 {
			out[d] = a[d] / b[d]
		}
	}
	return out
}

// perColumn repeats a number per delay for the delay's noise.
func (s *solver) perColumn(perDelay []float64) []float32 {
	out := make([]float32, s.width)
	for c := range s.p.perDelay * s.delays {
		out[c] = float32(perDelay[c/s.p.perDelay])
	}
	return out
}

func (s *solver) addScaled(to, from []float32, scale []float32, sign float32) {
	for at := 0; at < len(to); at += s.width {
		t, f := to[at:at+s.width], from[at:at+s.width]
		for c, w := range scale {
			t[c] += sign * w * f[c]
		}
	}
}

// point returns where the image so far stands, per delay. With residual = right - E*wE f - λR f,
// the data term Σ w|F-S|² is Σ w|S|² - <f, right + residual + λR f>.
func (s *solver) point() []Point {
	clear(s.applied)
	s.rule.add(s.applied, s.image)
	right, residual := s.p.dot(s.image, s.right, s.delays), s.p.dot(s.image, s.residual, s.delays)
	quadratic, value := s.p.dot(s.image, s.applied, s.delays), s.rule.value(s.image)
	out := make([]Point, s.delays)
	for d := range out {
		data := s.energy[d] - right[d] - residual[d] - quadratic[d]
		if s.energy[d] > 0 {
			out[d] = Point{Objective: (data + value[d]) / s.energy[d], Residual: math.Sqrt(math.Max(0, data) / s.energy[d])}
		}
	}
	return out
}
