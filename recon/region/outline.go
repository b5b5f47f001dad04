package region

import (
	"math"
	"slices"

	"torrloom/recon/volume"
)

// Plane is the stack of slices that an outline is drawn through. Coordinates in the plane are (y, z) for normal x, (x, z)
// for y and (x, y) for z. A range that holds no slice takes the slice it lies in.
type Plane struct {
	Normal string  `json:"normal"` // "x", "y" or "z"
	FromMM float64 `json:"fromMM"`
	ToMM   float64 `json:"toMM"`
}

var normals = []string{"x", "y", "z"}

func (p Plane) check() error {
	if !slices.Contains(normals, p.Normal) {
		return badSetting("plane.normal", "%q is not known; use x, y or z", p.Normal)
	}
	if !finite(p.FromMM, p.ToMM) || p.FromMM > p.ToMM {
		return badSetting("plane", "slices from %g to %g mm; the end must not lie before the start", p.FromMM, p.ToMM)
	}
	return nil
}

// axes returns the normal's axis and the two axes in the plane.
func (p Plane) axes() (normal, first, second int) {
	switch p.Normal {
	case "x":
		return 0, 1, 2
	case "y":
		return 1, 0, 2
	}
	return 2, 0, 1
}

// slices returns the indices of the slices from..to-1 that the plane takes.
func (p Plane) slices(g volume.Grid) (from, to int) {
	axis, _, _ := p.axes()
	n, size := g.N[axis], g.VoxelMM[axis]
	from = int(math.Ceil((p.FromMM-g.MM(axis, 0)-rounding)/size - 0))
	to = int(math.Floor((p.ToMM-g.MM(axis, 0)+rounding)/size)) + 1
	if from >= to {
		from = int(math.Round(((p.FromMM+p.ToMM)/2 - g.MM(axis, 0)) / size))
		to = from + 1
	}
	return max(from, 0), min(to, n)
}

// draw returns the mask of an outline: one slice is tested and copied through the others.
func (p Plane) draw(g volume.Grid, inside func(u, v float64) bool) Mask {
	normal, first, second := p.axes()
	from, to := p.slices(g)
	out := make(Mask, g.Voxels())
	for j := range g.N[second] {
		for i := range g.N[first] {
			if !inside(g.MM(first, i), g.MM(second, j)) {
				continue
			}
			for k := from; k < to; k++ {
				var at [3]int
				at[first], at[second], at[normal] = i, j, k
				out[g.Index(at[0], at[1], at[2])] = true
			}
		}
	}
	return out
}

// Polygon is a closed outline. Where it crosses itself, what is enclosed an even number of times is outside. Polygons
// that share an edge share no voxel and leave none out.
type Polygon struct {
	Plane    Plane        `json:"plane"`
	PointsMM [][2]float64 `json:"pointsMM"`
}

// mostPoints bounds the corners of an outline and the points of a brush.
const mostPoints = 20000

func (p *Polygon) check() error {
	if len(p.PointsMM) < 3 || len(p.PointsMM) > mostPoints {
		return badSetting("polygon.pointsMM", "%d corners; use 3 to %d", len(p.PointsMM), mostPoints)
	}
	for _, c := range p.PointsMM {
		if !finite(c[0], c[1]) {
			return badSetting("polygon.pointsMM", "a corner at (%g, %g) mm; corners are finite", c[0], c[1])
		}
	}
	return p.Plane.check()
}

func (p *Polygon) mask(g volume.Grid, _ Context) (Mask, error) {
	return p.Plane.draw(g, p.holds), nil
}

// holds counts the edges that a ray from the point towards +u crosses.
func (p *Polygon) holds(u, v float64) bool {
	in := false
	last := p.PointsMM[len(p.PointsMM)-1]
	for _, c := range p.PointsMM {
		if (c[1] > v) != (last[1] > v) {
			// The crossing is computed from the lower end, so that two polygons get the same one from their common edge.
			low, high := c, last
			if low[1] > high[1] {
				low, high = high, low
			}
			if u < low[0]+(v-low[1])/(high[1]-low[1])*(high[0]-low[0]) {
				in = !in
			}
		}
		last = c
	}
	return in
}

// Ellipse is an ellipse drawn through slices. The angle turns its first axis from the first towards the second
// coordinate of the plane.
type Ellipse struct {
	Plane    Plane      `json:"plane"`
	CentreMM [2]float64 `json:"centreMM"`
	SemiMM   [2]float64 `json:"semiMM"`
	AngleDeg float64    `json:"angleDeg,omitempty"`
}

func (e *Ellipse) check() error {
	if !positive(e.SemiMM[0], e.SemiMM[1]) || !finite(e.CentreMM[0], e.CentreMM[1], e.AngleDeg) {
		return badSetting("ellipse", "semi-axes %g and %g mm about (%g, %g) mm; positive semi-axes are needed", e.SemiMM[0], e.SemiMM[1], e.CentreMM[0], e.CentreMM[1])
	}
	return e.Plane.check()
}

func (e *Ellipse) mask(g volume.Grid, _ Context) (Mask, error) {
	sin, cos := math.Sincos(e.AngleDeg * math.Pi / 180)
	return e.Plane.draw(g, func(u, v float64) bool {
		du, dv := u-e.CentreMM[0], v-e.CentreMM[1]
		return math.Hypot((cos*du+sin*dv)/e.SemiMM[0], (cos*dv-sin*du)/e.SemiMM[1]) <= 1+rounding
	}), nil
}

// Brush is strokes of a round brush: all voxels within its radius of a stroke. A stroke of one point is a dab.
type Brush struct {
	Plane     Plane          `json:"plane"`
	RadiusMM  float64        `json:"radiusMM"`
	StrokesMM [][][2]float64 `json:"strokesMM"`
}

func (b *Brush) check() error {
	if !positive(b.RadiusMM) {
		return badSetting("brush.radiusMM", "%g mm; a positive radius is needed", b.RadiusMM)
	}
	points := 0
	for _, stroke := range b.StrokesMM {
		points += len(stroke)
		for _, c := range stroke {
			if !finite(c[0], c[1]) {
				return badSetting("brush.strokesMM", "a point at (%g, %g) mm; points are finite", c[0], c[1])
			}
		}
	}
	if points == 0 || points > mostPoints {
		return badSetting("brush.strokesMM", "%d points; use 1 to %d", points, mostPoints)
	}
	return b.Plane.check()
}

// mask paints each piece of each stroke over the voxels near it only.
func (b *Brush) mask(g volume.Grid, _ Context) (Mask, error) {
	_, first, second := b.Plane.axes()
	flat := make([]bool, g.N[first]*g.N[second])
	for _, stroke := range b.StrokesMM {
		for i, c := range stroke {
			b.paint(g, flat, stroke[max(i-1, 0)], c)
		}
	}
	i := 0
	return b.Plane.draw(g, func(u, v float64) bool { // visits the slice in the order of flat
		i++
		return flat[i-1]
	}), nil
}

func (b *Brush) paint(g volume.Grid, flat []bool, p, q [2]float64) {
	_, first, second := b.Plane.axes()
	i0, i1 := span(g, first, math.Min(p[0], q[0])-b.RadiusMM, math.Max(p[0], q[0])+b.RadiusMM)
	j0, j1 := span(g, second, math.Min(p[1], q[1])-b.RadiusMM, math.Max(p[1], q[1])+b.RadiusMM)
	for j := j0; j < j1; j++ {
		for i := i0; i < i1; i++ {
			if toSegment(g.MM(first, i), g.MM(second, j), p, q) <= b.RadiusMM+rounding {
				flat[j*g.N[first]+i] = true
			}
		}
	}
}

// span returns the voxels from..to-1 along an axis that may have centres between two coordinates.
func span(g volume.Grid, axis int, fromMM, toMM float64) (from, to int) {
	n := float64(g.N[axis])
	low := math.Floor((fromMM - g.MM(axis, 0)) / g.VoxelMM[axis])
	high := math.Ceil((toMM-g.MM(axis, 0))/g.VoxelMM[axis]) + 1
	return int(math.Max(0, math.Min(n, low))), int(math.Max(0, math.Min(n, high)))
}

// toSegment returns the distance of (u, v) to the straight piece from p to q.
func toSegment(u, v float64, p, q [2]float64) float64 {
	du, dv := q[0]-p[0], q[1]-p[1]
	along := 0.0
	if length := du*du + dv*dv; length > 0 {
		along = math.Max(0, math.Min(1, ((u-p[0])*du+(v-p[1])*dv)/length))
	}
	return math.Hypot(u-p[0]-along*du, v-p[1]-along*dv)
}
