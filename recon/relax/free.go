package relax

import "torrloom/recon/acquisition"

// freeDecay describes single-point images along the sample time: t counts from the pulse, and every voxel falls with the
// rate of its own line width. It shares the curve of the echo decay, and like that has no offset.
var freeDecay = Model{
	Name:     "free-decay",
	Sequence: acquisition.FreeDecay,
	RateName: "R2*",
	Label:    "free decay",
	Formula:  "S(t) = A exp(-R2* t)",
	Curve:    echoCurve{},
}
