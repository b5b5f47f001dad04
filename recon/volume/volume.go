// Package volume places voxels in space and holds values on them.
package volume

import (
	"math"

	"torrloom/recon/fault"
)

// MaxMatrix is the largest matrix size per axis. 512³ float32 voxels are 0.5 GiB per map, past what one browser
// worker can hold for several delays.
const MaxMatrix = 512

// Grid is a Cartesian set of voxel centres around the gradient centre. A 2D grid has N[2] = 1.
type Grid struct {
	N       [3]int     // voxels along x, y, z
	VoxelMM [3]float64 // voxel size in mm
}

// Cube returns the grid of a dim-dimensional image with matrix voxels over fieldOfViewMM along each axis. The single
// slice of a 2D image is given the thickness of one voxel, so that a viewer can draw it; its amplitudes stay per mm².
//
// Errors: bad-setting when dim is neither 2 nor 3, matrix is outside 2..MaxMatrix, or the field of view is not
// positive and finite.
func Cube(dim, matrix int, fieldOfViewMM float64) (Grid, error) {
	if dim != 2 && dim != 3 {
		return Grid{}, fault.New(fault.BadSetting, "grid", "%d dimensions asked for; images have 2 or 3", dim)
	}
	if matrix < 2 || matrix > MaxMatrix {
		return Grid{}, fault.New(fault.BadSetting, "recipe reconstruction.matrix", "%d voxels per axis; use 2 to %d", matrix, MaxMatrix)
	}
	if !(fieldOfViewMM > 0) || math.IsInf(fieldOfViewMM, 0) {
		return Grid{}, fault.New(fault.BadSetting, "recipe reconstruction.fieldOfViewMM", "%g mm; a positive length is needed", fieldOfViewMM)
	}
	size := fieldOfViewMM / float64(matrix)
	g := Grid{N: [3]int{matrix, matrix, matrix}, VoxelMM: [3]float64{size, size, size}}
	if dim == 2 {
		g.N[2] = 1
	}
	return g, nil
}

// Voxels returns the number of voxels.
func (g Grid) Voxels() int { return g.N[0] * g.N[1] * g.N[2] }

// Index returns the place of voxel (ix, iy, iz) in an x-fastest array.
func (g Grid) Index(ix, iy, iz int) int { return (iz*g.N[1]+iy)*g.N[0] + ix }

// MM returns the coordinate in mm of the centre of voxel i along axis (0, 1, 2 for x, y, z): (i - floor(n/2))·size.
func (g Grid) MM(axis, i int) float64 { return float64(i-g.N[axis]/2) * g.VoxelMM[axis] }

// Dim returns 2 for a single slice and 3 otherwise.
func (g Grid) Dim() int {
	if g.N[2] == 1 {
		return 2
	}
	return 3
}

// InsideFieldOfView tells whether the centre of voxel (ix, iy, iz) lies in the circle or sphere inscribed in the grid.
// Spokes see every direction to the same distance, so only that circle or sphere is reconstructed; the corners outside
// hold no answer.
func (g Grid) InsideFieldOfView(ix, iy, iz int) bool {
	x, y, z := g.MM(0, ix), g.MM(1, iy), g.MM(2, iz)
	return x*x+y*y+z*z <= g.RadiusMM()*g.RadiusMM()
}

// RadiusMM returns the radius of the inscribed circle or sphere: half the field of view along x.
func (g Grid) RadiusMM() float64 { return float64(g.N[0]) * g.VoxelMM[0] / 2 }

// Affine returns the first three rows of the matrix that takes voxel indices (ix, iy, iz, 1) to mm.
func (g Grid) Affine() [3][4]float64 {
	var a [3][4]float64
	for axis := range 3 {
		a[axis][axis] = g.VoxelMM[axis]
		a[axis][3] = g.MM(axis, 0)
	}
	return a
}

// Map is one named quantity on a grid. Values is x-fastest and has Grid.Voxels() entries; NaN where there is no answer.
type Map struct {
	Name   string // "pO2", "R1", "amplitude"
	Unit   string // "torr", "1/us", "1/mm3"
	Grid   Grid
	Values []float32
}
