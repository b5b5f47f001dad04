package quality

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

func median(values []float64) float64 { return quantile(values, 0.5) }

// spreadSample is from how many values on every so-many-th is enough for a spread: it is good to 0.6 % from that many.
const spreadSample = 20000

// quantile returns the value below which the share q of the values lies; NaN of none.
func quantile(values []float64, q float64) float64 {
	if len(values) == 0 {
		return math.NaN()
	}
	sorted := slices.Clone(values)
	slices.Sort(sorted)
	at := q * float64(len(sorted)-1)
	i := min(int(at), len(sorted)-2)
	if i < 0 {
		return sorted[0]
	}
	return sorted[i] + (at-float64(i))*(sorted[i+1]-sorted[i])
}

// spread returns 1.4826 times the median distance from the median: the standard deviation of Gaussian values, whatever
// a few others do.
func spread(values []float64) float64 {
	if step := len(values) / spreadSample; step > 1 {
		var some []float64
		for i := 0; i < len(values); i += step {
			some = append(some, values[i])
		}
		values = some
	}
	middle := median(values)
	off := make([]float64, len(values))
	for i, v := range values {
		off[i] = math.Abs(v - middle)
	}
	return 1.4826 * median(off)
}

// linearFit is y = Σ coefficient·column, fitted so that outliers do not count.
type linearFit struct {
	coefficient, se []float64
	residual        []float64
	scale           float64 // spread of the residuals
}

// tuning is Tukey's constant: 95 % as good as least squares on Gaussian data.
// Source: Huber & Ronchetti, Robust Statistics (2009); Beaton & Tukey, Technometrics 16 (1974) 147.
const tuning = 4.685

// robustFit fits by least squares, reweighted by Tukey's biweight until it settles. rows is [point][column]. A column that
// the others make up for gets a standard error far above its coefficient.
func robustFit(rows [][]float64, y []float64) linearFit {
	f := linearFit{residual: slices.Clone(y)}
	weight := make([]float64, len(y))
	for i := range weight {
		weight[i] = 1
	}
	for range 25 {
		f.solve(rows, y, weight)
		f.scale = spread(f.residual)
		changed := 0.0
		for i, r := range f.residual {
			u, w := r/(tuning*f.scale+math.SmallestNonzeroFloat64), 0.0
			if u*u < 1 {
				w = (1 - u*u) * (1 - u*u)
			}
			changed = math.Max(changed, math.Abs(w-weight[i]))
			weight[i] = w
		}
		if changed < 1e-4 {
			break
		}
	}
	return f
}

// solve returns the weighted least-squares fit. A trace of 10⁻¹¹ of the diagonal keeps dependent columns solvable and
// their standard errors huge.
func (f *linearFit) solve(rows [][]float64, y, weight []float64) {
	n := len(rows[0])
	normal, right := mat.NewSymDense(n, nil), mat.NewVecDense(n, nil)
	for i, row := range rows {
		for a := range n {
			right.SetVec(a, right.AtVec(a)+weight[i]*row[a]*y[i])
			for b := a; b < n; b++ {
				normal.SetSym(a, b, normal.At(a, b)+weight[i]*row[a]*row[b])
			}
		}
	}
	for a := range n {
		normal.SetSym(a, a, normal.At(a, a)*(1+1e-11)+math.SmallestNonzeroFloat64)
	}
	var chol mat.Cholesky
	f.coefficient, f.se = make([]float64, n), make([]float64, n)
	if !chol.Factorize(normal) {
		for a := range f.se {
			f.se[a] = math.Inf(1)
		}
		return
	}
	var x mat.VecDense
	var inverse mat.SymDense
	_ = chol.SolveVecTo(&x, right)
	_ = chol.InverseTo(&inverse)
	for i, row := range rows {
		f.residual[i] = y[i]
		for a := range n {
			f.residual[i] -= row[a] * x.AtVec(a)
		}
	}
	scale := spread(f.residual)
	for a := range n {
		f.coefficient[a], f.se[a] = x.AtVec(a), scale*math.Sqrt(math.Max(0, inverse.At(a, a)))
	}
}

// overOrder fits a straight line over the acquisition order: y = middle + drift·(u-1/2).
func overOrder(u, y []float64) (middle, drift, driftSE float64, residual []float64) {
	rows := make([][]float64, len(u))
	for i := range u {
		rows[i] = []float64{1, u[i] - 0.5}
	}
	f := robustFit(rows, y)
	return f.coefficient[0], f.coefficient[1], f.se[1], f.residual
}

// nearbyShots is over how many shots in order a running median looks.
const nearbyShots = 15

// offRunningMedian returns the values less the median of those nearby in order: slow changes of any kind are gone, single
// outliers stay.
func offRunningMedian(values []float64) []float64 {
	out := make([]float64, len(values))
	for i := range values {
		from := max(0, min(i-nearbyShots/2, len(values)-nearbyShots))
		out[i] = values[i] - median(values[from:min(len(values), from+nearbyShots)])
	}
	return out
}

// outliers lists where a value is further from 0 than `times` spreads and than floor.
func outliers(values []float64, times, floor float64) []int {
	limit := math.Max(times*spread(values), floor)
	var out []int
	for i, v := range values {
		if !(math.Abs(v) <= limit) {
			out = append(out, i)
		}
	}
	return out
}
