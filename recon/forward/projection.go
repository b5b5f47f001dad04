package forward

import (
	"math"

	"torrloom/recon/volume"
)

// Projection returns the integral of an image over the planes (3D) or lines (2D) at right angles to the unit vector n, at
// positions along n:
//
//	p(x) = Σ_v value_v · V · h((x - n·r_v)/w)/w,   h(u) = max(0, 1-|u|)
//
// with V the size of a voxel and w its longest edge: the integral seen through a triangle two voxels wide, which neither
// sees the rows of voxels one by one nor loses any of their sum. Positions must rise. NaN voxels count as 0.
//
// Units: mm; value·mm² or value·mm. Shape: values x-fastest over g. Approximate: details below two voxels are smoothed.
func Projection(g volume.Grid, values []float32, n [3]float64, positionMM []float64) []float64 {
	p := &projector{positions: positionMM, sum: make([]float64, len(positionMM)), width: widest(g)}
	scale := voxelSize(g) / p.width
	for iz := range g.N[2] {
		for iy := range g.N[1] {
			along := n[1]*g.MM(1, iy) + n[2]*g.MM(2, iz)
			row := values[g.Index(0, iy, iz) : g.Index(0, iy, iz)+g.N[0]]
			for ix, v := range row {
				if v != 0 && v == v {
					p.add(along+n[0]*g.MM(0, ix), float64(v)*scale)
				}
			}
		}
	}
	return p.sum
}

// voxelSize returns the volume of a voxel, in 2D its area.
func voxelSize(g volume.Grid) float64 {
	size := 1.0
	for axis := range g.Dim() {
		size *= g.VoxelMM[axis]
	}
	return size
}

func widest(g volume.Grid) float64 {
	most := 0.0
	for axis := range g.Dim() {
		most = math.Max(most, g.VoxelMM[axis])
	}
	return most
}

type projector struct {
	positions, sum []float64
	width          float64
}

// add spreads one voxel over the positions within a width of its place.
func (p *projector) add(at, value float64) {
	for i := p.firstAfter(at - p.width); i < len(p.positions); i++ {
		u := math.Abs(p.positions[i]-at) / p.width
		if u >= 1 && p.positions[i] > at {
			return
		}
		p.sum[i] += value * math.Max(0, 1-u)
	}
}

// firstAfter returns the first index whose position is above mm. Positions are nearly even, so that a guess is nearly right.
func (p *projector) firstAfter(mm float64) int {
	last := len(p.positions) - 1
	if last < 1 {
		return 0
	}
	i := int((mm - p.positions[0]) / (p.positions[last] - p.positions[0]) * float64(last))
	i = min(max(i, 0), last)
	for i > 0 && p.positions[i-1] > mm {
		i--
	}
	for i <= last && p.positions[i] <= mm {
		i++
	}
	return i
}
