package session

import (
	"torrloom/recon/acquisition"
	"torrloom/recon/backproject"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/gridding"
	"torrloom/recon/leastsquares"
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
	axis     []float64 // [shot] share of directions
	window   []float64 // [m]
	noise    func(realisations int) (*condition.Spokes, error)
	progress func(float64)
}

// spokeMethods holds the reconstruction behind every row of recipe.Methods that takes spokes.
var spokeMethods = map[string]func(j spokeJob) (*Images, error){
	"back-projection": backProjected,
	"gridding":        gridded,
	"least-squares":   solved,
}

func backProjected(j spokeJob) (*Images, error) {
	filter := sampling.Ramp(j.sp.Dim, j.sp.Half, j.sp.DeltaK)
	for m, w := range j.window {
		filter[m] *= w
	}
	return &Images{Values: backproject.Images(j.sp, j.g, j.axis, filter, j.progress), NoiseSD: j.sp.NoiseSD(j.axis, filter)}, nil
}

func gridded(j spokeJob) (*Images, error) {
	weights, err := j.weights()
	if err != nil {
		return nil, err
	}
	s := gridding.Settings{Tolerance: j.r.Tolerance, Oversampling: j.r.Oversampling}
	values, err := gridding.Images(j.sp, j.g, weights, s, j.progress)
	if err != nil {
		return nil, err
	}
	return &Images{Values: values, NoiseSD: j.sp.NoiseSDOf(weights)}, nil
}

// noiseRealisations is how many images of pure noise least squares solves beside each job, to learn what is left of it: one
// in 3D has thousands of voxels, 2D takes a few.
func noiseRealisations(dim int) int {
	if dim == 3 {
		return 1
	}
	return 6
}

func solved(j spokeJob) (*Images, error) {
	weights, err := j.weights()
	if err != nil {
		return nil, err
	}
	noise, err := j.noise(noiseRealisations(j.sp.Dim))
	if err != nil {
		return nil, err
	}
	s := leastsquares.Settings{Penalty: j.r.Penalty, Weight: j.r.PenaltyWeight, Edge: j.r.EdgeStep, Iterations: j.r.Iterations}
	out, err := leastsquares.Images(j.sp, noise, j.g, weights, s, j.progress)
	if err != nil {
		return nil, err
	}
	return &Images{Values: out.Values, NoiseSD: out.NoiseSD, Curve: out.Curve}, nil
}

// weights returns the density weights times the window, [shot][m].
func (j spokeJob) weights() ([]float64, error) {
	d, err := sampling.DensityNamed(j.r.Density)
	if err != nil {
		return nil, err
	}
	weights, err := d.Weights(sampling.Trajectory{Dim: j.sp.Dim, Directions: j.sp.Directions, DeltaK: j.sp.DeltaK, Half: j.sp.Half, Axis: j.axis})
	if err != nil {
		return nil, err
	}
	sampling.ApplyWindow(weights, j.window)
	return weights, nil
}

// spokeImages conditions the spokes of some delays and makes their images.
func spokeImages(a *acquisition.Acquisition, r recipe.Recipe, c *Constants, g volume.Grid, delays []int, progress func(float64)) (*Images, error) {
	cut, _ := kCut(a, r)
	geometry := condition.Plan(a, c.Spokes, r.Reconstruction.FieldOfViewMM, cut)
	sp, err := condition.Condition(a, r.Conditioning, c.Spokes, geometry, delays)
	if err != nil {
		return nil, err
	}
	if len(c.Axis) != len(sp.Shot) {
		return nil, fault.New(fault.Bug, "reconstruct", "%d axis weights for %d shots", len(c.Axis), len(sp.Shot))
	}
	w, err := sampling.WindowNamed(r.Reconstruction.Window)
	if err != nil {
		return nil, err
	}
	j := spokeJob{sp: sp, g: g, r: r.Reconstruction, axis: c.Axis, window: w.Sample(sp.Half, sp.DeltaK, cut), progress: progress}
	j.noise = func(realisations int) (*condition.Spokes, error) {
		return leastsquares.Noise(a, r.Conditioning, c.Spokes, geometry, realisations)
	}
	return spokeMethods[r.Reconstruction.Method](j)
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
