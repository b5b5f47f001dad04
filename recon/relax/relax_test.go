package relax

import (
	"errors"
	"math"
	"math/rand"
	"slices"
	"testing"

	"gonum.org/v1/gonum/optimize"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// logDelays is a usual set: ten delays, log-spaced from 0.3 to 40 µs.
var logDelays = logSpaced(0.3, 40, 10)

func logSpaced(from, to float64, n int) []float64 {
	list := make([]float64, n)
	for i := range list {
		list[i] = from * math.Pow(to/from, float64(i)/float64(n-1))
	}
	return list
}

func same(value float64, n int) []float64 { return slices.Repeat([]float64{value}, n) }

func fitter(t testing.TB, m Model, delayUS, noiseSD []float64, s Settings) *Fitter {
	t.Helper()
	f, err := NewFitter(m, delayUS, noiseSD, s)
	if err != nil {
		t.Fatalf("%s: %v", m.Name, err)
	}
	return f
}

func signal(m Model, delayUS []float64, rate, amplitude, inverted float64) []float64 {
	y := make([]float64, len(delayUS))
	for d, delay := range delayUS {
		y[d] = m.Signal(rate, amplitude, inverted, delay)
	}
	return y
}

// noise adds normal deviates from a fixed seed.
type noise struct{ *rand.Rand }

func newNoise(seed int64) noise { return noise{rand.New(rand.NewSource(seed))} }

func (n noise) onto(y []float64, sd float64) []float64 {
	for d := range y {
		y[d] += sd * n.NormFloat64()
	}
	return y
}

// spread returns rates from the slowest to the fastest of a fitter's range, ends left out.
func spread(f *Fitter, count int) []float64 {
	slowest, fastest := f.Range()
	return logSpaced(slowest, fastest, count+2)[1 : count+1]
}

func wantStatus(t *testing.T, what string, a Answer, want Status) {
	t.Helper()
	if a.Status != want {
		t.Errorf("%s: %v, want %v", what, a.Status, want)
	}
	for _, v := range []float64{a.Rate, a.RateSE, a.Amplitude, a.AmplitudeSE, a.Inverted, a.ChiSquare} {
		if want != Answered && !math.IsNaN(v) {
			t.Errorf("%s: %v carries the number %g, want NaN", what, a.Status, v)
		}
	}
}

func TestEveryRowOfModelsIsComplete(t *testing.T) {
	seen := map[string]bool{}
	for _, m := range Models {
		if m.Name == "" || m.Label == "" || m.Formula == "" || m.Curve == nil || seen[m.Name] {
			t.Errorf("row %+v lacks a text or a curve, or its name is taken", m)
		}
		seen[m.Name] = true
		if !slices.Contains(acquisition.Sequences, m.Sequence) {
			t.Errorf("%s: sequence %q is not in the field dictionary", m.Name, m.Sequence)
		}
		if want := (&acquisition.Acquisition{Sequence: m.Sequence}).RateName(); m.RateName != want {
			t.Errorf("%s: rate %q, an acquisition of that sequence says %q", m.Name, m.RateName, want)
		}
		if got, err := Named(m.Name); err != nil || got.Name != m.Name {
			t.Errorf("%s: not found by its name: %v", m.Name, err)
		}
		if got, err := For(m.Sequence); err != nil || got.Sequence != m.Sequence {
			t.Errorf("%s: not found by its sequence: %v", m.Name, err)
		}
	}
}

func TestDerivativesOfEveryCurveMatchDifferences(t *testing.T) {
	const h = 1e-4
	for _, m := range Models {
		for _, rate := range []float64{0.05, 0.4, 2} {
			for _, delay := range []float64{0, 0.3, 1.5, 8} {
				_, first, second := m.Curve.At(rate, delay)
				up, _, _ := m.Curve.At(rate*(1+h), delay)
				mid, _, _ := m.Curve.At(rate, delay)
				down, _, _ := m.Curve.At(rate*(1-h), delay)
				step := rate * h
				// Central differences err by (RT)²·h² relative to a curve of size one over the step scale; the second
				// also by rounding, 1e-16/h².
				if d := (up-down)/(2*step) - first; !(math.Abs(d)*rate <= 1e-5) {
					t.Errorf("%s at R %g, T %g: first derivative off by %g", m.Name, rate, delay, d)
				}
				if d := (up-2*mid+down)/(step*step) - second; !(math.Abs(d)*rate*rate <= 1e-5) {
					t.Errorf("%s at R %g, T %g: second derivative off by %g", m.Name, rate, delay, d)
				}
			}
		}
	}
}

func TestFrameDerivativesMatchDifferences(t *testing.T) {
	const h = 1e-4
	for _, m := range Models {
		f := fitter(t, m, logDelays, logSpaced(0.01, 0.03, len(logDelays)), Settings{})
		at, up, down := newFrame(len(logDelays)), newFrame(len(logDelays)), newFrame(len(logDelays))
		for _, rate := range spread(f, 10) {
			x := math.Log(rate)
			f.frameAt(x, at)
			f.frameAt(x+h, up)
			f.frameAt(x-h, down)
			near(t, m.Name+" |u|²", dot(at.u, at.u), 1, 1e-14)
			for d := range at.u {
				// Central differences of a unit curve err by h² = 1e-8, the second also by rounding, 1e-16/h².
				if off := (up.u[d]-down.u[d])/(2*h) - at.du[d]; !(math.Abs(off) <= 1e-7) {
					t.Errorf("%s at rate %g, delay %d: du off by %g", m.Name, rate, d, off)
				}
				if off := (up.u[d]-2*at.u[d]+down.u[d])/(h*h) - at.d2u[d]; !(math.Abs(off) <= 1e-6) {
					t.Errorf("%s at rate %g, delay %d: d2u off by %g", m.Name, rate, d, off)
				}
			}
		}
	}
}

func TestNoiselessDataGiveBackTheirParameters(t *testing.T) {
	for _, m := range Models {
		f := fitter(t, m, logDelays, same(0.02, len(logDelays)), Settings{})
		for _, rate := range spread(f, 40) {
			a := f.Fit(signal(m, logDelays, rate, 1.3, 2.4))
			if a.Status != Answered {
				t.Fatalf("%s at rate %g: %v", m.Name, rate, a.Status)
			}
			// Data are rounded at 1e-16; at the ends of the range a change of the curve by s = 0.01 of itself per e-fold
			// of rate makes that 1e-14/s = 1e-12, and slow recoveries have A and B a hundredfold the data.
			near(t, m.Name+" rate", a.Rate, rate, 1e-10)
			near(t, m.Name+" amplitude", a.Amplitude, 1.3, 1e-10)
			if m.Curve.Offset() {
				near(t, m.Name+" inverted", a.Inverted, 2.4, 1e-10)
			}
			if !(a.ChiSquare <= 1e-20) {
				t.Errorf("%s at rate %g: χ² %g of data without noise", m.Name, rate, a.ChiSquare)
			}
		}
	}
}

// fullFit minimises the sum of squares over all unknowns at once, from the truth, by a quasi-Newton method that knows
// nothing of linear amplitudes.
func fullFit(t *testing.T, m Model, y, sd []float64, start []float64) (*optimize.Result, error) {
	t.Helper()
	residual := func(p []float64, d int) (left, c, first float64) {
		c, first, _ = m.Curve.At(p[0], logDelays[d])
		inverted := 0.0
		if len(p) == 3 {
			inverted = p[2]
		}
		return (m.Signal(p[0], p[1], inverted, logDelays[d]) - y[d]) / sd[d], c, first
	}
	problem := optimize.Problem{
		Func: func(p []float64) (sum float64) {
			for d := range y {
				left, _, _ := residual(p, d)
				sum += left * left
			}
			return sum
		},
		Grad: func(grad, p []float64) {
			clear(grad)
			for d := range y {
				left, c, first := residual(p, d)
				by := 2 * left / sd[d]
				if len(p) == 3 {
					grad[0] += by * p[2] * first
					grad[1] += by
					grad[2] += by * c
				} else {
					grad[0] += by * p[1] * first
					grad[1] += by * c
				}
			}
		},
	}
	return optimize.Minimize(problem, start, &optimize.Settings{GradientThreshold: 1e-9}, &optimize.BFGS{})
}

func TestVariableProjectionEqualsTheFullFit(t *testing.T) {
	draw := newNoise(3)
	for _, m := range Models {
		sd := make([]float64, len(logDelays))
		for d := range sd {
			sd[d] = 0.01 + 0.004*float64(d%4)
		}
		f := fitter(t, m, logDelays, sd, Settings{})
		for _, rate := range []float64{0.1, 0.25, 0.7} {
			y := draw.onto(signal(m, logDelays, rate, 1, 1.8), 0.02)
			a := f.Fit(y)
			full, err := fullFit(t, m, y, sd, []float64{rate, 1, 1.8}[:m.Parameters()])
			// The line search gives up when the sum no longer falls by more than its rounding; the gradient says whether
			// it has arrived.
			if full == nil || a.Status != Answered {
				t.Fatalf("%s at rate %g: %v, full fit %v", m.Name, rate, a.Status, err)
			}
			// A sum of squares near 10 is flat to rounding within 1e-8 of its standard error; its gradient sees further.
			if !(math.Abs(full.X[0]-a.Rate) <= 1e-7*a.RateSE) || !(math.Abs(full.X[1]-a.Amplitude) <= 1e-7*a.AmplitudeSE) {
				t.Errorf("%s at rate %g: rate %.12g amplitude %.12g, full fit %.12g", m.Name, rate, a.Rate, a.Amplitude, full.X)
			}
			near(t, m.Name+" χ²", a.ChiSquare, full.F, 1e-12)
		}
	}
}

func TestFitFindsTheLeastSumOfSquaresInTheRange(t *testing.T) {
	draw := newNoise(5)
	for _, m := range Models {
		f := fitter(t, m, logDelays, same(1, len(logDelays)), Settings{})
		fr := newFrame(len(logDelays))
		for trial := range 400 {
			// From clear signals to nothing but noise.
			y := draw.onto(signal(m, logDelays, 0.1+0.5*draw.Float64(), float64(trial%20), 1.8*float64(trial%20)), 1)
			a := f.Fit(y)
			energy := dot(y, y)
			if f.offset != nil {
				energy -= math.Pow(dot(f.offset, y), 2)
			}
			sumAt := func(x float64) float64 {
				f.frameAt(x, fr)
				return energy - math.Pow(dot(fr.u, y), 2)
			}
			least := math.Inf(1)
			for x := f.lnMin; x <= f.lnMax; x += 0.01 {
				least = math.Min(least, sumAt(x))
			}
			got := a.ChiSquare
			switch a.Status {
			case BelowRange:
				got = sumAt(f.lnMin)
			case AboveRange:
				got = sumAt(f.lnMax)
			case WrongSign:
				continue // its sum is not told
			}
			if !(got <= least+1e-9*energy) { // rounding of the sums
				t.Errorf("%s trial %d: %v with χ² %g, a search over the range finds %g", m.Name, trial, a.Status, got, least)
			}
		}
	}
}

func TestTruthLiesWithinOneStandardErrorAsOftenAsItShould(t *testing.T) {
	const fits = 4000
	for _, m := range Models {
		f := fitter(t, m, logDelays, same(0.01, len(logDelays)), Settings{})
		draw := newNoise(17)
		rate, amplitude := 0, 0
		for range fits {
			a := f.Fit(draw.onto(signal(m, logDelays, 0.25, 1, 1.9), 0.01))
			if a.Status != Answered {
				t.Fatalf("%s: %v", m.Name, a.Status)
			}
			if math.Abs(a.Rate-0.25) < a.RateSE {
				rate++
			}
			if math.Abs(a.Amplitude-1) < a.AmplitudeSE {
				amplitude++
			}
		}
		// 68.27 % is the normal share; 4000 fits know theirs to 0.7 %, so 3 % is four of its standard errors.
		for what, count := range map[string]int{"rate": rate, "amplitude": amplitude} {
			if share := float64(count) / fits; !(math.Abs(share-0.6827) <= 0.03) {
				t.Errorf("%s: the true %s lies within one standard error in %.3f of the fits, want 0.683", m.Name, what, share)
			}
		}
	}
}

func TestAnswersDoNotDependOnTheOrderOfDelays(t *testing.T) {
	draw := newNoise(23)
	order := draw.Perm(len(logDelays))
	for _, m := range Models {
		y := draw.onto(signal(m, logDelays, 0.3, 1, 1.9), 0.02)
		sd := same(0.02, len(y))
		sd[3] = 0.05
		var delays2, y2, sd2 []float64
		for _, d := range order {
			delays2, y2, sd2 = append(delays2, logDelays[d]), append(y2, y[d]), append(sd2, sd[d])
		}
		a, b := fitter(t, m, logDelays, sd, Settings{}).Fit(y), fitter(t, m, delays2, sd2, Settings{}).Fit(y2)
		// The same sums in another order: rounding only, at the stopping distance of the fit.
		near(t, m.Name+" rate", b.Rate, a.Rate, 1e-11)
		near(t, m.Name+" standard error", b.RateSE, a.RateSE, 1e-11)
		near(t, m.Name+" amplitude", b.Amplitude, a.Amplitude, 1e-11)
	}
}

func TestADelayMeasuredTwiceCountsAsItsMeanWithHalfTheVariance(t *testing.T) {
	for _, m := range Models {
		y := newNoise(29).onto(signal(m, logDelays, 0.3, 1, 1.9), 0.02)
		sd := same(0.02, len(y))
		twice := fitter(t, m, append(slices.Clone(logDelays), logDelays[4]), append(slices.Clone(sd), 0.02), Settings{})
		a := twice.Fit(append(slices.Clone(y), y[4]+0.06))
		y[4] += 0.03
		sd[4] /= math.Sqrt2
		b := fitter(t, m, logDelays, sd, Settings{}).Fit(y)
		near(t, m.Name+" rate", a.Rate, b.Rate, 1e-11) // the same normal equations, apart from rounding
		near(t, m.Name+" standard error", a.RateSE, b.RateSE, 1e-11)
		near(t, m.Name+" amplitude", a.Amplitude, b.Amplitude, 1e-11)
	}
}

func TestResidualScaleIsUndefinedWithoutSpareDelays(t *testing.T) {
	f := fitter(t, inversionRecovery, []float64{1, 4, 12}, same(1, 3), Settings{})
	if by := f.ResidualScale(0); !math.IsNaN(by) {
		t.Errorf("three delays and three unknowns gave a residual scale of %g", by)
	}
	f = fitter(t, inversionRecovery, []float64{1, 2, 4, 12, 30}, same(1, 5), Settings{})
	near(t, "√(18/2)", f.ResidualScale(18), 3, 1e-15)
}

func TestVoxelsWithoutAnAnswerSayWhy(t *testing.T) {
	for _, m := range Models {
		f := fitter(t, m, logDelays, same(0.02, len(logDelays)), Settings{RateMinPerUS: 0.05, RateMaxPerUS: 2})
		good := signal(m, logDelays, 0.3, 1, 1.9)
		wantStatus(t, m.Name+" good", f.Fit(good), Answered)
		for what, bad := range map[string]float64{"NaN": math.NaN(), "+Inf": math.Inf(1), "-Inf": math.Inf(-1), "overflow": 1e300} {
			y := slices.Clone(good)
			y[2] = bad
			wantStatus(t, m.Name+" "+what, f.Fit(y), NoSignal)
		}
		wantStatus(t, m.Name+" zeros", f.Fit(same(0, len(good))), NoSignal)
		wantStatus(t, m.Name+" slow", f.Fit(signal(m, logDelays, 0.03, 1, 1.9)), BelowRange)
		wantStatus(t, m.Name+" fast", f.Fit(signal(m, logDelays, 3, 1, 1.9)), AboveRange)
		wantStatus(t, m.Name+" slow, from a fast start", f.FitFrom(signal(m, logDelays, 0.03, 1, 1.9), 50), BelowRange)
		wantStatus(t, m.Name+" fast, from a slow start", f.FitFrom(signal(m, logDelays, 3, 1, 1.9), 0), AboveRange)
		wantStatus(t, m.Name+" turned over", f.Fit(signal(m, logDelays, 0.3, -1, -1.9)), WrongSign)
		if m.Curve.Offset() {
			wantStatus(t, m.Name+" constant", f.Fit(same(0.7, len(good))), NoSignal)
			wantStatus(t, m.Name+" B below zero", f.Fit(signal(m, logDelays, 0.3, 1, -1.9)), WrongSign)
			wantStatus(t, m.Name+" A below zero", f.Fit(signal(m, logDelays, 0.3, -1, 1.9)), WrongSign)
		}
	}
}

func TestStartsAcrossTheRangeReachTheSameAnswer(t *testing.T) {
	for _, m := range Models {
		f := fitter(t, m, logDelays, same(0.02, len(logDelays)), Settings{})
		y := newNoise(31).onto(signal(m, logDelays, 0.4, 1, 1.9), 0.02)
		want := f.Fit(y)
		for _, start := range spread(f, 12) {
			near(t, m.Name+" rate", f.FitFrom(y, start).Rate, want.Rate, 1e-11) // the stopping distance
		}
	}
}

func TestChosenRangeHoldsWhatTheDelaysSee(t *testing.T) {
	for _, m := range Models {
		for _, delays := range [][]float64{logDelays, {1, 2, 3, 4, 5}, {0, 0.5, 40}, {10, 10.2, 10.5, 11}} {
			f := fitter(t, m, delays, same(1, len(delays)), Settings{})
			slowest, fastest := f.Range()
			for _, inside := range append(spread(f, 20), slowest, fastest) {
				if s, _ := visible(f, inside); !(s >= 0.99*seen.sensitivity) { // Range goes through a logarithm
					t.Errorf("%s at %v: rate %g is in the range but seen with %g only", m.Name, delays, inside, s)
				}
			}
			most := 0.0
			for _, rate := range logSpaced(slowest/100, fastest*100, 500) {
				_, norm := visible(f, rate)
				most = math.Max(most, norm)
			}
			for _, outside := range []float64{slowest / 1.06, fastest * 1.06} { // one step of the search further
				if s, norm := visible(f, outside); s >= 1.01*seen.sensitivity && norm >= 1.01*seen.signal*most {
					t.Errorf("%s at %v: rate %g is seen but outside the range", m.Name, delays, outside)
				}
			}
		}
	}
}

// visible returns how the delays see a rate: the sensitivity and the length of the curve.
func visible(f *Fitter, rate float64) (sensitivity, norm float64) {
	fr := newFrame(len(f.delayUS))
	if !f.frameAt(math.Log(rate), fr) {
		return 0, 0
	}
	return fr.sensitivity, fr.norm
}

func TestDelaysAndSettingsWithoutAnAnswerAreRefused(t *testing.T) {
	for _, c := range []struct {
		what     string
		model    Model
		delays   []float64
		noise    []float64
		settings Settings
		kind     fault.Kind
	}{
		{"one delay", echoDecay, []float64{1}, []float64{1}, Settings{}, fault.NoAnswer},
		{"no delay", echoDecay, nil, nil, Settings{}, fault.NoAnswer},
		{"two delays, three unknowns", inversionRecovery, []float64{1, 5}, same(1, 2), Settings{}, fault.NoAnswer},
		{"equal delays", echoDecay, same(4, 6), same(1, 6), Settings{}, fault.NoAnswer},
		{"two of three equal", inversionRecovery, []float64{1, 5, 5}, same(1, 3), Settings{}, fault.NoAnswer},
		{"delay zero tells nothing", saturationRecovery, []float64{0, 5}, same(1, 2), Settings{}, fault.NoAnswer},
		{"negative delay", echoDecay, []float64{-1, 2, 3}, same(1, 3), Settings{}, fault.BadSetting},
		{"NaN delay", echoDecay, []float64{math.NaN(), 2, 3}, same(1, 3), Settings{}, fault.BadSetting},
		{"no noise", echoDecay, []float64{1, 2, 3}, []float64{1, 0, 1}, Settings{}, fault.BadSetting},
		{"negative noise", echoDecay, []float64{1, 2, 3}, []float64{1, -1, 1}, Settings{}, fault.BadSetting},
		{"NaN noise", echoDecay, []float64{1, 2, 3}, []float64{1, math.NaN(), 1}, Settings{}, fault.BadSetting},
		{"noise missing", echoDecay, []float64{1, 2, 3}, []float64{1}, Settings{}, fault.Bug},
		{"negative rate", echoDecay, logDelays, same(1, 10), Settings{RateMinPerUS: -1}, fault.BadSetting},
		{"NaN rate", echoDecay, logDelays, same(1, 10), Settings{RateMaxPerUS: math.NaN()}, fault.BadSetting},
		{"empty range", echoDecay, logDelays, same(1, 10), Settings{RateMinPerUS: 1, RateMaxPerUS: 1}, fault.BadSetting},
		{"rates nobody sees", echoDecay, logDelays, same(1, 10), Settings{RateMaxPerUS: 1e6}, fault.BadSetting},
		{"range past the chosen end", echoDecay, logDelays, same(1, 10), Settings{RateMinPerUS: 1e6}, fault.BadSetting},
	} {
		_, err := NewFitter(c.model, c.delays, c.noise, c.settings)
		var f *fault.Fault
		if !errors.As(err, &f) || f.Kind != c.kind || f.Where == "" {
			t.Errorf("%s: got %v, want a %s fault with its place", c.what, err, c.kind)
		}
	}
	if _, err := Named("stretched"); err == nil {
		t.Error("an unknown model was accepted")
	}
	if _, err := For("no such sequence"); err == nil {
		t.Error("a sequence without a model was accepted")
	}
}
