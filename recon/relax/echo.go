package relax

import (
	"math"

	"torrloom/recon/acquisition"
)

// echoDecay has no offset: an echo decays to zero, and the baseline has been taken off before the image.
var echoDecay = Model{
	Name:     "echo-decay",
	Sequence: acquisition.EchoDecay,
	RateName: "R2",
	Label:    "echo decay",
	Formula:  "S(t) = A exp(-R2 t)",
	Curve:    echoCurve{},
}

// echoCurve is c = exp(-R t), t the total echo time 2τ.
type echoCurve struct{}

func (echoCurve) Offset() bool { return false }

func (echoCurve) At(ratePerUS, delayUS float64) (c, first, second float64) {
	e := math.Exp(-ratePerUS * delayUS)
	return e, -delayUS * e, delayUS * delayUS * e
}
