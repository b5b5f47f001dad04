package relax

import "math"

// lanes is the number of voxels that share each pass over the seeds. With two nodes at a time that makes eight
// independent sums per pass, which hides the latency of the additions and pays for the slow loops of wasm.
const lanes = 4

// bench is the workspace of one FitBlock call.
type bench struct {
	f    *Fitter
	side [][lanes]float64 // [delay] images of the voxels at work
	most [lanes]float64   // greatest f² over the nodes
	best [lanes]int       // the node that has it
	poly [coefficients]float64
}

func newBench(f *Fitter) *bench {
	return &bench{f: f, side: make([][lanes]float64, len(f.delayUS))}
}

// FitBlock fits voxels from..to-1 and writes the same indices of out. images is [delay][voxel]. The answers are those
// of Fit to 1e-10 of the rate, or to 1e-7 of its standard error where the delays hardly see it, before they are stored
// as float32.
//
// A block of a few thousand voxels is long enough to be fast and short enough to report progress after each.
func (f *Fitter) FitBlock(images [][]float32, from, to int, out *Maps) {
	b := newBench(f)
	var a Answer
	for v := from; v < to; v += lanes {
		count := min(lanes, to-v)
		b.gather(images, v, count)
		b.seed()
		for lane := range count {
			b.answer(lane, &a)
			out.put(v+lane, &a)
		}
	}
}

// gather copies count voxels from v on; lanes without a voxel keep what they had.
func (b *bench) gather(images [][]float32, v, count int) {
	for d, image := range images {
		side := &b.side[d]
		for lane, value := range image[v : v+count] {
			side[lane] = float64(value)
		}
	}
}

// seed finds the seed with the greatest f² for every lane. Seeds are every second node, numbered as nodes.
func (b *bench) seed() {
	b.most, b.best = [lanes]float64{}, [lanes]int{}
	n, seeds := len(b.side), b.f.table.seeds
	for k := 0; len(seeds) >= n; k += 4 {
		var p0, p1, p2, p3, q0, q1, q2, q3 float64
		pair := seeds[:n]
		for d := range b.side {
			u, y := &pair[d], &b.side[d]
			p0 += u[0] * y[0]
			p1 += u[0] * y[1]
			p2 += u[0] * y[2]
			p3 += u[0] * y[3]
			q0 += u[1] * y[0]
			q1 += u[1] * y[1]
			q2 += u[1] * y[2]
			q3 += u[1] * y[3]
		}
		seeds = seeds[n:]
		b.keep(0, k, p0*p0, q0*q0)
		b.keep(1, k, p1*p1, q1*q1)
		b.keep(2, k, p2*p2, q2*q2)
		b.keep(3, k, p3*p3, q3*q3)
	}
}

// keep notes nodes k and k+2 for one lane.
func (b *bench) keep(lane, k int, first, second float64) {
	if first > b.most[lane] {
		b.most[lane], b.best[lane] = first, k
	}
	if second > b.most[lane] {
		b.most[lane], b.best[lane] = second, k+2
	}
}

// answer fits one lane from its best node.
func (b *bench) answer(lane int, a *Answer) {
	energy, onOffset := b.lengths(lane)
	if !hasSignal(energy) {
		*a = unanswered(b.withoutSignal(lane))
		return
	}
	if !(b.most[lane] > flat*energy) {
		*a = unanswered(NoSignal)
		return
	}
	k := b.nearest(lane)
	b.expand(lane, k)
	uphill := b.poly[0]*b.poly[1] > 0
	switch {
	case k == 0 && !uphill:
		*a = unanswered(BelowRange)
		return
	case k == b.f.table.nodes-1 && uphill:
		*a = unanswered(AboveRange)
		return
	}
	s, along := b.peak(uphill)
	if !(math.Abs(s) < atNeighbour) {
		*a = b.f.Fit(b.voxel(lane))
		return
	}
	b.read(k, s, along, energy, onOffset, a)
}

// nearest returns the best of the lane's seed and the two nodes beside it, so that the peak is at most about half a
// step away and the polynomial is used where it is best.
func (b *bench) nearest(lane int) int {
	k := b.best[lane]
	best, most := k, b.most[lane]
	for near := max(k-1, 0); near <= min(k+1, b.f.table.nodes-1); near += 2 {
		if along := b.alongNode(lane, near); along*along > most {
			best, most = near, along*along
		}
	}
	return best
}

// alongNode returns f at a node.
func (b *bench) alongNode(lane, k int) float64 {
	n, sum := len(b.side), 0.0
	curves := b.f.table.curves[2*k*n:][:n]
	for d := range b.side {
		sum += curves[d][0] * b.side[d][lane&(lanes-1)]
	}
	return sum
}

// lengths returns the energy of the whitened data and its part along the constant.
func (b *bench) lengths(lane int) (energy, onOffset float64) {
	weight, offset := b.f.table.weight[:len(b.side)], b.f.table.offset[:len(b.side)]
	for d := range b.side {
		y := b.side[d][lane&(lanes-1)]
		energy += weight[d] * y * y
		onOffset += offset[d] * y
	}
	return energy, onOffset
}

// withoutSignal tells a voxel that was not reconstructed from one that has no signal.
func (b *bench) withoutSignal(lane int) Status {
	for d := range b.side {
		if math.IsNaN(b.side[d][lane]) {
			return OutsideView
		}
	}
	return NoSignal
}

func (b *bench) voxel(lane int) []float64 {
	y := make([]float64, len(b.side))
	for d := range y {
		y[d] = b.side[d][lane]
	}
	return y
}

// expand fills poly, the coefficients of f(s) of one lane around node k.
func (b *bench) expand(lane, k int) {
	n := len(b.side)
	curves := b.f.table.curves[2*k*n:]
	b.expandHalf(lane, curves[:n], (*[half]float64)(b.poly[:half]))
	b.expandHalf(lane, curves[n:2*n], (*[half]float64)(b.poly[half:]))
}

func (b *bench) expandHalf(lane int, curves [][half]float64, poly *[half]float64) {
	var p0, p1, p2, p3, p4, p5, p6, p7 float64
	side := b.side[:len(curves)]
	for d := range curves {
		u, y := &curves[d], side[d][lane&(lanes-1)]
		p0 += u[0] * y
		p1 += u[1] * y
		p2 += u[2] * y
		p3 += u[3] * y
		p4 += u[4] * y
		p5 += u[5] * y
		p6 += u[6] * y
		p7 += u[7] * y
	}
	*poly = [half]float64{p0, p1, p2, p3, p4, p5, p6, p7}
}

const (
	// closeEnough is the step in s at which Newton's method stops. The step after it would be near its square, 1e-12.
	closeEnough = 1e-6
	// atNeighbour marks a search that ended at the next node. The best fit then lies beyond, which takes data so unlike
	// the curve that f² has two peaks between two nodes.
	atNeighbour = 1 - 1e-5
)

// peak returns the s between the node and its neighbour uphill where f'(s) = 0, and f there.
func (b *bench) peak(uphill bool) (s, along float64) {
	lo, hi := -1.0, 0.0
	if uphill {
		lo, hi = 0, 1
	}
	p := &b.poly
	s = -p[1] / (2*p[2] - 1.5*p[1]*p[3]/p[2]) // root of f' to third order at the node
	if !(s > lo && s < hi) {
		s = (lo + hi) / 2
	}
	for range 50 { // halving alone needs 20
		value, first, halfSecond := b.slopes(s)
		along = value
		if first*value > 0 {
			lo = s
		} else {
			hi = s
		}
		next := s - first/(2*halfSecond)
		if !(next >= lo && next <= hi) {
			next = (lo + hi) / 2
		}
		moved := math.Abs(next - s)
		s = next
		if moved < closeEnough {
			break
		}
	}
	return s, along
}

// slopes returns f(s), f'(s) and f”(s)/2 by Horner's scheme.
func (b *bench) slopes(s float64) (value, first, halfSecond float64) {
	for m := coefficients - 4; m >= 0; m -= 4 {
		p := (*[4]float64)(b.poly[m:])
		halfSecond = halfSecond*s + first
		first = first*s + value
		value = value*s + p[3]
		halfSecond = halfSecond*s + first
		first = first*s + value
		value = value*s + p[2]
		halfSecond = halfSecond*s + first
		first = first*s + value
		value = value*s + p[1]
		halfSecond = halfSecond*s + first
		first = first*s + value
		value = value*s + p[0]
	}
	return value, first, halfSecond
}

// read turns the place of the peak into an answer. Inverted is not part of Maps and left out.
func (b *bench) read(k int, s, along, energy, onOffset float64, a *Answer) {
	r := b.f.table.readingAt(k, s)
	a.Rate, a.RateSE = r.rate, r.spread/along
	a.Amplitude, a.AmplitudeSE = onOffset*b.f.offsetUnit+along*r.perF, r.amplitudeSE
	a.ChiSquare = energy - onOffset*onOffset - along*along
	if a.ChiSquare < 0 {
		a.ChiSquare = 0 // rounding of a perfect fit
	}
	a.Status = Answered
	if !(along > 0 && a.Amplitude > 0) {
		*a = unanswered(WrongSign)
	}
}
