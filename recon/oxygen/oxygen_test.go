package oxygen

import (
	"encoding/csv"
	"errors"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"torrloom/recon/fault"
)

// table reads the numbers of a file of testdata/reference, without its header row.
func table(t *testing.T, name string) [][]float64 {
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
	var rows [][]float64
	for _, record := range records[1:] {
		row := make([]float64, len(record))
		for i, field := range record {
			if row[i], err = strconv.ParseFloat(field, 64); err != nil {
				t.Fatalf("%s: %v", name, err)
			}
		}
		rows = append(rows, row)
	}
	return rows
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

func wantFault(t *testing.T, err error, where string) {
	t.Helper()
	var f *fault.Fault
	if !errors.As(err, &f) || f.Kind != fault.BadSetting || !strings.Contains(f.Where, where) {
		t.Errorf("got %v, want a bad-setting fault at %s", err, where)
	}
}

func TestWaterVapourAgainstWagnerAndPruss(t *testing.T) {
	for _, row := range table(t, "water_vapour.csv") {
		torr, err := WaterVapourTorr(row[0])
		if err != nil {
			t.Fatal(err)
		}
		near(t, "water vapour in Pa", torr*PascalPerTorr, row[1], 6e-5) // the table has four decimals
		near(t, "water vapour in torr", torr, row[2], 6e-5)
		near(t, "water vapour by another equation", torr, row[3], 0.005) // IF97 is a fit of its own
	}
}

func TestGasMixturesAgainstTheTable(t *testing.T) {
	for _, row := range table(t, "gas_mixtures.csv") {
		gas := Gas{OxygenFraction: row[0] / 100, PressureTorr: 760, TemperatureC: row[1]}
		dry, err := gas.PO2Torr()
		if err != nil {
			t.Fatal(err)
		}
		gas.Humid = true
		humid, err := gas.PO2Torr()
		if err != nil {
			t.Fatal(err)
		}
		// The table has six digits.
		near(t, "dry", dry, row[2], 6e-6*row[2])
		near(t, "humid", humid, row[3], 6e-6*row[3])
		near(t, "humid in kPa", KPa(humid), row[4], 6e-6*row[4])
	}
}

func TestPressureUnitsFollowTheDefinitionOfTheTorr(t *testing.T) {
	near(t, "one atmosphere", KPa(760), 101.325, 1e-13)
	near(t, "one kPa", Torr(1), 7.500616827, 5e-10) // ten printed digits of the published factor
	near(t, "there and back", Torr(KPa(37.5)), 37.5, 1e-13)
}

func TestGasWithoutAnAnswerIsRefused(t *testing.T) {
	good := Gas{OxygenFraction: 0.05, PressureTorr: 760, TemperatureC: 37, Humid: true}
	for _, c := range []struct {
		where  string
		change func(*Gas)
	}{
		{"oxygenFraction", func(g *Gas) { g.OxygenFraction = 5 }},
		{"oxygenFraction", func(g *Gas) { g.OxygenFraction = -0.1 }},
		{"oxygenFraction", func(g *Gas) { g.OxygenFraction = math.NaN() }},
		{"pressureTorr", func(g *Gas) { g.PressureTorr = 0 }},
		{"pressureTorr", func(g *Gas) { g.PressureTorr = math.Inf(1) }},
		{"temperatureC", func(g *Gas) { g.TemperatureC = 310.15 }}, // kelvin by mistake: water boils
		{"temperatureC", func(g *Gas) { g.TemperatureC = -5 }},
		{"temperatureC", func(g *Gas) { g.TemperatureC = math.NaN() }},
		{"temperatureC", func(g *Gas) { g.TemperatureC = 374 }},
	} {
		gas := good
		c.change(&gas)
		_, err := gas.PO2Torr()
		wantFault(t, err, c.where)
	}
	dry := Gas{OxygenFraction: 0.05, PressureTorr: 760, TemperatureC: -5}
	if _, err := dry.PO2Torr(); err != nil {
		t.Errorf("a dry gas needs no temperature: %v", err)
	}
}

func TestMapInvertsTheCalibration(t *testing.T) {
	c := Calibration{Rate: "R1", ZeroPerUS: 0.15, SlopePerUSPerTorr: 0.008}
	truth := []float64{-3, 0, 2.5, 40, 159}
	rate, rateSE := make([]float32, len(truth)), make([]float32, len(truth))
	for v, p := range truth {
		rate[v], rateSE[v] = float32(c.ZeroPerUS+c.SlopePerUSPerTorr*p), 0.004
	}
	po2, se, err := Map(rate, rateSE, c)
	if err != nil {
		t.Fatal(err)
	}
	for v, p := range truth {
		// A float32 rate of up to 1.5 /µs is rounded by 6e-8, which the slope makes 8e-6 torr; the result adds as much.
		near(t, "pO2", float64(po2[v]), p, 2e-5)
		near(t, "its standard error", float64(se[v]), 0.5, 1e-7)
	}
}

func TestMapKeepsNaNAndCountsNegatives(t *testing.T) {
	c := Calibration{Rate: "R2", ZeroPerUS: 0.3, SlopePerUSPerTorr: 0.01}
	nan := float32(math.NaN())
	po2, se, err := Map([]float32{nan, 0.2, 0.301, 0.299, nan}, []float32{nan, 0.01, 0.01, 0.01, nan}, c)
	if err != nil {
		t.Fatal(err)
	}
	for _, v := range []int{0, 4} {
		if !math.IsNaN(float64(po2[v])) || !math.IsNaN(float64(se[v])) {
			t.Errorf("voxel %d without a rate got pO2 %g ± %g", v, po2[v], se[v])
		}
	}
	near(t, "negative pO2", float64(po2[1]), -10, 1e-5) // float32 rounding of the rate over the slope
	if got := Negatives(po2); got != 2 {
		t.Errorf("%d voxels counted below zero, want 2", got)
	}
}

func TestCalibrationWithoutAnAnswerIsRefused(t *testing.T) {
	good := Calibration{Rate: "R1", ZeroPerUS: 0.15, SlopePerUSPerTorr: 0.008}
	if err := good.Check(); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		where  string
		change func(*Calibration)
	}{
		{"rate", func(c *Calibration) { c.Rate = "" }},
		{"rate", func(c *Calibration) { c.Rate = "T1" }},
		{"zeroPerUS", func(c *Calibration) { c.ZeroPerUS = -0.1 }},
		{"zeroPerUS", func(c *Calibration) { c.ZeroPerUS = math.NaN() }},
		{"zeroPerUS", func(c *Calibration) { c.ZeroPerUS = math.Inf(1) }},
		{"slopePerUSPerTorr", func(c *Calibration) { c.SlopePerUSPerTorr = 0 }},
		{"slopePerUSPerTorr", func(c *Calibration) { c.SlopePerUSPerTorr = -0.008 }},
		{"slopePerUSPerTorr", func(c *Calibration) { c.SlopePerUSPerTorr = math.NaN() }},
	} {
		bad := good
		c.change(&bad)
		_, _, err := Map([]float32{1}, []float32{1}, bad)
		wantFault(t, err, c.where)
	}
	if _, _, err := Map([]float32{1, 2}, []float32{1}, good); err == nil {
		t.Error("a map with one standard error too few was accepted")
	}
}
