// Package backproject reconstructs by filtered back-projection in 2D and 3D, for several delays at once.
//
// Each spoke is filtered in k-space, |k| in 2D and k² in 3D times the window, transformed to a finely sampled
// projection, and smeared back over the voxels. The result is quantitative: signal per mm² or mm³. Voxels outside the
// circle or sphere of the field of view are NaN.
//
// Source: Kak & Slaney, Principles of Computerized Tomographic Imaging (1988), chapter 3, for 2D; the 3D formula is the
// inversion f(r) = -1/(8π²) ∫ ∂²P(n·r, n) dn of the plane-integral (Radon) transform, ∂ along n.
package backproject

import (
	"math"

	"torrloom/recon/condition"
	"torrloom/recon/fft"
	"torrloom/recon/volume"
)

// fineness is how finely filtered projections are sampled, on two levels.
type fineness struct {
	transformed int // samples per sample of the sampling theorem that the Fourier transform makes
	between     int // table entries per transformed sample, linearly interpolated; a voxel takes the nearest entry
}

// fine is what images are made with. Eight samples keep the compensation below 1.5 % at the cutoff: on the gradient centre
// every spoke is read at a sample, where nothing was damped. The damping of straight lines and of nearest entries is compensated, see
// compensated; what is left differs from spoke to spoke and averages to 1e-3 of an image from some hundred spokes.
var fine = fineness{transformed: 8, between: 4}

// chunk is how many spokes are filtered, smeared back and reported together: enough to keep the passes over the image
// cheap, few enough for progress at the pace of a screen. A multiple of four.
const chunk = 48

// slab is how many slices are kept in the processor's cache while the spokes of a chunk pass over them.
const slab = 4

// Images returns the images of all delays of the spokes, [delay][voxel] in one array. Axis is the weight of each spoke,
// filter the ramp times the window at k = m·DeltaK. Progress, if not nil, is called with the fraction done.
func Images(sp *condition.Spokes, g volume.Grid, axis, filter []float64, progress func(float64)) []float32 {
	return imagesSampled(sp, g, axis, filter, fine, progress)
}

// imagesSampled works on batches of delays, at most ten, since that is what fits one bundle.
func imagesSampled(sp *condition.Spokes, g volume.Grid, axis, filter []float64, f fineness, progress func(float64)) []float32 {
	out := make([]float32, 0, len(sp.Delays)*g.Voxels())
	batches := (len(sp.Delays) + 2*mostPairs - 1) / (2 * mostPairs)
	for b := range batches {
		from, to := batchEdge(len(sp.Delays), b, batches), batchEdge(len(sp.Delays), b+1, batches)
		out = append(out, smearBatch(newSource(sp, g, axis, filter, f, from, to), func(fraction float64) {
			if progress != nil {
				progress((float64(b) + fraction) / float64(batches))
			}
		})...)
	}
	return out
}

// batchEdge cuts delays into batches of nearly equal size that start at even delays.
func batchEdge(delays, b, batches int) int {
	return min(delays, (delays+1)/2*b/batches*2)
}

func smearBatch(s *source, progress func(float64)) []float32 {
	switch s.pairs {
	case 1:
		return smear(s, addRow1, progress)
	case 2:
		return smear(s, addRow2, progress)
	case 3:
		return smear(s, addRow3, progress)
	case 4:
		return smear(s, addRow4, progress)
	}
	return smear(s, addRow5, progress)
}

// source makes the filtered projections of some delays.
type source struct {
	sp       *condition.Spokes
	g        volume.Grid
	axis     []float64
	filter   []float64
	from, to int // delays of sp
	pairs    int // of delays

	plan       *fft.Plan[complex64]
	block      int         // spokes transformed together
	line, work []complex64 // [position][spoke of the block][pair], one period
	between    int
	reach      int       // transformed samples on either side of the gradient centre
	stepMM     float64   // distance of table entries
	scale      []float64 // [delay] from signal to fixed point
	rows       [][2]int  // see rowsInside
}

func newSource(sp *condition.Spokes, g volume.Grid, axis, filter []float64, f fineness, from, to int) *source {
	length := fft.FastLength(f.transformed * 2 * sp.Half)
	s := &source{sp: sp, g: g, axis: axis, filter: compensated(filter, length, f), from: from, to: to, pairs: (to - from + 1) / 2, between: f.between, rows: rowsInside(g)}
	s.plan, _ = fft.NewPlan[complex64](length) // FastLength is always a valid length
	s.block = (fewestLines + s.pairs - 1) / s.pairs
	s.line, s.work = make([]complex64, length*s.block*s.pairs), make([]complex64, length*s.block*s.pairs)
	s.stepMM = 1 / (sp.DeltaK * float64(length*f.between))
	s.reach = min(int(math.Ceil(g.RadiusMM()/s.stepMM/float64(f.between)))+1, length/2-1)
	for d := from; d < to; d++ {
		s.scale = append(s.scale, fixedPoint/s.bound(d))
	}
	return s
}

// compensated returns the filter divided by what reading the table does to a frequency on average: sinc² of the straight
// lines between length samples to a period, and sinc of the nearest entry between those. Projections sampled no finer
// than the sampling theorem asks are left as they are, since there the lines are the method.
func compensated(filter []float64, length int, f fineness) []float64 {
	out := append([]float64(nil), filter...)
	if f.transformed == 1 {
		return out
	}
	for m := range out {
		line := sinc(float64(m) / float64(length))
		out[m] /= line * line * sinc(float64(m)/float64(length*f.between))
	}
	return out
}

// sinc returns sin(πx)/(πx).
func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}

// fewestLines is how many lines a transform should have at a time to be worth its loops.
const fewestLines = 8

// fixedPoint leaves a sixteenth of the range of an int32 for rounding.
const fixedPoint = (1 << 31) * (15.0 / 16)

// bound returns a value that no voxel of delay d can pass: Σ_spokes Σ_m of the magnitudes that add up to it.
func (s *source) bound(d int) float64 {
	sum := 0.0
	for i, w := range s.axis {
		for m, f := range s.filter {
			v := complex128(s.sp.Row(i, m)[d])
			both := 2.0
			if m == 0 {
				both = 1
			}
			sum += both * math.Abs(f*w) * math.Hypot(real(v), imag(v))
		}
	}
	if sum == 0 {
		return 1
	}
	return sum * s.sp.DeltaK
}

// entries returns how many table entries a projection has.
func (s *source) entries() int { return 2*s.reach*s.between + 1 }

// load puts the filtered spokes first, first+1, ... before end, a block of them at most, into line and transforms them. It
// returns how many they were. Two delays a, b of real projections travel as a + ib: their transforms at ±k are A ± and B
// with A(-k) = A*(k).
func (s *source) load(first, end int) int {
	clear(s.line)
	count := min(s.block, end-first)
	for q := range count {
		s.loadSpoke(first+q, s.line[q*s.pairs:])
	}
	s.plan.Inverse(s.line, s.work, s.block*s.pairs)
	return count
}

func (s *source) loadSpoke(i int, line []complex64) {
	length, stride := s.plan.Len(), s.block*s.pairs
	for m := 0; m <= s.sp.Half; m++ {
		weight := complex(float32(s.filter[m]*s.axis[i]*s.sp.DeltaK), 0)
		row := s.sp.Row(i, m)[s.from:s.to]
		up := line[m*stride : m*stride+s.pairs]
		down := line[(length-m)%length*stride:]
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

// at returns the transformed sample x of pair l of spoke q of the loaded block, scaled to fixed point.
func (s *source) at(x, q, l int) (first, second float64) {
	if x < 0 {
		x += s.plan.Len()
	}
	v := s.line[(x*s.block+q)*s.pairs+l]
	first = float64(real(v)) * s.scale[2*l]
	if 2*l+1 < len(s.scale) {
		second = float64(imag(v)) * s.scale[2*l+1]
	}
	return first, second
}

// rowsInside returns, for every row of voxels [iz][iy], the range of ix whose centres lie in the field of view.
func rowsInside(g volume.Grid) [][2]int {
	out := make([][2]int, 0, g.N[1]*g.N[2])
	for iz := range g.N[2] {
		for iy := range g.N[1] {
			from, to := 0, g.N[0]
			for from < to && !g.InsideFieldOfView(from, iy, iz) {
				from++
			}
			for to > from && !g.InsideFieldOfView(to-1, iy, iz) {
				to--
			}
			out = append(out, [2]int{from, to})
		}
	}
	return out
}
