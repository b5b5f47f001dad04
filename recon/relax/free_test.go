package relax

import (
	"math"
	"testing"
)

// The logarithm of an exponential over evenly spaced times is a straight line, so that without noise rate and amplitude
// follow from any two of the points.
func TestFreeDecayIsTheLineOfLogarithms(t *testing.T) {
	times := []float64{0.8, 1.0, 1.2, 1.4, 1.6, 1.8, 2.0}
	f := fitter(t, freeDecay, times, same(0.01, len(times)), Settings{})
	y := signal(freeDecay, times, 1.35, 2.5, 0)
	a := f.Fit(y)
	wantStatus(t, "free decay", a, Answered)
	near(t, "rate", a.Rate, math.Log(y[0]/y[6])/1.2, 1e-11) // the stopping distance of the fit
	near(t, "amplitude", a.Amplitude, y[0]*math.Exp(a.Rate*0.8), 1e-11)
	if !math.IsNaN(a.Inverted) || freeDecay.Parameters() != 2 {
		t.Errorf("a free decay has %d unknowns and B = %g; it has no offset", freeDecay.Parameters(), a.Inverted)
	}
}

// Rate error for two times: ln(y1/y2)/Δt, so SE = √(σ²/y1² + σ²/y2²)/Δt exactly, for a line through two points.
func TestFreeDecayErrorOfTwoTimesIsThatOfTheLogarithm(t *testing.T) {
	times, sd := []float64{1, 1.8}, []float64{0.01, 0.02}
	f := fitter(t, freeDecay, times, sd, Settings{})
	y := signal(freeDecay, times, 0.9, 1, 0)
	a := f.Fit(y)
	wantStatus(t, "free decay", a, Answered)
	near(t, "rate error", a.RateSE, math.Hypot(sd[0]/y[0], sd[1]/y[1])/0.8, 1e-9)
}
