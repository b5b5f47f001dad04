// Package region marks voxels and says what a map holds in them: masks from outlines, solids, thresholds and files,
// statistics, and intervals that come from resampling spokes and from the calibration.
//
// Places are in mm, so that a region stays where it was drawn when the matrix changes. A voxel belongs to a shape when
// its centre lies in it.
//
// All members keep one promise: no voxel is dropped in silence. What a region holds and what a figure used are both
// counted, the difference by reason.
//
// A new shape is one file with a type that is a shape, a field in Part and a row in Shapes.
package region

import (
	"math"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// Mask tells for every voxel of a grid, x-fastest, whether it belongs to a region.
type Mask []bool

// Count returns how many voxels belong.
func (m Mask) Count() int {
	n := 0
	for _, in := range m {
		if in {
			n++
		}
	}
	return n
}

// Voxels returns the indices of the voxels that belong, in ascending order.
func (m Mask) Voxels() []int {
	var out []int
	for i, in := range m {
		if in {
			out = append(out, i)
		}
	}
	return out
}

// Combination is a way to put two masks together.
type Combination struct {
	Name  string `json:"name"`
	Label string `json:"label"`
	both  func(a, b bool) bool
}

// Combinations lists how a part of a definition joins what stands before it.
var Combinations = []Combination{
	{"add", "add", func(a, b bool) bool { return a || b }},
	{"keep", "keep what is in both", func(a, b bool) bool { return a && b }},
	{"take", "take away", func(a, b bool) bool { return a && !b }},
}

// Union returns the voxels of either mask.
func Union(a, b Mask) Mask { return combine(a, b, Combinations[0]) }

// Intersection returns the voxels of both masks.
func Intersection(a, b Mask) Mask { return combine(a, b, Combinations[1]) }

// Minus returns the voxels of a that are not in b.
func Minus(a, b Mask) Mask { return combine(a, b, Combinations[2]) }

func combine(a, b Mask, c Combination) Mask {
	out := make(Mask, len(a))
	for i := range a {
		out[i] = c.both(a[i], b[i])
	}
	return out
}

// where returns the mask of the voxel centres for which inside holds.
func where(g volume.Grid, inside func(r [3]float64) bool) Mask {
	out := make(Mask, g.Voxels())
	for iz := range g.N[2] {
		for iy := range g.N[1] {
			for ix := range g.N[0] {
				out[g.Index(ix, iy, iz)] = inside([3]float64{g.MM(0, ix), g.MM(1, iy), g.MM(2, iz)})
			}
		}
	}
	return out
}

// VoxelMeasure returns the volume of one voxel in mm³, or its area in mm² for a single slice, and the unit.
func VoxelMeasure(g volume.Grid) (size float64, unit string) {
	if g.Dim() == 2 {
		return g.VoxelMM[0] * g.VoxelMM[1], "mm²"
	}
	return g.VoxelMM[0] * g.VoxelMM[1] * g.VoxelMM[2], "mm³"
}

func finite(values ...float64) bool {
	for _, v := range values {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}

func badSetting(where, format string, args ...any) error {
	return fault.New(fault.BadSetting, where, format, args...)
}
