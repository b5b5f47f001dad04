package nufft

import (
	"math"

	"torrloom/recon/fault"
	"torrloom/recon/fft"
)

// Normal applies the normal operator of weighted sums over points and their mirrors to real images:
//
//	(N f)_i = Σ_i' q(x_i - x_i') f_i',   q(x) = Σ_j w_j cos(2π k_j·x)
//
// which is A*WA for a forward sum A over the points ±k_j that weigh w_j/2 each. It depends on differences of voxels only
// (a Toeplitz matrix), and is done as a convolution over at least twice the voxels per axis, without any gridding.
//
// A Normal is read-only; several goroutines may share it.
//
// Source: Fessler, Lee, Olafsson, Shi & Noll, Toeplitz-based iterative image reconstruction for MRI with correction for
// magnetic field inhomogeneity, IEEE Trans. Signal Process. 53 (2005) 3393, section on Toeplitz matrices.
type Normal[F Float] struct {
	plan     *Plan[F]
	spectrum []F // [z][y][x], the transform of q
}

// NewNormal returns the operator for images of n voxels. Settings are those of the one sum that makes q. Progress, if
// not nil, is called with the fraction done.
//
// Errors: those of NewPlan and Spread; bad-setting when there is not one weight per point.
func NewNormal[F Float](n [3]int, points [][3]float64, weights []float64, s Settings, progress func(float64)) (*Normal[F], error) {
	if len(points) != len(weights) {
		return nil, fault.New(fault.BadSetting, "gridding", "%d weights for %d points", len(weights), len(points))
	}
	q, double, err := differences[F](n, points, weights, s, progress)
	if err != nil {
		return nil, err
	}
	t := &Normal[F]{plan: &Plan[F]{}}
	wide := &Plan[F]{}
	for i := range n {
		length := 1
		if n[i] > 1 {
			length = fft.FastLength(2 * n[i])
		}
		t.plan.axes[i] = plainAxis(n[i], length)
		wide.axes[i] = plainAxis(double[i], length)
		for v := range wide.axes[i].correction {
			wide.axes[i].correction[v] = 1
		}
	}
	g := wide.NewGrid(1)
	g.Load(q, nil)
	t.spectrum = make([]F, len(g.cells)/2)
	for i := range t.spectrum {
		t.spectrum[i] = g.cells[2*i] // q is real and even, and so is its transform
	}
	return t, nil
}

// plainAxis is an axis of a transform without gridding: there and back it divides by length once.
func plainAxis(n, length int) axis {
	a := axis{n: n, length: length, correction: make([]float64, n)}
	for i := range a.correction {
		a.correction[i] = 1 / math.Sqrt(float64(length))
	}
	return a
}

// differences returns q at all differences of voxels, as an image of twice the voxels, and its size. The first voxel of
// every axis, which no difference reaches, is left out. The image is made of 2^dim parts of n voxels, so that the grid
// need not be larger than for an image; a part and its opposite are mirrors.
func differences[F Float](n [3]int, points [][3]float64, weights []float64, s Settings, progress func(float64)) ([]F, [3]int, error) {
	double := n
	for i := range n {
		if n[i] > 1 {
			double[i] = 2 * n[i]
		}
	}
	p, err := NewPlan[F](n, s)
	if err != nil {
		return nil, double, err
	}
	d := &differ[F]{n: n, double: double, g: p.NewGrid(1), q: make([]F, 2*double[0]*double[1]*double[2]), part: make([]F, 2*p.Voxels())}
	parts := d.parts()
	for i, negative := range parts {
		if err := d.add(negative, points, weights); err != nil {
			return nil, double, err
		}
		if progress != nil {
			progress(float64(i+1) / float64(len(parts)))
		}
	}
	return d.q, double, nil
}

// differ fills q part by part.
type differ[F Float] struct {
	n, double [3]int
	g         *Grid[F]
	q, part   []F
}

// parts lists, for half of all parts, along which axes the differences are negative.
func (d *differ[F]) parts() [][3]bool {
	var out [][3]bool
	for mask := range 8 {
		negative := [3]bool{mask&1 > 0, mask&2 > 0, mask&4 > 0}
		last, exists := -1, true
		for i := range negative {
			if d.n[i] > 1 {
				last = i
			}
			exists = exists && (d.n[i] > 1 || !negative[i])
		}
		if exists && (last < 0 || !negative[last]) {
			out = append(out, negative)
		}
	}
	return out
}

// add makes one part and stores it and its mirror.
func (d *differ[F]) add(negative [3]bool, points [][3]float64, weights []float64) error {
	var from [3]int // difference that voxel 0 of the part stands for
	var origin [3]float64
	for i := range from {
		if negative[i] {
			from[i] = -d.n[i]
		}
		origin[i] = float64(from[i]+d.n[i]/2) / float64(d.n[i])
	}
	values := make([]F, 0, 2*len(points))
	for j, k := range points {
		sin, cos := math.Sincos(2 * math.Pi * (k[0]*origin[0] + k[1]*origin[1] + k[2]*origin[2]))
		values = append(values, F(weights[j]*cos), F(weights[j]*sin))
	}
	d.g.Reset()
	if err := d.g.Spread(points, values); err != nil {
		return err
	}
	d.g.Image(d.part, nil)
	d.store(from)
	return nil
}

func (d *differ[F]) store(from [3]int) {
	at := 0
	for iz := range d.n[2] {
		for iy := range d.n[1] {
			for ix := range d.n[0] {
				difference := [3]int{from[0] + ix, from[1] + iy, from[2] + iz}
				v := d.part[at]
				d.set(difference, v)
				d.set([3]int{-difference[0], -difference[1], -difference[2]}, v)
				at += 2
			}
		}
	}
}

// set stores q at a difference of voxels, if two voxels can differ so.
func (d *differ[F]) set(difference [3]int, v F) {
	var at [3]int
	for i, x := range difference {
		if max(x, -x) >= d.n[i] {
			return
		}
		at[i] = x + d.double[i]/2
	}
	d.q[2*((at[2]*d.double[1]+at[1])*d.double[0]+at[0])] = v
}

// Work is the working memory of Apply. One goroutine uses it at a time.
type Work[F Float] struct {
	normal *Normal[F]
	g      *Grid[F]
}

// NewWork returns working memory for images of some lanes. A lane holds two real images.
func (t *Normal[F]) NewWork(lanes int) *Work[F] {
	return &Work[F]{normal: t, g: t.plan.newGrid(lanes, t.plan.axes[2].n)}
}

// Bytes returns the memory of NewWork for an element type of so many bytes.
func (t *Normal[F]) Bytes(lanes, element int) int64 {
	cells := t.plan.axes[0].length * t.plan.axes[1].length * t.plan.axes[2].n
	return int64(cells) * int64(2*lanes*element)
}

// Apply replaces image, [voxel][lane], by N image. Progress, if not nil, is called with the fraction done.
func (w *Work[F]) Apply(image []F, progress func(float64)) {
	x, y, z := &w.g.plan.axes[0], &w.g.plan.axes[1], &w.g.plan.axes[2]
	report := steps(progress, 2*z.n+y.length)
	for iz := range z.n {
		for iy := 0; iy < y.n; iy += w.g.columns() {
			w.g.growRows(image, iz, iy, min(iy+w.g.columns(), y.n), x)
		}
		if y.n > 1 {
			w.g.grow(1, iz)
		}
		report()
	}
	for iy := range y.length {
		w.convolveAlongZ(iy)
		report()
	}
	for iz := range z.n {
		if y.n > 1 {
			w.g.shrink(1, iz)
		}
		for iy := 0; iy < y.n; iy += w.g.columns() {
			w.g.shrinkRows(image, iz, iy, min(iy+w.g.columns(), y.n), x)
		}
		report()
	}
}

// convolveAlongZ transforms all columns along z at row iy, multiplies by the spectrum and transforms back, so that only
// the voxels along z need be stored.
func (w *Work[F]) convolveAlongZ(iy int) {
	y, z := &w.g.plan.axes[1], &w.g.plan.axes[2]
	bundle, pairs := w.g.bundle[2], 2*w.g.lanes
	w.g.eachBlock(func(from, to int) {
		bundle.start((to - from) / 2)
		for i := range z.n {
			bundle.put(z.output(i), 0, w.g.cellsAt(2, i, iy, from, to))
		}
		bundle.transform()
		for k := range z.length {
			row := w.normal.spectrum[(k*y.length+iy)*w.g.plan.rowCells():]
			bundle.multiply(k, row[from/pairs:to/pairs], w.g.lanes)
		}
		bundle.transform()
		for i := range z.n {
			bundle.take(z.mirrored(i), 0, w.g.cellsAt(2, i, iy, from, to), 1/F(z.length))
		}
	})
}
