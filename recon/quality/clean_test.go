package quality

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/phantom"
)

// randomClean returns a clean acquisition that a seed chooses: a plug with up to three inserts in 2D or 3D, even
// directions in order or scrambled, with or without zero-gradient shots, any receiver phase, noise of 0.05 to 1 % of the
// echo per sample.
func randomClean(t testing.TB, seed uint64) *acquisition.Acquisition {
	t.Helper()
	r := rand.New(rand.NewPCG(seed, 77))
	dim := 2 + int(seed%2)
	p := randomObject(t, r, dim)
	pr := phantom.Protocol{
		GradientMTPerM: 16 + 8*r.Float64(), DwellNS: 6 + 2*r.Float64(), Samples: 200, TimeZeroSample: 98 + 3*r.Float64(),
		PhaseRad: 2 * math.Pi * r.Float64(), Seed: seed, Directions: randomDirections(r, dim),
	}
	randomSequence(r, &pr)
	pr.NoiseSD = math.Abs(real(p.Transform([3]float64{}))) * math.Exp(math.Log(0.0005)+r.Float64()*math.Log(20))
	if pr.Sequence == acquisition.EchoDecay {
		pr.NoiseSD *= 0.5
	}
	a, err := p.Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func randomObject(t testing.TB, r *rand.Rand, dim int) *phantom.Phantom {
	body := func(semi, x, y, z, density float64) phantom.Body {
		stretch := func() float64 { return semi * (0.85 + 0.3*r.Float64()) }
		rate := 0.15 + 0.45*r.Float64()
		return phantom.Body{Density: density, R1PerUS: rate, R2PerUS: rate + 0.2, Shape: phantom.Shape{Dim: dim,
			CentreMM: [3]float64{x, y, z * float64(dim-2)}, SemiMM: [3]float64{stretch(), stretch(), stretch()}, AngleDeg: 180 * r.Float64()}}
	}
	bodies := []phantom.Body{body(9, 4*r.Float64()-2, 4*r.Float64()-2, 4*r.Float64()-2, 0.5)}
	c := bodies[0].Shape.CentreMM
	for k := range r.IntN(4) {
		sin, cos := math.Sincos(2*math.Pi*float64(k)/3 + r.Float64())
		bodies = append(bodies, body(1.3+0.8*r.Float64(), c[0]+3.5*cos, c[1]+3.5*sin, c[2]+2*r.Float64()-1, 0.6+0.4*r.Float64()))
	}
	p, err := phantom.Nested(dim, bodies...)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func randomDirections(r *rand.Rand, dim int) [][3]float64 {
	n := 70 + r.IntN(60)
	directions := phantom.EqualAngles(n)
	if dim == 3 {
		directions = phantom.GoldenHalfSphere(n)
	}
	if r.IntN(2) == 0 {
		r.Shuffle(n, func(i, j int) { directions[i], directions[j] = directions[j], directions[i] })
	}
	if r.IntN(2) == 0 {
		for _, at := range []int{0, n / 3, 2 * n / 3, n} {
			directions = slices.Insert(directions, at, [3]float64{})
		}
	}
	return directions
}

func randomSequence(r *rand.Rand, pr *phantom.Protocol) {
	switch r.IntN(3) {
	case 0:
		pr.Sequence, pr.DelayUS = acquisition.EchoDecay, []float64{0.9, 1.4, 2.1, 3.2, 4.8}
	case 1:
		pr.Sequence, pr.DelayUS = acquisition.SaturationRecovery, []float64{0.5, 1.2, 3, 8, 30}
	default:
		pr.Sequence, pr.DelayUS, pr.Inversion = acquisition.InversionRecovery, []float64{0.4, 0.9, 2, 4.5, 10, 30}, 1.6+0.3*r.Float64()
	}
}

// cleanSets is how many random acquisitions the false-alarm rate is measured over.
const cleanSets = 200

// A check may raise a false alarm in one of a hundred clean acquisitions, that is in two of two hundred.
func TestFalseAlarmsAreAtMostOnePercentPerCheck(t *testing.T) {
	alarms := map[string][]uint64{}
	text := map[string]string{}
	ran := map[string]int{}
	for seed := range uint64(cleanSets) {
		r := Examine(randomClean(t, seed), condition.Defaults(), Known{})
		hit := map[string]bool{}
		for _, f := range r.Findings {
			ran[f.Check]++
			if f.Level != Fine && !hit[f.Check] {
				hit[f.Check] = true
				alarms[f.Check] = append(alarms[f.Check], seed)
				text[f.Check] = f.Text
			}
			if math.IsNaN(f.Value) || math.IsInf(f.Value, 0) {
				t.Errorf("seed %d: %s has the value %g", seed, f.Check, f.Value)
			}
		}
	}
	for _, c := range Checks {
		if n := len(alarms[c.Name]); n > 0 {
			t.Logf("%s: %d of %d, seeds %v: %s", c.Name, n, cleanSets, alarms[c.Name], text[c.Name])
			if n > cleanSets/100 {
				t.Errorf("%s raises a false alarm in %d of %d clean acquisitions", c.Name, n, cleanSets)
			}
		}
	}
	for _, c := range spokeChecks() {
		if ran[c.Name] < cleanSets/10 {
			t.Errorf("%s ran on %d of %d acquisitions only", c.Name, ran[c.Name], cleanSets)
		}
	}
}

// Half echoes and recorded projections have fewer sets to be silent on; one alarm in 40 would be allowed to no check.
func TestHalfEchoesAndProjectionsAreSilentWhenClean(t *testing.T) {
	for seed := range uint64(40) {
		whole := randomClean(t, seed)
		for name, a := range map[string]*acquisition.Acquisition{"half echo": halfOf(whole), "projections": projectionsOf(t, seed)} {
			for _, f := range Examine(a, condition.Defaults(), Known{}).Findings {
				if f.Level != Fine {
					t.Errorf("%s, seed %d: %s %s: %s", name, seed, f.Level, f.Check, f.Text)
				}
			}
		}
	}
}

// halfOf drops all but eight samples before the echo.
func halfOf(a *acquisition.Acquisition) *acquisition.Acquisition {
	out := *a
	drop := int(a.TimeZeroSample) - 8
	out.Samples, out.TimeZeroSample, out.Signal = a.Samples-drop, a.TimeZeroSample-float64(drop), nil
	for d := range a.Delays {
		for s := range a.Shots {
			out.Signal = append(out.Signal, a.Trace(d, s)[drop:]...)
		}
	}
	return &out
}

// projectionsOf returns noisy exact projections of a random object.
func projectionsOf(t testing.TB, seed uint64) *acquisition.Acquisition {
	t.Helper()
	r := rand.New(rand.NewPCG(seed, 78))
	dim := 2 + int(seed%2)
	p := randomObject(t, r, dim)
	a := &acquisition.Acquisition{Dim: dim, Delays: 4, Shots: 90, Samples: 61, DelayUS: []float64{0.9, 1.5, 2.5, 4}, Sequence: acquisition.EchoDecay,
		Domain: acquisition.Projection, PositionStepMM: 0.8, TimeZeroSample: 30.3}
	directions := phantom.EqualAngles(90)
	if dim == 3 {
		directions = phantom.GoldenHalfSphere(90)
	}
	for d := range a.Delays {
		for _, n := range directions {
			for j := range a.Samples {
				v := p.Projection(n, (float64(j)-30.3)*0.8) * math.Exp(-0.5*a.DelayUS[d])
				a.Signal = append(a.Signal, complex(float32(v+0.02*r.NormFloat64()), 0))
			}
		}
	}
	a.GradientMTPerM = directions
	if err := a.Check(); err != nil {
		t.Fatal(err)
	}
	return a
}

// randomCleanGrid is a single-point acquisition of a random body without a fault: 2D or 3D, free decay or recovery, a grid
// of gradients, any phase, frequency and line width, noise of 0.03 to 0.6 % of the signal at k = 0, and sample times whose
// field of view holds the body.
func randomCleanGrid(t testing.TB, seed uint64) *acquisition.Acquisition {
	t.Helper()
	r := rand.New(rand.NewPCG(seed, 78))
	dim := 2 + int(seed%2)
	p := randomObject(t, r, dim)
	n, most := 13+2*r.IntN(5), 15+15*r.Float64()
	if dim == 3 {
		n = 9 + r.IntN(4)
	}
	const samples, wait = 12, 10 // the first sample comes as many dwell times after the pulse
	latestNS := 1 / (acquisition.KPerNS(2*most/float64(n-1), 1) * (38 + 10*r.Float64()))
	pr := phantom.SinglePointProtocol{Sequence: acquisition.FreeDecay, DelayUS: []float64{0}, GradientMTPerM: phantom.CubeGradients(dim, n, most),
		DwellNS: latestNS / (samples + wait), Samples: samples, TimeZeroSample: -wait, PhaseRad: 2 * math.Pi * r.Float64(),
		BroadeningPerUS: r.Float64(), FrequencyOffsetMHz: 0.2 * (r.Float64() - 0.5), Seed: seed}
	if r.IntN(2) == 1 {
		pr.Sequence, pr.DelayUS, pr.Inversion = acquisition.InversionRecovery, []float64{0.5, 1, 2, 4, 9, 30}, 1.6+0.35*r.Float64()
	}
	pr.NoiseSD = math.Abs(real(p.Transform([3]float64{}))) * math.Exp(math.Log(0.0003)+r.Float64()*math.Log(20))
	a, err := p.AcquireSinglePoint(pr)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// The seeds are not those that any limit was chosen with.
func TestFalseAlarmsOnGridsOfGradientsAreAtMostOnePercent(t *testing.T) {
	alarms, ran, text := map[string]int{}, map[string]int{}, map[string]string{}
	for seed := range uint64(cleanSets) {
		for _, f := range Examine(randomCleanGrid(t, 70000+seed), condition.Defaults(), Known{}).Findings {
			ran[f.Check]++
			if f.Level != Fine {
				alarms[f.Check]++
				text[f.Check] = f.Text
			}
		}
	}
	for check, n := range alarms {
		if n > cleanSets/100 {
			t.Errorf("%s raises a false alarm in %d of %d clean acquisitions: %s", check, n, cleanSets, text[check])
		}
	}
	for _, c := range singlePointChecks {
		if ran[c.Name] < cleanSets/10 {
			t.Errorf("%s ran on %d of %d acquisitions only", c.Name, ran[c.Name], cleanSets)
		}
	}
}

func spokeChecks() []Check {
	var out []Check
	for _, c := range Checks {
		if s := (&Subject{A: &acquisition.Acquisition{Encoding: acquisition.SinglePoint}}); len(c.Needs) > 0 && c.Needs[0](s) {
			continue
		}
		out = append(out, c)
	}
	return out
}
