package oxygen

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat"

	"torrloom/recon/fault"
)

func number(v float64) *float64 { return &v }

// benchOf makes a bench of pO2 and rates. Rows that go below zero are lifted by moving both axes, since only the
// arithmetic of a straight line is looked at.
func benchOf(regression string, x, xSE, y, ySE []float64) Bench {
	b := NewBench("R1")
	b.Regression, b.ErrorsFrom = regression, "given"
	for i := range x {
		r := Reading{PO2Torr: number(x[i]), RatePerUS: y[i]}
		if xSE != nil {
			r.PO2SETorr = xSE[i]
		}
		if ySE != nil {
			r.RateSEPerUS = ySE[i]
		}
		b.Readings = append(b.Readings, r)
	}
	return b
}

func fitted(t *testing.T, b Bench) *Fit {
	t.Helper()
	f, err := b.Fit()
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func columns(rows [][]float64) [][]float64 {
	out := make([][]float64, len(rows[0]))
	for _, row := range rows {
		for j, v := range row {
			out[j] = append(out[j], v)
		}
	}
	return out
}

func TestOrdinaryRegressionAgainstNorris(t *testing.T) {
	c := columns(table(t, "nist_norris.csv"))
	f := fitted(t, benchOf("ordinary", c[1], nil, c[0], nil))
	// Certified values with 15 digits. The data have about six and the solution loses some: 1e-11 of a value of order 1.
	near(t, "B0", f.Values[0], -0.262323073774029, 1e-11)
	near(t, "B1", f.Values[1], 1.00211681802045, 1e-13)
	near(t, "SD of B0", math.Sqrt(f.Covariance[0][0]), 0.232818234301152, 1e-12)
	near(t, "SD of B1", math.Sqrt(f.Covariance[1][1]), 0.429796848199937e-3, 1e-15)
	near(t, "residual SD", f.ResidualSD, 0.884796396144373, 1e-12)
	if f.Free != 34 || f.ErrorsFrom != "scatter" || f.Probability != nil {
		t.Errorf("free %d, errors from %s, probability %v", f.Free, f.ErrorsFrom, f.Probability)
	}
}

func pearson(t *testing.T, regression string) Bench {
	c := columns(table(t, "york_pearson.csv"))
	var xSE, ySE []float64
	for i := range c[0] {
		xSE, ySE = append(xSE, 1/math.Sqrt(c[1][i])), append(ySE, 1/math.Sqrt(c[3][i]))
	}
	return benchOf(regression, c[0], xSE, c[2], ySE)
}

func TestErrorsInBothAgainstYorkAndPearson(t *testing.T) {
	b := pearson(t, "both")
	f := fitted(t, b)
	near(t, "published intercept", f.Values[0], 5.47991, 5e-6)
	near(t, "published slope", f.Values[1], -0.48053, 5e-6)
	// The same computed independently of this project, in more digits.
	near(t, "intercept", f.Values[0], 5.47991022403, 6e-12)
	near(t, "slope", f.Values[1], -0.480533407446, 6e-13)
	near(t, "χ²", f.ChiSquare, 11.86635319, 6e-9)
	near(t, "SE of the intercept", math.Sqrt(f.Covariance[0][0]), 0.2949707355, 6e-11)
	near(t, "SE of the slope", math.Sqrt(f.Covariance[1][1]), 0.057985009, 6e-10)
	b.ErrorsFrom = "scatter"
	f = fitted(t, b)
	near(t, "scaled SE of the intercept", math.Sqrt(f.Covariance[0][0]), 0.3592, 6e-5)
	near(t, "scaled SE of the slope", math.Sqrt(f.Covariance[1][1]), 0.0706, 6e-5)
	// Ordinary regression of the same points, computed independently.
	near(t, "ordinary slope", fitted(t, pearson(t, "ordinary")).Values[1], -0.53957727498, 6e-12)
}

func TestWeightedRegressionAgainstGonum(t *testing.T) {
	b := pearson(t, "weighted")
	var x, y, w []float64
	for _, r := range b.Readings {
		x, y, w = append(x, *r.PO2Torr), append(y, r.RatePerUS), append(w, 1/square(r.RateSEPerUS))
	}
	zero, slope := stat.LinearRegression(x, y, w, false)
	f := fitted(t, b)
	near(t, "zero", f.Values[0], zero, 1e-12) // rounding of sums of ten
	near(t, "slope", f.Values[1], slope, 1e-12)
}

// With one and the same ratio of errors for all points the line has a closed form (Deming).
func TestErrorsInBothAgainstTheDemingFormula(t *testing.T) {
	b := pearson(t, "both")
	for i := range b.Readings {
		b.Readings[i].PO2SETorr, b.Readings[i].RateSEPerUS = 1, 1
	}
	f := fitted(t, b)
	near(t, "orthogonal slope", f.Values[1], -0.54556119752, 6e-12) // computed independently
	near(t, "orthogonal intercept", f.Values[0], 5.78404377453, 6e-12)
}

// The estimate must be a minimum of χ², which is checked by walking away from it in every direction.
func TestErrorsInBothIsTheLeastChiSquare(t *testing.T) {
	b := pearson(t, "both")
	f := fitted(t, b)
	chi := func(zero, slope float64) float64 {
		sum := 0.0
		for _, r := range b.Readings {
			sum += square(r.RatePerUS-zero-slope**r.PO2Torr) / (square(r.RateSEPerUS) + square(slope*r.PO2SETorr))
		}
		return sum
	}
	least := chi(f.Values[0], f.Values[1])
	near(t, "χ² of the definition", f.ChiSquare, least, 1e-10)
	for k := range 16 {
		sin, cos := math.Sincos(float64(k) * math.Pi / 8)
		// A hundredth of an error: far enough that χ² rises by 1e-6 or more, above its rounding.
		if rise := chi(f.Values[0]+0.003*cos, f.Values[1]+0.0006*sin) - least; !(rise > 0) {
			t.Errorf("χ² falls by %g in direction %d", -rise, k)
		}
	}
}

// gasBench makes noisy readings of four gases, three repeats each, of probes at several concentrations and temperatures.
func gasBench(r *rand.Rand, noise, bend float64) Bench {
	b := NewBench("R2")
	b.Regression, b.ErrorsFrom = "weighted", "given"
	i := 0
	for _, percent := range []float64{0, 2, 5, 9.3} {
		for range 3 {
			reading := Reading{OxygenFraction: number(percent / 100), ConcentrationUM: number(200 + 50*float64(i%4)), TemperatureC: number(33 + 2*float64(i%5)), RateSEPerUS: noise}
			p, _, _ := b.pO2Of(reading)
			reading.RatePerUS = 0.3 + 0.007*p + bend*p*p + 0.0008**reading.ConcentrationUM + 0.002*(*reading.TemperatureC-37) + noise*r.NormFloat64()
			b.Readings = append(b.Readings, reading)
			i++
		}
	}
	return b
}

func TestBenchRecoversConcentrationAndTemperatureTerms(t *testing.T) {
	b := gasBench(rand.New(rand.NewPCG(1, 2)), 1e-9, 0)
	b.Concentration, b.Temperature = true, true
	f := fitted(t, b)
	for j, want := range []float64{0, 0.007, 0.0008, 0.002} {
		if j > 0 {
			near(t, f.Terms[j], f.Values[j], want, 1e-9) // noise of 1e-9 over spreads of 4 °C and more
		}
	}
	c, err := f.CalibrationAt(0, 37)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "zero without probe", c.ZeroPerUS, 0.3, 1e-8) // extrapolated over 200 µM from a spread of 150 µM
	p := c.Value(Voxel{RatePerUS: 0.3 + 0.007*20 + 0.0008*310 - 0.002*4, Amplitude: 1.55}, Sample{TemperatureC: 33, ReferenceUM: 200, ReferenceAmplitude: 1})
	near(t, "pO2 at another concentration and temperature", p.PO2Torr, 20, 1e-5)
}

// The stated covariance must be that of the estimates over many noisy tables.
func TestStandardErrorsAgreeWithTheSpreadOfManyTables(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	const runs = 4000
	var zeros, slopes []float64
	var c Calibration
	within := 0
	for range runs {
		b := gasBench(r, 0.004, 0)
		b.Concentration, b.Temperature = true, true
		f := fitted(t, b)
		c, _ = f.CalibrationAt(250, 37)
		zeros, slopes = append(zeros, c.ZeroPerUS), append(slopes, c.SlopePerUSPerTorr)
		if row := f.Band([]float64{40})[0]; math.Abs(row.Rate-(f.Values[1]*40+f.Values[0])) < 1e-12 && row.Line[0] <= f.truthAt40() && f.truthAt40() <= row.Line[1] {
			within++
		}
	}
	// The SD of an SD over 4000 tables is 1.1 %, that of a correlation 1.6 %; three of each are allowed.
	near(t, "SE of the zero", c.ZeroSEPerUS/stat.StdDev(zeros, nil), 1, 0.034)
	near(t, "SE of the slope", c.SlopeSEPerUSPerTorr/stat.StdDev(slopes, nil), 1, 0.034)
	near(t, "correlation", c.Correlation, stat.Correlation(zeros, slopes, nil), 0.05)
	near(t, "95 % band holds the line", float64(within)/runs, 0.95, 0.011) // three binomial SD
}

// truthAt40 is the noiseless line of gasBench at 40 torr under the fit's reference conditions.
func (f *Fit) truthAt40() float64 {
	return 0.3 + 0.007*40 + 0.0008*f.ReferenceUM + 0.002*(f.ReferenceC-37)
}

func TestLackOfFitFollowsItsDistributionAndSeesABend(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	const runs = 3000
	lacks, bent := 0, 0
	for range runs {
		for _, bend := range []float64{0, 1e-5} {
			b := gasBench(r, 0.001, bend)
			for i := range b.Readings { // repeats need equal conditions
				b.Readings[i].RatePerUS -= 0.0008**b.Readings[i].ConcentrationUM + 0.002*(*b.Readings[i].TemperatureC-37)
				b.Readings[i].ConcentrationUM = nil
				p, _, _ := b.pO2Of(b.Readings[i])
				b.Readings[i].RatePerUS += 0.007*round(p) - 0.007*p + bend*(round(p)*round(p)-p*p)
				b.Readings[i].PO2Torr, b.Readings[i].OxygenFraction, b.Readings[i].TemperatureC = number(round(p)), nil, nil
			}
			f := fitted(t, b)
			if f.LackOfFit == nil || f.LackOfFit.Groups != 4 || f.LackOfFit.PureFree != 8 || f.LackOfFit.LackFree != 2 {
				t.Fatalf("lack of fit %+v, want 4 groups of 3", f.LackOfFit)
			}
			if f.LackOfFit.Lacks && bend == 0 {
				lacks++
			} else if f.LackOfFit.Lacks {
				bent++
			}
		}
	}
	near(t, "false alarms", float64(lacks)/runs, 0.05, 0.012) // three binomial SD
	if !(float64(bent)/runs > 0.9) {                          // a bend of 0.01 /µs at mid-range, ten times the noise
		t.Errorf("a bent line is seen in %d of %d tables", bent, runs)
	}
}

// round puts pressures that differ by the water vapour alone into one group.
func round(p float64) float64 { return 10 * math.Round(p/10) }

func TestOneWrongReadingIsFlaggedAndSoundOnesSeldom(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 8))
	const runs = 2000
	alarms := 0
	for range runs {
		b := gasBench(r, 0.004, 0)
		b.Concentration = true
		b.Temperature = true
		for _, p := range fitted(t, b).Points {
			if p.Outlier {
				alarms++
				break
			}
		}
		b.Readings[7].RatePerUS += 0.08
		for i, p := range fitted(t, b).Points {
			if p.Outlier != (i == 7) {
				t.Fatalf("a reading 20 errors off: reading %d has studentised residual %g, outlier %v", i, p.Studentised, p.Outlier)
			}
		}
	}
	if share := float64(alarms) / runs; !(share <= 0.065) { // at most one table in twenty, and three binomial SD
		t.Errorf("%.1f %% of the sound tables show an outlier", 100*share)
	}
}

// Leaving a reading out and asking how far it is from the others' line is what the studentised residual means.
func TestStudentisedResidualAgainstLeavingTheReadingOut(t *testing.T) {
	b := pearson(t, "weighted")
	b.ErrorsFrom = "scatter"
	f := fitted(t, b)
	for i, p := range f.Points {
		b.Readings[i].LeftOut = true
		others := fitted(t, b)
		b.Readings[i].LeftOut = false
		row := others.Band([]float64{p.PO2Torr})[0]
		lineSE := (row.Line[1] - row.Rate) / studentQuantile(0.975, float64(others.Free))
		own := others.ResidualSD * b.Readings[i].RateSEPerUS
		near(t, "studentised residual", p.Studentised, (p.RatePerUS-row.Rate)/math.Hypot(lineSE, own), 1e-9) // rounding through a small difference
	}
}

func TestPredictionBandHoldsNewReadings(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 10))
	const runs = 4000
	within := 0
	for range runs {
		b := NewBench("R1")
		for _, p := range []float64{0, 15, 36, 66} {
			b.Readings = append(b.Readings, Reading{PO2Torr: number(p), RatePerUS: 0.15 + 0.008*p + 0.003*r.NormFloat64()})
		}
		row := fitted(t, b).Band([]float64{50})[0]
		if reading := 0.15 + 0.008*50 + 0.003*r.NormFloat64(); row.Reading[0] <= reading && reading <= row.Reading[1] {
			within++
		}
	}
	near(t, "95 % band holds one more reading", float64(within)/runs, 0.95, 0.011) // three binomial SD
}

func TestGasFractionsBecomeThePressuresOfTheGasTable(t *testing.T) {
	for _, row := range table(t, "gas_mixtures.csv") {
		b := NewBench("R1")
		b.TemperatureC = row[1]
		for humid, want := range map[bool]float64{false: row[2], true: row[3]} {
			b.Humid = humid
			p, se, err := b.pO2Of(Reading{OxygenFraction: number(row[0] / 100), FractionSE: 0.001})
			if err != nil {
				t.Fatal(err)
			}
			near(t, "pO2", p, want, 6e-6*want) // six digits
			if row[0] == 100 {
				near(t, "its error", se, 0.001*want, 6e-9*want)
			}
		}
	}
}

// "5 % is about 40 torr" is common practice without a source; the numbers below are what stands behind it.
func TestFivePercentIsAboutFortyTorrWithinWhatTheToolExplains(t *testing.T) {
	for _, c := range []struct {
		gas  Gas
		want float64
	}{
		{Gas{0.05, 760, 37, false}, 38.0}, {Gas{0.05, 760, 37, true}, 35.6}, {Gas{0.05, 745, 37, true}, 34.9},
	} {
		p, err := c.gas.PO2Torr()
		if err != nil {
			t.Fatal(err)
		}
		near(t, "5 %", p, c.want, 0.06)
		if !(math.Abs(p-40) <= 5.2) { // dryness 2, water 2.4 and barometer 0.7 torr
			t.Errorf("5 %% gives %g torr, further from 40 than dryness, water and barometer explain", p)
		}
	}
}

func TestBenchesWithoutAnAnswerAreRefused(t *testing.T) {
	good := gasBench(rand.New(rand.NewPCG(1, 1)), 0.003, 0)
	for _, c := range []struct {
		kind   fault.Kind
		words  string
		change func(*Bench)
	}{
		{fault.BadSetting, "bench.rate", func(b *Bench) { b.Rate = "T2" }},
		{fault.BadSetting, "bench.regression", func(b *Bench) { b.Regression = "robust" }},
		{fault.BadSetting, "bench.errorsFrom", func(b *Bench) { b.ErrorsFrom = "" }},
		{fault.BadSetting, "reading 3", func(b *Bench) { b.Readings[2].RatePerUS = 0 }},
		{fault.BadSetting, "reading 3", func(b *Bench) { b.Readings[2].RatePerUS = math.NaN() }},
		{fault.BadSetting, "reading 3 oxygen", func(b *Bench) { b.Readings[2].OxygenFraction = nil }},
		{fault.BadSetting, "reading 3 oxygen", func(b *Bench) { b.Readings[2].PO2Torr = number(3) }},
		{fault.BadSetting, "reading 3 gas oxygenFraction", func(b *Bench) { b.Readings[2].OxygenFraction = number(5) }},
		{fault.BadSetting, "reading 3 rateSEPerUS", func(b *Bench) { b.Readings[2].RateSEPerUS = 0 }},
		{fault.BadSetting, "reading 3 standard errors", func(b *Bench) { b.Readings[2].RateSEPerUS = -1 }},
		{fault.BadSetting, "reading 3 concentrationUM", func(b *Bench) { b.Concentration = true; b.Readings[2].ConcentrationUM = nil }},
		{fault.BadSetting, "no reading has an error of its pO2", func(b *Bench) { b.Regression = "both" }},
		{fault.NoAnswer, "2 readings for 2 unknowns", func(b *Bench) { b.Readings = b.Readings[2:4] }},
		{fault.NoAnswer, "do not tell the unknowns apart", func(b *Bench) { b.Readings = append(b.Readings[:3:3], b.Readings[0]); b.Humid = false }},
		{fault.NoAnswer, "do not tell the unknowns apart", func(b *Bench) {
			b.Concentration = true
			for i := range b.Readings {
				b.Readings[i].ConcentrationUM = number(250)
			}
		}},
	} {
		bad := good
		bad.Readings = append([]Reading(nil), good.Readings...)
		c.change(&bad)
		_, err := bad.Fit()
		if err == nil || fault.From(err).Kind != c.kind || !strings.Contains(err.Error(), c.words) {
			t.Errorf("got %v, want a %s fault with %q", err, c.kind, c.words)
		}
	}
	if _, err := fitted(t, pearson(t, "both")).Calibration(); err == nil {
		t.Error("a falling line was accepted as a calibration")
	}
}

func TestTablesOfReadingsInSeveralHands(t *testing.T) {
	want := []Reading{
		{Label: "N2", OxygenFraction: number(0), RatePerUS: 0.151, RateSEPerUS: 0.002},
		{Label: "5 %", OxygenFraction: number(0.05), RatePerUS: 0.44},
	}
	for name, text := range map[string]string{
		"comma":     "label,oxygen_percent,rate_per_us,rate_se_per_us\nN2,0,0.151,0.002\n5 %,5,0.44,\n",
		"semicolon": "\ufeff# made on a bench\nlabel;oxygen_percent;rate_per_us;rate_se_per_us\r\nN2;0;0,151;0,002\r\n5 %;5;0,44;\r\n",
		"tab":       "Label\tOxygen_Percent\tRate_per_us\tRate_SE_per_us\nN2\t0\t0.151\t2e-3\n5 %\t5\t0.44\t\n",
	} {
		got, err := ReadTable([]byte(text))
		if err != nil || len(got) != 2 {
			t.Errorf("%s: %v, %d readings", name, err, len(got))
			continue
		}
		for i, r := range got {
			if r.Label != want[i].Label || *r.OxygenFraction != *want[i].OxygenFraction || r.RatePerUS != want[i].RatePerUS || r.RateSEPerUS != want[i].RateSEPerUS {
				t.Errorf("%s: reading %d is %+v", name, i, r)
			}
		}
	}
	for text, words := range map[string]string{
		"":                                       "no header",
		"oxygen,rate_per_us\n1,2\n":              `column "oxygen" is not known`,
		"po2_torr,rate_per_us\n1,2\n3,x\n":       `table line 3 column rate_per_us: "x" is not a number`,
		"po2_torr,rate_per_us\n1,2\n3\n":         "after 1 readings",
		"po2_torr;rate_per_us\n1,5;NaN\n":        `"NaN" is not a number`,
		"po2_torr;rate_per_us\n1,000,5;0,1\n":    `"1,000,5" is not a number`,
		"po2_torr,rate_per_us\n\"1,2\n3,4,5,6\n": "after 0 readings",
	} {
		if _, err := ReadTable([]byte(text)); err == nil || fault.From(err).Kind != fault.BadFile || !strings.Contains(err.Error(), words) {
			t.Errorf("%q gives %v, want %q", text, err, words)
		}
	}
}
