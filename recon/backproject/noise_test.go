package backproject

import (
	"math"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/phantom"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// The predicted noise of a voxel equals the spread over noise realisations, in 2D and 3D, for full and half echoes.
func TestPredictedNoiseEqualsMonteCarlo(t *testing.T) {
	for _, c := range []struct {
		dim, samples, matrix, runs int
		zero                       float64
		window                     string
	}{
		{2, 300, 32, 40, 149.6, "none"}, {2, 300, 32, 40, 149.6, "hann"}, {2, 160, 32, 40, 9.6, "hamming"}, {3, 300, 16, 20, 149.6, "hann"},
	} {
		directions := phantom.EqualAngles(60)
		if c.dim == 3 {
			directions = phantom.GoldenHalfSphere(150)
		}
		square, count, predicted := 0.0, 0, 0.0
		for seed := range c.runs {
			a, err := phantom.Sum(c.dim).Acquire(phantom.Protocol{Sequence: acquisition.EchoDecay, DelayUS: []float64{1, 2, 3},
				Directions: directions, GradientMTPerM: 20, DwellNS: 5, Samples: c.samples, TimeZeroSample: c.zero, NoiseSD: 3, Seed: uint64(seed)})
			if err != nil {
				t.Fatal(err)
			}
			image, sd := noiseImage(t, a, c.matrix, c.window)
			predicted = sd[0]
			for _, v := range image {
				if v == v {
					square, count = square+float64(v)*float64(v), count+1
				}
			}
		}
		got := math.Sqrt(square / float64(count))
		if !(math.Abs(got/predicted-1) <= 0.03) { // measured 0.4 %; the spread itself is known to 1 %
			t.Errorf("%+v: predicted %.4g, spread %.4g over %d voxels", c, predicted, got, count)
		}
	}
}

// noiseImage reconstructs with a fixed phase and the known noise, since there is no object to measure them from.
func noiseImage(t *testing.T, a *acquisition.Acquisition, matrix int, window string) ([]float32, []float64) {
	t.Helper()
	const field = 24.0
	c := &condition.Constants{NoiseSD: []float64{3, 3, 3}, ExtentMM: 20}
	kCut := math.Min(a.SmallestKMax(), float64(matrix)/(2*field))
	sp, err := condition.Condition(a, condition.Defaults(), c, condition.Plan(a, c, field, kCut), []int{0, 1, 2})
	if err != nil {
		t.Fatal(err)
	}
	axis, err := sampling.AxisWeights(a.Dim, sp.Directions)
	if err != nil {
		t.Fatal(err)
	}
	w, err := sampling.WindowNamed(window)
	if err != nil {
		t.Fatal(err)
	}
	filter := w.Sample(sp.Half, sp.DeltaK, kCut)
	for m, r := range sampling.Ramp(a.Dim, sp.Half, sp.DeltaK) {
		filter[m] *= r
	}
	g, err := volume.Cube(a.Dim, matrix, field)
	if err != nil {
		t.Fatal(err)
	}
	return Images(sp, g, axis, filter, nil), sp.NoiseSD(axis, filter)
}

// Known variances of back-projected white noise of SD σ per projection sample of spacing τ, M views or N directions, with
// fine interpolation: π²σ²/(12 M τ²) in 2D and π²σ²/(20 N τ⁴) in 3D. They follow from Σ axis² ∫ filter² dk.
func TestNoiseVarianceIsTheKnownOne(t *testing.T) {
	const sigma, tau, n = 2.0, 0.5, 64
	for _, dim := range []int{2, 3} {
		directions := phantom.EqualAngles(90)
		want := math.Pi * math.Pi * sigma * sigma / (12 * 90 * tau * tau)
		if dim == 3 {
			directions = phantom.GoldenHalfSphere(90)
			want = math.Pi * math.Pi * sigma * sigma / (20 * 90 * math.Pow(tau, 4))
		}
		sp := &condition.Spokes{Dim: dim, Directions: directions, DeltaK: 1 / (2 * n * tau), Half: n, Delays: []int{0}, Shot: make([]int, 90),
			NoiseDensity: []float64{sigma * sigma * tau}, OneSided: make([]int, 90)}
		for i := range sp.OneSided {
			sp.OneSided[i] = n + 1
		}
		axis := make([]float64, 90) // equal weights, as the formulas assume
		for i := range axis {
			axis[i] = float64(dim-1) * math.Pi / 90
		}
		got := math.Pow(sp.NoiseSD(axis, sampling.Ramp(dim, n, sp.DeltaK))[0], 2)
		// The last sample stands for half a step beyond the band limit: 3/(2n) in 2D and 5/(2n) in 3D.
		if !(math.Abs(got/want-1) <= 0.05) {
			t.Errorf("%dD: variance %.5g, want %.5g", dim, got, want)
		}
	}
}
