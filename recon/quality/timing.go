package quality

import (
	"math"

	"torrloom/recon/condition"
)

var timingChecks = []Check{
	{Name: "time-zero", Label: "time zero", Needs: []Need{spokes, traces, bothHalves},
		Rule:   "the echo is symmetric about the stated sample: less than 0.05 rad of twist at the object's rim, or five standard errors",
		Source: "the k-space of a real object is Hermitian about k = 0",
		Advice: "shift time zero", Run: timeZero},
	{Name: "time-zero-spread", Label: "jitter of time zero", Needs: []Need{spokes, traces, bothHalves},
		Rule:   "the echo's place varies from shot to shot by less than 0.1 rad of twist at the object's rim, or three times what noise does",
		Source: "the k-space of a real object is Hermitian about k = 0",
		Advice: "use each shot's own time zero", Run: timeZeroSpread},
	{Name: "echo-place", Label: "place of the echo", Needs: []Need{spokes, traces, noDeadTime},
		Rule:   "the strongest sample, all shots taken together, lies within 1 rad of twist at the object's rim of the stated time zero, or is hardly stronger",
		Source: "the signal of an object without negative density is largest at k = 0",
		Advice: "correct time_zero_sample, or shift time zero by this much; a missing half is the mirror of the other and repeats the error", Run: echoPlace},
}

func timeZero(s *Subject) []Finding {
	shifts := pick(s.V.ShiftSamples, s.sound())
	middle := median(shifts)
	// The median of Gaussian values spreads by 1.25 times their mean.
	se := 1.25 * spread(shifts) / math.Sqrt(float64(len(shifts)))
	bad := math.Abs(middle)*s.rim() > 0.05 && math.Abs(middle) > 5*se
	ns := middle * s.A.DwellNS
	return []Finding{doubtIf(bad, ns, "ns", "k = 0 lies %.3g ns ± %.2g after the stated time, %.2g rad of twist at the rim", ns, se*s.A.DwellNS, middle*s.rim()).
		proposing(func(c *condition.Settings) { c.TimeShiftSamples += middle })}
}

func timeZeroSpread(s *Subject) []Finding {
	at := s.sound()
	shifts := pick(s.V.ShiftSamples, at)
	scatter, noise := spread(shifts), median(pick(s.shiftSE, at))
	bad := scatter*s.rim() > 0.1 && scatter > 3*noise
	return []Finding{doubtIf(bad, scatter*s.A.DwellNS, "ns", "the echo's place scatters by %.2g ns from shot to shot, noise alone by about %.2g ns", scatter*s.A.DwellNS, noise*s.A.DwellNS).
		proposing(func(c *condition.Settings) { c.ShotTime = "own" })}
}

func noDeadTime(s *Subject) bool { return s.S.DeadSamples == 0 }

// clearlyStronger is by how much the power at the strongest sample passes that at the stated time zero before the two
// are told apart.
const clearlyStronger = 1.1

func echoPlace(s *Subject) []Finding {
	zero := s.A.TimeZeroSample + s.S.TimeShiftSamples
	power, se := s.powerOverSamples()
	strongest := 0
	for j, p := range power {
		if p > power[strongest] {
			strongest = j
		}
	}
	stated := power[min(max(int(math.Round(zero)), 0), len(power)-1)]
	off := float64(strongest) - zero
	bad := math.Abs(off)*s.rim() > 1 && power[strongest] > clearlyStronger*stated && power[strongest]-stated > manySpreads*se
	f := doubtIf(bad, off*s.A.DwellNS, "ns", "the strongest sample lies %.3g ns after the stated time zero; the shorter half of the echo is recorded to %.0f %% of the longer",
		off*s.A.DwellNS, s.shorterHalf(zero))
	if bad {
		f.Level = Stop
	}
	return []Finding{f}
}

// powerOverSamples returns the mean power of the sound shots at the reference delay for every sample, and the standard
// error that noise gives the mean.
func (s *Subject) powerOverSamples() (power []float64, se float64) {
	delay := s.S.ReferenceDelay(s.A)
	corrector, trace := condition.NewCorrector(s.A, s.S, s.C, []int{delay}), make([]complex64, s.A.Samples)
	power = make([]float64, s.A.Samples)
	at := s.sound()
	for _, i := range at {
		corrector.Load(trace, delay, s.V.Shots[i])
		for j, v := range trace {
			power[j] += (float64(real(v))*float64(real(v)) + float64(imag(v))*float64(imag(v))) / float64(len(at))
		}
	}
	// The variance of |signal + noise|² is about 4·|signal|²·sd² where the signal is far above the noise.
	sd := s.C.NoiseSD[delay]
	return power, 2 * sd * math.Sqrt((quantile(power, 1)+sd*sd)/math.Max(1, float64(len(at))))
}

// shorterHalf returns the length of the shorter half of the echo over that of the longer, in percent.
func (s *Subject) shorterHalf(zero float64) float64 {
	before, after := zero, float64(s.A.Samples-1)-zero
	return 100 * math.Min(before, after) / math.Max(before, after)
}
