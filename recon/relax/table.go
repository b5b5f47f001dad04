package relax

import (
	"math"

	"torrloom/recon/fault"
)

// The fast path never evaluates the curve. Around each of a few nodes in ln R the unit curve u is a polynomial in
//
//	s = (ln R - node)/lnStep,   -1 <= s <= 1,
//
// found once by interpolation at Chebyshev points. One voxel then costs a scalar product per node to find the best
// node, one per polynomial coefficient there to get f(s) = u(s)·z, and Newton's method on f'(s). This serves every
// model alike and calls no exponential, which is slow in the browser.

const (
	// coefficients of the polynomials in s. They are worked on in two halves, eight sums at a time.
	coefficients = 16
	half         = coefficients / 2
	// widestStep is the distance of nodes at which these polynomials reach rounding for curves made of exponentials.
	widestStep = 0.3
)

// table holds the unit curves, already divided by the noise so that they meet images that are not.
type table struct {
	nodes    int
	seeds    [][2]float64            // [pair of seeds][delay] unit curve at every second node; the last may be there twice
	curves   [][half]float64         // [node][half][delay] coefficients of the unit curve
	readings [][coefficients]reading // [node][coefficient]
	offset   []float64               // [delay] unit constant; zero for a model without an offset
	weight   []float64               // [delay] 1/noiseSD²
}

// reading holds one coefficient each of the four functions of the rate that turn f into an answer.
type reading struct {
	rate        float64
	spread      float64 // rate/sensitivity: RateSE·f
	perF        float64
	amplitudeSE float64
}

// tabulate fills the table for the rate range, with nodes as close as the polynomials need.
func (f *Fitter) tabulate() error {
	f.tabulateOffset()
	fewest := 3 + 2*int((f.lnMax-f.lnMin)/(2*widestStep)) // odd, so that both ends are seeds
	for nodes := fewest; nodes <= 16*fewest; nodes = 2*nodes - 1 {
		f.table.nodes = nodes
		f.lnStep = (f.lnMax - f.lnMin) / float64(nodes-1)
		f.tabulateCurves()
		if f.tableHolds() {
			f.tabulateSeeds()
			return nil
		}
	}
	return fault.New(fault.Bug, "rate table", "%d nodes do not hold the curve of %s", 16*fewest, f.model.Label)
}

func (f *Fitter) tabulateOffset() {
	t := &f.table
	t.offset, t.weight = make([]float64, len(f.delayUS)), make([]float64, len(f.delayUS))
	for d, w := range f.rootWeight {
		t.weight[d] = w * w
		if f.offset != nil {
			t.offset[d] = f.offset[d] * w
		}
	}
}

func (f *Fitter) tabulateSeeds() {
	n, fr := len(f.delayUS), newFrame(len(f.delayUS))
	pairs := (f.table.nodes + 3) / 4
	f.table.seeds = make([][2]float64, pairs*n)
	for place := range 2 * pairs {
		f.frameAt(f.nodeX(min(2*place, f.table.nodes-1)), fr)
		for d, u := range fr.u {
			f.table.seeds[place/2*n+d][place%2] = u * f.rootWeight[d]
		}
	}
}

func (f *Fitter) tabulateCurves() {
	t := &f.table
	t.curves = make([][half]float64, t.nodes*2*len(f.delayUS))
	t.readings = make([][coefficients]reading, t.nodes)
	for k := range t.nodes {
		f.tabulateNode(k)
	}
}

// tabulateNode samples the curve and the readings at the Chebyshev points around a node and stores their coefficients.
func (f *Fitter) tabulateNode(k int) {
	fr, curves := newFrame(len(f.delayUS)), make([][coefficients]float64, len(f.delayUS))
	var rate, spread, perF, amplitudeSE [coefficients]float64
	for j := range coefficients {
		x := f.nodeX(k) + f.lnStep*chebyshevPoint(j)
		f.frameAt(x, fr)
		for d, u := range fr.u {
			curves[d][j] = u * f.rootWeight[d]
		}
		rate[j], spread[j] = math.Exp(x), math.Exp(x)/fr.sensitivity
		perF[j], amplitudeSE[j] = fr.perF, fr.amplitudeSE
	}
	f.storeCurves(k, curves)
	rate, spread, perF, amplitudeSE = powers(rate), powers(spread), powers(perF), powers(amplitudeSE)
	for m := range coefficients {
		f.table.readings[k][m] = reading{rate[m], spread[m], perF[m], amplitudeSE[m]}
	}
}

func (f *Fitter) storeCurves(k int, curves [][coefficients]float64) {
	n := len(curves)
	for d, values := range curves {
		p := powers(values)
		f.table.curves[2*k*n+d] = [half]float64(p[:half])
		f.table.curves[(2*k+1)*n+d] = [half]float64(p[half:])
	}
}

const (
	// A curve off by 1e-13 moves the best rate by 1e-11 of itself where it is seen at all (seen.sensitivity). The curve
	// of a rate that is seen less is the small difference of larger numbers, and its own rounding is that much more.
	curveError = 1e-13
	rateError  = 1e-12
	// An amplitude ends as float32, which holds 6e-8, and a standard error is never known to five digits. These are the
	// errors at |s| = 1; most voxels lie well inside.
	readingError = 1e-7
	errorError   = 1e-5
)

// tableHolds compares the polynomials of every node with the frames at its two neighbours, where they are worst.
func (f *Fitter) tableHolds() bool {
	fr := newFrame(len(f.delayUS))
	for k := range f.table.nodes {
		for s := -1.0; s <= 1; s += 2 {
			if k == 0 && s < 0 || k == f.table.nodes-1 && s > 0 {
				continue // outside the range
			}
			x := f.nodeX(k) + s*f.lnStep
			if !f.frameAt(x, fr) || !(f.curveOff(k, s, fr) <= curveError*math.Max(1, seen.sensitivity/fr.sensitivity)) {
				return false
			}
			want := reading{math.Exp(x), math.Exp(x) / fr.sensitivity, fr.perF, fr.amplitudeSE}
			if got := f.table.readingAt(k, s); !got.near(want) {
				return false
			}
		}
	}
	return true
}

// curveOff returns the greatest difference between the unit curve and its polynomial at node k.
func (f *Fitter) curveOff(k int, s float64, fr *frame) float64 {
	n, most := len(fr.u), 0.0
	for d, u := range fr.u {
		low, high := &f.table.curves[2*k*n+d], &f.table.curves[(2*k+1)*n+d]
		sum := 0.0
		for m := coefficients - 1; m >= half; m-- {
			sum = sum*s + high[m-half]
		}
		for m := half - 1; m >= 0; m-- {
			sum = sum*s + low[m]
		}
		most = math.Max(most, math.Abs(sum/f.rootWeight[d]-u))
	}
	return most
}

// near tells whether a reading is as exact as it needs to be.
func (r reading) near(want reading) bool {
	off := func(got, want float64) float64 { return math.Abs(got/want - 1) }
	return off(r.rate, want.rate) <= rateError && off(r.perF, want.perF) <= readingError &&
		off(r.spread, want.spread) <= errorError && off(r.amplitudeSE, want.amplitudeSE) <= errorError
}

// readingAt evaluates the readings of node k.
func (t *table) readingAt(k int, s float64) (r reading) {
	of := &t.readings[k]
	for m := coefficients - 1; m >= 0; m-- {
		at := &of[m]
		r.rate = r.rate*s + at.rate
		r.spread = r.spread*s + at.spread
		r.perF = r.perF*s + at.perF
		r.amplitudeSE = r.amplitudeSE*s + at.amplitudeSE
	}
	return r
}

// chebyshevPoint returns cos(π(j+½)/n), n = coefficients.
func chebyshevPoint(j int) float64 {
	return math.Cos(math.Pi * (float64(j) + 0.5) / coefficients)
}

// powers takes values at the Chebyshev points to coefficients of 1, s, s², ... The discrete orthogonality of the
// Chebyshev polynomials gives their coefficients, and T_m+1 = 2s·T_m - T_m-1 the powers. The two steps stay apart:
// merged into one matrix their large entries would cost four digits.
func powers(values [coefficients]float64) (p [coefficients]float64) {
	var before, now [coefficients]float64 // powers of T_m-1 and T_m
	now[0] = 1
	for m := range coefficients {
		share := chebyshevShare(m, &values)
		for power, c := range now {
			p[power] += share * c
		}
		before, now = now, nextChebyshev(m, &before, &now)
	}
	return p
}

// chebyshevShare returns the coefficient of T_m.
func chebyshevShare(m int, values *[coefficients]float64) float64 {
	sum := 0.0
	for j, v := range values {
		sum += v * math.Cos(math.Pi*float64(m)*(float64(j)+0.5)/coefficients)
	}
	if m == 0 {
		return sum / coefficients
	}
	return 2 * sum / coefficients
}

func nextChebyshev(m int, before, now *[coefficients]float64) (next [coefficients]float64) {
	double := 2.0
	if m == 0 {
		double = 1 // T_1 = s·T_0
	}
	for power := range coefficients - 1 {
		next[power+1] = double * now[power]
	}
	for power := range next {
		next[power] -= before[power]
	}
	return next
}
