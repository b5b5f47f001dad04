package relax

import (
	"math"

	"torrloom/recon/acquisition"
)

// inversionRecovery leaves B free, because no pulse inverts completely: B/A is 2 only for a perfect one.
var inversionRecovery = Model{
	Name:     "inversion-recovery",
	Sequence: acquisition.InversionRecovery,
	RateName: "R1",
	Label:    "inversion recovery, free inversion",
	Formula:  "S(T) = A - B exp(-R1 T)",
	Curve:    inversionCurve{},
}

// inversionCurve is c = -exp(-R T).
type inversionCurve struct{}

func (inversionCurve) Offset() bool { return true }

func (inversionCurve) At(ratePerUS, delayUS float64) (c, first, second float64) {
	e := math.Exp(-ratePerUS * delayUS)
	return -e, delayUS * e, -delayUS * delayUS * e
}
