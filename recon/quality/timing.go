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
	{Name: "echo-halves", Label: "halves of the echo", Needs: []Need{spokes, traces},
		Rule:   "both halves of the echo are recorded to the same k",
		Source: "where one half is missing it is taken as the mirror of the other, with twice the noise variance",
		Advice: "record both halves, or see to phase and time zero with care: the mirror repeats their errors", Run: echoHalves},
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

func echoHalves(s *Subject) []Finding {
	before := s.A.TimeZeroSample + s.S.TimeShiftSamples
	after := float64(s.A.Samples-1) - before
	share := 100 * math.Min(before, after) / math.Max(before, after)
	return []Finding{found(Fine, share, "%", "the shorter half of the echo is recorded to %.0f %% of the longer", share)}
}
