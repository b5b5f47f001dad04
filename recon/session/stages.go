package session

import (
	"fmt"
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/leastsquares"
	"torrloom/recon/recipe"
	"torrloom/recon/relax"
	"torrloom/recon/sampling"
	"torrloom/recon/singlepoint"
	"torrloom/recon/volume"
)

// Constants are what the jobs of a run need to know about the whole acquisition. They travel as JSON: one of the two is
// there, as the encoding asks.
type Constants struct {
	Spokes      *condition.Constants `json:",omitempty"`
	Axis        []float64            `json:",omitempty"` // [kept shot] share of directions, see sampling.AxisWeights
	SinglePoint *singlepoint.Plan    `json:",omitempty"`
}

// Measure returns the constants of the acquisition under a recipe, and warnings.
//
// Errors: those of FramesOf, condition.Measure and singlepoint.Prepare.
func Measure(a *acquisition.Acquisition, r recipe.Recipe) (*Constants, []string, error) {
	if a.Encoding != acquisition.SinglePoint {
		return measureSpokes(a, r)
	}
	f, err := FramesOf(a, r)
	if err != nil {
		return nil, nil, err
	}
	g, err := gridOf(a, r)
	if err != nil {
		return nil, nil, err
	}
	p, warnings, err := singlepoint.Prepare(a, singlePointSettings(r), g, f.samples)
	return &Constants{SinglePoint: p}, warnings, err
}

func measureSpokes(a *acquisition.Acquisition, r recipe.Recipe) (*Constants, []string, error) {
	c, warnings, err := condition.Measure(a, r.Conditioning)
	if err != nil {
		return nil, nil, err
	}
	axis, err := sampling.AxisWeights(a.Dim, condition.Directions(a, r.Conditioning.KeptShots(a)))
	return &Constants{Spokes: c, Axis: axis}, warnings, err
}

func gridOf(a *acquisition.Acquisition, r recipe.Recipe) (volume.Grid, error) {
	return volume.Cube(a.Dim, r.Reconstruction.Matrix, r.Reconstruction.FieldOfViewMM)
}

// kCut returns where the window ends, in cycles/mm, and the limit that the voxels set. No method uses frequencies that
// the matrix cannot show, so that all methods answer alike.
func kCut(a *acquisition.Acquisition, r recipe.Recipe) (cut, matrixLimit float64) {
	matrixLimit = float64(r.Reconstruction.Matrix) / (2 * r.Reconstruction.FieldOfViewMM)
	return r.Reconstruction.Cutoff * math.Min(a.SmallestKMax(), matrixLimit), matrixLimit
}

// Images is the result of the reconstruct stage for some frames.
type Images struct {
	Values  []float32 // [frame][voxel]
	NoiseSD []float64 // [frame] predicted SD of a voxel

	Curve [][]leastsquares.Point // [frame][iteration] of an iterative method; nil otherwise
}

// Reconstruct returns the images of some frames. Progress, which may be nil, is told the fraction done.
//
// Errors: those of FramesOf and of the method; bug when constants and encoding do not fit.
func Reconstruct(a *acquisition.Acquisition, r recipe.Recipe, c *Constants, frames []int, progress func(float64)) (*Images, error) {
	g, err := gridOf(a, r)
	if err != nil {
		return nil, err
	}
	f, err := FramesOf(a, r)
	if err != nil {
		return nil, err
	}
	for _, i := range frames {
		if i < 0 || i >= len(f.TimeUS) {
			return nil, fault.New(fault.BadSetting, "reconstruct", "frame %d asked for; there are 0 to %d", i, len(f.TimeUS)-1)
		}
	}
	switch {
	case a.Encoding == acquisition.SinglePoint && c.SinglePoint != nil:
		wanted := frames
		if f.Kind == "delay" { // single-point images along the delay go by the delays of the file, left-out ones included
			wanted = f.delaysOf(frames)
		}
		images, err := singlepoint.Images(a, singlePointSettings(r), c.SinglePoint, g, wanted, progress)
		if err != nil {
			return nil, err
		}
		return &Images{Values: images.Values, NoiseSD: images.NoiseSD}, nil
	case a.Encoding == acquisition.Spoke && c.Spokes != nil:
		return spokeImages(a, r, c, g, f.delaysOf(frames), progress)
	}
	return nil, fault.New(fault.Bug, "reconstruct", "the constants are not those of %s data", a.Encoding)
}

// fitBlock is how many voxels are fitted between two reports of progress: a few milliseconds of work.
const fitBlock = 4096

// Fit returns the rates of voxels. Values is [frame][voxel] over all frames of the recipe; noiseSD is per frame.
//
// Errors: those of FramesOf and relax.NewFitter; unsupported when no rate model fits the sequence.
func Fit(a *acquisition.Acquisition, r recipe.Recipe, noiseSD []float64, values []float32, progress func(float64)) (*relax.Maps, error) {
	frames, err := FramesOf(a, r)
	if err != nil {
		return nil, err
	}
	f, err := frames.fitter(a, r, noiseSD)
	if err != nil {
		return nil, err
	}
	voxels := len(values) / len(frames.TimeUS)
	images := make([][]float32, len(frames.TimeUS))
	for i := range images {
		images[i] = values[i*voxels : (i+1)*voxels]
	}
	out := relax.NewMaps(voxels)
	for from := 0; from < voxels; from += fitBlock {
		to := min(from+fitBlock, voxels)
		f.FitBlock(images, from, to, out)
		if progress != nil {
			progress(float64(to) / float64(voxels))
		}
	}
	return out, nil
}

// planWarnings says what a recipe does to an acquisition that a person may not expect.
func planWarnings(a *acquisition.Acquisition, r recipe.Recipe, f Frames) []string {
	var out []string
	if a.Encoding == acquisition.Spoke {
		out = append(out, spokeWarnings(a, r)...)
	}
	if n := a.Delays - len(r.Conditioning.KeptDelays(a)); n > 0 {
		out = append(out, fmt.Sprintf("%d of %d delays are left out", n, a.Delays))
	}
	if n := len(a.ImageShots()) - len(r.Conditioning.KeptShots(a)); n > 0 {
		out = append(out, fmt.Sprintf("%d of %d shots are left out", n, len(a.ImageShots())))
	}
	if r.Calibration == nil {
		out = append(out, "no calibration: the rate map is made and the pO2 map is not; enter the rate at zero oxygen and the slope")
	}
	return out
}

func spokeWarnings(a *acquisition.Acquisition, r recipe.Recipe) []string {
	var out []string
	if _, limit := kCut(a, r); limit < 0.999*a.SmallestKMax() {
		out = append(out, fmt.Sprintf("voxels of %.3g mm end k at %.3g cycles/mm, the data reach %.3g; a larger matrix would use all",
			r.Reconstruction.FieldOfViewMM/float64(r.Reconstruction.Matrix), limit, a.SmallestKMax()))
	}
	if r.Reconstruction.FieldOfViewMM > a.AliasFreeMM() {
		out = append(out, fmt.Sprintf("the field of view of %.3g mm is larger than the sampling interval allows (%.3g mm); the rim repeats the object",
			r.Reconstruction.FieldOfViewMM, a.AliasFreeMM()))
	}
	return out
}
