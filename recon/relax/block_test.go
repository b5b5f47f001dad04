package relax

import (
	"math"
	"testing"
)

// images returns voxels of a model with rates over a range and normal noise, and the same values voxel by voxel.
func images(m Model, delayUS []float64, voxels int, slowest, fastest, sd float64) (byDelay [][]float32, byVoxel [][]float64) {
	draw := newNoise(41)
	byDelay = make([][]float32, len(delayUS))
	for d := range byDelay {
		byDelay[d] = make([]float32, voxels)
	}
	byVoxel = make([][]float64, voxels)
	for v := range voxels {
		rate := slowest * math.Pow(fastest/slowest, draw.Float64())
		byVoxel[v] = draw.onto(signal(m, delayUS, rate, 1, 1.9), sd)
		for d := range byVoxel[v] {
			byDelay[d][v] = float32(byVoxel[v][d])
			byVoxel[v][d] = float64(byDelay[d][v])
		}
	}
	return byDelay, byVoxel
}

// blockAnswer is the answer that FitBlock would store, before it is rounded to float32.
func blockAnswer(f *Fitter, y []float64) (a Answer) {
	b := newBench(f)
	for d, v := range y {
		b.side[d][0] = v
	}
	b.seed()
	b.answer(0, &a)
	return a
}

func TestBlockAnswersEqualSingleFits(t *testing.T) {
	sd := make([]float64, len(logDelays))
	for d := range sd {
		sd[d] = 0.02 * (1 + 0.1*float64(d))
	}
	for _, m := range Models {
		f := fitter(t, m, logDelays, sd, Settings{})
		slowest, fastest := f.Range()
		for _, noise := range []float64{0.001, 0.02, 0.2, 1} {
			_, voxels := images(m, logDelays, 1500, slowest, fastest, noise)
			answered := 0
			for _, y := range voxels {
				want, got := f.Fit(y), blockAnswer(f, y)
				if got.Status != want.Status {
					t.Errorf("%s: %v, a single fit says %v (rate %g)", m.Name, got.Status, want.Status, want.Rate)
				}
				if want.Status == Answered {
					answered++
					compareFits(t, m, f, y, got, want)
				}
			}
			if answered < 300 {
				t.Errorf("%s at noise %g: only %d voxels had an answer to compare", m.Name, noise, answered)
			}
		}
	}
}

func compareFits(t *testing.T, m Model, f *Fitter, y []float64, got, want Answer) {
	t.Helper()
	data, _ := f.whiten(y)
	snr := math.Sqrt(data.energy)
	s, _ := visible(f, want.Rate)
	// The table carries rounding of some 1e-13 of the data into f', which f'' = f·sensitivity² turns into a shift of
	// ln R. That is below 1e-10 for every rate that is seen well, and a 1e-8th of the standard error elsewhere.
	shift := 3e-13 * snr / s * want.RateSE / want.Rate
	if s > 0.1 && want.RateSE < 0.2*want.Rate {
		shift = math.Min(shift, 1e-10)
	}
	near(t, m.Name+" rate", got.Rate, want.Rate, math.Max(shift, 1e-11)) // the last step of Newton's method
	// The block takes χ² as a difference of energies, which are rounded at 1e-16 per delay.
	if !(math.Abs(got.ChiSquare-want.ChiSquare) <= 1e-14*data.energy) {
		t.Errorf("%s χ²: %g, want %g", m.Name, got.ChiSquare, want.ChiSquare)
	}
	// The tolerances of the table, and the shift through the steepest dependence on the rate.
	near(t, m.Name+" rate error", got.RateSE, want.RateSE, errorError+100*shift)
	near(t, m.Name+" amplitude", got.Amplitude, want.Amplitude, 2*readingError*(1+want.AmplitudeSE/want.Amplitude*snr)+100*shift)
	near(t, m.Name+" amplitude error", got.AmplitudeSE, want.AmplitudeSE, errorError+100*shift)
}

func TestBlockFillsExactlyItsVoxels(t *testing.T) {
	const voxels, from, to = 37, 5, 31 // neither end on a multiple of the lanes
	f := fitter(t, inversionRecovery, logDelays, same(0.02, len(logDelays)), Settings{})
	byDelay, byVoxel := images(inversionRecovery, logDelays, voxels, 0.1, 0.6, 0.02)
	out := NewMaps(voxels)
	f.FitBlock(byDelay, from, to, out)
	for v := range voxels {
		if v < from || v >= to {
			if Status(out.Status[v]) != OutsideView || !math.IsNaN(float64(out.Rate[v])) {
				t.Errorf("voxel %d outside the block was written to", v)
			}
			continue
		}
		want := f.Fit(byVoxel[v])
		if Status(out.Status[v]) != want.Status {
			t.Errorf("voxel %d: %v, want %v", v, Status(out.Status[v]), want.Status)
		}
		for _, c := range []struct {
			what string
			got  float32
			want float64
		}{
			{"rate", out.Rate[v], want.Rate}, {"rate error", out.RateSE[v], want.RateSE},
			{"amplitude", out.Amplitude[v], want.Amplitude}, {"amplitude error", out.AmplitudeSE[v], want.AmplitudeSE},
			{"χ²", out.ChiSquare[v], want.ChiSquare},
		} {
			near(t, c.what, float64(c.got), c.want, 1e-6) // float32 rounds by 6e-8
		}
	}
	if got := out.Count(); got[Answered] != to-from || got[OutsideView] != voxels-(to-from) {
		t.Errorf("counts %v, want %d answered and the rest outside", got, to-from)
	}
}

func TestBlockTellsVoxelsWithoutAnAnswerApart(t *testing.T) {
	for _, m := range Models {
		f := fitter(t, m, logDelays, same(0.02, len(logDelays)), Settings{RateMinPerUS: 0.05, RateMaxPerUS: 2})
		good := signal(m, logDelays, 0.3, 1, 1.9)
		broken := func(at int, value float64) []float64 {
			y := signal(m, logDelays, 0.3, 1, 1.9)
			y[at] = value
			return y
		}
		cases := []struct {
			y    []float64
			want Status
		}{
			{good, Answered},
			{broken(0, math.NaN()), OutsideView},
			{broken(9, math.NaN()), OutsideView},
			{same(math.NaN(), 10), OutsideView},
			{broken(4, math.Inf(1)), NoSignal},
			{same(0, 10), NoSignal},
			{signal(m, logDelays, 0.03, 1, 1.9), BelowRange},
			{signal(m, logDelays, 3, 1, 1.9), AboveRange},
			{signal(m, logDelays, 0.3, -1, -1.9), WrongSign},
			{good, Answered},
		}
		if m.Curve.Offset() {
			cases[5].y = same(0.7, 10) // without change along the delays
		}
		byDelay := make([][]float32, len(logDelays))
		for d := range byDelay {
			for _, c := range cases {
				byDelay[d] = append(byDelay[d], float32(c.y[d]))
			}
		}
		out := NewMaps(len(cases))
		f.FitBlock(byDelay, 0, len(cases), out)
		for v, c := range cases {
			if got := Status(out.Status[v]); got != c.want {
				t.Errorf("%s voxel %d: %v, want %v", m.Name, v, got, c.want)
			}
			if c.want != Answered && !math.IsNaN(float64(out.Rate[v]+out.RateSE[v]+out.Amplitude[v]+out.AmplitudeSE[v]+out.ChiSquare[v])) {
				t.Errorf("%s voxel %d: %v carries a number", m.Name, v, c.want)
			}
		}
	}
}

func TestBlockHoldsForUnusualDelays(t *testing.T) {
	for _, m := range Models {
		for _, delays := range [][]float64{{1, 2, 9}, {0, 0.5, 40}, {10, 10.2, 10.5, 11}, logSpaced(0.01, 1000, 100)} {
			f := fitter(t, m, delays, same(0.02, len(delays)), Settings{})
			for _, rate := range spread(f, 25) {
				y := newNoise(int64(1e6*rate)).onto(signal(m, delays, rate, 1, 1.9), 0.002)
				got, want := blockAnswer(f, y), f.Fit(y)
				if got.Status != want.Status {
					t.Errorf("%s at %v: %v, a single fit says %v", m.Name, delays, got.Status, want.Status)
				}
				if want.Status == Answered {
					compareFits(t, m, f, y, got, want)
				}
			}
		}
	}
}

func TestTableHoldsOverTheWidestAllowedRange(t *testing.T) {
	for _, m := range Models {
		f := fitter(t, m, logDelays, same(0.02, len(logDelays)), Settings{})
		lnMin, lnMax, _ := f.rangeOf(allowed)
		wide := fitter(t, m, logDelays, same(0.02, len(logDelays)), Settings{RateMinPerUS: 1.001 * math.Exp(lnMin), RateMaxPerUS: 0.999 * math.Exp(lnMax)})
		fr := newFrame(len(logDelays))
		for k := range wide.table.nodes - 1 {
			// The polynomials of a node are worst at its neighbours, most so at the slower one.
			x := wide.nodeX(k)
			wide.frameAt(x, fr)
			got := wide.table.readingAt(k+1, -1)
			// Rounding, the digits of float32, and four digits of a standard error.
			near(t, m.Name+" rate", got.rate, math.Exp(x), 1e-11)
			near(t, m.Name+" amplitude", got.perF, fr.perF, 1e-6)
			near(t, m.Name+" rate error", got.spread, math.Exp(x)/fr.sensitivity, 1e-4)
			near(t, m.Name+" amplitude error", got.amplitudeSE, fr.amplitudeSE, 1e-4)
		}
		draw := newNoise(43)
		for _, rate := range spread(wide, 200) {
			y := draw.onto(signal(m, logDelays, rate, 1, 1.9), 1e-4)
			if got, want := blockAnswer(wide, y), wide.Fit(y); want.Status == Answered {
				compareFits(t, m, wide, y, got, want)
			}
		}
	}
}

func BenchmarkFitBlock(b *testing.B) {
	const voxels = 4096
	for _, m := range Models {
		f := fitter(b, m, logDelays, same(0.02, len(logDelays)), Settings{})
		byDelay, _ := images(m, logDelays, voxels, 0.15, 0.5, 0.02)
		out := NewMaps(voxels)
		b.Run(m.Name, func(b *testing.B) {
			for b.Loop() {
				f.FitBlock(byDelay, 0, voxels, out)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/voxels, "ns/voxel")
		})
	}
}
