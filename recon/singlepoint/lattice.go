package singlepoint

import (
	"math"
	"slices"
)

// lattice is a Cartesian set of gradients q·step/2 with whole q, all even or all odd along an axis: multiples of the step
// when the origin is a lattice point, otherwise the points half a step beside them.
type lattice struct {
	axes [3]latticeAxis
	q    [][3]int // [shot]
}

// latticeAxis holds the points q = -most, -most+2, ..., most along one axis.
type latticeAxis struct {
	most   int
	step   float64 // mT/m
	values int     // different gradients that occur
}

func (x latticeAxis) parity() int { return x.most & 1 }
func (x latticeAxis) points() int { return x.most + 1 }

const (
	// offLattice is how far, in steps, a gradient may lie beside its lattice point. It then errs in phase by at most
	// 2π·0.002/2 rad, 0.4°, at the rim of the field of view.
	offLattice = 0.002
	// leastFill is the share of lattice points that must occur. A ball fills 0.52 of its cube; a list of arbitrary
	// gradients written with three decimals lies on a lattice too, but fills next to nothing of it.
	leastFill = 0.3
)

// latticeOf returns the lattice on which the gradients lie, nil if there is none.
func latticeOf(g [][3]float64, dim int) *lattice {
	l := &lattice{q: make([][3]int, len(g))}
	cells := 1.0
	for axis := range dim {
		values := make([]float64, len(g))
		for s := range g {
			values[s] = g[s][axis]
		}
		fitted, ok := fitAxis(values, math.Pow(float64(len(g))/leastFill, 1/float64(dim)))
		if !ok {
			return nil
		}
		l.axes[axis] = fitted
		cells *= float64(fitted.values)
		for s, v := range values {
			l.q[s][axis] = int(math.Round(2 * v / fitted.step))
		}
	}
	if float64(len(l.multiplicity())) < leastFill*cells {
		return nil
	}
	return l
}

// fitAxis finds step and parity of the values along one axis, which on a lattice filled well enough are hardly more than
// most.
func fitAxis(values []float64, most float64) (latticeAxis, bool) {
	sorted := slices.Clone(values)
	slices.Sort(sorted)
	span := sorted[len(sorted)-1] - sorted[0]
	if !(span > 0) {
		return latticeAxis{}, false
	}
	// Anisotropic sets have more points along one axis than along the others, hence the factor 4.
	step, values2 := span, 1
	for i := 1; i < len(sorted); i++ {
		if gap := sorted[i] - sorted[i-1]; gap > 0.02*span/(4*most) {
			step = math.Min(step, gap)
			values2++
		}
	}
	x := latticeAxis{step: span / math.Round(span/step), values: values2}
	parity := int(math.Round(2*sorted[0]/x.step)) & 1
	for _, v := range sorted {
		q := math.Round(2 * v / x.step)
		if !(math.Abs(2*v/x.step-q) <= 2*offLattice) || int(q)&1 != parity {
			return latticeAxis{}, false
		}
		x.most = max(x.most, int(math.Abs(q)))
	}
	return x, true
}

// multiplicity returns how many shots lie on each lattice point.
func (l *lattice) multiplicity() map[[3]int]int {
	count := map[[3]int]int{}
	for _, q := range l.q {
		count[q]++
	}
	return count
}
