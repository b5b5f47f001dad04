package quality

import (
	"math"
	"slices"
	"sort"

	"torrloom/recon/acquisition"
	"torrloom/recon/relax"
)

var delayChecks = []Check{
	{Name: "delay-range", Label: "delays against the rates", Needs: []Need{spokes, severalDelays},
		Rule:   "the shortest delay is below 1/R (recovery) or 2/R (decay) of the fastest rates and the longest above 2/R (recovery) or 1/R (decay) of the slowest",
		Source: "Cramér-Rao bound of S = A - B exp(-R T): outside this range the error of R grows quickly",
		Advice: "pO2 at this end of the range is weakly held; add a delay there", Run: delayRange},
	{Name: "delay-order", Label: "delay curve of the whole signal", Needs: []Need{spokes, severalDelays},
		Rule: "the signal rises (recovery) or falls (decay) from each delay to the next, within 1 % or six standard errors", Source: "a sum of exponentials of one sign is monotone",
		Advice: "check delay_us, and leave out a delay that does not belong", Run: delayOrder},
	{Name: "null-crossing", Label: "zero crossing", Needs: []Need{spokes, severalDelays, inversion},
		Rule: "the signal of early delays is negative", Source: "S = A - B exp(-R T) starts at A - B, which is negative after an inversion",
		Advice: "without delays before the crossing the inversion efficiency is a guess; add short delays, and check that signal is complex and not a magnitude", Run: nullCrossing},
	{Name: "inversion-efficiency", Label: "inversion efficiency", Needs: []Need{spokes, severalDelays, inversion},
		Rule: "B/A between 1.2 and 2.05", Source: "2 for a perfect pulse; 1.6 to 1.95 is usual",
		Advice: "look at the inversion pulse; the fit leaves B free, so that rates stay right as long as signal is left", Run: inversionEfficiency},
	{Name: "repetition", Label: "repetition time", Needs: []Need{spokes, recovery},
		Rule: "at least 3/R1 of the slowest rates", Source: "after 3/R1 all but 5 % of the signal has come back",
		Advice: "slow voxels are saturated: their amplitude is low, and after an incomplete recovery their inversion too", Run: repetition},
}

func severalDelays(s *Subject) bool { return len(s.V.Delays) >= 2 }

func inversion(s *Subject) bool { return s.A.Sequence == acquisition.InversionRecovery }

// rates returns the rates found by the chain, or those of the whole signal with a factor of 1.5 to either side, and
// where they come from; "" when there are none.
func (s *Subject) rates() (Rates, string) {
	if s.Known.Rates != nil {
		return *s.Known.Rates, "rate map"
	}
	whole, ok := s.wholeFit()
	if !ok {
		return Rates{}, ""
	}
	return Rates{whole.Rate / 1.5, whole.Rate, whole.Rate * 1.5}, "whole signal, and a factor of 1.5 around it"
}

// wholeFit fits the delay curve of the whole signal.
func (s *Subject) wholeFit() (relax.Answer, bool) {
	m, err := relax.For(s.A.Sequence)
	if err != nil {
		return relax.Answer{}, false
	}
	ones := make([]float64, len(s.V.Delays))
	for d := range ones {
		ones[d] = 1
	}
	f, err := relax.NewFitter(m, s.delayUS(), ones, relax.Settings{})
	if err != nil {
		return relax.Answer{}, false
	}
	a := f.Fit(s.V.Curve)
	return a, a.Status == relax.Answered
}

func (s *Subject) delayUS() []float64 {
	var out []float64
	for _, d := range s.V.Delays {
		out = append(out, s.A.DelayUS[d])
	}
	return out
}

func delayRange(s *Subject) []Finding {
	r, from := s.rates()
	if from == "" {
		return []Finding{found(Doubt, 0, "", "the whole signal has no rate that these delays can show")}
	}
	times := s.delayUS()
	first, last := slices.Min(times), slices.Max(times)
	mostShort, leastLong := 2.0, 1.0
	if s.A.Recovers() {
		mostShort, leastLong = 1, 2
	}
	short, long := first*r.HighPerUS, last*r.LowPerUS
	f := doubtIf(short > mostShort || long < leastLong, long, "", "rates of %.3g to %.3g /µs (%s): the shortest delay is %.2g/R of the fastest, the longest %.2g/R of the slowest", r.LowPerUS, r.HighPerUS, from, short, long)
	return []Finding{f}
}

func delayOrder(s *Subject) []Finding {
	times := s.delayUS()
	order := make([]int, len(times))
	largest := 0.0
	for d := range order {
		order[d] = d
		largest = math.Max(largest, math.Abs(s.V.Curve[d]))
	}
	sort.SliceStable(order, func(a, b int) bool { return times[order[a]] < times[order[b]] })
	limit := math.Max(0.01*largest, manySpreads*s.curveSE())
	worst := 0.0
	var bad []int
	for k := 1; k < len(order); k++ {
		step := s.V.Curve[order[k]] - s.V.Curve[order[k-1]]
		if !s.A.Recovers() {
			step = -step
		}
		worst = math.Min(worst, step)
		if step < -limit {
			bad = union(bad, []int{s.V.Delays[order[k]], s.V.Delays[order[k-1]]})
		}
	}
	f := doubtIf(len(bad) > 0, -100*worst/largest, "%", "the largest step against the trend is %.2g %% of the signal", -100*worst/largest)
	f.Delays = bad
	return []Finding{f}
}

// curveSE is the standard error of a step between two points of the delay curve.
func (s *Subject) curveSE() float64 {
	worst := 0.0
	for _, d := range s.V.Delays {
		worst = math.Max(worst, s.C.NoiseSD[d])
	}
	i := 0
	perShot := worst * s.V.NoiseGain[i] * s.V.StepMM[i] * math.Sqrt(float64(len(s.profile[i])))
	return 1.25 * math.Sqrt2 * perShot / math.Sqrt(float64(len(s.V.Shots)))
}

func nullCrossing(s *Subject) []Finding {
	least, most := slices.Min(s.V.Curve), slices.Max(s.V.Curve)
	share := least / math.Max(most, math.SmallestNonzeroFloat64)
	return []Finding{doubtIf(!(share < 0), 100*share, "%", "the signal runs from %.0f %% to 100 %% of its largest", 100*share)}
}

func inversionEfficiency(s *Subject) []Finding {
	a, ok := s.wholeFit()
	if !ok {
		return []Finding{found(Fine, 0, "", "the whole signal has no fit; the inversion efficiency cannot be told")}
	}
	ratio := a.Inverted / a.Amplitude
	return []Finding{doubtIf(!(ratio >= 1.2 && ratio <= 2.05), ratio, "", "B/A of the whole signal is %.2f", ratio)}
}

func repetition(s *Subject) []Finding {
	t := s.A.Optional.RepetitionUS
	r, from := s.rates()
	if t == nil || from == "" {
		return []Finding{found(Fine, 0, "", "the file does not give the repetition time, or no rate is known")}
	}
	times := *t * r.LowPerUS
	return []Finding{doubtIf(times < 3, times, "", "%.4g µs, %.2g/R1 of the slowest rates (%.3g /µs, %s)", *t, times, r.LowPerUS, from)}
}
