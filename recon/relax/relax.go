// Package relax turns the images of an acquisition, one per delay, into a relaxation rate per voxel.
//
// Every model is a curve with one unknown rate R, scaled by an unknown amplitude and, for some, standing on an unknown
// constant. The amplitudes are linear, so they are solved exactly inside and only R is searched (variable projection:
// Golub & Pereyra, SIAM Journal on Numerical Analysis 10, 1973, 413-432). The fit is the least-squares fit, weighted by
// the noise of each delay.
//
// All members keep one promise: a voxel gets the rate with the least sum of squares within the rate range, or it gets a
// Status that says why there is none, and NaN for its numbers. Nothing is guessed, clipped or filled.
//
// A new model is one file with a type that is a Curve, and one row in Models.
package relax

import (
	"slices"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// Model is one relation between signal, delay T and rate R:
//
//	S(T) = A c(R, T)             without an offset
//	S(T) = A + B c(R, T)         with one
//
// A right answer has A > 0 and, with an offset, B > 0.
type Model struct {
	Name     string               // the name a recipe uses
	Sequence acquisition.Sequence // the measurements it describes
	RateName string               // "R1" or "R2"
	Label    string               // for a form
	Formula  string               // for a form and a report
	Curve    Curve
}

// Curve is the part of a model that depends on the rate. A scale of the curve does not matter, its sign does: it is
// chosen so that the factor in front is positive.
type Curve interface {
	// Offset tells whether a constant is fitted beside the curve.
	Offset() bool
	// At returns c(R, T) and its first and second derivative with respect to R.
	// Units: R in 1/µs, T in µs.
	At(ratePerUS, delayUS float64) (c, first, second float64)
}

// Models lists every model. The first row of a sequence is the one used unless a recipe names another.
var Models = []Model{inversionRecovery, saturationRecovery, echoDecay, freeDecay}

// Named returns the model with that name.
//
// Errors: bad-setting when there is none.
func Named(name string) (Model, error) {
	at := slices.IndexFunc(Models, func(m Model) bool { return m.Name == name })
	if at < 0 {
		return Model{}, fault.New(fault.BadSetting, "model", "%q is not a known rate model; use one of %s", name, names())
	}
	return Models[at], nil
}

// For returns the first model that describes a sequence.
//
// Errors: unsupported when there is none.
func For(sequence acquisition.Sequence) (Model, error) {
	at := slices.IndexFunc(Models, func(m Model) bool { return m.Sequence == sequence })
	if at < 0 {
		return Model{}, fault.New(fault.Unsupported, "sequence", "no rate model describes %q; the known models are %s", sequence, names())
	}
	return Models[at], nil
}

func names() string {
	var list []string
	for _, m := range Models {
		list = append(list, m.Name)
	}
	return strings.Join(list, ", ")
}

// Parameters returns the number of unknowns: the rate, the amplitude and, with an offset, B.
func (m Model) Parameters() int {
	if m.Curve.Offset() {
		return 3
	}
	return 2
}

// Signal returns S(T) for known parameters. A model without an offset ignores inverted.
func (m Model) Signal(ratePerUS, amplitude, inverted, delayUS float64) float64 {
	c, _, _ := m.Curve.At(ratePerUS, delayUS)
	if m.Curve.Offset() {
		return amplitude + inverted*c
	}
	return amplitude * c
}
