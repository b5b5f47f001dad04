package condition

import (
	"math"
	"math/cmplx"

	"torrloom/recon/acquisition"
)

// ProjectionOf returns the projection of one shot at one delay over position, for looking at: unfiltered, at 160
// positions over 1.4 times the extent of the object (or over the recorded positions of a projection).
//
//	p(x) = Re Σ_j s_j exp(i2π k_j x) dk
//
// A zero-gradient shot has no projection; both slices are then empty. Units: mm, and signal per mm or mm².
func ProjectionOf(a *acquisition.Acquisition, s Settings, c *Constants, delay, shot int) (positionMM, value []float64, err error) {
	if err := checkUsable(a, s); err != nil {
		return nil, nil, err
	}
	corrector, trace := NewCorrector(a, s, c, []int{delay}), make([]complex64, a.Samples)
	corrector.Load(trace, delay, shot)
	zero := corrector.ZeroSample(shot)
	if a.Domain == acquisition.Projection {
		for j, v := range trace {
			positionMM = append(positionMM, (float64(j)-zero)*a.PositionStepMM)
			value = append(value, float64(real(v)))
		}
		return positionMM, value, nil
	}
	dk := acquisition.KPerNS(a.Strength(shot), a.DwellNS)
	if dk == 0 {
		return nil, nil, nil
	}
	const positions = 160
	turn := cmplx.Rect(dk, -c.PhaseRad)
	reach := math.Min(0.7*c.ExtentMM, a.AliasFreeMM()/2)
	for i := range positions + 1 {
		x := reach * (2*float64(i)/positions - 1)
		var sum complex128
		for j, v := range trace {
			sum += complex128(v) * cmplx.Rect(1, 2*math.Pi*dk*(float64(j)-zero)*x)
		}
		positionMM, value = append(positionMM, x), append(value, real(sum*turn))
	}
	return positionMM, value, nil
}
