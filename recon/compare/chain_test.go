package compare

import (
	"math"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/backproject"
	"torrloom/recon/condition"
	"torrloom/recon/phantom"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// chain is the part of a recipe that the tests of this package vary.
type chain struct {
	matrix  int
	fieldMM float64
	window  string
	cutoff  float64
}

func (c chain) kCut(a *acquisition.Acquisition) float64 {
	return c.cutoff * math.Min(a.SmallestKMax(), float64(c.matrix)/(2*c.fieldMM))
}

func (c chain) grid(t testing.TB, dim int) volume.Grid {
	t.Helper()
	g, err := volume.Cube(dim, c.matrix, c.fieldMM)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// spokes conditions all delays and returns them with the axis weights and the filter.
func (c chain) spokes(t testing.TB, a *acquisition.Acquisition, s condition.Settings, k *condition.Constants) (sp *condition.Spokes, axis, filter []float64) {
	t.Helper()
	delays := make([]int, a.Delays)
	for d := range delays {
		delays[d] = d
	}
	sp, err := condition.Condition(a, s, k, condition.Plan(a, k, c.fieldMM, c.kCut(a)), delays)
	if err != nil {
		t.Fatal(err)
	}
	if axis, err = sampling.AxisWeights(a.Dim, sp.Directions); err != nil {
		t.Fatal(err)
	}
	w, err := sampling.WindowNamed(c.window)
	if err != nil {
		t.Fatal(err)
	}
	filter = w.Sample(sp.Half, sp.DeltaK, c.kCut(a))
	for m, r := range sampling.Ramp(a.Dim, sp.Half, sp.DeltaK) {
		filter[m] *= r
	}
	return sp, axis, filter
}

func (c chain) images(t testing.TB, a *acquisition.Acquisition, s condition.Settings, k *condition.Constants) []float32 {
	t.Helper()
	sp, axis, filter := c.spokes(t, a, s, k)
	return backproject.Images(sp, c.grid(t, a.Dim), axis, filter, nil)
}

// perSample returns axis·filter·DeltaK.
func perSample(sp *condition.Spokes, axis, filter []float64) []float64 {
	var out []float64
	for _, a := range axis {
		for _, f := range filter {
			out = append(out, a*f*sp.DeltaK)
		}
	}
	return out
}

func (c chain) operator(t testing.TB, a *acquisition.Acquisition) *SpokeOperator {
	t.Helper()
	sp, axis, filter := c.spokes(t, a, PointSettings(condition.Defaults()), noObject)
	o, err := NewSpokeOperator(sp, perSample(sp, axis, filter))
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// noObject stands for constants that cannot be measured where there is nothing but noise.
var noObject = &condition.Constants{NoiseSD: []float64{1, 1, 1, 1, 1, 1, 1, 1}, ExtentMM: 20}

// shots returns an acquisition of dim dimensions with two delays that holds nothing but noise.
func shots(t testing.TB, dim, spokes int, noiseSD float64, seed uint64) *acquisition.Acquisition {
	t.Helper()
	directions := phantom.EqualAngles(spokes)
	if dim == 3 {
		directions = phantom.GoldenHalfSphere(spokes)
	}
	a, err := phantom.Sum(dim).Acquire(phantom.Protocol{Sequence: acquisition.EchoDecay, DelayUS: []float64{1, 2}, Directions: directions,
		GradientMTPerM: 20, DwellNS: 5, Samples: 300, TimeZeroSample: 149.6, NoiseSD: noiseSD, Seed: seed})
	if err != nil {
		t.Fatal(err)
	}
	return a
}
