package compare

import (
	"math"

	"torrloom/recon/fault"
)

// Layer is one map with the standard error of every voxel from noise.
type Layer struct{ Values, SE []float32 }

// Standing tells how a voxel of a difference map is drawn.
type Standing uint8

const (
	NoPair Standing = iota // no answer in one of the maps, or no standard error
	Pale                   // differs by less than the threshold: noise alone would do that
	Clear                  // differs by more
)

// DifferenceMap is the other map less the reference with the standard error of that difference.
type DifferenceMap struct {
	Values   []float32 // NaN where there is no pair
	SE       []float32 // of the paired difference
	Standing []uint8
	Numbers  DifferenceNumbers
}

// DifferenceNumbers describe a difference map.
type DifferenceNumbers struct {
	Pairing
	WithoutSE int     `json:"withoutSE"` // pairs whose difference has no standard error
	Pale      int     `json:"pale"`
	Clear     int     `json:"clear"`
	Threshold float64 `json:"threshold"` // in standard errors
	ByChance  float64 `json:"byChance"`  // share of pairs that would come out clear if nothing but noise differed
	Largest   float64 `json:"largest"`   // |difference| that one pair in a hundred exceeds: an end for a colour scale
}

// DefaultThreshold is the number of standard errors below which a difference is drawn pale.
const DefaultThreshold = 2

// Difference returns the difference of two maps made from the same measurement. The errors of a voxel in both maps have
// the given correlation, which two linear reconstructions have through their weights (SpokeOperator.Correlation):
//
//	SE² = SE_a² + SE_b² - 2·correlation·SE_a·SE_b
//
// 0 stands for maps of different measurements. The result holds to first order where rates and pO2 follow from images of
// correlated noise, since both voxels then stand on nearly the same part of the curve.
//
// Errors: bug when lengths differ; bad-setting when the correlation or threshold is out of range.
func Difference(reference, other Layer, correlation, threshold float64) (*DifferenceMap, error) {
	if len(reference.SE) != len(reference.Values) || len(other.SE) != len(other.Values) {
		return nil, fault.New(fault.Bug, "difference", "maps of %d and %d voxels with %d and %d standard errors", len(reference.Values), len(other.Values), len(reference.SE), len(other.SE))
	}
	if !(math.Abs(correlation) <= 1) {
		return nil, fault.New(fault.BadSetting, "compare correlation", "%g; use -1 to 1", correlation)
	}
	se := make([]float32, len(reference.SE))
	for i := range min(len(se), len(other.SE)) {
		a, b := float64(reference.SE[i]), float64(other.SE[i])
		// Rounding can take equal errors of correlation 1 a trifle below zero.
		se[i] = float32(math.Sqrt(math.Max(0, a*a+b*b-2*correlation*a*b)))
		if a != a || b != b {
			se[i] = float32(math.NaN())
		}
	}
	return differenceOf(reference.Values, other.Values, se, threshold)
}

// differenceOf returns the difference map of two maps with the errors of their difference.
func differenceOf(reference, other, se []float32, threshold float64) (*DifferenceMap, error) {
	if !(threshold > 0) || math.IsInf(threshold, 0) {
		return nil, fault.New(fault.BadSetting, "compare threshold", "%g standard errors; use a positive number such as 2", threshold)
	}
	_, _, pairing, err := pairUp(reference, other, nil)
	if err != nil {
		return nil, err
	}
	d := &DifferenceMap{Values: make([]float32, len(se)), SE: se, Standing: make([]uint8, len(se))}
	d.Numbers = DifferenceNumbers{Pairing: pairing, Threshold: threshold, ByChance: math.Erfc(threshold / math.Sqrt2)}
	for i := range se {
		d.Values[i] = other[i] - reference[i]
		d.judge(i)
	}
	d.Numbers.Largest = largestOf(d.Values)
	return d, nil
}

// judge gives voxel i its standing. Equal values never stand out, also where an error of exactly zero says they might.
func (d *DifferenceMap) judge(i int) {
	value, se := math.Abs(float64(d.Values[i])), float64(d.SE[i])
	switch {
	case value != value:
		d.SE[i] = float32(math.NaN())
	case se != se:
		d.Numbers.WithoutSE++
	case value > d.Numbers.Threshold*se:
		d.Standing[i] = uint8(Clear)
		d.Numbers.Clear++
	default:
		d.Standing[i] = uint8(Pale)
		d.Numbers.Pale++
	}
}

// largestOf returns the size that one in a hundred answered values exceeds.
func largestOf(values []float32) float64 {
	var sizes []float64
	for _, v := range values {
		if v == v {
			sizes = append(sizes, math.Abs(float64(v)))
		}
	}
	if len(sizes) == 0 {
		return 0
	}
	return quantile(sorted(sizes), 0.99)
}

// DifferenceJackknife gathers, one group after the other, maps of two variants that were both made without that group of
// shots. It holds two numbers per voxel, however many groups there are.
//
//	SE² = (G-1)/G Σ_g (d_g - mean d)²
//
// of the G differences d_g. Nothing is assumed about how the noise of the two variants is related, nor about how the map
// follows from the images. Approximate: with G groups the error itself is known to about 1/√(2(G-1)).
//
// Source: Wolter, Introduction to Variance Estimation (1985), chapter 4, the delete-a-group jackknife.
type DifferenceJackknife struct {
	groups       int
	mean, square []float64
}

// Add takes in the maps of both variants without one more group.
//
// Errors: bug when the lengths differ from each other or from those before.
func (j *DifferenceJackknife) Add(reference, other []float32) error {
	if j.groups == 0 {
		j.mean, j.square = make([]float64, len(reference)), make([]float64, len(reference))
	}
	if len(reference) != len(j.mean) || len(other) != len(j.mean) {
		return fault.New(fault.Bug, "difference", "group maps of %d and %d voxels after such of %d", len(reference), len(other), len(j.mean))
	}
	j.groups++
	for i := range j.mean {
		d := float64(other[i]) - float64(reference[i])
		off := d - j.mean[i]
		j.mean[i] += off / float64(j.groups)
		j.square[i] += off * (d - j.mean[i])
	}
	return nil
}

// Difference returns the difference map of the two variants made from all shots. A voxel that one of the group maps
// leaves without an answer has no standard error.
//
// Errors: no-answer with fewer than two groups; those of Difference.
func (j *DifferenceJackknife) Difference(reference, other []float32, threshold float64) (*DifferenceMap, error) {
	if j.groups < 2 {
		return nil, fault.New(fault.NoAnswer, "difference", "%d groups of shots; a jackknife needs at least 2, and some 10 to be of use", j.groups)
	}
	if len(reference) != len(j.mean) {
		return nil, fault.New(fault.Bug, "difference", "maps of %d voxels, group maps of %d", len(reference), len(j.mean))
	}
	se := make([]float32, len(j.square))
	for i, s := range j.square {
		se[i] = float32(math.Sqrt(float64(j.groups-1) / float64(j.groups) * s))
	}
	return differenceOf(reference, other, se, threshold)
}
