package oxygen

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat"

	"torrloom/recon/fault"
)

var whole = Calibration{Rate: "R1", ZeroPerUS: 0.15, SlopePerUSPerTorr: 0.008, ZeroSEPerUS: 0.004, SlopeSEPerUSPerTorr: 0.0002, Correlation: -0.7,
	ConcentrationPerUSPerUM: 0.0006, ConcentrationSEPerUSPerUM: 0.0001, ConcentrationUM: 200,
	TemperaturePerUSPerC: 0.003, TemperatureSEPerUSPerC: 0.001, TemperatureC: 37, FromTorr: 0, ToTorr: 70}

// Both errors of a pO2 must be the spread of the pO2 when everything behind it is drawn at random.
func TestBothErrorsAgreeWithTheSpreadOfDrawnCalibrations(t *testing.T) {
	s := Sample{TemperatureC: 33, ReferenceUM: 280, ReferenceSEUM: 15, ReferenceAmplitude: 0.9}
	v := Voxel{RatePerUS: 0.5, RateSE: 0.01, Amplitude: 1.1, AmplitudeSE: 0.05}
	value := whole.Value(v, s)
	r := rand.New(rand.NewPCG(11, 12))
	const runs = 40000
	random, systematic := make([]float64, runs), make([]float64, runs)
	for i := range runs {
		noisy := v
		noisy.RatePerUS += v.RateSE * r.NormFloat64()
		noisy.Amplitude += v.AmplitudeSE * r.NormFloat64()
		random[i] = whole.Value(noisy, s).PO2Torr
		c, drawn := whole.WithinSE(r.NormFloat64(), r.NormFloat64()), s
		c.ConcentrationPerUSPerUM += c.ConcentrationSEPerUSPerUM * r.NormFloat64()
		c.TemperaturePerUSPerC += c.TemperatureSEPerUSPerC * r.NormFloat64()
		drawn.ReferenceUM += s.ReferenceSEUM * r.NormFloat64()
		systematic[i] = c.Value(v, drawn).PO2Torr
	}
	// The SD of an SD over 40000 draws is 0.35 %; the slope's 2.5 % makes the second order another 0.2 %.
	near(t, "random", value.RandomSE/stat.StdDev(random, nil), 1, 0.011)
	near(t, "systematic", value.CalibrationSE/stat.StdDev(systematic, nil), 1, 0.013)
}

func TestCorrectionsNeedBothSidesToBeKnown(t *testing.T) {
	v := Voxel{RatePerUS: 0.5, RateSE: 0.01, Amplitude: 1.1, AmplitudeSE: 0.05}
	plain, _ := whole.PO2(v.RatePerUS, v.RateSE)
	for _, s := range []Sample{{}, {TemperatureC: 37}, {ReferenceUM: 200, ReferenceAmplitude: 1.1}} {
		near(t, "pO2 without a correction", whole.Value(v, s).PO2Torr, plain, 1e-12)
	}
	near(t, "100 µM more", plain-whole.Value(v, Sample{ReferenceUM: 300, ReferenceAmplitude: 1.1}).PO2Torr, 0.06/0.008, 1e-12)
	near(t, "4 °C less", whole.Value(v, Sample{TemperatureC: 33}).PO2Torr-plain, 0.012/0.008, 1e-12)
	exact := Calibration{Rate: "R1", ZeroPerUS: 0.15, SlopePerUSPerTorr: 0.008}
	if got := exact.Value(v, Sample{TemperatureC: 20, ReferenceUM: 300, ReferenceAmplitude: 1}); got.CalibrationSE != 0 || got.PO2Torr != plain {
		t.Errorf("a calibration without optional numbers gives %+v", got)
	}
}

func TestMapsCountWhatIsOutsideTheCalibratedRange(t *testing.T) {
	nan := float32(math.NaN())
	rates := []float32{nan, 0.1, 0.15 + 0.008*30, 0.15 + 0.008*80, 0.15 + 0.008*90}
	m, err := MapValues(Rates{Rate: rates, RateSE: make([]float32, 5)}, whole, Sample{})
	if err != nil {
		t.Fatal(err)
	}
	if m.Negative != 1 || m.BelowRange != 1 || m.AboveRange != 2 || !math.IsNaN(float64(m.CalibrationSE[0])) {
		t.Errorf("%+v", m)
	}
	if text := whole.RangeWarning(1, 2, 4); !strings.Contains(text, "75.0 %") || !strings.Contains(text, "0 to 70 torr") {
		t.Errorf("warning %q", text)
	}
	if whole.RangeWarning(0, 0, 4) != "" {
		t.Error("a map within the range is warned about")
	}
	unknown := whole
	unknown.ToTorr = 0
	if below, above := unknown.OutsideRange(m.PO2); below+above != 0 {
		t.Error("voxels lie outside a range that is not known")
	}
	if _, err := MapValues(Rates{Rate: rates, RateSE: rates}, whole, Sample{ReferenceUM: 2, ReferenceAmplitude: 1}); err == nil {
		t.Error("a concentration correction without amplitudes was accepted")
	}
}

func TestOptionalNumbersThatMakeNoSenseAreRefused(t *testing.T) {
	for where, change := range map[string]func(*Calibration){
		"zeroSEPerUS":               func(c *Calibration) { c.ZeroSEPerUS = -1 },
		"slopeSEPerUSPerTorr":       func(c *Calibration) { c.SlopeSEPerUSPerTorr = math.NaN() },
		"correlation":               func(c *Calibration) { c.Correlation = 1.01 },
		"concentrationPerUSPerUM":   func(c *Calibration) { c.ConcentrationPerUSPerUM = math.Inf(1) },
		"concentrationSEPerUSPerUM": func(c *Calibration) { c.ConcentrationSEPerUSPerUM = -1 },
		"temperatureC":              func(c *Calibration) { c.TemperatureC = math.NaN() },
		"toTorr":                    func(c *Calibration) { c.FromTorr, c.ToTorr = 50, 40 },
	} {
		bad := whole
		change(&bad)
		wantFault(t, bad.Check(), where)
	}
	for where, s := range map[string]Sample{
		"sample.referenceUM":        {ReferenceUM: 200},
		"sample.referenceAmplitude": {ReferenceAmplitude: -1},
		"sample.temperatureC":       {TemperatureC: math.NaN()},
	} {
		wantFault(t, s.Check(), where)
	}
}

func TestPublishedLinesInEitherDirectionAndAnyUnitAreOne(t *testing.T) {
	for _, d := range Directions {
		for _, u := range Units {
			p, err := whole.Published(d.Name, u.Name)
			if err != nil {
				t.Fatal(err)
			}
			c, err := p.Calibration()
			if err != nil {
				t.Fatal(err)
			}
			// Derivatives by differences are good to 1e-9.
			near(t, d.Name+" zero", c.ZeroPerUS, whole.ZeroPerUS, 1e-13)
			near(t, d.Name+" slope", c.SlopePerUSPerTorr, whole.SlopePerUSPerTorr, 1e-15)
			near(t, d.Name+" error of zero", c.ZeroSEPerUS, whole.ZeroSEPerUS, 1e-7*whole.ZeroSEPerUS)
			near(t, d.Name+" error of slope", c.SlopeSEPerUSPerTorr, whole.SlopeSEPerUSPerTorr, 1e-7*whole.SlopeSEPerUSPerTorr)
			near(t, d.Name+" correlation", c.Correlation, whole.Correlation, 1e-7)
		}
	}
}

func TestInverseDirectionAgainstArithmeticByHand(t *testing.T) {
	p := Published{Direction: "pO2-of-rate", Unit: "torr", Rate: "R1", Constant: 0.15, ConstantSE: 0.004, Factor: 125, FactorSE: 3, Correlation: 0.6}
	c, err := p.Calibration()
	if err != nil {
		t.Fatal(err)
	}
	near(t, "slope", c.SlopePerUSPerTorr, 0.008, 1e-17)
	near(t, "its error", c.SlopeSEPerUSPerTorr, 3.0/(125*125), 1e-12) // differences
	near(t, "correlation turns its sign", c.Correlation, -0.6, 1e-8)
	p = Published{Direction: "pO2-of-rate-offset", Unit: "kPa", Rate: "R1", Constant: -2, Factor: 16}
	if c, err = p.Calibration(); err != nil {
		t.Fatal(err)
	}
	near(t, "zero", c.ZeroPerUS, 0.125, 1e-15)
	near(t, "slope per torr", c.SlopePerUSPerTorr, PascalPerTorr/1000/16, 1e-15)
	for _, bad := range []Published{
		{Direction: "sideways", Unit: "torr", Rate: "R1", Factor: 1}, {Direction: "pO2-of-rate", Unit: "bar", Rate: "R1", Factor: 1},
		{Direction: "pO2-of-rate", Unit: "torr", Rate: "R1"}, {Direction: "pO2-of-rate", Unit: "torr", Rate: "R1", Factor: -3},
	} {
		if _, err := bad.Calibration(); err == nil {
			t.Errorf("%+v was accepted", bad)
		}
	}
}

func TestUnitsConvertBothWays(t *testing.T) {
	for _, u := range Units {
		near(t, u.Name, u.ToTorr(u.FromTorr(37)), 37, 1e-13)
	}
	kPa, err := UnitNamed("kPa")
	if err != nil {
		t.Fatal(err)
	}
	near(t, "kPa", kPa.FromTorr(760), 101.325, 1e-12)
	mmHg, _ := UnitNamed("mmHg")
	near(t, "mmHg below torr", 1-mmHg.FromTorr(1), 1.425e-7, 1e-10) // the four digits printed
	_, err = UnitNamed("Torr")
	wantFault(t, err, "unit")
}

func TestCalibrationFilesReadBackTheSame(t *testing.T) {
	b := gasBench(rand.New(rand.NewPCG(2, 3)), 0.003, 0)
	f := fitted(t, b)
	c, err := f.Calibration()
	if err != nil {
		t.Fatal(err)
	}
	text, err := Record{Calibration: &c, Provenance: Provenance{Source: "fitted here", Probe: "batch 7"}, Bench: &b, Fit: f}.Text()
	if err != nil {
		t.Fatal(err)
	}
	got, err := ReadRecord(text)
	if err != nil {
		t.Fatal(err)
	}
	if *got.Calibration != c || got.Provenance.Probe != "batch 7" {
		t.Errorf("%+v, want %+v", got.Calibration, c)
	}
	again := fitted(t, *got.Bench)
	if a, b := again.Values[0], f.Values[0]; a != b {
		t.Errorf("fitted again from the file: zero %g, then %g", b, a)
	}
}

func TestCalibrationFilesThatMakeNoSenseAreRefused(t *testing.T) {
	line := `"calibration":{"rate":"R1","zeroPerUS":0.15,"slopePerUSPerTorr":0.008}`
	if _, err := ReadRecord([]byte(`{"calibrationFile":1,` + line + `}`)); err != nil {
		t.Fatal(err)
	}
	r, err := ReadRecord([]byte(`{"calibrationFile":1,"published":{"direction":"pO2-of-rate","unit":"mmHg","rate":"R2","constant":0.2,"factor":110}}`))
	if err != nil || r.Calibration == nil || !(math.Abs(r.Calibration.SlopePerUSPerTorr-1/110.0) < 1e-8) {
		t.Errorf("an inverse line gives %+v, %v", r, err)
	}
	for text, words := range map[string]string{
		`{"calibrationFile":2,` + line + `}`:                                          "format 2",
		`{` + line + `}`:                                                              "format 0",
		`{"calibrationFile":1}`:                                                       "either calibration or published",
		`{"calibrationFile":1,"slope":2,` + line + `}`:                                `"slope"`,
		`{"calibrationFile":1,` + line + `} {}`:                                       "goes on",
		`{"calibrationFile":1,"calibration":{"rate":1}}`:                              "a JSON number was found",
		`{"calibrationFile":1,"calibration":{"rate":"R1","slopePerUSPerTorr":-0.1}}`:  "a positive slope",
		`{"calibrationFile":1,"published":{"direction":"up","unit":"torr"}}`:          "published.direction",
		`{"calibrationFile":1,"calibration":{"rate":"R1","slopePerUSPerTorr":1e999}}`: "number",
		`[`: "one JSON object",
	} {
		if _, err := ReadRecord([]byte(text)); err == nil || !strings.Contains(err.Error(), words) || fault.From(err).Kind == fault.Bug {
			t.Errorf("%s gives %v, want %q", text, err, words)
		}
	}
}

func TestPlainCalibrationsKeepTheirOldText(t *testing.T) {
	text, err := json.Marshal(Calibration{Rate: "R1", ZeroPerUS: 0.15, SlopePerUSPerTorr: 0.008})
	if want := `{"rate":"R1","zeroPerUS":0.15,"slopePerUSPerTorr":0.008}`; err != nil || string(text) != want {
		t.Errorf("%s, want %s", text, want)
	}
}

func TestEnhancementAgainstTheTable(t *testing.T) {
	e := Enhancement{M: 3, KTorr: 3}
	last := 0.0
	for _, row := range table(t, "oer.csv") {
		near(t, "OER", e.At(row[0]), row[1], 6e-12) // twelve digits
		near(t, "OER over m", e.At(row[0])/e.M, row[2], 6e-13)
		if !(e.At(row[0]) > last) {
			t.Errorf("OER falls at %g torr", row[0])
		}
		last = e.At(row[0])
	}
	near(t, "limit", e.At(math.Inf(1)), 3, 0)
}

func TestEnhancementHasNoPoleAndKeepsNaN(t *testing.T) {
	e := Enhancement{M: 2.9, KTorr: 3.28}
	for _, p := range []float64{-3.28, -3.27, -100, -1e-9, 0} {
		near(t, "OER at or below zero", e.At(p), 1, 0)
	}
	m, err := e.Map([]float32{float32(math.NaN()), -3.28, 3.28}, []float32{1, 1, 1})
	if err != nil || m.Raised != 1 || !math.IsNaN(float64(m.OER[0])) {
		t.Errorf("%+v, %v", m, err)
	}
	near(t, "half the effect", float64(m.OER[2]), (2.9+1)/2, 1e-6) // float32
	const h = 1e-4
	near(t, "slope", e.Slope(5), (e.At(5+h)-e.At(5-h))/(2*h), 1e-8) // second-order difference
	for where, bad := range map[string]Enhancement{"enhancement.m": {0.5, 3}, "enhancement.kTorr": {3, 0}} {
		wantFault(t, bad.Check(), where)
	}
}
