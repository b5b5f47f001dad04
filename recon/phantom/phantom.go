// Package phantom makes invented objects of ellipses and ellipsoids whose projections and k-space are known in closed
// form, and invented acquisitions of them. It is the measure of every reconstruction and the source of the demo.
//
// Promise: what a phantom yields is exact up to rounding; noise is added only where asked for, from a fixed seed.
package phantom

import (
	"math"

	"torrloom/recon/fault"
)

// Body is a shape of one material.
type Body struct {
	Name    string
	Shape   Shape
	Density float64 // signal per mm² or mm³
	R1PerUS float64
	R2PerUS float64
}

// Phantom is a set of bodies. Densities of bodies that overlap add up, unless the phantom was made by Nested.
type Phantom struct {
	Dim    int
	Bodies []Body

	parts []Body // what is summed: for a nested body also its surroundings with the opposite sign
}

// Sum returns the phantom in which overlapping bodies add up.
func Sum(dim int, bodies ...Body) *Phantom {
	return &Phantom{Dim: dim, Bodies: bodies, parts: bodies}
}

// Nested returns the phantom in which each body replaces the material of the body it lies in: the last earlier body
// that holds it.
//
// Errors: bad-setting when a body reaches across the rim of an earlier one.
func Nested(dim int, bodies ...Body) (*Phantom, error) {
	p := &Phantom{Dim: dim, Bodies: bodies}
	for i, b := range bodies {
		p.parts = append(p.parts, b)
		for j := i - 1; j >= 0; j-- {
			inside, outside := rimInside(b.Shape, bodies[j].Shape)
			if inside && outside {
				return nil, fault.New(fault.BadSetting, "phantom", "body %q crosses the rim of %q; it must lie inside or apart", b.Name, bodies[j].Name)
			}
			if inside {
				surroundings := bodies[j]
				surroundings.Shape, surroundings.Density = b.Shape, -surroundings.Density
				p.parts = append(p.parts, surroundings)
				break
			}
		}
	}
	return p, nil
}

// rimInside tells whether some and whether not all points of the rim of inner lie in outer, over a dense set of rim
// points.
func rimInside(inner, outer Shape) (inside, outside bool) {
	for i := range 24 {
		for j := range 24 {
			sinP, cosP := math.Sincos(2 * math.Pi * float64(i) / 24)
			z := 0.0
			if inner.Dim == 3 {
				z = -1 + (2*float64(j)+1)/24
			}
			r := math.Sqrt(1 - z*z)
			v := [3]float64{inner.SemiMM[0] * r * cosP, inner.SemiMM[1] * r * sinP, inner.SemiMM[2] * z}
			sin, cos := math.Sincos(inner.AngleDeg * math.Pi / 180)
			point := [3]float64{
				inner.CentreMM[0] + cos*v[0] - sin*v[1],
				inner.CentreMM[1] + sin*v[0] + cos*v[1],
				inner.CentreMM[2] + v[2],
			}
			if outer.Contains(point) {
				inside = true
			} else {
				outside = true
			}
		}
	}
	return inside, outside
}

// At returns the last body that holds the point r, and whether there is one: in a nested phantom, the material there.
func (p *Phantom) At(r [3]float64) (Body, bool) {
	for i := len(p.Bodies) - 1; i >= 0; i-- {
		if p.Bodies[i].Shape.Contains(r) {
			return p.Bodies[i], true
		}
	}
	return Body{}, false
}

// Density returns the density at r.
func (p *Phantom) Density(r [3]float64) float64 {
	sum := 0.0
	for _, b := range p.parts {
		if b.Shape.Contains(r) {
			sum += b.Density
		}
	}
	return sum
}

// Projection returns the line or plane integral of the density at n·r = x.
func (p *Phantom) Projection(n [3]float64, x float64) float64 {
	sum := 0.0
	for _, b := range p.parts {
		sum += b.Density * b.Shape.Projection(n, x)
	}
	return sum
}

// Transform returns ∫ density·exp(-i2π k·r) dr.
func (p *Phantom) Transform(k [3]float64) complex128 {
	var sum complex128
	for _, b := range p.parts {
		sum += complex(b.Density, 0) * b.Shape.Transform(k)
	}
	return sum
}
