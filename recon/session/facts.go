package session

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/recipe"
	"torrloom/recon/singlepoint"
	"torrloom/recon/volume"
)

// Facts are what an acquisition shows of itself before any setting is chosen.
type Facts struct {
	ExtentMM      float64 // diameter of the object around the gradient centre
	KMaxPerMM     float64 // that every direction reaches; single-point: at the latest sample time
	ResolutionMM  float64
	AliasFreeMM   float64 // field of view before folding; single-point: at the earliest sample time
	SignalToNoise float64 // echo height of the reference delay over the noise of one channel of a raw sample

	Spokes   *condition.Constants  // under the default conditioning; nil for single-point data
	Coverage *singlepoint.Coverage // nil for spokes
	Warnings []string
}

// Survey returns the facts of an acquisition.
//
// Errors: those of condition.Measure, singlepoint.Describe and singlepoint.Prepare.
func Survey(a *acquisition.Acquisition) (*Facts, error) {
	if a.Encoding == acquisition.SinglePoint {
		return surveySinglePoint(a)
	}
	c, warnings, err := condition.Measure(a, condition.Defaults())
	if err != nil {
		return nil, err
	}
	f := &Facts{ExtentMM: c.ExtentMM, KMaxPerMM: a.SmallestKMax(), AliasFreeMM: a.AliasFreeMM(), Spokes: c, Warnings: warnings}
	f.ResolutionMM = 1 / (2 * f.KMaxPerMM)
	ref := a.ReferenceDelay()
	noise := c.NoiseSD[ref]
	if a.Domain == acquisition.Projection {
		noise *= a.PositionStepMM * math.Sqrt(float64(a.Samples)) // of the integral over a projection
	}
	f.SignalToNoise = math.Abs(c.EchoHeight[ref]) / noise
	return f, nil
}

// surveySinglePoint measures the object in the images of single sample times.
func surveySinglePoint(a *acquisition.Acquisition) (*Facts, error) {
	coverage, err := singlepoint.Describe(a, 0)
	if err != nil {
		return nil, err
	}
	f := &Facts{Coverage: coverage}
	if f.ExtentMM, err = singlepoint.Extent(a, singlepoint.Defaults()); err != nil {
		return nil, err
	}
	usable := coverage.Covering(0) // not empty, or Extent has no answer
	first, last := coverage.Times[usable[0]], coverage.Times[usable[len(usable)-1]]
	f.KMaxPerMM, f.ResolutionMM, f.AliasFreeMM = last.KMaxPerMM, last.ResolutionMM, first.FieldOfViewMM
	g, err := volume.Cube(a.Dim, 2, first.FieldOfViewMM)
	if err != nil {
		return nil, err
	}
	p, warnings, err := singlepoint.Prepare(a, singlepoint.Defaults(), g, []int{first.Sample})
	if err != nil {
		return nil, err
	}
	f.Warnings, f.SignalToNoise = warnings, strongestSample(a, first.Sample)/p.NoiseSD
	return f, nil
}

// strongestSample returns the largest magnitude over the shots of one sample time at the reference delay: the signal at
// k = 0.
func strongestSample(a *acquisition.Acquisition, sample int) float64 {
	most := 0.0
	for s := range a.Shots {
		v := complex128(a.Trace(a.ReferenceDelay(), s)[sample])
		most = math.Max(most, math.Hypot(real(v), imag(v)))
	}
	return most
}

// DefaultRecipe returns the recipe that an acquisition with these facts starts with.
func (f *Facts) DefaultRecipe(a *acquisition.Acquisition) recipe.Recipe {
	return recipe.Defaults(a, f.ExtentMM)
}
