package session

import (
	"torrloom/recon/acquisition"
	"torrloom/recon/backproject"
	"torrloom/recon/condition"
	"torrloom/recon/gridding"
	"torrloom/recon/recipe"
	"torrloom/recon/sampling"
	"torrloom/recon/singlepoint"
	"torrloom/recon/volume"
)

const singlePointMethod = "single-point"

// spokeJob is what a reconstruction from spokes needs.
type spokeJob struct {
	sp       *condition.Spokes
	g        volume.Grid
	r        recipe.Reconstruction
	window   []float64 // [m]
	progress func(float64)
}

// spokeMethods holds the reconstruction behind every row of recipe.Methods that takes spokes: images [delay][voxel] and
// the predicted noise SD of a voxel per delay.
var spokeMethods = map[string]func(j spokeJob) ([]float32, []float64, error){
	"back-projection": backProjected,
	"gridding":        gridded,
}

func backProjected(j spokeJob) ([]float32, []float64, error) {
	axis, err := sampling.AxisWeights(j.sp.Dim, j.sp.Directions)
	if err != nil {
		return nil, nil, err
	}
	filter := sampling.Ramp(j.sp.Dim, j.sp.Half, j.sp.DeltaK)
	for m, w := range j.window {
		filter[m] *= w
	}
	return backproject.Images(j.sp, j.g, axis, filter, j.progress), j.sp.NoiseSD(axis, filter), nil
}

func gridded(j spokeJob) ([]float32, []float64, error) {
	weights, err := j.weights()
	if err != nil {
		return nil, nil, err
	}
	s := gridding.Settings{Tolerance: j.r.Tolerance, Oversampling: j.r.Oversampling}
	values, err := gridding.Images(j.sp, j.g, weights, s, j.progress)
	return values, j.sp.NoiseSDOf(weights), err
}

// weights returns the density weights times the window, [shot][m].
func (j spokeJob) weights() ([]float64, error) {
	d, err := sampling.DensityNamed(j.r.Density)
	if err != nil {
		return nil, err
	}
	weights, err := d.Weights(sampling.Trajectory{Dim: j.sp.Dim, Directions: j.sp.Directions, DeltaK: j.sp.DeltaK, Half: j.sp.Half})
	if err != nil {
		return nil, err
	}
	sampling.ApplyWindow(weights, j.window)
	return weights, nil
}

// spokeImages conditions the spokes of some delays and makes their images.
func spokeImages(a *acquisition.Acquisition, r recipe.Recipe, c *condition.Constants, g volume.Grid, delays []int, progress func(float64)) (*Images, error) {
	cut, _ := kCut(a, r)
	sp, err := condition.Condition(a, r.Conditioning, c, condition.Plan(a, c, r.Reconstruction.FieldOfViewMM, cut), delays)
	if err != nil {
		return nil, err
	}
	w, err := sampling.WindowNamed(r.Reconstruction.Window)
	if err != nil {
		return nil, err
	}
	j := spokeJob{sp: sp, g: g, r: r.Reconstruction, window: w.Sample(sp.Half, sp.DeltaK, cut), progress: progress}
	values, noise, err := spokeMethods[r.Reconstruction.Method](j)
	if err != nil {
		return nil, err
	}
	return &Images{Values: values, NoiseSD: noise}, nil
}

// singlePointSettings takes the settings of single-point reconstruction from a recipe.
func singlePointSettings(r recipe.Recipe) singlepoint.Settings {
	s := singlepoint.Settings{Axis: r.SinglePoint.Axis, Resolution: r.SinglePoint.Resolution, Window: r.Reconstruction.Window, Cutoff: r.Reconstruction.Cutoff,
		Offset: "none", Phase: r.Conditioning.Phase, TimeShiftSamples: r.Conditioning.TimeShiftSamples}
	if r.Conditioning.Offset == "baseline-shots" {
		s.Offset = r.Conditioning.Offset
	}
	return s
}
