package relax

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"
)

// rows reads a file of testdata/reference, without its header row.
func rows(t *testing.T, name string) [][]string {
	t.Helper()
	file, err := os.Open(filepath.Join("..", "..", "testdata", "reference", name))
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	reader := csv.NewReader(file)
	reader.Comment = '#'
	records, err := reader.ReadAll()
	if err != nil || len(records) < 2 {
		t.Fatalf("%s: %d rows, %v", name, len(records), err)
	}
	return records[1:]
}

func number(t *testing.T, field string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(field, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// near fails unless got is within a relative tolerance of want.
func near(t *testing.T, what string, got, want, relative float64) {
	t.Helper()
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		t.Errorf("%s: %.12g, want %.12g within %g of it", what, got, want, relative)
	}
}

// certified is one problem of the NIST Statistical Reference Datasets with the model b1 (1 - exp(-b2 x)).
type certified struct {
	x, y                   []float64
	starts                 [2]float64 // of b2
	b1, b1SD, b2, b2SD     float64
	sumOfSquares, residual float64
}

func readCertified(t *testing.T, problem, data string) (c certified) {
	for _, row := range rows(t, data) {
		c.y, c.x = append(c.y, number(t, row[0])), append(c.x, number(t, row[1]))
	}
	for _, row := range rows(t, "nist_certified.csv") {
		if row[0] != problem {
			continue
		}
		switch row[1] {
		case "b1":
			c.b1, c.b1SD = number(t, row[4]), number(t, row[5])
		case "b2":
			c.starts = [2]float64{number(t, row[2]), number(t, row[3])}
			c.b2, c.b2SD = number(t, row[4]), number(t, row[5])
		case "RSS":
			c.sumOfSquares = number(t, row[4])
		case "RSD":
			c.residual = number(t, row[4])
		}
	}
	return c
}

func (c certified) check(t *testing.T, f *Fitter, a Answer) {
	t.Helper()
	// The certified values have 11 digits, and the fit stops at 1e-12 of the rate.
	const digits = 1e-9
	by := f.ResidualScale(a.ChiSquare)
	near(t, "b2", a.Rate, c.b2, digits)
	near(t, "b1", a.Amplitude, c.b1, digits)
	near(t, "SD of b2", a.RateSE*by, c.b2SD, digits)
	near(t, "SD of b1", a.AmplitudeSE*by, c.b1SD, digits)
	near(t, "residual sum of squares", a.ChiSquare, c.sumOfSquares, digits)
	near(t, "residual standard deviation", by, c.residual, digits)
}

func (c certified) run(t *testing.T) {
	f := fitter(t, saturationRecovery, c.x, same(1, len(c.x)), Settings{})
	for _, start := range c.starts {
		c.check(t, f, f.FitFrom(c.y, start))
	}
	c.check(t, f, f.Fit(c.y))
}

func TestRateFitAgainstMisra1a(t *testing.T) { readCertified(t, "Misra1a", "nist_misra1a.csv").run(t) }

func TestRateFitAgainstBoxBOD(t *testing.T) { readCertified(t, "BoxBOD", "nist_boxbod.csv").run(t) }

func TestStandardErrorsEqualTheCramerRaoBound(t *testing.T) {
	f := fitter(t, inversionRecovery, logDelays, same(0.02, len(logDelays)), Settings{})
	for _, row := range rows(t, "crb_inversion_recovery.csv") {
		rate := number(t, row[0])
		a := f.Fit(signal(inversionRecovery, logDelays, rate, 1, 1.9))
		if a.Status != Answered {
			t.Fatalf("rate %g: %v", rate, a.Status)
		}
		// The table has eight digits.
		near(t, "SD of R", a.RateSE, number(t, row[1]), 1e-7)
		near(t, "SD of A", a.AmplitudeSE, number(t, row[2]), 1e-7)
	}
}

func TestManyFitsScatterByTheCramerRaoBound(t *testing.T) {
	const fits = 2000
	f := fitter(t, inversionRecovery, logDelays, same(0.02, len(logDelays)), Settings{})
	for _, row := range rows(t, "crb_inversion_recovery.csv") {
		rate, bound := number(t, row[0]), number(t, row[1])
		draw := newNoise(11)
		var sum, squares float64
		for range fits {
			a := f.Fit(draw.onto(signal(inversionRecovery, logDelays, rate, 1, 1.9), 0.02))
			if a.Status != Answered {
				t.Fatalf("rate %g: %v", rate, a.Status)
			}
			sum += a.Rate - rate
			squares += (a.Rate - rate) * (a.Rate - rate)
		}
		bias := sum / fits
		// 2000 fits know their SD to 1.6 %, and the bound is that of a linear problem.
		near(t, "scatter of R", math.Sqrt(squares/fits-bias*bias), bound, 0.05)
		// The mean is known to 0.022 bounds; the curvature of the model adds a bias of a few hundredths.
		if !(math.Abs(bias) <= 0.1*bound) {
			t.Errorf("rate %g: bias %g is more than a tenth of the scatter %g", rate, bias, bound)
		}
	}
}
