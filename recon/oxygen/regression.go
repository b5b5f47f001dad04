package oxygen

import (
	"errors"
	"math"
	"slices"
	"strconv"

	"gonum.org/v1/gonum/mat"

	"torrloom/recon/fault"
)

// Regression is one way to lay a line through readings. The rows differ only in the errors they believe in.
type Regression struct {
	Name  string `json:"name"`
	Label string `json:"label"`
	Help  string `json:"help"`

	needsRateSE, needsPO2SE bool
	knowsErrors             bool // the errors are real ones, so that χ² tells whether they fit
	errors                  func(p point) (pO2SE, rateSE float64)
}

// Regressions lists every regression. All are the minimum of
//
//	χ² = Σ W (R - R0 - slope·pO2 - ...)²,   W = 1/(SE_R² + slope²·SE_pO2²)
//
// Source: York, Evensen, Martínez & De Basabe Delgado, American Journal of Physics 72 (2004) 367, eqs. 13, with
// independent errors; with no error of pO2 it is weighted, and with equal errors ordinary least squares.
var Regressions = []Regression{
	{Name: "ordinary", Label: "ordinary", Help: "all rates equally uncertain, pO2 exact",
		errors: func(point) (float64, float64) { return 0, 1 }},
	{Name: "weighted", Label: "weighted", Help: "each rate with its own standard error, pO2 exact",
		needsRateSE: true, knowsErrors: true, errors: func(p point) (float64, float64) { return 0, p.ySE }},
	{Name: "both", Label: "errors in both", Help: "standard errors of rates and of pO2; the line treats both alike",
		needsRateSE: true, needsPO2SE: true, knowsErrors: true, errors: func(p point) (float64, float64) { return p.xSE, p.ySE }},
}

func regressionNamed(name string) (Regression, error) {
	at := slices.IndexFunc(Regressions, func(r Regression) bool { return r.Name == name })
	if at < 0 {
		return Regression{}, fault.New(fault.BadSetting, "bench.regression", "%q is not known; use ordinary, weighted or both", name)
	}
	return Regressions[at], nil
}

func (r Regression) check(points []point) error {
	some := false
	for _, p := range points {
		if r.needsRateSE && !(p.ySE > 0) {
			return fault.New(fault.BadSetting, readingName(p.reading)+" rateSEPerUS", "%g; %s regression needs a positive standard error of every rate", p.ySE, r.Label)
		}
		some = some || p.xSE > 0
	}
	if r.needsPO2SE && !some {
		return fault.New(fault.BadSetting, "bench.regression", "no reading has an error of its pO2; enter some, or use weighted regression")
	}
	return nil
}

// line is a solved regression. Its unknowns stand for columns centred at centre: (1, pO2 - centre0, term - centre1, ...).
type line struct {
	values     []float64
	covariance *mat.SymDense // from the given errors
	centre     []float64
	weight     []float64   // W of each point
	columns    [][]float64 // of each point, centred; pO2 as adjusted by its error
	residual   []float64
	leverage   []float64
	chiSquare  float64
}

// mostSteps bounds the iteration over the slope. York's equations gain about a digit per step on sound data.
const mostSteps = 500

// solve iterates the unified equations: with weights and adjusted pO2 of the last slope, the next unknowns solve
//
//	Σ W g (R - hᵀβ) = 0,   h = (1, pO2, ...),   g the same with pO2 adjusted towards the line
//
// Errors: no-answer when the readings do not determine the unknowns or the slope does not settle.
func (r Regression) solve(points []point) (*line, error) {
	l := &line{centre: centreOf(points), weight: make([]float64, len(points))}
	plain := l.centred(points)
	l.columns = plain
	l.values = make([]float64, len(plain[0]))
	for range mostSteps {
		l.reweigh(r, points)
		next, err := l.step(plain, points)
		if err != nil {
			return nil, err
		}
		moved := math.Abs(next[1] - l.values[1])
		l.values = next
		l.adjust(r, points, plain)
		if moved <= 1e-13*math.Abs(next[1]) {
			return l, l.finish(points, plain)
		}
	}
	return nil, fault.New(fault.NoAnswer, "bench", "the slope does not settle with these errors of pO2 and rate; look for a reading whose errors are far too large or too small")
}

func centreOf(points []point) []float64 {
	out := make([]float64, 1+len(points[0].terms))
	for _, p := range points {
		for j, v := range append([]float64{p.x}, p.terms...) {
			out[j] += v / float64(len(points))
		}
	}
	return out
}

func (l *line) centred(points []point) [][]float64 {
	out := make([][]float64, len(points))
	for i, p := range points {
		row := []float64{1, p.x - l.centre[0]}
		for j, v := range p.terms {
			row = append(row, v-l.centre[1+j])
		}
		out[i] = row
	}
	return out
}

func (l *line) reweigh(r Regression, points []point) {
	for i, p := range points {
		xSE, ySE := r.errors(p)
		l.weight[i] = 1 / (square(ySE) + square(l.values[1]*xSE))
	}
}

// step solves the linear equations, each unknown in the scale of its column so that units do not matter.
func (l *line) step(plain [][]float64, points []point) ([]float64, error) {
	n := len(l.values)
	scale := l.scales(plain)
	left, right := mat.NewDense(n, n, nil), mat.NewVecDense(n, nil)
	for i, p := range points {
		for a := range n {
			g := l.weight[i] * l.columns[i][a] / scale[a]
			right.SetVec(a, right.AtVec(a)+g*p.y)
			for b := range n {
				left.Set(a, b, left.At(a, b)+g*plain[i][b]/scale[b])
			}
		}
	}
	var solved mat.VecDense
	var ill mat.Condition
	if err := solved.SolveVec(left, right); err != nil && !(errors.As(err, &ill) && float64(ill) < 1e14) {
		return nil, undetermined()
	}
	out := make([]float64, n)
	for a := range out {
		out[a] = solved.AtVec(a) / scale[a]
	}
	return out, nil
}

func undetermined() error {
	return fault.New(fault.NoAnswer, "bench", "the readings do not tell the unknowns apart; vary pO2, and each fitted condition independently of it")
}

// scales returns the largest size of each column.
func (l *line) scales(columns [][]float64) []float64 {
	out := make([]float64, len(columns[0]))
	for _, row := range columns {
		for j, v := range row {
			out[j] = math.Max(out[j], math.Abs(v))
		}
	}
	for j, s := range out {
		if s == 0 {
			out[j] = 1 // the equations are then singular and say so
		}
	}
	return out
}

// adjust moves the pO2 of each point towards the line by its share of the error: x + W·slope·SE_x²·residual.
func (l *line) adjust(r Regression, points []point, plain [][]float64) {
	l.residual = make([]float64, len(points))
	l.columns = make([][]float64, len(points))
	for i, p := range points {
		xSE, ySE := r.errors(p)
		l.residual[i] = p.y - dot(l.values, plain[i])
		l.columns[i] = slices.Clone(plain[i])
		l.columns[i][1] += l.values[1] * square(xSE) / (square(ySE) + square(l.values[1]*xSE)) * l.residual[i]
	}
}

// finish computes the covariance (Σ W g gᵀ)⁻¹, χ² and the leverages W gᵀ C g.
func (l *line) finish(points []point, plain [][]float64) error {
	n, scale := len(l.values), l.scales(plain)
	normal := mat.NewSymDense(n, nil)
	for i := range points {
		for a := range n {
			for b := a; b < n; b++ {
				normal.SetSym(a, b, normal.At(a, b)+l.weight[i]*l.columns[i][a]*l.columns[i][b]/(scale[a]*scale[b]))
			}
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(normal) || chol.Cond() > 1e14 {
		return undetermined()
	}
	l.covariance = mat.NewSymDense(n, nil)
	var inverse mat.SymDense
	if err := chol.InverseTo(&inverse); err != nil {
		return undetermined()
	}
	for a := range n {
		for b := a; b < n; b++ {
			l.covariance.SetSym(a, b, inverse.At(a, b)/(scale[a]*scale[b]))
		}
	}
	for i, w := range l.weight {
		l.chiSquare += w * square(l.residual[i])
		l.leverage = append(l.leverage, w*quadratic(l.covariance, l.columns[i]))
	}
	return nil
}

func quadratic(c mat.Symmetric, g []float64) float64 {
	v := mat.NewVecDense(len(g), g)
	return mat.Inner(v, c, v)
}

func dot(a, b []float64) float64 {
	sum := 0.0
	for i, v := range a {
		sum += v * b[i]
	}
	return sum
}

func readingName(i int) string { return "reading " + strconv.Itoa(i+1) }
