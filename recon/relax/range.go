package relax

import (
	"math"
	"slices"

	"torrloom/recon/fault"
)

// Settings limits the rates that can be an answer. A limit of zero is chosen from the delays.
//
// The chosen range reaches from the slowest to the fastest rate that the delays can see. How well they see a rate is
// the sensitivity |∂u/∂ln R|, the change of the curve's shape per e-fold of the rate relative to the curve: the
// standard error of ln R is 1/(sensitivity · signal-to-noise ratio of the whole curve). A rate is seen when the
// sensitivity is at least 0.01, because even a voxel with a ratio of 100, better than this kind of imaging gives, could
// not tell a less visible rate R from e·R.
type Settings struct {
	RateMinPerUS float64 `json:"rateMinPerUS"`
	RateMaxPerUS float64 `json:"rateMaxPerUS"`
}

const (
	seenSensitivity = 0.01
	// leastSensitivity bounds the limits a caller may ask for: below it a rate has lost too many digits to rounding to
	// keep the promised ten.
	leastSensitivity = 1e-4
)

// Check returns a fault when a limit is negative or not finite, or the range is empty.
func (s Settings) Check() error {
	if !(s.RateMinPerUS >= 0) || math.IsInf(s.RateMinPerUS, 0) {
		return fault.New(fault.BadSetting, "rateMinPerUS", "%g /µs; use a positive rate, or 0 to have it chosen from the delays", s.RateMinPerUS)
	}
	if !(s.RateMaxPerUS >= 0) || math.IsInf(s.RateMaxPerUS, 0) {
		return fault.New(fault.BadSetting, "rateMaxPerUS", "%g /µs; use a positive rate, or 0 to have it chosen from the delays", s.RateMaxPerUS)
	}
	if s.RateMaxPerUS > 0 && !(s.RateMinPerUS < s.RateMaxPerUS) {
		return fault.New(fault.BadSetting, "rateMinPerUS", "%g /µs is not below rateMaxPerUS %g /µs; widen the range", s.RateMinPerUS, s.RateMaxPerUS)
	}
	return nil
}

func (f *Fitter) setRange(s Settings) error {
	if err := s.Check(); err != nil {
		return err
	}
	var seen bool
	f.lnMin, f.lnMax, seen = f.seenRange()
	if !seen {
		return fault.New(fault.NoAnswer, "delay_us", "%v µs cannot tell rates apart in a %s; add delays that differ", f.delayUS, f.model.Label)
	}
	chosenMin, chosenMax := math.Exp(f.lnMin), math.Exp(f.lnMax)
	if s.RateMinPerUS > 0 {
		f.lnMin = math.Log(s.RateMinPerUS)
	}
	if s.RateMaxPerUS > 0 {
		f.lnMax = math.Log(s.RateMaxPerUS)
	}
	if !(f.lnMin < f.lnMax) || !(f.sensitivityAt(f.lnMin) >= leastSensitivity) || !(f.sensitivityAt(f.lnMax) >= leastSensitivity) {
		return fault.New(fault.BadSetting, "rateMinPerUS", "the range %.4g to %.4g /µs is not one these delays can see; they see %.4g to %.4g /µs", math.Exp(f.lnMin), math.Exp(f.lnMax), chosenMin, chosenMax)
	}
	return nil
}

func (f *Fitter) sensitivityAt(x float64) float64 {
	fr := newFrame(len(f.delayUS))
	if !f.frameAt(x, fr) {
		return 0
	}
	return fr.sensitivity
}

// seenRange returns the slowest and fastest ln R with the sensitivity of a rate that is seen. A rate below 1e-3 of the
// slowest time scale bends no curve, and one above 1e3 of the fastest has died out before the second delay.
func (f *Fitter) seenRange() (lnMin, lnMax float64, seen bool) {
	const step = 0.05 // the sensitivity changes over about one e-fold
	fastest := slices.Max(f.delayUS)
	for _, t := range f.delayUS {
		if t > 0 {
			fastest = math.Min(fastest, t)
		}
	}
	for x := math.Log(1e-3 / slices.Max(f.delayUS)); x < math.Log(1e3/fastest); x += step {
		if !(f.sensitivityAt(x) >= seenSensitivity) {
			continue
		}
		if !seen {
			lnMin, seen = x, true
		}
		lnMax = x
	}
	return lnMin, lnMax, seen && lnMin < lnMax
}
