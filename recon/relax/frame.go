package relax

import "math"

// A frame describes the curve at one rate as a direction in the space of whitened delays, where each delay is divided
// by its noise and every distance is a number of standard deviations. With x = ln R and ĉ the whitened curve less its
// part along the whitened constant (if the model has an offset):
//
//	u = ĉ/|ĉ|,   du = ∂u/∂x,   d2u = ∂²u/∂x²
//
// The data z then has f = u·z along the curve, and the least sum of squares is where f² is greatest, that is f' = du·z = 0.
// Because u has unit length and stays normal to the constant, the tangents u, du and the constant are normal to each
// other: the Fisher matrix is diagonal, and the Cramér-Rao bound of x is 1/(|f| |du|).
type frame struct {
	u, du, d2u  []float64
	norm        float64 // |ĉ|
	sensitivity float64 // |du|

	// A = offset coefficient · offsetUnit + f · perF, and AmplitudeSE depends on the rate alone.
	perF, amplitudeSE float64
}

func newFrame(delays int) *frame {
	return &frame{u: make([]float64, delays), du: make([]float64, delays), d2u: make([]float64, delays)}
}

// leastNorm keeps the square of the norm away from the subnormal numbers, where it loses its digits.
const leastNorm = 1e-140

// frameAt fills fr for x = ln R. It returns false when the curve has vanished from every delay.
func (f *Fitter) frameAt(x float64, fr *frame) bool {
	f.curveAt(math.Exp(x), fr)
	along, alongFirst := f.takeOffset(fr.u), f.takeOffset(fr.du)
	f.takeOffset(fr.d2u)
	fr.norm = math.Sqrt(dot(fr.u, fr.u))
	if !(fr.norm > leastNorm) {
		return false
	}
	growth := fr.turn()
	f.amplitudeTerms(fr, growth, along, alongFirst)
	return true
}

// curveAt puts the whitened curve and its derivatives with respect to ln R into u, du, d2u.
func (f *Fitter) curveAt(rate float64, fr *frame) {
	for d, t := range f.delayUS {
		c, first, second := f.model.Curve.At(rate, t)
		w := f.rootWeight[d]
		fr.u[d] = w * c
		fr.du[d] = w * rate * first
		fr.d2u[d] = w * rate * (first + rate*second)
	}
}

// takeOffset removes from v its part along the constant and returns the length of that part. It does so twice, because
// a slow curve is nearly constant and the first pass leaves a remainder of rounding.
func (f *Fitter) takeOffset(v []float64) float64 {
	if f.offset == nil {
		return 0
	}
	part := remove(v, f.offset)
	return part + remove(v, f.offset)
}

// turn makes u a unit vector and du, d2u its derivatives, from the curve ĉ and its derivatives. It returns the relative
// growth of the length, |ĉ|'/|ĉ|.
func (fr *frame) turn() float64 {
	scale(fr.u, 1/fr.norm)
	scale(fr.du, 1/fr.norm)
	scale(fr.d2u, 1/fr.norm)
	growth := remove(fr.du, fr.u)
	growth += remove(fr.du, fr.u)
	remove(fr.d2u, fr.u)
	squared := dot(fr.du, fr.du)
	for d := range fr.d2u {
		fr.d2u[d] -= 2*growth*fr.du[d] + squared*fr.u[d]
	}
	fr.sensitivity = math.Sqrt(squared)
	return growth
}

// amplitudeTerms finds how A and B follow from the coordinates, and the Cramér-Rao bound of A by the same map: with
// A = f·h(x) the bound is h² + (h'/|du|)², and an offset adds its own variance.
func (f *Fitter) amplitudeTerms(fr *frame, growth, along, alongFirst float64) {
	fr.perF = 1 / fr.norm
	slope := -growth / fr.norm
	offsetVariance := 0.0
	if f.offset != nil {
		fr.perF = -along * f.offsetUnit / fr.norm
		slope = (along*growth - alongFirst) * f.offsetUnit / fr.norm
		offsetVariance = f.offsetUnit * f.offsetUnit
	}
	tilt := slope / fr.sensitivity
	fr.amplitudeSE = math.Sqrt(offsetVariance + fr.perF*fr.perF + tilt*tilt)
}

func dot(a, b []float64) float64 {
	sum := 0.0
	for i, v := range a {
		sum += v * b[i]
	}
	return sum
}

func scale(v []float64, by float64) {
	for i := range v {
		v[i] *= by
	}
}

// remove takes from v its part along the unit vector and returns that part's length.
func remove(v, unit []float64) float64 {
	part := dot(v, unit)
	for i := range v {
		v[i] -= part * unit[i]
	}
	return part
}
