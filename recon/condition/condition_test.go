package condition

import (
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/phantom"
)

// ball is an off-centre ball of density 1 without relaxation.
func ball(radius float64, rate float64, centre ...float64) phantom.Body {
	s := phantom.Shape{Dim: 3, SemiMM: [3]float64{radius, radius, radius}}
	copy(s.CentreMM[:], centre)
	return phantom.Body{Shape: s, Density: 1, R1PerUS: rate, R2PerUS: rate}
}

func protocol() phantom.Protocol {
	return phantom.Protocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{0.5, 1, 2, 4, 8, 30}, Inversion: 1.8,
		Directions: phantom.GoldenHalfSphere(60), GradientMTPerM: 20, DwellNS: 5, Samples: 360, TimeZeroSample: 179.37, PhaseRad: 0.8, Seed: 5}
}

func acquire(t *testing.T, p *phantom.Phantom, pr phantom.Protocol) *acquisition.Acquisition {
	t.Helper()
	a, err := p.Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func measure(t *testing.T, a *acquisition.Acquisition) *Constants {
	t.Helper()
	c, _, err := Measure(a, Defaults())
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// weight is what the inversion recovery of a body of that rate multiplies its density with.
func weight(rate, delay float64) float64 { return 1 - 1.8*math.Exp(-rate*delay) }

// Conditioned samples equal the closed-form transform of the object: the low-pass is unbiased inside the band, time zero
// at a fraction of a sample is honoured, and the phase is taken out, also at the last samples of the trace.
func TestConditionedSamplesEqualTheClosedForm(t *testing.T) {
	body := ball(9, 0.3, 2, -3, 1.5)
	p := phantom.Sum(3, body)
	for _, zero := range []float64{180, 179.37, 179.5} {
		pr := protocol()
		pr.TimeZeroSample = zero
		a := acquire(t, p, pr)
		c := measure(t, a)
		g := Plan(a, c, 30, a.SmallestKMax()*0.99)
		sp, err := Condition(a, Defaults(), c, g, []int{0, 2, 5})
		if err != nil {
			t.Fatal(err)
		}
		volume, worst := body.Shape.Measure(), 0.0
		for i, n := range sp.Directions {
			for m := 0; m <= sp.Half; m++ {
				k := float64(m) * sp.DeltaK
				exact := p.Transform([3]float64{k * n[0], k * n[1], k * n[2]})
				for d, value := range sp.Row(i, m) {
					want := exact * complex(weight(0.3, a.DelayUS[sp.Delays[d]]), 0)
					worst = math.Max(worst, cmplx.Abs(complex128(value)-want)/volume)
				}
			}
		}
		// Bias of the noise penalty, 2e-4 of one tone, less for a whole object.
		if !(worst <= 1e-4) {
			t.Errorf("time zero %g: a sample is off by %.2g of the whole signal", zero, worst)
		}
	}
}

// The low-pass averages the noise outside the band away: a conditioned sample has at most 1.6 times the noise variance
// that an ideal band-pass leaves, β of the raw variance. The rest is noise from just outside the band.
func TestLowPassTakesTheNoiseOutsideTheBandAway(t *testing.T) {
	for _, beta := range []float64{0.08, 0.15, 0.4} {
		at := []float64{150, 150.25, 150.5, 163.7}
		r, err := NewResampler(360, beta, at)
		if err != nil {
			t.Fatal(err)
		}
		for i := range at {
			gain := 0.0
			for _, w := range r.weights[i] {
				gain += w * w
			}
			if !(gain <= 1.6*beta && gain >= 0.9*beta) {
				t.Errorf("band fraction %g at %g: noise gain %.4f", beta, at[i], gain)
			}
		}
	}
}

// A tone inside the band passes unchanged at every place, the ends of the trace included.
func TestTonesInsideTheBandPassUnchanged(t *testing.T) {
	const samples, beta = 200, 0.2
	var at []float64
	for u := 0.0; u <= samples-1; u += 3.317 {
		at = append(at, u)
	}
	r, err := NewResampler(samples, beta, at)
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range []float64{-0.45, -0.2, 0, 0.13, 0.45} { // fraction of the band
		trace := make([]complex64, samples)
		for j := range trace {
			trace[j] = complex64(cmplx.Rect(1, 2*math.Pi*f*beta*float64(j)))
		}
		for i, u := range at {
			got, _ := r.Apply(i, trace)
			// The root of the noise penalty; the ends of the trace, with half the neighbours, are the worst.
			if want := cmplx.Rect(1, 2*math.Pi*f*beta*u); !(cmplx.Abs(got-want) <= 4e-4) {
				t.Fatalf("tone at %g of the band, place %.3f: %v, want %v", f, u, got, want)
			}
		}
	}
}

func TestPlacesOutsideTheTraceGetNoWeights(t *testing.T) {
	r, err := NewResampler(100, 0.2, []float64{-0.5, 0, 99, 99.5})
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []bool{false, true, true, false} {
		if _, ok := r.Apply(i, make([]complex64, 100)); ok != want {
			t.Errorf("place %d: answered %v, want %v", i, ok, want)
		}
	}
}

// An echo of which one half is missing gives the samples of the full echo, by symmetry, and says so.
func TestHalfEchoGivesTheSamplesOfTheFullOne(t *testing.T) {
	p := phantom.Sum(3, ball(9, 0.3, 2, -3, 1.5))
	full, pr := acquire(t, p, protocol()), protocol()
	pr.Samples, pr.TimeZeroSample = 190, 9.37
	half := acquire(t, p, pr)
	g := Geometry{BandMM: 40, KCut: 0.45}
	want, err := Condition(full, Defaults(), measure(t, full), g, []int{3})
	if err != nil {
		t.Fatal(err)
	}
	c, warnings, err := Measure(half, Defaults())
	if err != nil {
		t.Fatal(err)
	}
	got, err := Condition(half, Defaults(), c, g, []int{3})
	if err != nil {
		t.Fatal(err)
	}
	for i, v := range got.Samples {
		if d := cmplx.Abs(complex128(v - want.Samples[i])); !(d <= 1e-3*3000) { // a thousandth of the whole signal
			t.Fatalf("sample %d differs by %g", i, d)
		}
	}
	if len(warnings) == 0 || !strings.Contains(strings.Join(warnings, " "), "Hermitian") {
		t.Errorf("no warning of the missing half: %q", warnings)
	}
	if got.OneSided[0] > got.Half || want.OneSided[0] <= want.Half {
		t.Errorf("one-sided from %d (half echo), %d (full echo) of %d", got.OneSided[0], want.OneSided[0], got.Half)
	}
}

func TestExtentIsTheDiameterAroundTheGradientCentre(t *testing.T) {
	for _, c := range []struct {
		radius  float64
		centre  [3]float64
		noiseSD float64
	}{{9, [3]float64{}, 0}, {7, [3]float64{4, 0, 3}, 0}, {9, [3]float64{0, -2, 0}, 12}} {
		pr := protocol()
		pr.NoiseSD = c.noiseSD
		a := acquire(t, phantom.Sum(3, ball(c.radius, 0.3, c.centre[:]...)), pr)
		far := c.radius + math.Sqrt(c.centre[0]*c.centre[0]+c.centre[1]*c.centre[1]+c.centre[2]*c.centre[2])
		got := measure(t, a).ExtentMM
		// The rim is blurred by the resolution, and seen above a hundredth of the peak only.
		if !(got >= 2*far-1.5 && got <= 2*far+4) {
			t.Errorf("radius %g at %v, noise %g: extent %.2f mm, want about %.2f", c.radius, c.centre, c.noiseSD, got, 2*far)
		}
	}
}

func TestNoiseIsMeasuredBesideTheObject(t *testing.T) {
	pr := protocol()
	pr.NoiseSD = 7
	c := measure(t, acquire(t, phantom.Sum(3, ball(9, 0.3, 2, -3, 1.5)), pr))
	for d, sd := range c.NoiseSD {
		if !(math.Abs(sd/7-1) <= 0.06) { // median of about 2000 powers: SD 2.2 %, the taper correlates neighbours
			t.Errorf("delay %d: noise %.3f, want 7", d, sd)
		}
	}
}

func TestOffsetIsFoundAndCleanDataAreLeftAlone(t *testing.T) {
	p := phantom.Sum(3, ball(9, 0.3, 2, -3, 1.5), ball(3, 0.8, -4, 5, 0))
	pr := protocol()
	pr.NoiseSD = 5
	if c := measure(t, acquire(t, p, pr)); c.OffsetReal != 0 || c.OffsetImag != 0 {
		t.Errorf("clean data: offset %g %g was subtracted", c.OffsetReal, c.OffsetImag)
	}
	pr.Offset = 20 - 30i // about 1 % of the echo
	c := measure(t, acquire(t, p, pr))
	// Mean of 6 delays x 60 shots x 36 samples of SD 5, times the leverage of the intercept.
	if d := cmplx.Abs(complex(c.OffsetReal, c.OffsetImag) - pr.Offset); !(d <= 0.3) {
		t.Errorf("offset %.3f %+.3fi, want 20 -30i", c.OffsetReal, c.OffsetImag)
	}
	for d, h := range c.EchoHeight {
		want := ball(9, 0.3).Shape.Measure()*weight(0.3, pr.DelayUS[d]) + ball(3, 0.8).Shape.Measure()*weight(0.8, pr.DelayUS[d])
		if !(math.Abs(h-want) <= 4) { // five SD of the mean of 60 samples of SD 5
			t.Errorf("delay %d: echo height %.2f, want %.2f", d, h, want)
		}
	}
}

func TestBaselineShotsAreSubtracted(t *testing.T) {
	p := phantom.Sum(3, ball(9, 0.3, 2, -3, 1.5))
	pr := protocol()
	clean := acquire(t, p, pr)
	pr.Directions = append(phantom.GoldenHalfSphere(60), [3]float64{1, 0, 0}, [3]float64{1, 0, 0})
	dirty := acquire(t, p, pr)
	for d := range dirty.Delays {
		for s := range dirty.Shots {
			for j := range dirty.Trace(d, s) {
				ring := complex64(cmplx.Rect(300*math.Exp(-float64(j)/40), float64(j)/9))
				if s >= 60 {
					dirty.Trace(d, s)[j] = ring
				} else {
					dirty.Trace(d, s)[j] += ring
				}
			}
		}
	}
	dirty.ShotRole[60], dirty.ShotRole[61] = acquisition.RoleOffResonance, acquisition.RoleOffResonance
	s := Defaults()
	s.Offset = "baseline-shots"
	c := measure(t, clean) // phase and noise as without the ringing
	g := Geometry{BandMM: 40, KCut: 0.45}
	want, err := Condition(clean, Defaults(), c, g, []int{1})
	if err != nil {
		t.Fatal(err)
	}
	got, err := Condition(dirty, s, c, g, []int{1})
	if err != nil {
		t.Fatal(err)
	}
	for i, v := range got.Samples {
		if d := cmplx.Abs(complex128(v - want.Samples[i])); !(d <= 0.01) { // float32 rounding of values of 3000
			t.Fatalf("sample %d differs by %g after baseline subtraction", i, d)
		}
	}
	if _, _, err := Measure(clean, s); err == nil {
		t.Error("baseline shots were subtracted from a file without any")
	}
}

// Real projections give the same samples as the traces they are the transform of.
func TestProjectionsGiveTheSamplesOfTheirTransform(t *testing.T) {
	p := phantom.Sum(3, ball(9, 0, 2, -3, 1.5))
	a := &acquisition.Acquisition{Dim: 3, Delays: 1, Shots: 20, Samples: 601, DelayUS: []float64{1}, Sequence: acquisition.EchoDecay,
		Domain: acquisition.Projection, PositionStepMM: 0.05, TimeZeroSample: 290}
	for _, n := range phantom.GoldenHalfSphere(20) {
		a.GradientMTPerM = append(a.GradientMTPerM, n)
		for j := range a.Samples {
			a.Signal = append(a.Signal, complex(float32(p.Projection(n, (float64(j)-290)*0.05)), 0))
		}
	}
	if err := a.Check(); err != nil {
		t.Fatal(err)
	}
	sp, err := Condition(a, Defaults(), measure(t, a), Geometry{BandMM: 30, KCut: 0.5}, []int{0})
	if err != nil {
		t.Fatal(err)
	}
	for i, n := range sp.Directions {
		for m := 0; m <= sp.Half; m++ {
			k := float64(m) * sp.DeltaK
			want := p.Transform([3]float64{k * n[0], k * n[1], k * n[2]})
			// Trapezoid sum of a parabola with step 0.05 mm: (step/radius)²/2 of the whole.
			if d := cmplx.Abs(complex128(sp.Row(i, m)[0]) - want); !(d <= 0.1) {
				t.Fatalf("shot %d sample %d: off by %g of %g", i, m, d, p.Transform([3]float64{}))
			}
		}
	}
}

// The displayed projection is the exact one within the band limit.
func TestDisplayedProjectionFollowsTheExactOne(t *testing.T) {
	p := phantom.Sum(3, ball(9, 0, 2, -3, 1.5))
	pr := protocol()
	pr.Sequence, pr.DelayUS = acquisition.EchoDecay, []float64{1}
	a := acquire(t, p, pr)
	x, v, err := ProjectionOf(a, Defaults(), measure(t, a), 0, 7)
	if err != nil {
		t.Fatal(err)
	}
	n := pr.Directions[7]
	for i := range x {
		if want := p.Projection(n, x[i]); !(math.Abs(v[i]-want) <= 4) { // 1.5 % of the peak 254: ringing of the band limit
			t.Errorf("at %.2f mm: %.2f, want %.2f", x[i], v[i], want)
		}
	}
}

func TestUnusableInputIsRefusedWithItsKind(t *testing.T) {
	a := acquire(t, phantom.Sum(3, ball(5, 0.2)), protocol())
	for _, c := range []struct {
		change func(a *acquisition.Acquisition, s *Settings)
		kind   fault.Kind
	}{
		{func(a *acquisition.Acquisition, s *Settings) { a.Encoding = acquisition.SinglePoint }, fault.Unsupported},
		{func(a *acquisition.Acquisition, s *Settings) { a.TimeZeroSample = -3 }, fault.Unsupported},
		{func(a *acquisition.Acquisition, s *Settings) { s.TimeShiftSamples = 1000 }, fault.Unsupported},
		{func(a *acquisition.Acquisition, s *Settings) { s.TimeShiftSamples = math.NaN() }, fault.BadSetting},
		{func(a *acquisition.Acquisition, s *Settings) { s.Offset = "guess" }, fault.BadSetting},
		{func(a *acquisition.Acquisition, s *Settings) { s.Phase = "" }, fault.BadSetting},
	} {
		changed, s := *a, Defaults()
		c.change(&changed, &s)
		_, _, err := Measure(&changed, s)
		if err == nil || fault.From(err).Kind != c.kind {
			t.Errorf("%v, want kind %s", err, c.kind)
		}
	}
}
