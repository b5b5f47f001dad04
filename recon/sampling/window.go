package sampling

import (
	"math"

	"torrloom/recon/fault"
)

// Window is one k-space window: Weight(u) with u = |k|/k_cut in 0..1. Every window is 1 at u = 0, does not rise, and is
// taken as 0 beyond u = 1.
type Window struct {
	Name   string
	Label  string
	Help   string
	Weight func(u float64) float64
}

// Windows is the table of k-space windows. To add one: a row here.
var Windows = []Window{
	{"none", "none", "keeps every frequency up to the cutoff; sharpest, most noise, rings at edges",
		func(u float64) float64 { return 1 }},
	{"sinc", "Shepp-Logan sinc", "sin(πu/2)/(πu/2); mild smoothing (Shepp & Logan 1974)",
		func(u float64) float64 { return sinc(u / 2) }},
	{"cosine", "cosine", "cos(πu/2); medium smoothing",
		func(u float64) float64 { return math.Cos(math.Pi * u / 2) }},
	{"hamming", "Hamming", "0.54 + 0.46 cos(πu); strong smoothing, small step at the cutoff",
		func(u float64) float64 { return 0.54 + 0.46*math.Cos(math.Pi*u) }},
	{"hann", "Hann", "(1 + cos(πu))/2; strong smoothing, no ringing to speak of",
		func(u float64) float64 { return 0.5 + 0.5*math.Cos(math.Pi*u) }},
	{"gaussian", "Gaussian", "exp(-4.5 u²), three standard deviations at the cutoff; strongest smoothing",
		func(u float64) float64 { return math.Exp(-4.5 * u * u) }},
}

// WindowNamed returns the row of Windows with that name.
//
// Errors: bad-setting when there is none.
func WindowNamed(name string) (Window, error) {
	known := ""
	for _, w := range Windows {
		if w.Name == name {
			return w, nil
		}
		known += " " + w.Name
	}
	return Window{}, fault.New(fault.BadSetting, "recipe reconstruction.window", "window %q is not known; use one of%s", name, known)
}

// Sample returns the window at k = 0, dk, ..., half·dk for a cutoff of kCut, both in cycles/mm. A sample at the cutoff
// itself is kept; one beyond it is 0.
func (w Window) Sample(half int, dk, kCut float64) []float64 {
	out := make([]float64, half+1)
	for m := range out {
		// The slack lets a cutoff that is a whole number of steps keep its last sample in spite of rounding.
		if u := float64(m) * dk / kCut; u <= 1+1e-9 {
			out[m] = w.Weight(math.Min(u, 1))
		}
	}
	return out
}

// sinc returns sin(πx)/(πx).
func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}
