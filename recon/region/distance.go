package region

import (
	"math"

	"torrloom/recon/volume"
)

// Margin returns the mask grown by a margin in mm, or shrunk by a negative one. Growing takes every voxel whose centre
// lies within the margin of a centre inside; shrinking drops every voxel whose centre lies within it of a centre
// outside. Beyond the grid is outside.
func Margin(g volume.Grid, m Mask, mm float64) Mask {
	if mm == 0 {
		return m
	}
	out := make(Mask, len(m))
	limit := (math.Abs(mm) + rounding) * (math.Abs(mm) + rounding)
	if mm > 0 {
		for i, d := range SquaredDistance(g, m) {
			out[i] = d <= limit
		}
		return out
	}
	outside := make(Mask, len(m))
	for i, in := range m {
		outside[i] = !in
	}
	for i, d := range SquaredDistance(g, outside) {
		edge := toEdge(g, i)
		out[i] = d > limit && edge*edge > limit
	}
	return out
}

// toEdge returns the distance of a voxel to the nearest centre that the grid would have beyond its faces. A single slice
// has no faces along z.
func toEdge(g volume.Grid, i int) float64 {
	at := [3]int{i % g.N[0], i / g.N[0] % g.N[1], i / (g.N[0] * g.N[1])}
	least := math.Inf(1)
	for axis := range g.Dim() {
		least = math.Min(least, float64(min(at[axis]+1, g.N[axis]-at[axis]))*g.VoxelMM[axis])
	}
	return least
}

// SquaredDistance returns, for every voxel, the squared distance in mm² from its centre to the nearest centre of the
// mask, 0 inside and +Inf everywhere for an empty mask. Exact.
//
// Source: Felzenszwalb & Huttenlocher, Theory of Computing 8 (2012) 415, with voxels of any size.
func SquaredDistance(g volume.Grid, m Mask) []float64 {
	out := make([]float64, len(m))
	for i, in := range m {
		if !in {
			out[i] = math.Inf(1)
		}
	}
	stride := [3]int{1, g.N[0], g.N[0] * g.N[1]}
	for axis := range 3 {
		e := newEnvelope(g.N[axis], g.VoxelMM[axis])
		for start := range out {
			if start/stride[axis]%g.N[axis] == 0 {
				e.line(out, start, stride[axis])
			}
		}
	}
	return out
}

// envelope is the lower envelope of parabolas (x - x_q)² + f(q) along one line of voxels.
type envelope struct {
	size   float64
	f      []float64
	vertex []int     // whose parabola is lowest, left to right
	from   []float64 // where it starts to be
}

func newEnvelope(n int, size float64) *envelope {
	return &envelope{size: size, f: make([]float64, n), vertex: make([]int, n), from: make([]float64, n)}
}

func (e *envelope) line(values []float64, start, stride int) {
	for q := range e.f {
		e.f[q] = values[start+q*stride]
	}
	count := e.build()
	if count == 0 {
		return // no parabola: the line stays at infinity
	}
	k := 0
	for q := range e.f {
		x := float64(q) * e.size
		for k+1 < count && e.from[k+1] <= x {
			k++
		}
		d := x - float64(e.vertex[k])*e.size
		values[start+q*stride] = d*d + e.f[e.vertex[k]]
	}
}

// build returns how many parabolas make the envelope.
func (e *envelope) build() int {
	count := 0
	for q, f := range e.f {
		if math.IsInf(f, 1) {
			continue
		}
		start := math.Inf(-1)
		for count > 0 {
			start = e.crossing(e.vertex[count-1], q)
			if start > e.from[count-1] {
				break
			}
			count--
			start = math.Inf(-1)
		}
		e.vertex[count], e.from[count] = q, start
		count++
	}
	return count
}

// crossing returns where the parabola of q falls below that of p, p < q.
func (e *envelope) crossing(p, q int) float64 {
	xp, xq := float64(p)*e.size, float64(q)*e.size
	return (e.f[q] + xq*xq - e.f[p] - xp*xp) / (2 * (xq - xp))
}
