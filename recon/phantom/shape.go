package phantom

import "math"

// Shape is an ellipse (Dim 2) or ellipsoid (Dim 3). The semi-axes lie along x, y, z before the shape is turned by
// AngleDeg counter-clockwise about z; the centre is not turned.
type Shape struct {
	Dim      int
	CentreMM [3]float64
	SemiMM   [3]float64 // SemiMM[2] is unused in 2D
	AngleDeg float64
}

// Measure returns the area πab or the volume 4π/3·abc.
func (s Shape) Measure() float64 {
	if s.Dim == 2 {
		return math.Pi * s.SemiMM[0] * s.SemiMM[1]
	}
	return 4 * math.Pi / 3 * s.SemiMM[0] * s.SemiMM[1] * s.SemiMM[2]
}

// Contains tells whether the point r lies inside or on the rim.
func (s Shape) Contains(r [3]float64) bool {
	v := s.turn([3]float64{r[0] - s.CentreMM[0], r[1] - s.CentreMM[1], r[2] - s.CentreMM[2]})
	sum := 0.0
	for i := range s.Dim {
		sum += v[i] / s.SemiMM[i] * v[i] / s.SemiMM[i]
	}
	return sum <= 1
}

// turn returns v in the frame of the semi-axes.
func (s Shape) turn(v [3]float64) [3]float64 {
	sin, cos := math.Sincos(s.AngleDeg * math.Pi / 180)
	return [3]float64{cos*v[0] + sin*v[1], cos*v[1] - sin*v[0], v[2]}
}

// stretched returns |(a₁v₁, a₂v₂, a₃v₃)| of v in the frame of the semi-axes: the half width of the shape's shadow along
// a unit vector, or the argument of its transform along k.
func (s Shape) stretched(v [3]float64) float64 {
	v = s.turn(v)
	sum := 0.0
	for i := range s.Dim {
		sum += s.SemiMM[i] * v[i] * s.SemiMM[i] * v[i]
	}
	return math.Sqrt(sum)
}

func (s Shape) alongCentre(v [3]float64) float64 {
	return v[0]*s.CentreMM[0] + v[1]*s.CentreMM[1] + v[2]*s.CentreMM[2]
}

// Projection returns the integral over the line (2D) or plane (3D) n·r = x of the shape with density 1, n a unit vector:
//
//	2D: 2ab √(A²-u²)/A²,   3D: πabc (1-u²/A²)/A,   u = x - n·centre, 0 for |u| > A
//
// with A the half width of the shape along n. Units: mm, mm². Exact.
// Source: Kak & Slaney, Principles of Computerized Tomographic Imaging (1988), chapter 3 (2D); the same step in 3D.
func (s Shape) Projection(n [3]float64, x float64) float64 {
	a := s.stretched(n)
	u := (x - s.alongCentre(n)) / a
	if u*u >= 1 {
		return 0
	}
	if s.Dim == 2 {
		return 2 * s.SemiMM[0] * s.SemiMM[1] * math.Sqrt(1-u*u) / a
	}
	return math.Pi * s.SemiMM[0] * s.SemiMM[1] * s.SemiMM[2] * (1 - u*u) / a
}

// Transform returns ∫ exp(-i2π k·r) dr over the shape, k in cycles/mm:
//
//	2D: ab J₁(2πK)/K,   3D: 4π abc (sin q - q cos q)/q³ with q = 2πK
//
// times exp(-i2π k·centre), with K = |(a₁k₁, a₂k₂, a₃k₃)| in the frame of the semi-axes. Units: mm², mm³. Exact.
func (s Shape) Transform(k [3]float64) complex128 {
	q := 2 * math.Pi * s.stretched(k)
	sin, cos := math.Sincos(-2 * math.Pi * s.alongCentre(k))
	return complex(cos, sin) * complex(s.Measure()*s.form(q), 0)
}

// form returns the transform over its value at the origin. Below 0.1 the closed forms cancel and a series, exact there
// to 1e-14, takes their place.
func (s Shape) form(q float64) float64 {
	q2 := q * q
	switch {
	case s.Dim == 2 && q < 0.1:
		return 1 - q2/8*(1-q2/24*(1-q2/48))
	case s.Dim == 2:
		return 2 * math.J1(q) / q
	case q < 0.1:
		return 1 - q2/10*(1-q2/28*(1-q2/54))
	}
	sin, cos := math.Sincos(q)
	return 3 * (sin - q*cos) / (q2 * q)
}
