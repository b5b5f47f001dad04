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
	"torrloom/recon/oxygen"
)

// Version is the format version of a recipe.
const Version = 1

// Recipe is the whole chain. A nil Calibration means that the rate map is made and the pO2 map is not.
type Recipe struct {
	Recipe         int                 `json:"recipe"`
	Conditioning   Conditioning        `json:"conditioning"`
	Reconstruction Reconstruction      `json:"reconstruction"`
	Rates          Rates               `json:"rates"`
	Calibration    *oxygen.Calibration `json:"calibration,omitempty"`
	Mask           Mask                `json:"mask"`
}

// Conditioning prepares the traces.
type Conditioning struct {
	Offset           string  `json:"offset"`           // row of condition.Offsets
	Phase            string  `json:"phase"`            // row of condition.Phases
	TimeShiftSamples float64 `json:"timeShiftSamples"` // added to the file's time zero
}

// Reconstruction turns conditioned spokes into one image per delay.
type Reconstruction struct {
	Method        string  `json:"method"`
	Matrix        int     `json:"matrix"`
	FieldOfViewMM float64 `json:"fieldOfViewMM"`
	Window        string  `json:"window"`
	Cutoff        float64 `json:"cutoff"` // fraction of k_max
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
func Defaults(a *acquisition.Acquisition, extentMM float64) Recipe {
	conditioning := condition.Defaults()
	field := math.Ceil(math.Min(1.1*extentMM, a.AliasFreeMM()))
	return Recipe{
		Recipe:       Version,
		Conditioning: Conditioning{Offset: conditioning.Offset, Phase: conditioning.Phase},
		Reconstruction: Reconstruction{Method: "back-projection", Window: "hann", Cutoff: 1, FieldOfViewMM: field,
			Matrix: defaultMatrix(a, field)},
		Calibration: fileCalibration(a),
		Mask:        Mask{AmplitudeFraction: 0.2},
	}
}

func defaultMatrix(a *acquisition.Acquisition, fieldOfViewMM float64) int {
	sizes := []int{32, 48, 64}
	if a.Dim == 2 {
		sizes = []int{64, 96, 128, 192, 256}
	}
	resolution := 1 / (2 * a.SmallestKMax())
	for _, n := range sizes {
		if fieldOfViewMM/float64(n) <= resolution*2/3 {
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
