package relax

import "math"

// The fast path never evaluates the curve. Around each of a few nodes in ln R the unit curve u is a polynomial in
//
//	s = (ln R - node)/lnStep,   -1 <= s <= 1,
//
// found once by interpolation at Chebyshev points. One voxel then costs a scalar product per node to find the best
// node, one per polynomial coefficient there to get f(s) = u(s)·z, and Newton's method on f'(s). This serves every
// model alike and calls no exponential, which is slow in the browser.

const (
	// coefficients of the polynomials in s, a multiple of coefficientGroup. With nodes widestStep apart the unit curves
	// are interpolated down to rounding.
	coefficients     = 16
	coefficientGroup = 4
	widestStep       = 0.3
)

// table holds the unit curves, already divided by the noise so that they meet images that are not.
type table struct {
	nodes int
	seeds []float64 // [node][delay] unit curve at the node
	// [node][group][delay][coefficientGroup] coefficients of the unit curve
	curves   []float64
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

func (f *Fitter) setNodes(nodes int) {
	f.table.nodes = nodes
	f.lnStep = (f.lnMax - f.lnMin) / float64(nodes-1)
}

// tabulate fills the table for the rate range.
func (f *Fitter) tabulate() {
	n, t := len(f.delayUS), &f.table
	f.setNodes(2 + int((f.lnMax-f.lnMin)/widestStep))
	t.seeds = make([]float64, t.nodes*n)
	t.curves = make([]float64, t.nodes*coefficients*n)
	t.readings = make([][coefficients]reading, t.nodes)
	t.offset, t.weight = make([]float64, n), make([]float64, n)
	for d, w := range f.rootWeight {
		t.weight[d] = w * w
		if f.offset != nil {
			t.offset[d] = f.offset[d] * w
		}
	}
	toPowers := powersFromValues()
	fr := newFrame(n)
	for k := range t.nodes {
		f.frameAt(f.nodeX(k), fr)
		for d, u := range fr.u {
			t.seeds[k*n+d] = u * f.rootWeight[d]
		}
		f.tabulateNode(k, toPowers, fr)
	}
}

// tabulateNode adds up the coefficients of node k from the frames at the Chebyshev points around it.
func (f *Fitter) tabulateNode(k int, toPowers *[coefficients][coefficients]float64, fr *frame) {
	for j := range coefficients {
		x := f.nodeX(k) + f.lnStep*chebyshevPoint(j)
		f.frameAt(x, fr)
		rate := math.Exp(x)
		for m := range coefficients {
			p := toPowers[m][j]
			for d, u := range fr.u {
				f.table.curves[f.table.curveAt(k, m, d, len(fr.u))] += p * u * f.rootWeight[d]
			}
			r := &f.table.readings[k][m]
			r.rate += p * rate
			r.spread += p * rate / fr.sensitivity
			r.perF += p * fr.perF
			r.amplitudeSE += p * fr.amplitudeSE
		}
	}
}

func (t *table) curveAt(k, m, d, delays int) int {
	group, place := m/coefficientGroup, m%coefficientGroup
	return ((k*coefficients/coefficientGroup+group)*delays+d)*coefficientGroup + place
}

// chebyshevPoint returns cos(π(j+½)/n), n = coefficients.
func chebyshevPoint(j int) float64 {
	return math.Cos(math.Pi * (float64(j) + 0.5) / coefficients)
}

// powersFromValues returns the matrix that takes values at the Chebyshev points to coefficients of 1, s, s², ...: the
// discrete orthogonality of the Chebyshev polynomials gives their coefficients, and T_m+1 = 2s·T_m - T_m-1 their powers.
func powersFromValues() *[coefficients][coefficients]float64 {
	var matrix [coefficients][coefficients]float64
	var before, now [coefficients]float64 // powers of T_m-1 and T_m
	now[0] = 1
	for m := range coefficients {
		share := 2.0 / coefficients
		if m == 0 {
			share = 1.0 / coefficients
		}
		for j := range coefficients {
			value := share * math.Cos(math.Pi*float64(m)*(float64(j)+0.5)/coefficients)
			for power, c := range now {
				matrix[power][j] += c * value
			}
		}
		before, now = now, nextChebyshev(m, before, now)
	}
	return &matrix
}

func nextChebyshev(m int, before, now [coefficients]float64) (next [coefficients]float64) {
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
