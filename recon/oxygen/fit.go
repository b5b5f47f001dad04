package oxygen

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"torrloom/recon/fault"
)

// Fit is a fitted bench:
//
//	R = zero + slope·pO2 + concentration·(c - ReferenceUM) + temperature·(T - ReferenceC)
//
// The references are the means of the readings, so that the extra terms disturb zero and slope as little as possible.
type Fit struct {
	Rate       string      `json:"rate"`
	Regression string      `json:"regression"`
	ErrorsFrom string      `json:"errorsFrom"` // what the covariance was scaled by
	Terms      []string    `json:"terms"`      // "zero", "slope", then "concentration" and "temperature" if fitted
	Values     []float64   `json:"values"`
	Covariance [][]float64 `json:"covariance"` // of Values

	ReferenceUM float64 `json:"referenceUM"` // mean concentration of the readings, 0 if not all have one
	ReferenceC  float64 `json:"referenceC"`
	FromTorr    float64 `json:"fromTorr"`
	ToTorr      float64 `json:"toTorr"`

	Points      []FittedPoint `json:"points"`
	ChiSquare   float64       `json:"chiSquare"`   // Σ W·residual²; of ordinary regression the sum of squares
	Free        int           `json:"free"`        // readings less unknowns
	ResidualSD  float64       `json:"residualSD"`  // √(χ²/free): of ordinary regression in 1/µs, else 1 is expected
	Probability *float64      `json:"probability"` // of a χ² this large if the given errors are true; null for ordinary
	LackOfFit   *LackOfFit    `json:"lackOfFit"`   // null without repeat readings

	centre     []float64
	centred    *mat.SymDense // scaled covariance of the centred unknowns
	centredAt  []float64
	readingVar float64 // variance of one further reading of the rate
}

// FittedPoint is one reading beside the line.
type FittedPoint struct {
	Reading     int     `json:"reading"` // index in the bench
	PO2Torr     float64 `json:"pO2Torr"`
	PO2SETorr   float64 `json:"pO2SETorr"`
	RatePerUS   float64 `json:"ratePerUS"`
	FittedPerUS float64 `json:"fittedPerUS"`
	Residual    float64 `json:"residual"`    // 1/µs
	Leverage    float64 `json:"leverage"`    // 0 to 1; a reading near 1 decides the line alone
	Studentised float64 `json:"studentised"` // residual over its error as judged by the other readings
	Outlier     bool    `json:"outlier"`
}

// LackOfFit compares the scatter of the means of repeats about the line with the scatter within repeats.
// Source: Draper & Smith, Applied Regression Analysis, 3rd ed. (1998), section 2.1.
type LackOfFit struct {
	Groups      int     `json:"groups"` // distinct conditions
	LackFree    int     `json:"lackFree"`
	PureFree    int     `json:"pureFree"`
	F           float64 `json:"f"`
	Probability float64 `json:"probability"` // of an F this large if the line is right
	Lacks       bool    `json:"lacks"`       // probability below 5 %
}

// Fit fits the bench.
//
// Errors: bad-setting for a reading or a setting that makes no sense; no-answer when there are too few readings or they
// do not determine the line.
func (b Bench) Fit() (*Fit, error) {
	r, err := b.check()
	if err != nil {
		return nil, err
	}
	points, err := b.points()
	if err != nil {
		return nil, err
	}
	unknowns := 2 + len(b.extraTerms())
	if len(points) <= unknowns {
		return nil, fault.New(fault.NoAnswer, "bench", "%d readings for %d unknowns; at least %d are needed to judge the line", len(points), unknowns, unknowns+1)
	}
	if err := r.check(points); err != nil {
		return nil, err
	}
	l, err := r.solve(points)
	if err != nil {
		return nil, err
	}
	return b.fitOf(r, points, l), nil
}

func (b Bench) check() (Regression, error) {
	if b.Rate != "R1" && b.Rate != "R2" {
		return Regression{}, fault.New(fault.BadSetting, "bench.rate", "%q is not a rate; use R1 or R2", b.Rate)
	}
	if !slices.ContainsFunc(ErrorSources, func(e ErrorSource) bool { return e.Name == b.ErrorsFrom }) {
		return Regression{}, fault.New(fault.BadSetting, "bench.errorsFrom", "%q is not known; use given or scatter", b.ErrorsFrom)
	}
	return regressionNamed(b.Regression)
}

func (b Bench) extraTerms() []string {
	var out []string
	if b.Concentration {
		out = append(out, "concentration")
	}
	if b.Temperature {
		out = append(out, "temperature")
	}
	return out
}

func (b Bench) fitOf(r Regression, points []point, l *line) *Fit {
	f := &Fit{Rate: b.Rate, Regression: r.Name, ErrorsFrom: b.ErrorsFrom, Terms: append([]string{"zero", "slope"}, b.extraTerms()...),
		ChiSquare: l.chiSquare, Free: len(points) - len(l.values)}
	f.ResidualSD = math.Sqrt(l.chiSquare / float64(f.Free))
	scale := square(f.ResidualSD)
	if r.knowsErrors {
		p := distuv.ChiSquared{K: float64(f.Free)}.Survival(l.chiSquare)
		f.Probability = &p
		if b.ErrorsFrom == "given" {
			scale = 1
		}
	} else {
		f.ErrorsFrom = "scatter"
	}
	f.setConditions(points)
	f.setLine(l, scale)
	f.setPoints(points, l)
	f.readingVar = readingVariance(r, points, scale)
	f.LackOfFit = lackOfFit(points, l)
	return f
}

func (f *Fit) setConditions(points []point) {
	f.FromTorr, f.ToTorr = math.Inf(1), math.Inf(-1)
	everywhere := true
	for _, p := range points {
		f.FromTorr, f.ToTorr = math.Min(f.FromTorr, p.x), math.Max(f.ToTorr, p.x)
		f.ReferenceUM += p.conditions[0] / float64(len(points))
		f.ReferenceC += p.conditions[1] / float64(len(points))
		everywhere = everywhere && p.conditions[0] > 0
	}
	if !everywhere && !slices.Contains(f.Terms, "concentration") {
		f.ReferenceUM = 0
	}
}

// setLine turns the centred unknowns into those of Fit: only the constant differs, by slope times the centre of pO2.
func (f *Fit) setLine(l *line, scale float64) {
	n := len(l.values)
	f.centred = mat.NewSymDense(n, nil)
	f.centred.ScaleSym(scale, l.covariance)
	f.centre, f.centredAt = l.centre, l.values
	f.Values = slices.Clone(l.values)
	f.Values[0] -= l.values[1] * l.centre[0]
	turn := mat.NewDense(n, n, nil)
	for i := range n {
		turn.Set(i, i, 1)
	}
	turn.Set(0, 1, -l.centre[0])
	var half, whole mat.Dense
	half.Mul(turn, f.centred)
	whole.Mul(&half, turn.T())
	for a := range n {
		row := make([]float64, n)
		for b := range n {
			row[b] = whole.At(a, b)
		}
		f.Covariance = append(f.Covariance, row)
	}
}

// setPoints judges each reading by the scatter of the others: the residual over s₍ᵢ₎·√((1-hᵢ)/Wᵢ) follows Student's t
// with one degree of freedom less. It is an outlier when so large a value would appear among n sound readings in fewer
// than one table in twenty (Bonferroni).
//
// Source: Cook & Weisberg, Residuals and Influence in Regression (1982), section 2.2.
func (f *Fit) setPoints(points []point, l *line) {
	free := float64(f.Free - 1)
	limit := math.Inf(1)
	if free >= 1 {
		limit = studentQuantile(1-0.05/(2*float64(len(points))), free)
	}
	for i, p := range points {
		own := l.weight[i] * square(l.residual[i]) / (1 - l.leverage[i])
		studentised := math.Copysign(math.Sqrt(own*free/math.Max(l.chiSquare-own, 0)), l.residual[i])
		if !(free >= 1) || !(l.leverage[i] < 1) || l.chiSquare == 0 {
			studentised = 0
		}
		f.Points = append(f.Points, FittedPoint{Reading: p.reading, PO2Torr: p.x, PO2SETorr: p.xSE, RatePerUS: p.y,
			FittedPerUS: p.y - l.residual[i], Residual: l.residual[i], Leverage: l.leverage[i],
			Studentised: math.Max(-mostStudentised, math.Min(mostStudentised, studentised)), Outlier: math.Abs(studentised) > limit})
	}
}

// mostStudentised stands for infinity, which JSON cannot carry: a reading off the line when all others lie on it.
const mostStudentised = 1e9

func studentQuantile(p, free float64) float64 {
	return distuv.StudentsT{Sigma: 1, Nu: free}.Quantile(p)
}

// readingVariance is the variance of one further reading of the rate like the middle one of those at hand.
func readingVariance(r Regression, points []point, scale float64) float64 {
	variances := make([]float64, len(points))
	for i, p := range points {
		_, ySE := r.errors(p)
		variances[i] = square(ySE)
	}
	slices.Sort(variances)
	return scale * variances[len(variances)/2]
}

// lackOfFit compares, over readings grouped by equal pO2 and conditions, the weighted sums of squares of group means
// about the line and of readings about their mean.
func lackOfFit(points []point, l *line) *LackOfFit {
	groups := repeats(points)
	unknowns := len(l.values)
	if len(groups) <= unknowns || len(groups) == len(points) {
		return nil
	}
	pure := 0.0
	for _, group := range groups {
		mean, weights := 0.0, 0.0
		for _, i := range group {
			mean, weights = mean+l.weight[i]*points[i].y, weights+l.weight[i]
		}
		mean /= weights
		for _, i := range group {
			pure += l.weight[i] * square(points[i].y-mean)
		}
	}
	out := &LackOfFit{Groups: len(groups), LackFree: len(groups) - unknowns, PureFree: len(points) - len(groups)}
	lack := math.Max(0, l.chiSquare-pure)
	if pure == 0 {
		return nil // repeats that agree to the last digit are copies and tell no scatter
	}
	out.F = lack / float64(out.LackFree) / (pure / float64(out.PureFree))
	out.Probability = distuv.F{D1: float64(out.LackFree), D2: float64(out.PureFree)}.Survival(out.F)
	out.Lacks = out.Probability < 0.05
	return out
}

func repeats(points []point) [][]int {
	type key struct{ x, c, t float64 }
	place := map[key]int{}
	var out [][]int
	for i, p := range points {
		k := key{p.x, p.conditions[0], p.conditions[1]}
		at, seen := place[k]
		if !seen {
			at = len(out)
			place[k] = at
			out = append(out, nil)
		}
		out[at] = append(out[at], i)
	}
	return out
}

// BandRow is the line at one pO2 with two 95 % bands, in 1/µs.
type BandRow struct {
	PO2Torr float64    `json:"pO2Torr"`
	Rate    float64    `json:"rate"`
	Line    [2]float64 `json:"line"`    // where the line is
	Reading [2]float64 `json:"reading"` // where one more reading would fall
}

// Band returns the line at some pO2 under the reference conditions, with pointwise 95 % bands by Student's t.
func (f *Fit) Band(torr []float64) []BandRow {
	t := 1.959963984540054 // normal, when the errors are taken as given
	if f.ErrorsFrom == "scatter" {
		t = studentQuantile(0.975, float64(f.Free))
	}
	out := make([]BandRow, len(torr))
	for i, p := range torr {
		g := make([]float64, len(f.Values))
		g[0], g[1] = 1, p-f.centre[0]
		rate, variance := dot(f.centredAt, g), quadratic(f.centred, g)
		line, reading := t*math.Sqrt(variance), t*math.Sqrt(variance+f.readingVar)
		out[i] = BandRow{p, rate, [2]float64{rate - line, rate + line}, [2]float64{rate - reading, rate + reading}}
	}
	return out
}

// Calibration returns the fitted line under the reference conditions of the readings.
//
// Errors: no-answer when the line is none: a slope that is not positive or a negative rate without oxygen.
func (f *Fit) Calibration() (Calibration, error) { return f.CalibrationAt(f.ReferenceUM, f.ReferenceC) }

// CalibrationAt returns the fitted line at a probe concentration and temperature. Zero, slope and their covariance are
// exact there; the errors of the extra coefficients are carried along as if independent of them.
func (f *Fit) CalibrationAt(concentrationUM, temperatureC float64) (Calibration, error) {
	zero := make([]float64, len(f.Values)) // gradient of the zero
	zero[0] = 1
	c := Calibration{Rate: f.Rate, SlopePerUSPerTorr: f.Values[1], ConcentrationUM: concentrationUM, TemperatureC: temperatureC,
		FromTorr: math.Max(0, f.FromTorr), ToTorr: f.ToTorr}
	for j, term := range f.Terms {
		se := math.Sqrt(f.Covariance[j][j])
		switch term {
		case "concentration":
			zero[j] = concentrationUM - f.ReferenceUM
			c.ConcentrationPerUSPerUM, c.ConcentrationSEPerUSPerUM = f.Values[j], se
		case "temperature":
			zero[j] = temperatureC - f.ReferenceC
			c.TemperaturePerUSPerC, c.TemperatureSEPerUSPerC = f.Values[j], se
		}
	}
	c.ZeroPerUS = dot(zero, f.Values)
	variance, withSlope := 0.0, 0.0
	for a := range zero {
		withSlope += zero[a] * f.Covariance[a][1]
		variance += zero[a] * dot(f.Covariance[a], zero)
	}
	c.ZeroSEPerUS, c.SlopeSEPerUSPerTorr = math.Sqrt(math.Max(0, variance)), math.Sqrt(f.Covariance[1][1])
	if c.ZeroSEPerUS > 0 && c.SlopeSEPerUSPerTorr > 0 {
		c.Correlation = math.Max(-1, math.Min(1, withSlope/(c.ZeroSEPerUS*c.SlopeSEPerUSPerTorr)))
	}
	if !(c.ZeroPerUS >= 0 && c.SlopePerUSPerTorr > 0) {
		return c, fault.New(fault.NoAnswer, "bench", "the fitted line has zero %.4g /µs and slope %.4g /µs/torr; both must be positive, look for swapped columns or units", c.ZeroPerUS, c.SlopePerUSPerTorr)
	}
	return c, c.Check()
}
