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

// surveySinglePoint finds the object in a coarse image of the earliest usable sample time, whose field of view is the
// largest.
func surveySinglePoint(a *acquisition.Acquisition) (*Facts, error) {
	coverage, err := singlepoint.Describe(a, 0)
	if err != nil {
		return nil, err
	}
	usable := coverage.Covering(0)
	if len(usable) == 0 {
		return nil, noSampleTime()
	}
	first, last := coverage.Times[usable[0]], coverage.Times[usable[len(usable)-1]]
	f := &Facts{Coverage: coverage, KMaxPerMM: last.KMaxPerMM, ResolutionMM: last.ResolutionMM, AliasFreeMM: first.FieldOfViewMM}
	g, err := volume.Cube(a.Dim, coarseMatrix, first.FieldOfViewMM)
	if err != nil {
		return nil, err
	}
	s := singlepoint.Defaults()
	s.Window = "hann"
	p, warnings, err := singlepoint.Prepare(a, s, g, []int{first.Sample})
	if err != nil {
		return nil, err
	}
	images, err := singlepoint.Images(a, s, p, g, []int{0}, nil)
	if err != nil {
		return nil, err
	}
	f.Warnings = warnings
	f.ExtentMM = math.Min(extentOf(g, images.Values), first.FieldOfViewMM)
	f.SignalToNoise = strongest(images.Values) / images.NoiseSD[0]
	return f, nil
}

// coarseMatrix is enough to find an object; its rim is taken a voxel wider.
const coarseMatrix = 32

// extentOf returns the diameter around the gradient centre of the voxels above a tenth of the strongest.
func extentOf(g volume.Grid, image []float32) float64 {
	level, farthest := 0.1*strongest(image), 0.0
	for iz := range g.N[2] {
		for iy := range g.N[1] {
			for ix := range g.N[0] {
				if float64(image[g.Index(ix, iy, iz)]) >= level {
					x, y, z := g.MM(0, ix), g.MM(1, iy), g.MM(2, iz)
					farthest = math.Max(farthest, math.Sqrt(x*x+y*y+z*z))
				}
			}
		}
	}
	return 2*farthest + g.VoxelMM[0]
}

// DefaultRecipe returns the recipe that an acquisition with these facts starts with.
func (f *Facts) DefaultRecipe(a *acquisition.Acquisition) recipe.Recipe {
	return recipe.Defaults(a, f.ExtentMM)
}
