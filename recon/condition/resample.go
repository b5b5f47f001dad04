package condition

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"torrloom/recon/fault"
)

// Resampler takes traces sampled evenly in time to samples at k = m·dk, m = -half..half, for objects within a band.
//
// Each output is the linear combination of nearby inputs that is best, in least squares, for signals whose position
// spectrum is flat inside the band, with a small penalty on noise: the interpolation weights w solve (S + λ1) w = s with
// S_jj' = sinc(β(j-j')), s_j = sinc(β(u-j)), β the band over the alias-free field of view, u the wanted place in samples.
// Oversampled noise outside the band is averaged away, and the ends of a trace need no special case.
//
// Source: the estimate is Wiener's (Extrapolation, Interpolation, and Smoothing of Stationary Time Series, 1949) for a
// flat band.
type Resampler struct {
	samples int
	first   []int       // [output] index of the first input used
	weights [][]float64 // [output][input - first]; nil where the output lies outside the trace
}

const (
	// reach is how far an output looks to either side, in units of 1/band. A longer reach costs time and takes away only
	// noise from outside the band, which no image shows.
	reach = 2.0
	// extraReach in samples keeps critically sampled traces, which have no oversampling to help, accurate.
	extraReach = 8
	// noisePenalty λ, times the oversampling. The bias of a tone inside the band falls with its root and is 2e-4 here,
	// a little less than the error of the reconstructions.
	noisePenalty = 1e-7
)

// place is one wanted output, in input samples from sample 0.
type place = float64

// NewResampler returns the resampler for traces of samples inputs whose band fills the fraction beta (0..1] of the
// alias-free field of view. Outputs outside the trace by more than a thousandth of a sample get no weights.
//
// Errors: bug when the system cannot be solved, which beta in range excludes.
func NewResampler(samples int, beta float64, at []place) (*Resampler, error) {
	return newResampler(samples, 0, beta, at)
}

// firstUsable returns the first sample that may be used when dead samples after k = 0 may not.
func firstUsable(dead int, zero float64) int {
	if dead == 0 {
		return 0
	}
	return max(0, int(math.Ceil(zero))+dead)
}

// newResampler is NewResampler without the samples before first. Places before it, in the hole that the dead time
// leaves, are extrapolated from those after it.
func newResampler(samples, first int, beta float64, at []place) (*Resampler, error) {
	r := &Resampler{samples: samples, first: make([]int, len(at)), weights: make([][]float64, len(at))}
	half := int(math.Ceil(reach/beta)) + extraReach
	solvers := map[int]*mat.Cholesky{}
	for i, u := range at {
		if u < -1e-3 || u > float64(samples-1)+1e-3 {
			continue
		}
		if u < float64(first)-deepestHole(beta) {
			continue
		}
		from, to := max(first, int(math.Ceil(u))-half), min(samples-1, int(math.Floor(u))+half)
		n := to - from + 1
		if solvers[n] == nil {
			solvers[n] = &mat.Cholesky{}
			if !solvers[n].Factorize(bandMatrix(n, beta)) {
				return nil, fault.New(fault.Bug, "resampling", "no solution for %d samples at band fraction %g", n, beta)
			}
		}
		r.first[i], r.weights[i] = from, solveWeights(solvers[n], n, beta, u-float64(from))
	}
	return r, nil
}

// bridged is how much of 1/band can be extrapolated before the first usable sample: a quarter, where the error for a tone
// inside the band stays below half a percent.
const bridged = 0.25

// deepestHole returns how many samples before the first usable one can be extrapolated.
func deepestHole(beta float64) float64 { return bridged/beta + 1e-3 }

func bandMatrix(n int, beta float64) *mat.SymDense {
	s := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			s.SetSym(i, j, sinc(beta*float64(j-i)))
		}
		s.SetSym(i, i, 1+noisePenalty/beta)
	}
	return s
}

func solveWeights(solver *mat.Cholesky, n int, beta, u float64) []float64 {
	right := mat.NewVecDense(n, nil)
	for j := range n {
		right.SetVec(j, sinc(beta*(u-float64(j))))
	}
	var w mat.VecDense
	// A matrix that Cholesky took but finds ill-conditioned still solves; the penalty keeps it far from singular.
	_ = solver.SolveVecTo(&w, right)
	return w.RawVector().Data
}

// Apply returns output i of a trace.
func (r *Resampler) Apply(i int, trace []complex64) (complex128, bool) {
	w := r.weights[i]
	if w == nil {
		return 0, false
	}
	var re, im float64
	for j, v := range trace[r.first[i] : r.first[i]+len(w)] {
		re += w[j] * float64(real(v))
		im += w[j] * float64(imag(v))
	}
	return complex(re, im), true
}

func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}
