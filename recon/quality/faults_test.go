package quality

import (
	"encoding/json"
	"math"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/phantom"
)

// clean returns the acquisition that faults are planted into: three balls in a plug, 120 directions in scrambled order,
// a zero-gradient shot after every 30.
func clean(t testing.TB) *acquisition.Acquisition {
	t.Helper()
	a, err := object(t).Acquire(protocol())
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func object(t testing.TB) *phantom.Phantom {
	t.Helper()
	ball := func(r, rate, x, y, z, density float64) phantom.Body {
		return phantom.Body{Density: density, R1PerUS: rate, R2PerUS: rate + 0.2, Shape: phantom.Shape{Dim: 3, SemiMM: [3]float64{r, r, r}, CentreMM: [3]float64{x, y, z}}}
	}
	p, err := phantom.Nested(3, ball(9, 0.45, 1.5, -1, 0.5, 0.6), ball(3, 0.18, -2, 2, 1, 1), ball(2.5, 0.3, 4, -3, -1, 1))
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func protocol() phantom.Protocol {
	pr := phantom.Protocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{0.4, 0.9, 2, 4.5, 10, 30}, Inversion: 1.8,
		GradientMTPerM: 20, DwellNS: 6, Samples: 240, TimeZeroSample: 119.3, PhaseRad: 0.9, NoiseSD: 5, Seed: 3}
	golden := phantom.GoldenHalfSphere(120)
	for i := range golden {
		if i%30 == 0 {
			pr.Directions = append(pr.Directions, [3]float64{})
		}
		pr.Directions = append(pr.Directions, golden[(i*47)%120])
	}
	pr.Directions = append(pr.Directions, [3]float64{})
	return pr
}

// spoilt is a fault that a check must find.
type spoilt struct {
	name   string
	check  string
	plant  func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known)
	level  Level
	value  float64 // what the finding should say, NaN when only its level matters
	within float64
	shots  []int // that the finding must name, no others; nil when none need be named
}

func planted(change func(a *acquisition.Acquisition)) func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
	return func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
		a := clean(t)
		change(a)
		return a, condition.Defaults(), Known{}
	}
}

// measured changes the protocol instead.
func measured(change func(pr *phantom.Protocol)) func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
	return func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
		pr := protocol()
		change(&pr)
		a, err := object(t).Acquire(pr)
		if err != nil {
			t.Fatal(err)
		}
		return a, condition.Defaults(), Known{}
	}
}

func withSettings(change func(a *acquisition.Acquisition, s *condition.Settings, k *Known)) func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
	return func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
		a, s, k := clean(t), condition.Defaults(), Known{}
		change(a, &s, &k)
		return a, s, k
	}
}

// unsteady gives every shot a frequency of its own, up to kHz off.
func unsteady(a *acquisition.Acquisition, kHz float64) {
	for s := range a.Shots {
		for d := range a.Delays {
			one := phantom.Clone(&acquisition.Acquisition{Signal: a.Trace(d, s), Delays: 1, Shots: 1, Samples: a.Samples, DwellNS: a.DwellNS, TimeZeroSample: a.TimeZeroSample})
			phantom.DriftFrequency(one, kHz*math.Sin(float64(s)*2.4), 0)
			copy(a.Trace(d, s), one.Signal)
		}
	}
}

// shuffledDemo is the demo, which looks nearly the same from everywhere, with its gradients dealt out at random.
func shuffledDemo(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
	a, err := phantom.DemoAcquisition(true)
	if err != nil {
		t.Fatal(err)
	}
	phantom.ShuffleGradients(a, 7)
	return a, condition.Defaults(), Known{}
}

var nan = math.NaN()

var faults = []spoilt{
	{name: "two silent shots", check: "silent-shots", level: Doubt, value: nan, shots: []int{11, 77}, plant: planted(func(a *acquisition.Acquisition) {
		phantom.Silence(a, 11, 5, 1)
		phantom.Silence(a, 77, 5, 2)
	})},
	{name: "a noisy shot", check: "noisy-shots", level: Doubt, value: 4, within: 0.8, shots: []int{40}, plant: planted(func(a *acquisition.Acquisition) { phantom.AddNoise(a, 40, 20, 1) })},
	{name: "two weak shots", check: "uneven-shots", level: Doubt, value: nan, shots: []int{5, 99}, plant: planted(func(a *acquisition.Acquisition) {
		phantom.Weaken(a, 5, 0.6)
		phantom.Weaken(a, 99, 0.8)
	})},
	{name: "two turned shots", check: "shot-phase", level: Doubt, value: 180, within: 1, shots: []int{20, 60}, plant: planted(func(a *acquisition.Acquisition) {
		phantom.Turn(a, 20, 0.4)
		phantom.Turn(a, 60, math.Pi)
	})},
	{name: "one bad trace", check: "single-traces", level: Doubt, value: nan, shots: []int{33}, plant: planted(func(a *acquisition.Acquisition) {
		for j := range a.Trace(4, 33) {
			a.Trace(4, 33)[j] *= 0.7
		}
	})},
	{name: "swapped gradients", check: "neighbours", level: Doubt, value: nan, shots: []int{20, 24}, plant: planted(func(a *acquisition.Acquisition) { phantom.SwapGradients(a, 20, 24) })},
	{name: "shuffled gradients", check: "gradient-order", level: Stop, value: nan, plant: planted(func(a *acquisition.Acquisition) { phantom.ShuffleGradients(a, 9) })},
	{name: "a copied row of gradients", check: "same-direction", level: Doubt, value: nan, shots: []int{20, 24}, plant: planted(func(a *acquisition.Acquisition) { phantom.RepeatGradient(a, 20, 24) })},
	{name: "opposite directions and a frequency offset", check: "opposite-direction", level: Doubt, value: nan, plant: func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
		a, s, k := measured(func(pr *phantom.Protocol) {
			for _, n := range phantom.GoldenHalfSphere(20) {
				pr.Directions = append(pr.Directions, n, [3]float64{-n[0], -n[1], -n[2]})
			}
		})(t)
		phantom.DriftFrequency(a, 500, 500)
		return a, s, k
	}},
	{name: "an unsteady signal", check: "zeroth-moment", level: Doubt, value: 6, within: 2.5, plant: planted(func(a *acquisition.Acquisition) {
		for s := range a.Shots {
			phantom.Weaken(a, s, 1+0.085*math.Sin(float64(s)*2.4)) // SD 6 %
		}
	})},
	{name: "an unsteady frequency", check: "first-moment", level: Doubt, value: nan, plant: planted(func(a *acquisition.Acquisition) { unsteady(a, 200) })},
	{name: "a very unsteady frequency", check: "first-moment", level: Stop, value: nan, plant: planted(func(a *acquisition.Acquisition) { unsteady(a, 400) })},
	{name: "a frequency offset", check: "frequency-offset", level: Doubt, value: 80, within: 4, plant: planted(func(a *acquisition.Acquisition) { phantom.DriftFrequency(a, 80, 80) })},
	{name: "a frequency drift with zero-gradient shots", check: "frequency-drift", level: Doubt, value: 90, within: 4.5, plant: planted(func(a *acquisition.Acquisition) { phantom.DriftFrequency(a, 0, 90) })},
	{name: "a frequency drift without zero-gradient shots", check: "frequency-drift", level: Doubt, value: 90, within: 4.5, plant: func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
		a, s, k := measured(func(pr *phantom.Protocol) {
			pr.Directions = slices.DeleteFunc(pr.Directions, func(n [3]float64) bool { return n == [3]float64{} })
		})(t)
		phantom.DriftFrequency(a, 0, 90)
		return a, s, k
	}},
	{name: "a wrong time zero", check: "time-zero", level: Doubt, value: 3, within: 0.2, plant: planted(func(a *acquisition.Acquisition) { phantom.MistakeTimeZero(a, 3) })},
	{name: "a jittering time zero", check: "time-zero-spread", level: Doubt, value: 6, within: 2, plant: planted(func(a *acquisition.Acquisition) { phantom.JitterTimeZero(a, 6, 4) })},
	{name: "a phase drift", check: "phase-drift", level: Doubt, value: 40, within: 1, plant: planted(func(a *acquisition.Acquisition) { phantom.DriftPhase(a, 40*math.Pi/180) })},
	{name: "an amplitude drift", check: "amplitude-drift", level: Doubt, value: -8.3, within: 0.4, plant: planted(func(a *acquisition.Acquisition) { phantom.DriftAmplitude(a, -0.08) })},
	{name: "a weak measurement", check: "signal-to-noise", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.NoiseSD = 220 })},
	{name: "a hopeless measurement", check: "signal-to-noise", level: Stop, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.NoiseSD = 1100 })},
	{name: "one loud delay", check: "delay-noise", level: Doubt, value: nan, plant: planted(func(a *acquisition.Acquisition) {
		for s := range a.Shots {
			one := &acquisition.Acquisition{Signal: a.Trace(3, s), Delays: 1, Shots: 1, Samples: a.Samples}
			phantom.AddNoise(one, 0, 12, uint64(s))
		}
	})},
	{name: "filtered noise", check: "noise-kind", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.NoiseSD = 0.5 }), shots: nil},
	{name: "spikes", check: "noise-kind", level: Doubt, value: nan, plant: planted(func(a *acquisition.Acquisition) { phantom.Spikes(a, 90, 3000, 4) })},
	{name: "clipping", check: "clipping", level: Stop, value: nan, plant: planted(func(a *acquisition.Acquisition) { phantom.Clip(a, 0.9) })},
	{name: "an offset that is left in", check: "offset", level: Doubt, value: nan, plant: withSettings(func(a *acquisition.Acquisition, s *condition.Settings, _ *Known) {
		phantom.AddOffset(a, 20-10i)
		s.Offset = "none"
	})},
	{name: "unequal channels", check: "quadrature", level: Doubt, value: 2.9, within: 0.7, plant: planted(func(a *acquisition.Acquisition) { phantom.Unbalance(a, 0.05, 0.03) })},
	{name: "ringing at the start", check: "baseline", level: Doubt, value: nan, plant: planted(func(a *acquisition.Acquisition) { phantom.Ring(a, 60, 20) })},
	{name: "a cone without directions", check: "direction-gap", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) {
		pr.Directions = slices.DeleteFunc(phantom.GoldenHalfSphere(180), func(n [3]float64) bool { return n[0]*n[0] > 0.55 })
	})},
	{name: "bunched directions", check: "direction-evenness", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) {
		bunch := phantom.GoldenHalfSphere(4000)[:60]
		pr.Directions = append(phantom.GoldenHalfSphere(40), bunch...)
	})},
	{name: "too few spokes", check: "spoke-count", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.Directions = phantom.GoldenHalfSphere(24) })},
	{name: "a short trace", check: "resolution", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.Samples, pr.TimeZeroSample = 80, 39.5 })},
	{name: "slow sampling", check: "field-of-view", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.DwellNS = 95; pr.Samples = 48; pr.TimeZeroSample = 23.5 })},
	{name: "fast decay along the trace", check: "readout-decay", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.ReadoutDecayPerUS = 5 })},
	{name: "delays that end early", check: "delay-range", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.DelayUS = []float64{0.3, 0.5, 0.8, 1.2, 1.7, 2.2} })},
	{name: "delays that end early for the rates found", check: "delay-range", level: Doubt, value: nan, plant: withSettings(func(a *acquisition.Acquisition, _ *condition.Settings, k *Known) {
		k.Rates = &Rates{LowPerUS: 0.02, MedianPerUS: 0.3, HighPerUS: 0.5}
	})},
	{name: "a delay that is not what it says", check: "delay-order", level: Doubt, value: nan, plant: planted(func(a *acquisition.Acquisition) {
		a.DelayUS[1], a.DelayUS[4] = a.DelayUS[4], a.DelayUS[1]
	})},
	{name: "magnitudes", check: "null-crossing", level: Doubt, value: nan, plant: measured(func(pr *phantom.Protocol) { pr.DelayUS = []float64{2.2, 3, 4.5, 7, 12, 30} })},
	{name: "a poor inversion", check: "inversion-efficiency", level: Doubt, value: 1.05, within: 0.1, plant: measured(func(pr *phantom.Protocol) { pr.Inversion = 1.05 })},
	{name: "a short repetition time", check: "repetition", level: Doubt, value: nan, plant: withSettings(func(a *acquisition.Acquisition, _ *condition.Settings, _ *Known) {
		tr := 6.0
		a.Optional.RepetitionUS = &tr
	})},
	{name: "a time zero far from the echo", check: "echo-place", level: Stop, value: 120, within: 12, plant: planted(func(a *acquisition.Acquisition) { a.TimeZeroSample -= 20 })},
	{name: "half an echo with a time zero too early", check: "echo-place", level: Stop, value: 60, within: 12, plant: func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
		a, s, k := measured(func(pr *phantom.Protocol) { pr.Samples, pr.TimeZeroSample = 130, 14.4 })(t)
		a.TimeZeroSample -= 10
		return a, s, k
	}},
	{name: "shuffled gradients of a nearly round object", check: "gradient-order", level: Stop, value: nan, plant: shuffledDemo},
	{name: "shuffled gradients as the centres show them", check: "first-moment", level: Stop, value: nan, plant: shuffledDemo},
}

func TestEveryCheckFindsItsFault(t *testing.T) {
	found := map[string]bool{}
	for _, f := range faults {
		found[f.check] = true
		a, s, known := f.plant(t)
		if f.name == "filtered noise" {
			phantom.ColourNoise(a, 5, 1)
		}
		f.compare(t, Examine(a, s, known))
	}
	for _, f := range singlePointFaults {
		found[f.check] = true
		a, s, known := f.plant(t)
		f.compare(t, Examine(a, s, known))
	}
	for _, c := range Checks {
		if !found[c.Name] {
			t.Errorf("no fault is planted for %s", c.Name)
		}
	}
}

// What a finding proposes deals with what it found: with the proposed settings the finding is fine.
func TestProposalsPutRightWhatTheyAreFor(t *testing.T) {
	proposing := map[string]bool{"silent-shots": true, "noisy-shots": true, "uneven-shots": true, "shot-phase": true, "single-traces": true,
		"neighbours": true, "frequency-offset": true, "frequency-drift": true, "time-zero": true, "time-zero-spread": true, "phase-drift": true,
		"amplitude-drift": true, "offset": true, "quadrature": true}
	for _, f := range faults {
		if !proposing[f.check] {
			continue
		}
		a, s, known := f.plant(t)
		before := Examine(a, s, known)
		after := Examine(a, before.Proposed, known)
		for _, x := range after.Findings {
			if x.Check == f.check && x.Level != Fine {
				t.Errorf("%s: still %s: %s %v (settings %+v)", f.name, x.Level, x.Text, x.Shots, before.Proposed)
			}
		}
	}
}

func TestBaselineShotsAreProposedWhenTheyHoldRinging(t *testing.T) {
	a := clean(t)
	phantom.Ring(a, 60, 20)
	for d := range a.Delays {
		for s, role := range a.ShotRole {
			if role == acquisition.RoleZeroGradient {
				one := &acquisition.Acquisition{Signal: a.Trace(d, s), Delays: 1, Shots: 1, Samples: a.Samples}
				phantom.Silence(one, 0, 5, uint64(s+d))
				phantom.Ring(one, 60, 20)
			}
		}
	}
	for s, role := range a.ShotRole {
		if role == acquisition.RoleZeroGradient {
			a.ShotRole[s] = acquisition.RoleOffResonance
		}
	}
	r := Examine(a, condition.Defaults(), Known{})
	if r.Proposed.Offset != "baseline-shots" {
		t.Errorf("offset %q proposed, want baseline-shots", r.Proposed.Offset)
	}
	if again := Examine(a, r.Proposed, Known{}); Worst(again.Findings) != Fine {
		t.Errorf("after subtracting them: %+v", again.Findings[0])
	}
}

func TestWashOutIsGivenPerMinute(t *testing.T) {
	a := clean(t)
	for s := range a.Shots {
		a.Optional.ShotTimeS = append(a.Optional.ShotTimeS, 3*float64(s))
		phantom.Weaken(a, s, math.Exp(-0.02*3*float64(s)/60)) // 2 % per minute
	}
	for _, f := range Examine(a, condition.Defaults(), Known{}).Findings {
		if f.Check == "amplitude-drift" && (f.Level != Doubt || !strings.Contains(f.Text, "-2 % per minute")) {
			t.Errorf("%s: %s", f.Level, f.Text)
		}
	}
}

func TestAnAcquisitionThatCannotBeConditionedIsStopped(t *testing.T) {
	a := clean(t)
	a.TimeZeroSample = -5
	r := Examine(a, condition.Defaults(), Known{})
	if Worst(r.Findings) != Stop || r.Findings[0].Check != "conditioning" {
		t.Errorf("%+v", r.Findings)
	}
}

// A report is a JSON document: every number is finite, every list is there.
func TestReportsAreJSONWithTheirLists(t *testing.T) {
	a := clean(t)
	phantom.Silence(a, 3, 5, 1)
	for _, one := range []*acquisition.Acquisition{a, gradientGrid(t, plain)} {
		text, err := json.Marshal(Examine(one, condition.Defaults(), Known{}))
		if err != nil {
			t.Fatal(err)
		}
		if strings.Contains(string(text), ":null") {
			t.Errorf("a null in %s", text[strings.Index(string(text), ":null")-60:])
		}
		for _, key := range []string{"\"level\":", "\"check\":", "\"shots\":[", "\"delays\":[", "\"advice\":", "\"proposed\":", "\"series\":["} {
			if !strings.Contains(string(text), key) {
				t.Errorf("no %s in the report", key)
			}
		}
	}
}

// Findings are sorted by level, and every check explains itself.
func TestChecksExplainThemselves(t *testing.T) {
	seen := map[string]bool{}
	for _, c := range Checks {
		if c.Name == "" || c.Label == "" || c.Rule == "" || c.Source == "" || c.Advice == "" || len(c.Needs) == 0 || seen[c.Name] {
			t.Errorf("%+v", c)
		}
		seen[c.Name] = true
	}
	a := clean(t)
	phantom.Clip(a, 0.9)
	phantom.Silence(a, 3, 5, 1)
	rank := map[Level]int{Stop: 0, Doubt: 1, Fine: 2}
	findings := Examine(a, condition.Defaults(), Known{}).Findings
	for i := 1; i < len(findings); i++ {
		if rank[findings[i].Level] < rank[findings[i-1].Level] {
			t.Errorf("%s comes after %s", findings[i].Level, findings[i-1].Level)
		}
	}
}

func (f spoilt) compare(t *testing.T, r *Report) {
	t.Helper()
	var own []Finding
	for _, x := range r.Findings {
		if x.Check == f.check {
			own = append(own, x)
		} else if x.Level != Fine {
			t.Logf("%s: beside it %s %s: %s %v", f.name, x.Level, x.Check, x.Text, x.Shots)
		}
	}
	worstFirst(own)
	if len(own) == 0 || own[0].Level != f.level {
		t.Errorf("%s: %+v, want level %s", f.name, own, f.level)
		return
	}
	t.Logf("%s: %s %s", f.name, own[0].Level, own[0].Text)
	if !math.IsNaN(f.value) && !(math.Abs(own[0].Value-f.value) <= f.within) {
		t.Errorf("%s: value %g, want %g ± %g: %s", f.name, own[0].Value, f.value, f.within, own[0].Text)
	}
	if f.shots != nil && !slices.Equal(own[0].Shots, f.shots) {
		t.Errorf("%s: shots %v, want %v", f.name, own[0].Shots, f.shots)
	}
	if f.level != Fine && (own[0].Advice == "" || own[0].Rule == "" || own[0].Source == "") {
		t.Errorf("%s: a finding without advice, rule or source: %+v", f.name, own[0])
	}
}

func gradientGrid(t testing.TB, change func(pr *phantom.SinglePointProtocol)) *acquisition.Acquisition {
	t.Helper()
	pr := phantom.SinglePointProtocol{Sequence: acquisition.FreeDecay, DelayUS: []float64{0}, GradientMTPerM: phantom.CubeGradients(3, 11, 20),
		DwellNS: 20, Samples: 11, TimeZeroSample: -10, NoiseSD: 3, Seed: 5}
	change(&pr)
	a, err := object(t).AcquireSinglePoint(pr)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func onGrid(change func(pr *phantom.SinglePointProtocol), spoil func(a *acquisition.Acquisition)) func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
	return func(t *testing.T) (*acquisition.Acquisition, condition.Settings, Known) {
		a := gradientGrid(t, change)
		spoil(a)
		return a, condition.Defaults(), Known{}
	}
}

func asIs(*acquisition.Acquisition)         {}
func plain(pr *phantom.SinglePointProtocol) {}

var singlePointFaults = []spoilt{
	{name: "late sample times", check: "single-point-fold", level: Doubt, value: nan, plant: onGrid(func(pr *phantom.SinglePointProtocol) { pr.Samples = 60 }, asIs)},
	{name: "a noisy grid", check: "single-point-noise", level: Doubt, value: nan, plant: onGrid(func(pr *phantom.SinglePointProtocol) { pr.NoiseSD = 600 }, asIs)},
	{name: "a weak shot of a grid", check: "single-point-pairs", level: Doubt, value: nan, shots: []int{664, 666}, plant: onGrid(plain, func(a *acquisition.Acquisition) { phantom.Weaken(a, 664, 0.5) })},
}

// The same faults are found in 2D, all at once.
func TestFaultsAreFoundIn2DAllAtOnce(t *testing.T) {
	pr := protocol()
	pr.Directions, pr.NoiseSD = nil, 0.3
	for i := range 150 {
		pr.Directions = append(pr.Directions, phantom.EqualAngles(150)[i*61%150])
	}
	disc := func(r, rate, x, y, density float64) phantom.Body {
		return phantom.Body{Density: density, R1PerUS: rate, Shape: phantom.Shape{Dim: 2, SemiMM: [3]float64{r, 0.8 * r}, CentreMM: [3]float64{x, y}}}
	}
	p, err := phantom.Nested(2, disc(9, 0.45, 1, -1, 0.6), disc(3, 0.18, -2, 2, 1))
	if err != nil {
		t.Fatal(err)
	}
	a, err := p.Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	if r := Examine(a, condition.Defaults(), Known{}); Worst(r.Findings) != Fine {
		t.Errorf("before any fault: %+v", r.Findings[0])
	}
	phantom.DriftFrequency(a, -60, 60)
	phantom.Weaken(a, 12, 0.8)
	phantom.Silence(a, 50, 0.3, 1)
	phantom.Turn(a, 77, 0.5)
	phantom.AddNoise(a, 99, 1.5, 2)
	phantom.SwapGradients(a, 120, 133)
	phantom.MistakeTimeZero(a, -3)
	r := Examine(a, condition.Defaults(), Known{})
	want := map[string][]int{"uneven-shots": {12}, "silent-shots": {50}, "shot-phase": {77}, "noisy-shots": {99}, "neighbours": {120, 133}}
	for _, f := range r.Findings {
		t.Logf("%s %s: %s %v", f.Level, f.Check, f.Text, f.Shots)
		if shots, ok := want[f.Check]; ok && !slices.Equal(f.Shots, shots) {
			t.Errorf("%s names %v, planted %v", f.Check, f.Shots, shots)
		}
		if f.Check == "frequency-drift" && !(math.Abs(f.Value-120) <= 6) {
			t.Errorf("drift %.2f kHz, planted 120", f.Value)
		}
		if f.Check == "time-zero" && !(math.Abs(f.Value+3) <= 0.2) {
			t.Errorf("time zero %.3f ns, planted -3", f.Value)
		}
	}
	if again := Examine(a, r.Proposed, Known{}); Worst(again.Findings) != Fine {
		t.Errorf("with the proposals: %+v", again.Findings[0])
	}
}
