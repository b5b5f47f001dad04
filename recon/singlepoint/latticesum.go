package singlepoint

import (
	"torrloom/recon/acquisition"
	"torrloom/recon/volume"
)

// latticeSum sums over a lattice axis by axis: x, then y, then the real part over z; in 2D x, then the real part over y.
// Re(s exp(i2πk·r)) = Re(s* exp(-i2πk·r)) lets the last axis keep the points q >= 0 alone, which halves all the work.
type latticeSum struct {
	l       *lattice
	g       volume.Grid
	last    int // axis
	middle  int // points along y in 3D, 1 in 2D
	half    int // points q >= 0 along the last axis
	columns int // voxels along y in 3D, 1 in 2D
	from    []int
	to      []int // [iz·ny + iy] voxels of the row inside the field of view
	timeUS  float64
	axes    [3]axis

	points []float64 // [qx][2][half·middle]
	rows   []float64 // [ix][2][half·middle]
	turned []float64 // [middle][2][ix] of one point of the last axis
	planes []float64 // [half][iy][2][ix]
	line   []float64 // [last voxel][ix] of one iy
}

func newLatticeSum(geo *geometry, g volume.Grid) *latticeSum {
	l := geo.lattice
	t := &latticeSum{l: l, g: g, last: geo.dim - 1, middle: 1, columns: 1}
	t.half = l.axes[t.last].most/2 + 1
	if geo.dim == 3 {
		t.middle, t.columns = l.axes[1].points(), g.N[1]
	}
	lines := t.half * t.middle
	t.points = make([]float64, l.axes[0].points()*2*lines)
	t.rows = make([]float64, g.N[0]*2*lines)
	t.turned = make([]float64, t.middle*2*g.N[0])
	t.planes = make([]float64, t.half*t.columns*2*g.N[0])
	t.line = make([]float64, g.N[t.last]*g.N[0])
	for iz := range g.N[2] {
		for iy := range g.N[1] {
			from, to := rowInside(g, iy, iz)
			t.from, t.to = append(t.from, from), append(t.to, to)
		}
	}
	return t
}

// rowInside returns the range of ix whose voxel centres lie in the field of view.
func rowInside(g volume.Grid, iy, iz int) (from, to int) {
	for to = g.N[0]; from < to && !g.InsideFieldOfView(from, iy, iz); from++ {
	}
	for ; to > from && !g.InsideFieldOfView(to-1, iy, iz); to-- {
	}
	return from, to
}

func (t *latticeSum) add(image []float32, samples []complex128, timeUS float64) error {
	if t.axes[0] == nil || timeUS != t.timeUS {
		t.timeUS = timeUS
		perMT := acquisition.KPerNS(1, timeUS*1e3)
		for i := range t.last + 1 {
			t.axes[i] = newAxis(t.l.axes[i], t.g.N[i], perMT*t.l.axes[i].step*t.g.VoxelMM[i])
		}
	}
	t.place(samples)
	lines := t.half * t.middle
	t.axes[0].full(t.rows, t.points, lines)
	for m := range t.half {
		t.toPlane(m)
	}
	for iy := range t.columns {
		t.addColumn(image, iy)
	}
	return nil
}

// place puts the samples on the lattice, those with q < 0 along the last axis as their conjugates at -q.
func (t *latticeSum) place(samples []complex128) {
	clear(t.points)
	lines := t.half * t.middle
	for s, v := range samples {
		q, re, im := t.l.q[s], real(v), imag(v)
		if q[t.last] < 0 {
			q, im = [3]int{-q[0], -q[1], -q[2]}, -im
		}
		line := q[t.last] / 2 * t.middle
		if t.middle > 1 {
			line += (q[1] + t.l.axes[1].most) / 2
		}
		at := (q[0]+t.l.axes[0].most)/2*2*lines + line
		t.points[at] += re
		t.points[at+lines] += im
	}
}

// toPlane carries the point m of the last axis from rows, [ix][2][line], to its plane, [iy][2][ix].
func (t *latticeSum) toPlane(m int) {
	nx, lines := t.g.N[0], t.half*t.middle
	plane := t.planes[m*t.columns*2*nx : (m+1)*t.columns*2*nx]
	turned := t.turned
	if t.last == 1 {
		turned = plane
	}
	for ix := range nx {
		for part := range 2 {
			row := t.rows[(ix*2+part)*lines+m*t.middle:]
			for i := range t.middle {
				turned[(i*2+part)*nx+ix] = row[i]
			}
		}
	}
	if t.last == 2 {
		t.axes[1].full(plane, turned, nx)
	}
}

// addColumn sums over the last axis for one iy (for all of the image in 2D) and adds what lies in the field of view.
func (t *latticeSum) addColumn(image []float32, iy int) {
	nx, depth := t.g.N[0], t.g.N[t.last]
	from, to, reach := t.view(iy)
	if from >= to {
		return
	}
	line := t.line[:depth*(to-from)]
	t.axes[t.last].half(line, t.planes[iy*2*nx+from:], t.columns*2*nx, nx, to-from, reach)
	for p := max(0, depth/2-reach); p <= min(depth-1, depth/2+reach); p++ {
		row := t.rowIndex(iy, p)
		if t.from[row] >= t.to[row] {
			continue
		}
		out := image[row*nx+t.from[row] : row*nx+t.to[row]]
		for i, v := range line[p*(to-from)+t.from[row]-from:][:len(out)] {
			out[i] += float32(v)
		}
	}
}

// rowIndex returns the row of voxels at p along the last axis.
func (t *latticeSum) rowIndex(iy, p int) int {
	if t.last == 1 {
		return p
	}
	return p*t.g.N[1] + iy
}

// view returns the range of ix that any row of the column needs, and how far from the centre rows have any.
func (t *latticeSum) view(iy int) (from, to, reach int) {
	depth := t.g.N[t.last]
	centre := t.rowIndex(iy, depth/2)
	for p := range depth {
		if row := t.rowIndex(iy, p); t.from[row] < t.to[row] {
			reach = max(reach, p-depth/2, depth/2-p)
		}
	}
	return t.from[centre], t.to[centre], reach
}
