package relax

import (
	"math"

	"torrloom/recon/acquisition"
)

// saturationRecovery takes the saturation as complete: no signal is left at T = 0.
var saturationRecovery = Model{
	Name:     "saturation-recovery",
	Sequence: acquisition.SaturationRecovery,
	RateName: "R1",
	Label:    "saturation recovery",
	Formula:  "S(T) = A (1 - exp(-R1 T))",
	Curve:    saturationCurve{},
}

// saturationCurve is c = 1 - exp(-R T).
type saturationCurve struct{}

func (saturationCurve) Offset() bool { return false }

func (saturationCurve) At(ratePerUS, delayUS float64) (c, first, second float64) {
	e := math.Exp(-ratePerUS * delayUS)
	// Expm1 keeps the digits that 1 - e loses at slow rates.
	return -math.Expm1(-ratePerUS * delayUS), delayUS * e, -delayUS * delayUS * e
}
