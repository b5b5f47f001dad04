// Package leastsquares reconstructs by regularised least squares, for several delays at once: the real image f that
// minimises
//
//	Σ_s Σ_{m=-M..M} w_{s,|m|} |F_s(m) - S_s(m)|² + λ·penalty(f),   F_s(m) = v Σ_r f(r) exp(-i2π m·DeltaK n_s·r)
//
// over the voxels of the field of view, or, where the object reaches further, of a ball that holds it; v is the area or
// volume of a voxel. With density weights the first term is close to ∫(f - object)² within the reach of the data, so that
// λ is a share: 0.001 smooths next to nothing. A window multiplied into the weights makes its frequencies count less; it
// does not smooth the image.
//
// Conjugate gradients start from the gridded image and stop after a fixed number of iterations, before noise that the
// spokes hardly determine has grown. The result is quantitative: signal per mm² or mm³. Voxels outside the circle or
// sphere of the field of view are NaN.
//
// Promise: the image of a delay does not depend on which other delays are reconstructed with it. To add a penalty: one
// row in Penalties.
//
// Sources: Hestenes & Stiefel, Methods of conjugate gradients for solving linear systems, J. Res. Natl. Bur. Stand. 49
// (1952) 409; the normal operator is that of package nufft.
package leastsquares

import (
	"math"

	"torrloom/recon/fault"
)

// Settings of the reconstruction. The zero value is not valid; use Defaults.
type Settings struct {
	Penalty    string  // a row of Penalties
	Weight     float64 // λ, a share of the data term; 0 or more
	Edge       float64 // for "edges": the step between neighbours that counts as an edge, as a share of the image's height
	Iterations int     // of the conjugate gradients
}

const mostIterations = 200

// Defaults returns the Tikhonov penalty at 0.001 and ten iterations.
func Defaults() Settings {
	return Settings{Penalty: "tikhonov", Weight: 1e-3, Edge: 0.05, Iterations: 10}
}

// Check returns a bad-setting fault for a value that is not known or out of range.
func (s Settings) Check() error {
	if _, err := PenaltyNamed(s.Penalty); err != nil {
		return err
	}
	switch {
	case !(s.Weight >= 0) || math.IsInf(s.Weight, 0):
		return fault.New(fault.BadSetting, "recipe reconstruction.weight", "%g; the weight of the penalty is 0 or more", s.Weight)
	case !(s.Edge > 0 && s.Edge <= 1):
		return fault.New(fault.BadSetting, "recipe reconstruction.edge", "%g; a share above 0 and up to 1 of the image's height is needed", s.Edge)
	case s.Iterations < 1 || s.Iterations > mostIterations:
		return fault.New(fault.BadSetting, "recipe reconstruction.iterations", "%d iterations; use 1 to %d", s.Iterations, mostIterations)
	}
	return nil
}
