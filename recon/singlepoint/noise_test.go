package singlepoint

import (
	"math"
	"math/cmplx"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/phantom"
	"torrloom/recon/relax"
	"torrloom/recon/volume"
)

func allFrames(t testing.TB, a *acquisition.Acquisition, s Settings, p *Plan, g volume.Grid) *Result {
	t.Helper()
	frames := make([]int, len(p.FrameUS))
	for f := range frames {
		frames[f] = f
	}
	r, err := Images(a, s, p, g, frames, nil)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// The predicted noise of a voxel equals the spread over noise realisations, for every kind of set, along both axes.
func TestPredictedNoiseEqualsMonteCarlo(t *testing.T) {
	for _, dim := range []int{2, 3} {
		for name, list := range sets(dim) {
			for _, axis := range Axes {
				s := Defaults()
				s.Axis, s.NoiseSD = axis.Name, 3
				if axis.Name == "delay" {
					s.Window, s.Resolution = "hamming", "own"
				}
				g := cube(t, dim, 32-16*(dim-2), 12)
				pr := phantom.SinglePointProtocol{Sequence: acquisition.EchoDecay, DelayUS: []float64{1, 2}, GradientMTPerM: list, DwellNS: 250,
					Samples: 3, TimeZeroSample: -3.2, PhaseRad: 0.8, FrequencyOffsetMHz: 0.3}
				object := phantom.Sum(dim, ball(dim, [3]float64{1, -1, 0}, 4, 10, 0.3))
				p, _, err := Prepare(measured(t, object, pr), s, g, []int{0, 1, 2})
				if err != nil {
					t.Fatal(err)
				}
				// Images are linear in the signal once the plan is made, so that its noise can be looked at alone.
				square, count := 0.0, 0.0
				pr.NoiseSD = 3
				for seed := range 40 - 32*(dim-2) {
					pr.Seed = uint64(seed)
					for i, v := range allFrames(t, measured(t, phantom.Sum(dim), pr), s, p, g).Values {
						if z := float64(v) / p.FrameNoiseSD[i/g.Voxels()]; z == z {
							square, count = square+z*z, count+1
						}
					}
				}
				// The agreed 5 %; some thousand independent values know the spread to 1 %.
				if got := math.Sqrt(square / count); !(math.Abs(got-1) <= 0.05) {
					t.Errorf("%dD %s along %s: spread over prediction %.4f in %g voxels", dim, name, axis.Name, got, count)
				}
			}
		}
	}
}

// White noise with uniform weights stays white: all frequencies of the image up to the cutoff hold NoiseSD² of noise power
// times the cell squared, and those beyond hold none.
func TestNoiseOfALatticeIsWhite(t *testing.T) {
	const n, matrix, runs = 17, 24, 400
	list := phantom.CubeGradients(2, n, 25)
	power, shells := make([]float64, 13), make([]float64, 13)
	var waves [matrix]complex128
	for i := range waves {
		waves[i] = cmplx.Rect(1, 2*math.Pi*float64(i)/matrix)
	}
	for seed := range runs {
		a := measured(t, phantom.Sum(2), phantom.SinglePointProtocol{GradientMTPerM: list, DwellNS: 100, Samples: 1, TimeZeroSample: -8, NoiseSD: 3, Seed: uint64(seed)})
		st := described(t, a).Times[0]
		g := cube(t, 2, matrix, st.FieldOfViewMM)
		geo, err := newGeometry(a)
		if err != nil {
			t.Fatal(err)
		}
		p := &Plan{Samples: []int{0}, TimeUS: []float64{st.TimeUS}, PhaseRad: []float64{0}, KCutPerMM: []float64{st.KMaxPerMM}}
		sum := newLatticeSum(geo, g)
		for row := range sum.from { // the corners too, since a spectrum needs the whole period
			sum.from[row], sum.to[row] = 0, matrix
		}
		samples := make([]complex128, len(list))
		job{weight: 1}.load(samples, newReader(a, unphased()), geo, unphased(), p)
		image := make([]float32, g.Voxels())
		if err := sum.add(image, samples, st.TimeUS); err != nil {
			t.Fatal(err)
		}
		cell := 1 / (st.FieldOfViewMM * st.FieldOfViewMM)
		for qy := -12; qy < 12; qy++ {
			for qx := -12; qx < 12; qx++ {
				re, im := 0.0, 0.0
				for i, v := range image {
					wave := waves[(qx*(i%matrix)+qy*(i/matrix)+2*matrix*matrix)%matrix]
					re, im = re+float64(v)*real(wave), im+float64(v)*imag(wave)
				}
				shell := min(12, int(math.Ceil(math.Hypot(float64(qx), float64(qy)))))
				power[shell] += (re*re + im*im) / (9 * cell * cell * math.Pow(matrix, 4))
				shells[shell]++
			}
		}
	}
	for shell, sum := range power {
		want := 1.0
		if shell > n/2 {
			want = 0
		}
		// The agreed 5 %. The innermost shell is one real number per run, whose square is known to √(2/400), 7 %.
		allowed := 0.05
		if shell == 0 {
			allowed = 0.2
		}
		if got := sum / shells[shell]; !(math.Abs(got-want) <= allowed) {
			t.Errorf("shell %d: %.4f of the predicted noise power, want %g", shell, got, want)
		}
	}
}

// unphased leaves the real channel as recorded.
func unphased() Settings {
	s := Defaults()
	s.Phase, s.NoiseSD = "none", 3
	return s
}

func TestNoiseIsMeasuredWithAndWithoutOppositeGradients(t *testing.T) {
	for _, c := range []struct {
		name string
		dim  int
		list [][3]float64
	}{{"odd cube", 3, sets(3)["odd cube"]}, {"even square", 2, sets(2)["even cube"]}, {"ball", 3, sets(3)["ball"]}, {"spiral without opposites", 3, spiralBall(900, 25)}} {
		for _, seed := range []uint64{1, 2, 3} {
			object := phantom.Sum(c.dim, ball(c.dim, [3]float64{1, -1, 0}, 4, 10, 0.3))
			a := measured(t, object, phantom.SinglePointProtocol{GradientMTPerM: c.list, DwellNS: 20, Samples: 60, TimeZeroSample: -30,
				PhaseRad: 0.8, FrequencyOffsetMHz: 0.3, NoiseSD: 3, Seed: seed})
			g := cube(t, c.dim, 16, 12)
			p, _, err := Prepare(a, Defaults(), g, []int{0, 10, 20, 30, 40, 50})
			if err != nil {
				t.Fatal(err)
			}
			// The median of n exponential powers spreads by 1/√n of itself, so the SD by half that: 2 % for the 600 of the
			// square. Five of those.
			if !(math.Abs(p.NoiseSD/3-1) <= 0.1) || c.dim == 3 && !(math.Abs(p.NoiseSD/3-1) <= 0.04) {
				t.Errorf("%s: measured %.3f, want 3", c.name, p.NoiseSD)
			}
		}
	}
}

// The whole way to R2*: the rate of a voxel lies within one standard error of the truth as often as it should, with the
// noise measured from the data.
func TestFreeDecayGivesTheKnownRateWithItsError(t *testing.T) {
	const rate = 0.9
	model, err := relax.For(acquisition.FreeDecay)
	if err != nil {
		t.Fatal(err)
	}
	object := phantom.Sum(3, ball(3, [3]float64{0.4, 0.2, -0.3}, 5, 1, 0.7))
	g := cube(t, 3, 12, 12)
	samples := []int{0, 6, 12, 18, 24, 30}
	within, total, off := 0.0, 0.0, 0.0
	for seed := range 60 {
		pr := phantom.SinglePointProtocol{GradientMTPerM: phantom.BallGradients(3, 13, 24), DwellNS: 10, Samples: 32, TimeZeroSample: -40,
			BroadeningPerUS: 0.2, PhaseRad: 0.8, FrequencyOffsetMHz: 0.9, NoiseSD: 4, Seed: uint64(seed)}
		s := Defaults()
		s.Window = "hann"
		a := measured(t, object, pr)
		p, warnings, err := Prepare(a, s, g, samples)
		if err != nil || len(warnings) != 0 {
			t.Fatal(err, warnings)
		}
		r := allFrames(t, a, s, p, g)
		f, err := relax.NewFitter(model, r.FrameUS, r.NoiseSD, relax.Settings{})
		if err != nil {
			t.Fatal(err)
		}
		y := make([]float64, len(samples))
		for _, at := range [][3]int{{6, 6, 6}, {4, 6, 6}, {8, 6, 6}, {6, 4, 6}, {6, 8, 6}, {6, 6, 4}, {6, 6, 8}} {
			for d := range y {
				y[d] = float64(r.Values[d*g.Voxels()+g.Index(at[0], at[1], at[2])])
			}
			answer := f.Fit(y)
			if answer.Status != relax.Answered {
				t.Fatalf("seed %d voxel %v: %v", seed, at, answer.Status)
			}
			total++
			off += (answer.Rate - rate) / answer.RateSE
			if math.Abs(answer.Rate-rate) < answer.RateSE {
				within++
			}
		}
	}
	// The agreed 68 ± 6 %; 420 rates, of which neighbours share some noise, know it to 3 %.
	if share := within / total; !(math.Abs(share-0.683) <= 0.06) {
		t.Errorf("the true rate lies within one standard error in %.3f of %g voxels", share, total)
	}
	if mean := off / total; !(math.Abs(mean) <= 0.25) { // five standard errors of the mean of 420
		t.Errorf("rates are off by %.3f standard errors on average", mean)
	}
}
