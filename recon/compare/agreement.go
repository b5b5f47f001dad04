package compare

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"torrloom/recon/fault"
)

// Agreement describes how far voxels of two maps agree.
//
// Bias is the mean difference, SD its standard deviation over the voxels (1/(n-1)), and Limits = Bias ∓ 1.96 SD hold 95 %
// of the differences if those are Gaussian. The intervals are Bias ± t SD/√m and limit ± t √(3/m) SD with the 97.5 % point
// t of Student's distribution of m-1 degrees of freedom, m being Independent.
//
// Concordance is 2 s_xy/(s_x² + s_y² + bias²) with variances over n (Lin's own convention; over n-1 it comes out a
// trifle higher). Pearson's correlation stands beside it as a warning: it can be high where the limits are wide.
//
// Source: Bland & Altman, Statistical methods for assessing agreement between two methods of clinical measurement, Lancet
// i (1986) 307; Lin, A concordance correlation coefficient to evaluate reproducibility, Biometrics 45 (1989) 255.
type Agreement struct {
	Pairing
	Independent float64       `json:"independent"` // how many independent pairs the voxels are worth
	Bias        float64       `json:"bias"`
	BiasCI      [2]float64    `json:"biasCI"`
	SD          float64       `json:"sd"`
	Limits      [2]float64    `json:"limits"`
	LimitsCI    [2][2]float64 `json:"limitsCI"`
	Concordance float64       `json:"concordance"`
	Pearson     float64       `json:"pearson"`
}

// limitWidth takes in 95 % of a Gaussian distribution.
const limitWidth = 1.96

// Agree returns the agreement of two maps over a region (nil: everywhere). Neighbouring voxels share noise, so that n
// of them are worth n/voxelsPerSample independent pairs; see SpokeOperator.VoxelsPerSample. 1 takes them as independent.
//
// Errors: no-answer when fewer than three independent pairs are left, or when all voxels of both maps are equal; bug when
// the maps differ in length or voxelsPerSample is below 1.
func Agree(reference, other []float32, region []bool, voxelsPerSample float64) (Agreement, error) {
	x, y, pairing, err := pairUp(reference, other, region)
	if err != nil {
		return Agreement{}, err
	}
	if !(voxelsPerSample >= 1) {
		return Agreement{}, fault.New(fault.Bug, "agreement", "%g voxels per independent value; 1 or more", voxelsPerSample)
	}
	a := Agreement{Pairing: pairing, Independent: float64(len(x)) / voxelsPerSample}
	if !(a.Independent >= 3) {
		return a, fault.New(fault.NoAnswer, "agreement", "%d voxels have an answer in both maps, worth %.1f independent ones; at least 3 are needed, take a larger region", len(x), a.Independent)
	}
	a.spread(x, y)
	return a, a.correlate(x, y)
}

func (a *Agreement) spread(x, y []float64) {
	d := make([]float64, len(x))
	for i := range x {
		d[i] = y[i] - x[i]
	}
	a.Bias = meanOf(d)
	a.SD = math.Sqrt(products(d, d) / float64(len(d)-1))
	t := studentQuantile(a.Independent - 1)
	a.BiasCI = around(a.Bias, t*a.SD/math.Sqrt(a.Independent))
	a.Limits = around(a.Bias, limitWidth*a.SD)
	for side, limit := range a.Limits {
		a.LimitsCI[side] = around(limit, t*a.SD*math.Sqrt(3/a.Independent))
	}
}

func (a *Agreement) correlate(x, y []float64) error {
	n := float64(len(x))
	sxx, syy, sxy := products(x, x)/n, products(y, y)/n, products(x, y)/n
	if !(sxx+syy > 0) {
		return fault.New(fault.NoAnswer, "agreement", "all %d voxels are equal within each map; correlations need values that vary", len(x))
	}
	a.Concordance = 2 * sxy / (sxx + syy + a.Bias*a.Bias)
	if sxx > 0 && syy > 0 {
		a.Pearson = sxy / math.Sqrt(sxx*syy)
	}
	return nil
}

func around(centre, half float64) [2]float64 { return [2]float64{centre - half, centre + half} }

// studentQuantile returns the 97.5 % point of Student's distribution.
func studentQuantile(degrees float64) float64 {
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: degrees}.Quantile(0.975)
}

// Repeatability returns 2·√(mean d²) of the differences d of readings taken twice under the same conditions: 95 % of such
// pairs differ by less, if their mean difference is zero.
//
// Errors: no-answer without pairs; bug when the lengths differ.
// Source: Bland & Altman 1986, as for Agreement; British Standards Institution's factor of 2.
func Repeatability(first, second []float32, region []bool) (float64, error) {
	x, y, _, err := pairUp(first, second, region)
	if err != nil {
		return 0, err
	}
	if len(x) == 0 {
		return 0, fault.New(fault.NoAnswer, "repeatability", "no voxel has an answer in both maps")
	}
	sum := 0.0
	for i := range x {
		sum += (y[i] - x[i]) * (y[i] - x[i])
	}
	return 2 * math.Sqrt(sum/float64(len(x))), nil
}

// Scatter counts voxels by mean and difference of two maps, for drawing.
type Scatter struct {
	MeanEdges       []float64 `json:"meanEdges"`
	DifferenceEdges []float64 `json:"differenceEdges"`
	Counts          []int     `json:"counts"`  // [difference][mean], mean fastest
	Outside         int       `json:"outside"` // pairs beyond the edges
	Most            int       `json:"most"`    // largest count
}

// ScatterOf counts the pairs in columns × rows cells. The edges take in all means and differences but the outermost
// thousandth on either side, and zero difference; the few voxels beyond are counted as Outside.
//
// Errors: no-answer without pairs; bug when the lengths differ or a count is below 1.
func ScatterOf(reference, other []float32, region []bool, columns, rows int) (Scatter, error) {
	x, y, _, err := pairUp(reference, other, region)
	if err != nil {
		return Scatter{}, err
	}
	if columns < 1 || rows < 1 {
		return Scatter{}, fault.New(fault.Bug, "agreement", "%d x %d cells asked for", columns, rows)
	}
	if len(x) == 0 {
		return Scatter{}, fault.New(fault.NoAnswer, "agreement", "no voxel has an answer in both maps; choose another region")
	}
	mean, difference := make([]float64, len(x)), make([]float64, len(x))
	for i := range x {
		mean[i], difference[i] = (x[i]+y[i])/2, y[i]-x[i]
	}
	s := Scatter{MeanEdges: edgesOf(columns, mean), DifferenceEdges: edgesOf(rows, difference, 0), Counts: make([]int, columns*rows)}
	for i := range mean {
		c, r := binOf(s.MeanEdges, mean[i]), binOf(s.DifferenceEdges, difference[i])
		if c < 0 || r < 0 {
			s.Outside++
			continue
		}
		s.Counts[r*columns+c]++
		s.Most = max(s.Most, s.Counts[r*columns+c])
	}
	return s, nil
}
