package relax

import (
	"cmp"
	"math"
	"slices"

	"torrloom/recon/fault"
)

// Settings limits the rates that can be an answer. A limit of zero is chosen from the delays.
//
// The chosen range is the stretch of rates that the delays can see, around the one they see best. How well they see a
// rate is the sensitivity |∂u/∂ln R|, the change of the curve's shape per e-fold of the rate relative to the curve: the
// standard error of ln R is 1/(sensitivity · signal-to-noise ratio of the whole curve). A rate is seen when the
// sensitivity is at least 0.01, because even a voxel with a ratio of 100, better than this kind of imaging gives, could
// not tell a less visible rate R from e·R; and when the change of the curve along the delays (for a decay the curve
// itself) is at least 1/1000 of that at the rate where it is greatest, because a decay or recovery that is over before
// the first delay has left nothing to measure.
type Settings struct {
	RateMinPerUS float64 `json:"rateMinPerUS"`
	RateMaxPerUS float64 `json:"rateMaxPerUS"`
}

// visibility is the least that is asked of a rate.
type visibility struct {
	sensitivity float64
	signal      float64 // |ĉ| of the frame, as a fraction of the greatest
}

var (
	seen = visibility{sensitivity: 0.01, signal: 1e-3}
	// allowed bounds the limits a caller may ask for: below it a rate has lost too many digits to rounding.
	allowed = visibility{sensitivity: 1e-4, signal: 1e-6}
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
	var some bool
	f.lnMin, f.lnMax, some = f.rangeOf(seen)
	if !some {
		return fault.New(fault.NoAnswer, "delay_us", "%v µs cannot tell rates apart in a %s; add delays that differ", f.delayUS, f.model.Label)
	}
	if s.RateMinPerUS > 0 {
		f.lnMin = math.Log(s.RateMinPerUS)
	}
	if s.RateMaxPerUS > 0 {
		f.lnMax = math.Log(s.RateMaxPerUS)
	}
	lnMin, lnMax, _ := f.rangeOf(allowed)
	if !(lnMin <= f.lnMin && f.lnMin < f.lnMax && f.lnMax <= lnMax) {
		return fault.New(fault.BadSetting, "rateMinPerUS", "the range %.4g to %.4g /µs is not one these delays can see; stay within %.4g to %.4g /µs",
			math.Exp(f.lnMin), math.Exp(f.lnMax), math.Exp(lnMin), math.Exp(lnMax))
	}
	return nil
}

// rangeOf returns the ends, as ln R, of the stretch of rates that have a given visibility, around the rate of greatest
// sensitivity. A rate below 1e-5 of the slowest time scale bends no curve, and one above 1e3 of the fastest has died out
// before the second delay.
func (f *Fitter) rangeOf(least visibility) (lnMin, lnMax float64, some bool) {
	const step = 0.05 // the visibility changes over about one e-fold
	fastest, slowest := f.timeScales()
	start := math.Log(1e-5 / slowest)
	list := f.visibilities(start, step, int((math.Log(1e3/fastest)-start)/step))
	most := slices.MaxFunc(list, func(a, b visibility) int { return cmp.Compare(a.signal, b.signal) }).signal
	hidden := func(v visibility) bool { return !(v.sensitivity >= least.sensitivity && v.signal >= least.signal*most) }
	best := 0
	for i, v := range list {
		if !hidden(v) && v.sensitivity > list[best].sensitivity {
			best = i
		}
	}
	from, to := best, best
	for from > 0 && !hidden(list[from-1]) {
		from--
	}
	for to < len(list)-1 && !hidden(list[to+1]) {
		to++
	}
	return start + float64(from)*step, start + float64(to)*step, from < to
}

// timeScales returns the shortest delay that is not zero and the longest.
func (f *Fitter) timeScales() (fastest, slowest float64) {
	slowest = slices.Max(f.delayUS)
	fastest = slowest
	for _, t := range f.delayUS {
		if t > 0 {
			fastest = math.Min(fastest, t)
		}
	}
	return fastest, slowest
}

// visibilities returns the visibility at evenly spaced ln R, zero where the curve has vanished.
func (f *Fitter) visibilities(start, step float64, steps int) []visibility {
	list := make([]visibility, steps)
	fr := newFrame(len(f.delayUS))
	for i := range list {
		if f.frameAt(start+float64(i)*step, fr) {
			list[i] = visibility{sensitivity: fr.sensitivity, signal: fr.norm}
		}
	}
	return list
}
