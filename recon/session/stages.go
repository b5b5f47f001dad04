package session

import (
	"fmt"
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/backproject"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/recipe"
	"torrloom/recon/relax"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// kernel makes the images of conditioned spokes, [delay][voxel], and is told the axis weights, the filter along a spoke
// and where to report the fraction done.
type kernel func(sp *condition.Spokes, g volume.Grid, axis, filter []float64, progress func(float64)) []float32

// kernels holds the reconstruction behind every row of recipe.Methods.
var kernels = map[string]kernel{
	"back-projection": backproject.Images,
}

// Measure returns the constants of the acquisition under a recipe, and warnings.
func Measure(a *acquisition.Acquisition, r recipe.Recipe) (*condition.Constants, []string, error) {
	return condition.Measure(a, conditioning(r))
}

func conditioning(r recipe.Recipe) condition.Settings {
	return condition.Settings{Offset: r.Conditioning.Offset, Phase: r.Conditioning.Phase, TimeShiftSamples: r.Conditioning.TimeShiftSamples}
}

// kCut returns where the window ends, in cycles/mm, and the limit that the voxels set. No method uses frequencies that
// the matrix cannot show, so that all methods answer alike.
func kCut(a *acquisition.Acquisition, r recipe.Recipe) (cut, matrixLimit float64) {
	matrixLimit = float64(r.Reconstruction.Matrix) / (2 * r.Reconstruction.FieldOfViewMM)
	return r.Reconstruction.Cutoff * math.Min(a.SmallestKMax(), matrixLimit), matrixLimit
}

// Images is the result of the reconstruct stage for some delays.
type Images struct {
	Values  []float32 // [delay][voxel]
	NoiseSD []float64 // [delay] predicted SD of a voxel
}

// Reconstruct returns the images of some delays. Progress, which may be nil, is told the fraction done.
//
// Errors: those of condition.Condition, sampling.AxisWeights and volume.Cube.
func Reconstruct(a *acquisition.Acquisition, r recipe.Recipe, c *condition.Constants, delays []int, progress func(float64)) (*Images, error) {
	g, err := volume.Cube(a.Dim, r.Reconstruction.Matrix, r.Reconstruction.FieldOfViewMM)
	if err != nil {
		return nil, err
	}
	for _, d := range delays {
		if d < 0 || d >= a.Delays {
			return nil, fault.New(fault.BadSetting, "reconstruct", "delay %d asked for; the acquisition has 0 to %d", d, a.Delays-1)
		}
	}
	cut, _ := kCut(a, r)
	geometry := condition.Plan(a, c, r.Reconstruction.FieldOfViewMM, cut)
	sp, err := condition.Condition(a, conditioning(r), c, geometry, delays)
	if err != nil {
		return nil, err
	}
	axis, err := sampling.AxisWeights(a.Dim, sp.Directions)
	if err != nil {
		return nil, err
	}
	filter, err := spokeFilter(sp, r, cut)
	if err != nil {
		return nil, err
	}
	values := kernels[r.Reconstruction.Method](sp, g, axis, filter, progress)
	return &Images{Values: values, NoiseSD: sp.NoiseSD(axis, filter)}, nil
}

func spokeFilter(sp *condition.Spokes, r recipe.Recipe, cut float64) ([]float64, error) {
	w, err := sampling.WindowNamed(r.Reconstruction.Window)
	if err != nil {
		return nil, err
	}
	filter := w.Sample(sp.Half, sp.DeltaK, cut)
	for m, ramp := range sampling.Ramp(sp.Dim, sp.Half, sp.DeltaK) {
		filter[m] *= ramp
	}
	return filter, nil
}

// fitBlock is how many voxels are fitted between two reports of progress: a few milliseconds of work.
const fitBlock = 4096

// Fit returns the rates of voxels. Values is [delay][voxel] over all delays of the acquisition; noiseSD is per delay.
//
// Errors: those of relax.NewFitter; unsupported when no rate model fits the sequence.
func Fit(a *acquisition.Acquisition, r recipe.Recipe, noiseSD []float64, values []float32, progress func(float64)) (*relax.Maps, error) {
	f, err := fitter(a, r, noiseSD)
	if err != nil {
		return nil, err
	}
	voxels := len(values) / a.Delays
	images := make([][]float32, a.Delays)
	for d := range images {
		images[d] = values[d*voxels : (d+1)*voxels]
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

func fitter(a *acquisition.Acquisition, r recipe.Recipe, noiseSD []float64) (*relax.Fitter, error) {
	for _, m := range relax.Models {
		if m.Sequence == a.Sequence {
			return relax.NewFitter(m, a.DelayUS, noiseSD, relax.Settings{RateMinPerUS: r.Rates.MinPerUS, RateMaxPerUS: r.Rates.MaxPerUS})
		}
	}
	return nil, fault.New(fault.Unsupported, "sequence", "there is no rate model for %s yet", a.Sequence)
}

// planWarnings says what a recipe does to an acquisition that a person may not expect.
func planWarnings(a *acquisition.Acquisition, r recipe.Recipe) []string {
	var out []string
	if _, limit := kCut(a, r); limit < 0.999*a.SmallestKMax() {
		out = append(out, fmt.Sprintf("voxels of %.3g mm end k at %.3g cycles/mm, the data reach %.3g; a larger matrix would use all",
			r.Reconstruction.FieldOfViewMM/float64(r.Reconstruction.Matrix), limit, a.SmallestKMax()))
	}
	if r.Reconstruction.FieldOfViewMM > a.AliasFreeMM() {
		out = append(out, fmt.Sprintf("the field of view of %.3g mm is larger than the sampling interval allows (%.3g mm); the rim repeats the object",
			r.Reconstruction.FieldOfViewMM, a.AliasFreeMM()))
	}
	if r.Calibration == nil {
		out = append(out, "no calibration: the rate map is made and the pO2 map is not; enter the rate at zero oxygen and the slope")
	}
	return out
}
