package leastsquares

import (
	"math"

	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/nufft"
	"torrloom/recon/volume"
)

// accuracy of the sums that make the gridded image and the normal operator, once each: some 1e-4, below what float32
// iterations keep.
var accuracy = nufft.Settings{Width: 6, Oversampling: 1.5}

// bandMargin is how much wider condition.Plan makes the band than the object: the object ends there.
const bandMargin = 1.15

// problem is what all delays share: where the image is sought, and the normal operator.
type problem struct {
	sp       *condition.Spokes
	noise    *condition.Spokes // nil when none was given
	weights  []float64         // [shot][m]
	perDelay int               // columns: the delay itself and its noise realisations

	n        [3]int // voxels of the box that holds the support
	voxelMM  [3]float64
	voxel    float64    // mm² or mm³
	support  []int32    // voxels of the box where the image is sought
	next     [][3]int32 // [supported voxel] its next neighbours along the axes, as indices into support; -1 for none
	inside   []int32    // [supported voxel] its index in the field of view; -1 outside the circle or sphere
	answered int        // voxels inside
	points   [][3]float64
	share    []float64 // [point] its weight
	sample   []int32   // [point] its index shot·(Half+1)+m
	plan     *nufft.Plan[float32]
	operator *nufft.Normal[float32]
}

func newProblem(sp, noise *condition.Spokes, g volume.Grid, weights []float64, progress func(float64)) (*problem, error) {
	if want := len(sp.Shot) * (sp.Half + 1); len(weights) != want {
		return nil, fault.New(fault.Bug, "least squares", "%d density weights for %d samples", len(weights), want)
	}
	p := &problem{sp: sp, noise: noise, weights: weights, perDelay: 1, voxelMM: g.VoxelMM, voxel: 1}
	if noise != nil {
		if len(noise.Shot) != len(sp.Shot) || noise.Half != sp.Half || len(noise.Delays) == 0 {
			return nil, fault.New(fault.Bug, "least squares", "noise of %d spokes to sample %d for data of %d to %d",
				len(noise.Shot), noise.Half, len(sp.Shot), sp.Half)
		}
		p.perDelay += len(noise.Delays)
	}
	for axis := range g.Dim() {
		p.voxel *= g.VoxelMM[axis]
	}
	p.findSupport(g)
	p.findInside(g)
	p.findNext()
	if err := p.findPoints(); err != nil {
		return nil, err
	}
	var err error
	if p.plan, err = nufft.NewPlan[float32](p.n, accuracy); err != nil {
		return nil, err
	}
	p.operator, err = nufft.NewNormal[float32](p.n, p.points, p.normalWeights(), accuracy, progress)
	return p, err
}

// boxOf returns the voxels of a box, and the radius of the circle or sphere in it, where the image is sought: that of the
// field of view, or a larger one that the object needs.
func boxOf(g volume.Grid, bandMM float64) (n [3]int, radius float64) {
	n, radius = g.N, g.RadiusMM()
	if object := bandMM / bandMargin / 2; object > radius*(1+1e-6) {
		radius = object
		for axis := range g.Dim() {
			n[axis] = max(g.N[axis], 2*int(radius/g.VoxelMM[axis])+1)
		}
	}
	return n, radius
}

func (p *problem) findSupport(g volume.Grid) {
	var radius float64
	p.n, radius = boxOf(g, p.sp.BandMM)
	box := volume.Grid{N: p.n, VoxelMM: g.VoxelMM}
	for iz := range p.n[2] {
		for iy := range p.n[1] {
			for ix := range p.n[0] {
				x, y, z := box.MM(0, ix), box.MM(1, iy), box.MM(2, iz)
				if x*x+y*y+z*z <= radius*radius {
					p.support = append(p.support, int32(box.Index(ix, iy, iz)))
				}
			}
		}
	}
}

func (p *problem) findInside(g volume.Grid) {
	p.inside = make([]int32, len(p.support))
	for i, v := range p.support {
		p.inside[i] = -1
		at := [3]int{int(v) % p.n[0], int(v) / p.n[0] % p.n[1], int(v) / p.n[0] / p.n[1]}
		within := true
		for axis := range at {
			at[axis] += g.N[axis]/2 - p.n[axis]/2
			within = within && at[axis] >= 0 && at[axis] < g.N[axis]
		}
		if within && g.InsideFieldOfView(at[0], at[1], at[2]) {
			p.inside[i] = int32(g.Index(at[0], at[1], at[2]))
			p.answered++
		}
	}
}

func (p *problem) findNext() {
	place := make([]int32, p.n[0]*p.n[1]*p.n[2])
	for i := range place {
		place[i] = -1
	}
	for i, v := range p.support {
		place[v] = int32(i)
	}
	strides := [3]int{1, p.n[0], p.n[0] * p.n[1]}
	p.next = make([][3]int32, len(p.support))
	for i, v := range p.support {
		for axis, stride := range strides {
			p.next[i][axis] = -1
			if at := int(v) / stride % p.n[axis]; at+1 < p.n[axis] {
				p.next[i][axis] = place[int(v)+stride]
			}
		}
	}
}

// findPoints lists the samples that weigh something, in cycles per box.
func (p *problem) findPoints() error {
	for i, w := range p.weights {
		if !(w >= 0) || math.IsInf(w, 0) {
			return fault.New(fault.BadSetting, "least squares", "density weight %g of sample %d; weights are 0 or more", w, i)
		}
		if w == 0 {
			continue
		}
		k := float64(i%(p.sp.Half+1)) * p.sp.DeltaK
		var point [3]float64
		for axis, n := range p.sp.Directions[i/(p.sp.Half+1)] {
			point[axis] = k * n * float64(p.n[axis]) * p.voxelMM[axis]
		}
		p.points, p.share, p.sample = append(p.points, point), append(p.share, w), append(p.sample, int32(i))
	}
	if len(p.points) == 0 {
		return fault.New(fault.NoAnswer, "least squares", "every sample weighs nothing; a density and a window that keep some are needed")
	}
	return nil
}

// mirrored tells whether a point stands for a sample and its mirror. The origin is its own.
func (p *problem) mirrored(j int) bool { return int(p.sample[j])%(p.sp.Half+1) > 0 }

// normalWeights are those that make the operator E*wE, with E the forward sum times the voxel.
func (p *problem) normalWeights() []float64 {
	out := make([]float64, len(p.share))
	for j, w := range p.share {
		out[j] = w * p.voxel
		if p.mirrored(j) {
			out[j] *= 2
		}
	}
	return out
}

// columns returns the images per voxel for so many delays; two share a lane.
func (p *problem) columns(delays int) int { return (p.perDelay*delays + 1) / 2 * 2 }

// gridded returns E*w S on the support, [supported voxel][column], of delays from..to-1 and their noise probes: the
// gridded image. It also returns, per delay, Σ w|S|².
func (p *problem) gridded(from, to int, progress func(float64)) (image []float32, energy []float64, err error) {
	width := p.columns(to - from)
	grid := p.plan.NewGrid(width / 2)
	energy = make([]float64, to-from)
	values := make([]float32, 2*width)
	for j := range p.points {
		p.column(values, j, from, to, energy)
		if err := grid.SpreadReal(p.points[j:j+1], values); err != nil {
			return nil, nil, err
		}
	}
	box := make([]float32, p.n[0]*p.n[1]*p.n[2]*width)
	grid.Image(box, progress)
	image = make([]float32, len(p.support)*width)
	p.gather(image, box, width)
	return image, energy, nil
}

// column fills the weighed values of point j, all columns in pairs, and adds to the energy.
func (p *problem) column(values []float32, j, from, to int, energy []float64) {
	count, w := 2.0, complex(float32(p.share[j]), 0)
	if !p.mirrored(j) {
		count, w = 1, w/2 // its own mirror, which SpreadReal adds once more
	}
	at := 0
	put := func(v complex64) {
		values[at], values[at+1] = real(w*v), imag(w*v)
		at += 2
	}
	for d, v := range p.sp.Samples[int(p.sample[j])*len(p.sp.Delays):][from:to] {
		energy[d] += count * p.share[j] * (float64(real(v))*float64(real(v)) + float64(imag(v))*float64(imag(v)))
		put(v)
		if p.noise != nil {
			realisations := len(p.noise.Delays)
			for _, v := range p.noise.Samples[int(p.sample[j])*realisations:][:realisations] {
				put(v)
			}
		}
	}
}

// gather copies the supported voxels out of a box, scatter the other way; the rest of a box is zero.
func (p *problem) gather(to, box []float32, width int) {
	for i, v := range p.support {
		copy(to[i*width:(i+1)*width], box[int(v)*width:])
	}
}

func (p *problem) scatter(box, from []float32, width int) {
	clear(box)
	for i, v := range p.support {
		copy(box[int(v)*width:], from[i*width:(i+1)*width])
	}
}

// dot returns Σ a·b·voxel of every delay, leaving out its noise.
func (p *problem) dot(a, b []float32, delays int) []float64 {
	width := p.columns(delays)
	sums := make([]float64, width)
	for ; len(a) >= width; a, b = a[width:], b[width:] {
		for c, v := range a[:width] {
			sums[c] += float64(v) * float64(b[c])
		}
	}
	out := make([]float64, delays)
	for d := range out {
		out[d] = sums[d*p.perDelay] * p.voxel
	}
	return out
}
