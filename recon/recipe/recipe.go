// Package recipe holds every setting of the chain as one JSON document: defaults, check and catalogue. Same data and
// same recipe give the same numbers.
//
// To add a setting: a field in a struct here and a row in Catalogue; the page draws its form from that row, and the
// check and the tests range over it.
package recipe

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/leastsquares"
	"torrloom/recon/oxygen"
	"torrloom/recon/singlepoint"
)

// Version is the format version of a recipe.
const Version = 1

// Recipe is the whole chain. A nil Calibration means that the rate map is made and the pO2 map is not.
type Recipe struct {
	Recipe         int                 `json:"recipe"`
	Conditioning   condition.Settings  `json:"conditioning"`
	Reconstruction Reconstruction      `json:"reconstruction"`
	SinglePoint    SinglePoint         `json:"singlePoint"`
	Rates          Rates               `json:"rates"`
	Calibration    *oxygen.Calibration `json:"calibration,omitempty"`
	Sample         oxygen.Sample       `json:"sample"`
	Mask           Mask                `json:"mask"`
}

// Reconstruction turns conditioned spokes into one image per delay.
type Reconstruction struct {
	Method        string  `json:"method"`
	Matrix        int     `json:"matrix"`
	FieldOfViewMM float64 `json:"fieldOfViewMM"`
	Window        string  `json:"window"`
	Cutoff        float64 `json:"cutoff"`        // fraction of k_max
	Density       string  `json:"density"`       // row of sampling.Densities; methods that weigh samples
	Tolerance     float64 `json:"tolerance"`     // relative error of the gridding kernel
	Oversampling  float64 `json:"oversampling"`  // of the gridding grid
	Penalty       string  `json:"penalty"`       // row of leastsquares.Penalties
	PenaltyWeight float64 `json:"penaltyWeight"` // as a share of the data term
	EdgeStep      float64 `json:"edgeStep"`      // step that counts as an edge, as a share of the image's height
	Iterations    int     `json:"iterations"`    // of least squares
}

// SinglePoint chooses the sample times of single-point data and what the images run along.
type SinglePoint struct {
	Axis       string  `json:"axis"`    // row of singlepoint.Axes
	FirstUS    float64 `json:"firstUS"` // sample times since k = 0
	LastUS     float64 `json:"lastUS"`
	Count      int     `json:"count"`      // images or, along the delay, sample times averaged
	Resolution string  `json:"resolution"` // row of singlepoint.Resolutions
}

// Rates bounds the rate fit. Zero means: from the delays.
type Rates struct {
	MinPerUS float64 `json:"minPerUS"`
	MaxPerUS float64 `json:"maxPerUS"`
}

// Mask keeps voxels whose reference-delay amplitude is at least a fraction of the image's strongest amplitude.
type Mask struct {
	AmplitudeFraction float64 `json:"amplitudeFraction"`
}

// Defaults returns the recipe a new acquisition starts with. extentMM is the measured diameter of the object.
//
// The field of view leaves a tenth around the object. The matrix is the smallest of a few round sizes whose voxel is at
// most two thirds of the nominal resolution 1/(2 k_max). The calibration is the file's own, if it carries one.
//
// Of single-point data the sample times are those whose field of view holds the object, and the images run along them
// unless there are several delays.
func Defaults(a *acquisition.Acquisition, extentMM float64) Recipe {
	ls := leastsquares.Defaults()
	r := Recipe{
		Recipe:       Version,
		Conditioning: condition.Defaults(),
		Reconstruction: Reconstruction{Method: "back-projection", Window: "hann", Cutoff: 1, Density: "solid-angle",
			Tolerance: 1e-3, Oversampling: 1.5, Penalty: ls.Penalty, PenaltyWeight: ls.Weight, EdgeStep: ls.Edge, Iterations: ls.Iterations},
		SinglePoint: SinglePoint{Axis: "sample-time", Count: 12, Resolution: "common"},
		Calibration: fileCalibration(a),
		Mask:        Mask{AmplitudeFraction: 0.2},
	}
	resolution := 0.0
	if a.Encoding == acquisition.SinglePoint {
		r.Reconstruction.FieldOfViewMM = math.Ceil(1.1 * extentMM)
		resolution = r.singlePointDefaults(a, extentMM)
	} else {
		r.Reconstruction.FieldOfViewMM = math.Ceil(math.Min(1.1*extentMM, a.AliasFreeMM()))
		resolution = 1 / (2 * a.SmallestKMax())
	}
	r.Reconstruction.Matrix = defaultMatrix(a.Dim, r.Reconstruction.FieldOfViewMM, resolution)
	return r
}

// singlePointDefaults sets method, window and sample times, and returns the resolution that the first of them has.
func (r *Recipe) singlePointDefaults(a *acquisition.Acquisition, extentMM float64) (resolutionMM float64) {
	r.Reconstruction.Method, r.Reconstruction.Window = "single-point", "none"
	if a.Delays > 1 {
		r.SinglePoint.Axis, r.SinglePoint.Count = "delay", 8
	}
	coverage, err := singlepoint.Describe(a, 0)
	if err != nil {
		return extentMM // the same fault follows when the images are planned
	}
	first, last, err := coverage.Suggest(extentMM)
	if err != nil {
		return extentMM
	}
	r.SinglePoint.FirstUS, r.SinglePoint.LastUS = first, last
	for _, t := range coverage.Times {
		if t.Usable && t.TimeUS >= first {
			return t.ResolutionMM // all images are as sharp as the earliest
		}
	}
	return extentMM
}

func defaultMatrix(dim int, fieldOfViewMM, resolutionMM float64) int {
	sizes := []int{32, 48, 64}
	if dim == 2 {
		sizes = []int{64, 96, 128, 192, 256}
	}
	for _, n := range sizes {
		if fieldOfViewMM/float64(n) <= resolutionMM*2/3 {
			return n
		}
	}
	return sizes[len(sizes)-1]
}

func fileCalibration(a *acquisition.Acquisition) *oxygen.Calibration {
	zero, slope := a.Optional.R2ZeroPerUS, a.Optional.R2SlopePerUSPerTorr
	if a.Recovers() {
		zero, slope = a.Optional.R1ZeroPerUS, a.Optional.R1SlopePerUSPerTorr
	}
	if zero == nil || slope == nil {
		return nil
	}
	return &oxygen.Calibration{Rate: a.RateName(), ZeroPerUS: *zero, SlopePerUSPerTorr: *slope}
}
