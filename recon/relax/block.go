package relax

import "math"

// lanes is the number of voxels that share each pass over the seeds: four independent sums hide the latency of the
// additions, and each table entry is loaded once for all of them.
const lanes = 4

// bench is the workspace of one FitBlock call.
type bench struct {
	f    *Fitter
	side []float64 // [delay][lane] images of the voxels at work
	best [lanes]int
	poly [coefficients]float64 // f(s) of one voxel
}

// FitBlock fits voxels from..to-1 and writes the same indices of out. images is [delay][voxel]. The answers are those
// of Fit, to 1e-10 of the rate before it is stored as float32.
//
// A block of a few thousand voxels is long enough to be fast and short enough to report progress after each.
func (f *Fitter) FitBlock(images [][]float32, from, to int, out *Maps) {
	b := &bench{f: f, side: make([]float64, lanes*len(f.delayUS))}
	for v := from; v < to; v += lanes {
		count := min(lanes, to-v)
		b.gather(images, v, count)
		b.seed()
		for lane := range count {
			a := b.answer(lane)
			out.put(v+lane, &a)
		}
	}
}

// gather copies count voxels from v on; lanes without a voxel keep what they had.
func (b *bench) gather(images [][]float32, v, count int) {
	for d, image := range images {
		side := b.side[d*lanes : d*lanes+lanes]
		for lane, value := range image[v : v+count] {
			side[lane] = float64(value)
		}
	}
}

// seed finds the node with the greatest f² for every lane.
func (b *bench) seed() {
	var most [lanes]float64
	n, side, seeds := len(b.f.delayUS), b.side, b.f.table.seeds
	b.best = [lanes]int{}
	for k := 0; len(seeds) >= n; k++ {
		var f0, f1, f2, f3 float64
		rest := side
		for _, u := range seeds[:n] {
			y := (*[lanes]float64)(rest)
			rest = rest[lanes:]
			f0 += u * y[0]
			f1 += u * y[1]
			f2 += u * y[2]
			f3 += u * y[3]
		}
		seeds = seeds[n:]
		b.keep(&most, 0, k, f0*f0)
		b.keep(&most, 1, k, f1*f1)
		b.keep(&most, 2, k, f2*f2)
		b.keep(&most, 3, k, f3*f3)
	}
}

func (b *bench) keep(most *[lanes]float64, lane, k int, energy float64) {
	if energy > most[lane] {
		most[lane], b.best[lane] = energy, k
	}
}

// answer fits one lane from its best node.
func (b *bench) answer(lane int) Answer {
	energy, onOffset := b.lengths(lane)
	if !hasSignal(energy) {
		return unanswered(b.withoutSignal(lane))
	}
	k := b.best[lane]
	b.expand(lane, k)
	if !(b.poly[0]*b.poly[0] > flat*energy) {
		return unanswered(NoSignal)
	}
	uphill := b.poly[0]*b.poly[1] > 0
	if k == 0 && !uphill {
		return unanswered(BelowRange)
	}
	if k == b.f.table.nodes-1 && uphill {
		return unanswered(AboveRange)
	}
	s := b.peak(uphill)
	if !(math.Abs(s) < atNeighbour) {
		return b.f.Fit(b.voxel(lane))
	}
	return b.read(k, s, energy, onOffset)
}

// lengths returns the energy of the whitened data and its part along the constant.
func (b *bench) lengths(lane int) (energy, onOffset float64) {
	t := &b.f.table
	for d, w := range t.weight {
		y := b.side[d*lanes+lane]
		energy += w * y * y
		onOffset += t.offset[d] * y
	}
	return energy, onOffset
}

// withoutSignal tells a voxel that was not reconstructed from one that has no signal.
func (b *bench) withoutSignal(lane int) Status {
	for d := range b.f.delayUS {
		if math.IsNaN(b.side[d*lanes+lane]) {
			return OutsideView
		}
	}
	return NoSignal
}

func (b *bench) voxel(lane int) []float64 {
	y := make([]float64, len(b.f.delayUS))
	for d := range y {
		y[d] = b.side[d*lanes+lane]
	}
	return y
}

// expand fills poly for one lane around node k.
func (b *bench) expand(lane, k int) {
	n := len(b.f.delayUS)
	curves := b.f.table.curves[k*coefficients*n : (k+1)*coefficients*n]
	for m := 0; m < coefficients; m += coefficientGroup {
		var p0, p1, p2, p3 float64
		side := b.side[lane:]
		for d := range n {
			u, y := (*[coefficientGroup]float64)(curves[d*coefficientGroup:]), side[d*lanes]
			p0 += u[0] * y
			p1 += u[1] * y
			p2 += u[2] * y
			p3 += u[3] * y
		}
		curves = curves[n*coefficientGroup:]
		*(*[coefficientGroup]float64)(b.poly[m:]) = [coefficientGroup]float64{p0, p1, p2, p3}
	}
}

const (
	// closeEnough is the step in s at which Newton's method stops. The step after it would be near its square, 1e-14.
	closeEnough = 1e-7
	// atNeighbour marks a search that ended at the next node. The best fit then lies beyond, which takes data so unlike
	// the curve that f² has two peaks between two nodes.
	atNeighbour = 1 - 1e-6
)

// peak returns the s between the node and its neighbour uphill where f'(s) = 0.
func (b *bench) peak(uphill bool) float64 {
	lo, hi := -1.0, 0.0
	if uphill {
		lo, hi = 0, 1
	}
	p := &b.poly
	s := -p[1] / (2*p[2] - 1.5*p[1]*p[3]/p[2]) // root of f' to third order at the node
	if !(s > lo && s < hi) {
		s = (lo + hi) / 2
	}
	for range 50 { // halving alone needs 24
		first, second := b.slopes(s)
		if first*p[0] > 0 {
			lo = s
		} else {
			hi = s
		}
		next := s - first/second
		if !(next >= lo && next <= hi) {
			next = (lo + hi) / 2
		}
		moved := math.Abs(next - s)
		s = next
		if moved < closeEnough {
			break
		}
	}
	return s
}

// slopes returns f'(s) and f”(s).
func (b *bench) slopes(s float64) (first, second float64) {
	for m := coefficients - 1; m > 0; m-- {
		second = second*s + first
		first = first*s + float64(m)*b.poly[m]
	}
	return first, second
}

// read turns the place of the peak into an answer.
func (b *bench) read(k int, s, energy, onOffset float64) Answer {
	var along float64
	var r reading
	table := &b.f.table.readings[k]
	for m := coefficients - 1; m >= 0; m-- {
		at := &table[m]
		along = along*s + b.poly[m]
		r.rate = r.rate*s + at.rate
		r.spread = r.spread*s + at.spread
		r.perF = r.perF*s + at.perF
		r.amplitudeSE = r.amplitudeSE*s + at.amplitudeSE
	}
	a := Answer{
		Rate: r.rate, RateSE: r.spread / along,
		Amplitude: onOffset*b.f.offsetUnit + along*r.perF, AmplitudeSE: r.amplitudeSE,
		Inverted: math.NaN(), // not part of Maps
		// Rounding may leave a perfect fit a little below zero.
		ChiSquare: math.Max(0, energy-onOffset*onOffset-along*along),
		Status:    Answered,
	}
	if !(along > 0 && a.Amplitude > 0) {
		return unanswered(WrongSign)
	}
	return a
}
