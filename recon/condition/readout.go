package condition

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// readoutRate returns the rate, in 1/µs, of the decay along the traces that is to be undone.
//
// Errors: bad-setting when zero-gradient shots are asked for and the file has none; no-answer when they do not decay.
func readoutRate(a *acquisition.Acquisition, s Settings) (float64, error) {
	switch orNone(s.ReadoutDecay) {
	case "none":
		return 0, nil
	case "typed":
		return s.ReadoutDecayPerUS, nil
	}
	shots := a.ZeroGradientShots()
	if len(shots) == 0 {
		return 0, fault.New(fault.BadSetting, "recipe conditioning.readoutDecay", "zero-gradient shots asked for, but the file has none (shot_role 1); enter a rate or leave the decay")
	}
	rate := decayRate(a, s, MeanTrace(a, s.ReferenceDelay(a), shots))
	if !(rate > 0) {
		return 0, fault.New(fault.NoAnswer, "recipe conditioning.readoutDecay", "the zero-gradient shots do not decay along the trace; leave the decay")
	}
	return rate, nil
}

// decayRate fits ln|s| = c - rate·|t| by least squares, each sample weighted by its power, over the samples above a tenth
// of the strongest: below, noise lifts the magnitude (Rice 1944).
func decayRate(a *acquisition.Acquisition, s Settings, trace []complex64) float64 {
	zero, peak := a.TimeZeroSample+s.TimeShiftSamples, 0.0
	for _, v := range trace {
		peak = math.Max(peak, power(v))
	}
	var w, wt, wl, wtt, wtl float64
	for j, v := range trace {
		p := power(v)
		if p < 0.01*peak || p == 0 {
			continue
		}
		t, l := math.Abs(float64(j)-zero)*a.DwellNS*1e-3, 0.5*math.Log(p)
		w, wt, wl, wtt, wtl = w+p, wt+p*t, wl+p*l, wtt+p*t*t, wtl+p*t*l
	}
	spread := w*wtt - wt*wt
	if !(spread > 0) {
		return 0
	}
	return -(w*wtl - wt*wl) / spread
}

func power(v complex64) float64 {
	return float64(real(v))*float64(real(v)) + float64(imag(v))*float64(imag(v))
}

// readoutGains returns the factor of sample m = 0..half of one shot, or nil when no decay is undone. The sample at m·DeltaK
// was recorded at the time that the shot's gradient needs to get there.
func readoutGains(a *acquisition.Acquisition, s Settings, ratePerUS, deltaK float64, half, shot int) []float64 {
	if ratePerUS == 0 || a.Domain == acquisition.Projection {
		return nil
	}
	perUS := acquisition.KPerNS(a.Strength(shot), 1000)
	out := make([]float64, half+1)
	for m := range out {
		out[m] = math.Min(math.Exp(ratePerUS*float64(m)*deltaK/perUS), math.Max(1, s.ReadoutGainCap))
	}
	return out
}
