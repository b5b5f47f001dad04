// Package exporter writes maps and acquisitions in open formats.
//
// Every writer promises: the same input gives the same bytes, so that a checksum can be compared; voxels without an
// answer stay NaN; the quantity, its unit and the voxel centres in mm travel along. An error of the io.Writer itself
// comes back unchanged.
//
// To add a format for maps, write one file with its function and add its row to MapFormats.
package exporter

import (
	"io"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// MapFormat is one way to hand back a map.
type MapFormat struct {
	Name      string
	Extension string
	Write     func(io.Writer, volume.Map) error
}

// MapFormats lists what a map can be written as.
var MapFormats = []MapFormat{
	{"NIfTI-1", ".nii.gz", NIfTI},
	{"NumPy archive", ".npz", MapNPZ},
}

// checkGrid returns a fault unless n values fill a grid with voxels of a size.
func checkGrid(where string, g volume.Grid, n int) error {
	for axis := range 3 {
		if g.N[axis] < 1 || !(g.VoxelMM[axis] > 0) {
			return fault.New(fault.BadSetting, where, "%v voxels of %v mm; each axis needs a voxel with a size", g.N, g.VoxelMM)
		}
	}
	if n != g.Voxels() {
		return fault.New(fault.Bug, where, "%d values for %d voxels", n, g.Voxels())
	}
	return nil
}
