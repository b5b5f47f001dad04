package condition

import (
	"math"
	"math/cmplx"
	"slices"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/phantom"
)

// differFrom returns the largest difference between the conditioned samples of two acquisitions, over the whole signal.
func differFrom(t *testing.T, a, clean *acquisition.Acquisition, s Settings) float64 {
	t.Helper()
	g, delays := Geometry{BandMM: 34, KCut: 0.45}, []int{0, 3, 5}
	spokesOf := func(a *acquisition.Acquisition, s Settings) *Spokes {
		c, _, err := Measure(a, s)
		if err != nil {
			t.Fatal(err)
		}
		sp, err := Condition(a, s, c, g, delays)
		if err != nil {
			t.Fatal(err)
		}
		return sp
	}
	got, want := spokesOf(a, s), spokesOf(clean, Defaults())
	worst := 0.0
	for i, v := range got.Samples {
		worst = math.Max(worst, cmplx.Abs(complex128(v-want.Samples[i])))
	}
	return worst / ball(9, 0).Shape.Measure()
}

// What a correction undoes is exactly what the fault of the same size does.
func TestCorrectionsUndoTheirFaults(t *testing.T) {
	p := phantom.Sum(3, ball(9, 0.3, 2, -3, 1.5))
	for _, c := range []struct {
		name  string
		plant func(a *acquisition.Acquisition)
		set   func(s *Settings)
		limit float64
	}{
		// Rounding of float32 samples, summed over a band of them.
		{"phase drift", func(a *acquisition.Acquisition) { phantom.DriftPhase(a, 1.2) }, func(s *Settings) { s.PhaseDriftDeg = 1.2 * 180 / math.Pi }, 1e-5},
		{"frequency drift", func(a *acquisition.Acquisition) { phantom.DriftFrequency(a, 50, 350) }, func(s *Settings) { s.FrequencyKHz, s.FrequencyDriftKHz = 200, 300 }, 1e-5},
		// At u = 1/2 the planted signal is 0.9 of itself, which stays: a drift has no size of its own.
		{"amplitude drift", func(a *acquisition.Acquisition) {
			phantom.DriftAmplitude(a, -0.2)
			for s := range a.Shots {
				phantom.Weaken(a, s, 1/0.9)
			}
		}, func(s *Settings) { s.AmplitudeDrift = -0.2 / 0.9 }, 1e-5},
		{"quadrature", func(a *acquisition.Acquisition) { phantom.Unbalance(a, 0.2, 0.3) }, func(s *Settings) { s.QuadratureGain, s.QuadratureSkewDeg = 0.2, 0.3*180/math.Pi }, 1e-5},
		{"time zero", func(a *acquisition.Acquisition) { phantom.MistakeTimeZero(a, 7.3) }, func(s *Settings) { s.TimeShiftSamples = 7.3 / 5 }, 1e-5},
		{"own phase", func(a *acquisition.Acquisition) {
			phantom.Turn(a, 5, 2)
			phantom.Turn(a, 40, -1)
		}, func(s *Settings) { s.ShotPhase = "own" }, 1e-4},
		// Time zero is kept to a 64th of a sample, of a jitter of 0.8; both halves of the echo hide much of it.
		{"own time zero", func(a *acquisition.Acquisition) { phantom.JitterTimeZero(a, 4, 3) }, func(s *Settings) { s.ShotTime = "own" }, 5e-4},
	} {
		spoilt, s := acquire(t, p, protocol()), Defaults()
		clean := phantom.Clone(spoilt)
		c.plant(spoilt)
		before := differFrom(t, spoilt, clean, s)
		c.set(&s)
		after := differFrom(t, spoilt, clean, s)
		t.Logf("%s: off by %.2g before, %.2g after", c.name, before, after)
		if !(after <= c.limit) || !(before > 3*c.limit) {
			t.Errorf("%s: off by %.2g of the whole signal before, %.2g after; want at most %.2g", c.name, before, after, c.limit)
		}
	}
}

func TestExcludedShotsAndDelaysAreLeftOut(t *testing.T) {
	p := phantom.Sum(3, ball(9, 0.3, 2, -3, 1.5))
	a, s := acquire(t, p, protocol()), Defaults()
	s.ExcludeShots, s.ExcludeDelays = []int{0, 17, 59}, []int{5}
	phantom.Silence(a, 17, 1000, 1)
	c, _, err := Measure(a, s)
	if err != nil {
		t.Fatal(err)
	}
	sp, err := Condition(a, s, c, Geometry{BandMM: 34, KCut: 0.45}, s.KeptDelays(a))
	if err != nil {
		t.Fatal(err)
	}
	if len(sp.Shot) != 57 || slices.Contains(sp.Shot, 17) || len(sp.Directions) != 57 || !slices.Equal(sp.Delays, []int{0, 1, 2, 3, 4}) {
		t.Errorf("%d shots, delays %v", len(sp.Shot), sp.Delays)
	}
	if d := s.ReferenceDelay(a); d != 4 {
		t.Errorf("reference delay %d, want the longest that is kept, 4", d)
	}
	s.ExcludeDelays = []int{0, 1, 2, 3, 4, 5}
	if _, _, err := Measure(a, s); err == nil || fault.From(err).Kind != fault.BadSetting {
		t.Errorf("no delays left: %v", err)
	}
}

// Samples of the dead time may hold anything; the rest, and that the object is finite, give the samples of k-space back.
func TestDeadTimeIsBridged(t *testing.T) {
	p := phantom.Sum(3, ball(9, 0.3, 2, -3, 1.5))
	pr := protocol()
	pr.Samples, pr.TimeZeroSample = 190, 0.4
	whole := acquire(t, p, pr)
	dead := phantom.Clone(whole)
	for d := range dead.Delays {
		for shot := range dead.Shots {
			for j := range 3 {
				dead.Trace(d, shot)[j] = 9000
			}
		}
	}
	s := Defaults()
	s.DeadSamples = 2
	deeper := s
	deeper.DeadSamples = 9
	c, _, err := Measure(dead, deeper)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Condition(dead, deeper, c, Geometry{BandMM: 34, KCut: 0.45}, []int{0}); err == nil || fault.From(err).Kind != fault.BadSetting {
		t.Errorf("a hole of ten samples: %v, want a bad setting", err)
	}
	// A tone extrapolated by a quarter of 1/band errs by half a percent at most, and this hole is as deep as allowed.
	if off := differFrom(t, dead, whole, s); !(off <= 5e-3) {
		t.Errorf("off by %.2g of the whole signal", off)
	}
}

// Order follows shot_time_s where the file has it.
func TestOrderFollowsTheShotTimes(t *testing.T) {
	a := &acquisition.Acquisition{Shots: 3}
	if u := Order(a); !slices.Equal(u, []float64{0, 0.5, 1}) {
		t.Errorf("by index: %v", u)
	}
	a.Optional.ShotTimeS = []float64{10, 40, 20}
	if u := Order(a); !(u[0] == 0 && u[1] == 1 && math.Abs(u[2]-1.0/3) < 1e-15) {
		t.Errorf("by time: %v", u)
	}
}

// A survey finds time zero to a thousandth of a sample, whatever phase and sign the echo has.
func TestSurveyFindsPhaseTimeZeroAndStrength(t *testing.T) {
	a := acquire(t, phantom.Sum(3, ball(9, 0.3, 2, -3, 1.5)), protocol())
	phantom.MistakeTimeZero(a, 6) // 1.2 samples
	phantom.Turn(a, 3, 1)
	phantom.Weaken(a, 8, 0.25)
	c, _, err := Measure(a, Defaults())
	if err != nil {
		t.Fatal(err)
	}
	v := NewSurvey(a, Defaults(), c)
	for i, shift := range v.ShiftSamples {
		if !(math.Abs(shift-1.2) <= 5e-3) {
			t.Errorf("shot %d: shifted by %.4f samples, planted 1.2", i, shift)
		}
	}
	if turned := math.Remainder(v.PhaseRad[3]-v.PhaseRad[4], 2*math.Pi); !(math.Abs(turned-1) <= 1e-3) {
		t.Errorf("turned by %.4f rad, planted 1", turned)
	}
	if !(math.Abs(v.Strength[8]-0.25) <= 1e-3) || !(math.Abs(v.Strength[9]-1) <= 1e-3) {
		t.Errorf("strengths %.4f and %.4f, planted 0.25 and 1", v.Strength[8], v.Strength[9])
	}
}
