// Package backproject reconstructs by filtered back-projection in 2D and 3D, for several delays at once.
//
// Each spoke is filtered in k-space, |k| in 2D and k² in 3D times the window, transformed to a finely sampled
// projection, and smeared back over the voxels with linear interpolation. The result is quantitative: signal per mm² or
// mm³. Voxels outside the circle or sphere of the field of view are NaN.
//
// Source: Kak & Slaney, Principles of Computerized Tomographic Imaging (1988), chapter 3, for 2D; the 3D formula is the
// inversion f(r) = -1/(8π²) ∫ P_xx(n·r, n) dn of the plane-integral (Radon) transform.
package backproject

import (
	"math"

	"torrloom/recon/condition"
	"torrloom/recon/fft"
	"torrloom/recon/volume"
)

// oversampling of the filtered projections against the sampling theorem. Linear interpolation then errs by at most
// (π/8)²/8, 2 %, at the cutoff itself and by the fourth power less at lower frequencies.
const oversampling = 8

// chunk is how many spokes are filtered, smeared back and reported together: enough to keep the passes over the image
// cheap, few enough for progress at the pace of a screen.
const chunk = 24

// Images returns the images of all delays of the spokes, [delay][voxel] in one array. Axis is the weight of each spoke,
// filter the ramp times the window at k = m·DeltaK. Progress, if not nil, is called with the fraction done.
func Images(sp *condition.Spokes, g volume.Grid, axis, filter []float64, progress func(float64)) []float32 {
	return imagesSampled(sp, g, axis, filter, oversampling, progress)
}

// imagesSampled is Images with projections sampled oversampled times as finely as the sampling theorem asks.
func imagesSampled(sp *condition.Spokes, g volume.Grid, axis, filter []float64, oversampled int, progress func(float64)) []float32 {
	p := newProjector(sp, g, filter, oversampled)
	for from := 0; from < len(sp.Shot); from += chunk {
		to := min(from+chunk, len(sp.Shot))
		p.fill(from, to, axis)
		p.smear(sp.Directions[from:to])
		if progress != nil {
			progress(float64(to) / float64(len(sp.Shot)))
		}
	}
	return p.images()
}

// projector holds the filtered projections of one chunk and the growing images, both with the delays innermost.
type projector struct {
	sp     *condition.Spokes
	g      volume.Grid
	filter []float64

	plan   *fft.Plan[complex64]
	lanes  int         // complex lanes: two delays each
	line   []complex64 // [position][lane], one period
	work   []complex64
	width  int     // floats per table row and per voxel: 2·lanes
	reach  int     // table rows on either side of the gradient centre
	stepMM float64 // distance of table rows
	table  []float32
	sum    []float32 // [voxel][width]
}

func newProjector(sp *condition.Spokes, g volume.Grid, filter []float64, oversampled int) *projector {
	p := &projector{sp: sp, g: g, filter: filter, lanes: (len(sp.Delays) + 1) / 2}
	length := fft.FastLength(oversampled * 2 * sp.Half)
	p.plan, _ = fft.NewPlan[complex64](length) // FastLength is always a valid length
	p.line, p.work = make([]complex64, length*p.lanes), make([]complex64, length*p.lanes)
	p.width = 2 * p.lanes
	p.stepMM = 1 / (sp.DeltaK * float64(length))
	p.reach = min(int(math.Ceil(g.RadiusMM()/p.stepMM))+2, length/2)
	p.table = make([]float32, chunk*p.rows()*p.width)
	p.sum = make([]float32, g.Voxels()*p.width)
	return p
}

func (p *projector) rows() int { return 2*p.reach + 1 }

// fill puts the filtered projections of spokes from..to-1 into the table.
func (p *projector) fill(from, to int, axis []float64) {
	for i := from; i < to; i++ {
		p.load(i, axis[i]*p.sp.DeltaK)
		p.plan.Inverse(p.line, p.work, p.lanes)
		p.store(p.table[(i-from)*p.rows()*p.width:])
	}
}

// load puts the filtered spoke i into line. Two delays a, b of real projections travel as a + ib: their transforms at
// ±k are A ± and B with A(-k) = A*(k).
func (p *projector) load(i int, scale float64) {
	clear(p.line)
	length := p.plan.Len()
	for m := 0; m <= p.sp.Half; m++ {
		weight := complex(float32(p.filter[m]*scale), 0)
		row := p.sp.Row(i, m)
		up := p.line[m*p.lanes : (m+1)*p.lanes]
		down := p.line[(length-m)%length*p.lanes:]
		for l := range up {
			a, b := row[2*l]*weight, complex64(0)
			if 2*l+1 < len(row) {
				b = row[2*l+1] * weight
			}
			up[l] = complex(real(a)-imag(b), imag(a)+real(b))
			down[l] = complex(real(a)+imag(b), real(b)-imag(a))
		}
	}
}

// store copies the middle of the line, positions -reach..reach, into rows of floats.
func (p *projector) store(rows []float32) {
	length := p.plan.Len()
	at := 0
	for x := -p.reach; x <= p.reach; x++ {
		for _, v := range p.line[(x+length)%length*p.lanes : (x+length)%length*p.lanes+p.lanes] {
			rows[at], rows[at+1] = real(v), imag(v)
			at += 2
		}
	}
}

// smear adds the table's projections to the images, row of voxels by row of voxels.
func (p *projector) smear(directions [][3]float64) {
	for iz := range p.g.N[2] {
		for iy := range p.g.N[1] {
			from, to := p.rowInside(iy, iz)
			if from >= to {
				continue
			}
			row := p.sum[p.g.Index(from, iy, iz)*p.width : p.g.Index(to-1, iy, iz)*p.width+p.width]
			for i, n := range directions {
				start := (n[0]*p.g.MM(0, from)+n[1]*p.g.MM(1, iy)+n[2]*p.g.MM(2, iz))/p.stepMM + float64(p.reach)
				table := p.table[i*p.rows()*p.width : (i+1)*p.rows()*p.width]
				addRow(row, table, start, n[0]*p.g.VoxelMM[0]/p.stepMM, p.width)
			}
		}
	}
}

// rowInside returns the range of ix whose voxel centres lie in the field of view.
func (p *projector) rowInside(iy, iz int) (from, to int) {
	n := p.g.N[0]
	for from = 0; from < n && !p.g.InsideFieldOfView(from, iy, iz); from++ {
	}
	for to = n; to > from && !p.g.InsideFieldOfView(to-1, iy, iz); to-- {
	}
	return from, to
}

// addRow adds to every voxel of a row the table, linearly interpolated at start, start+step, ... The coordinate walks in
// fixed point with 32 binary places.
func addRow(row, table []float32, start, step float64, width int) {
	at, by := int64(start*(1<<32)), int64(step*(1<<32))
	for ; len(row) >= width; row = row[width:] {
		i := int(at>>32) * width
		f := float32(uint32(at)) * (1.0 / (1 << 32))
		near, far, sum := table[i:i+width], table[i+width:i+2*width], row[:width]
		far, sum = far[:len(near)], sum[:len(near)]
		for d, v := range near {
			sum[d] += v + f*(far[d]-v)
		}
		at += by
	}
}

// images returns the sums as one image per delay.
func (p *projector) images() []float32 {
	voxels := p.g.Voxels()
	out := make([]float32, len(p.sp.Delays)*voxels)
	nan := float32(math.NaN())
	i := 0
	for iz := range p.g.N[2] {
		for iy := range p.g.N[1] {
			for ix := range p.g.N[0] {
				inside := p.g.InsideFieldOfView(ix, iy, iz)
				for d := range p.sp.Delays {
					if inside {
						out[d*voxels+i] = p.sum[i*p.width+d]
					} else {
						out[d*voxels+i] = nan
					}
				}
				i++
			}
		}
	}
	return out
}
