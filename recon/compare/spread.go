package compare

import (
	"math"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// PointSpread is the image of one point.
type PointSpread struct {
	WidthMM [3]float64 `json:"widthMM"` // full width at half maximum along x, y, z; z is 0 in 2D
	Peak    float64    `json:"peak"`    // per mm² or mm³ for a point of 1
	PeakMM  [3]float64 `json:"peakMM"`
	Ring    float64    `json:"ring"` // largest size beyond the main lobe along the three lines, as a share of the peak
}

// SpreadOf measures the image of a point at atMM that some linear reconstruction made on a grid. Between voxels the image
// is taken as band-limited, which it is when the reconstruction uses no frequency that the voxels cannot show. Voxels
// without an answer count as 0.
//
// Errors: no-answer when the image is not largest near the point or does not fall to half within the field of view; bug when
// the sizes differ.
func SpreadOf(image []float32, g volume.Grid, atMM [3]float64) (PointSpread, error) {
	if len(image) != g.Voxels() {
		return PointSpread{}, fault.New(fault.Bug, "point spread", "%d values on a grid of %d", len(image), g.Voxels())
	}
	b := bandLimited{image, g}
	peak := b.climb(atMM)
	if off := distance(peak, atMM); off > 3*g.VoxelMM[0] {
		return PointSpread{}, fault.New(fault.NoAnswer, "point spread", "the image of a point at (%.3g, %.3g, %.3g) mm is strongest %.3g mm away; choose a place inside the field of view", atMM[0], atMM[1], atMM[2], off)
	}
	p := PointSpread{PeakMM: peak}
	for axis := range g.Dim() {
		line := b.line(axis, peak)
		reach := float64(g.N[axis]) / 2 * g.VoxelMM[axis]
		width, ring, err := lobe(func(d float64) float64 { return line(peak[axis] + d) }, g.VoxelMM[axis]/8, reach)
		if err != nil {
			return p, err
		}
		p.WidthMM[axis], p.Ring, p.Peak = width, math.Max(p.Ring, ring), line(peak[axis])
	}
	return p, nil
}

// bandLimited evaluates an image between its voxels by sinc interpolation.
type bandLimited struct {
	image []float32
	g     volume.Grid
}

// line returns the image along one axis through a point: the other axes are summed up once.
func (b bandLimited) line(axis int, through [3]float64) func(mm float64) float64 {
	row := make([]float64, b.g.N[axis])
	var shares [3][]float64
	for other := range 3 {
		if other != axis {
			shares[other] = b.shares(other, through[other])
		}
	}
	for i, v := range b.image {
		at := [3]int{i % b.g.N[0], i / b.g.N[0] % b.g.N[1], i / b.g.N[0] / b.g.N[1]}
		share := 1.0
		for other := range 3 {
			if other != axis {
				share *= shares[other][at[other]]
			}
		}
		if v == v {
			row[at[axis]] += share * float64(v)
		}
	}
	return func(mm float64) float64 {
		sum := 0.0
		for i, s := range b.shares(axis, mm) {
			sum += s * row[i]
		}
		return sum
	}
}

// shares returns sinc of the distance from mm to every voxel centre of an axis, in voxels.
func (b bandLimited) shares(axis int, mm float64) []float64 {
	out := make([]float64, b.g.N[axis])
	if len(out) == 1 {
		out[0] = 1
		return out
	}
	for i := range out {
		out[i] = sinc((mm - b.g.MM(axis, i)) / b.g.VoxelMM[axis])
	}
	return out
}

func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}

// climb returns the place of the largest value near a point: two rounds of the best place along each axis, within two
// voxels, to a 64th of a voxel.
func (b bandLimited) climb(mm [3]float64) [3]float64 {
	for _, reach := range []float64{2, 1. / 8} {
		for axis := range b.g.Dim() {
			line, best, centre := b.line(axis, mm), math.Inf(-1), mm[axis]
			for step := -8; step <= 8; step++ {
				at := centre + float64(step)/8*reach*b.g.VoxelMM[axis]
				if v := line(at); v > best {
					best, mm[axis] = v, at
				}
			}
		}
	}
	return mm
}

// lobe returns the full width at half maximum of f around 0 and the largest size of f beyond its first rise or change of
// sign on either side, as a share of f(0). It walks in steps up to reach.
//
// Errors: no-answer when f does not fall to half.
func lobe(f func(float64) float64, step, reach float64) (width, ring float64, err error) {
	peak := f(0)
	for _, side := range []float64{-1, 1} {
		half, rest, found := walk(func(d float64) float64 { return f(side*d) / peak }, step, reach)
		if !found {
			return 0, 0, fault.New(fault.NoAnswer, "point spread", "the image of the point does not fall to half within %.3g mm; the place is too near the rim of the field of view", reach)
		}
		width, ring = width+half, math.Max(ring, rest)
	}
	return width, ring, nil
}

// walk goes from f(0) = 1 outwards and returns where f is ½, by bisection, and the largest size of f after its first
// minimum or change of sign.
func walk(f func(float64) float64, step, reach float64) (half, rest float64, found bool) {
	last, beyond := 1.0, false
	for d := step; d <= reach; d += step {
		v := f(d)
		if !found && v <= 0.5 {
			half, found = bisect(f, d-step, d), true
		}
		beyond = beyond || found && (v <= 0 || v > last)
		if beyond {
			rest = math.Max(rest, math.Abs(v))
		}
		last = v
	}
	return half, rest, found
}

// bisect returns where f falls through ½ between from and to.
func bisect(f func(float64) float64, from, to float64) float64 {
	for range 30 { // to 1e-9 of the step
		if middle := (from + to) / 2; f(middle) > 0.5 {
			from = middle
		} else {
			to = middle
		}
	}
	return (from + to) / 2
}
