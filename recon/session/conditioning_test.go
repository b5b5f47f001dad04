package session

import (
	"encoding/json"
	"math"
	"slices"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/phantom"
	"torrloom/recon/quality"
)

// scrambledDemo returns the demo object measured with 400 shots in an order that jumps over the half sphere.
func scrambledDemo(t testing.TB) *acquisition.Acquisition {
	t.Helper()
	pr := phantom.Protocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{0.4, 0.7, 1.2, 2.1, 3.6, 6.3, 11, 32}, EchoTimeUS: 1.1,
		Inversion: 1.82, GradientMTPerM: 18, DwellNS: 6, Samples: 320, TimeZeroSample: 159.4, PhaseRad: 0.7, NoiseSD: 14, Seed: 21}
	golden := phantom.GoldenHalfSphere(400)
	for i := range golden {
		pr.Directions = append(pr.Directions, golden[i*151%400])
	}
	a, err := phantom.Demo().Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	demo, err := phantom.DemoAcquisition(false)
	if err != nil {
		t.Fatal(err)
	}
	a.Optional = demo.Optional // the calibration
	return a
}

// The faults of the agreed set.
var (
	weakShots, noiseShots, turnedShots = []int{37, 250}, []int{101, 333}, []int{180, 396}
)

const (
	plantedDriftKHz = 90.0
	plantedLateNS   = 3.0
)

func spoiltDemo(t testing.TB) *acquisition.Acquisition {
	a := scrambledDemo(t)
	echo := 0.0
	for _, v := range a.Trace(a.ReferenceDelay(), 0) {
		echo = math.Max(echo, math.Hypot(float64(real(v)), float64(imag(v))))
	}
	phantom.DriftFrequency(a, 0, plantedDriftKHz)
	phantom.Weaken(a, weakShots[0], 0.5)
	phantom.Weaken(a, weakShots[1], 0.7)
	phantom.Silence(a, noiseShots[0], 14, 5)
	phantom.Silence(a, noiseShots[1], 14, 6)
	phantom.Turn(a, turnedShots[0], 2)
	phantom.Turn(a, turnedShots[1], math.Pi)
	phantom.AddOffset(a, complex(0.008*echo, -0.006*echo)) // 1 %
	phantom.MistakeTimeZero(a, plantedLateNS)
	return a
}

// medians returns the median pO2 of the inserts of the demo under settings.
func medians(t *testing.T, a *acquisition.Acquisition, s condition.Settings) []float64 {
	t.Helper()
	text, err := json.Marshal(map[string]any{"conditioning": s, "reconstruction": map[string]any{"matrix": 40, "fieldOfViewMM": 31}})
	if err != nil {
		t.Fatal(err)
	}
	r, err := Run(a, "conditioning", text, 2)
	if err != nil {
		t.Fatal(err)
	}
	var out []float64
	for _, in := range phantom.DemoInserts {
		median, values := insertErrors(r, in)
		if len(values) < 20 {
			t.Fatalf("%s: %d voxels", in.Name, len(values))
		}
		out = append(out, median)
	}
	return out
}

// furthest returns the largest distance of two lists of medians.
func furthest(a, b []float64) float64 {
	worst := 0.0
	for i := range a {
		worst = math.Max(worst, math.Abs(a[i]-b[i]))
	}
	return worst
}

// named lists the shots that findings of level doubt or stop name.
func named(findings []quality.Finding) map[string][]int {
	out := map[string][]int{}
	for _, f := range findings {
		if f.Level != quality.Fine && len(f.Shots) > 0 {
			out[f.Check] = append(out[f.Check], f.Shots...)
		}
	}
	return out
}

func valueOf(t *testing.T, r *quality.Report, check string) float64 {
	t.Helper()
	for _, f := range r.Findings {
		if f.Check == check {
			return f.Value
		}
	}
	t.Fatalf("no finding of %s", check)
	return 0
}

func TestBrokenShotsAndErrorsAreNamedAndPutRight(t *testing.T) {
	clean, spoilt := scrambledDemo(t), spoiltDemo(t)
	// Nothing is taken off before: the page starts with trace-ends, which would hide the offset.
	before := condition.Defaults()
	before.Offset = "none"
	report := quality.Examine(spoilt, before, quality.Known{})
	for _, f := range report.Findings {
		if f.Level != quality.Fine {
			t.Logf("%s %s: %s %v", f.Level, f.Check, f.Text, f.Shots)
		}
	}
	got := named(report.Findings)
	want := map[string][]int{"uneven-shots": weakShots, "silent-shots": noiseShots, "shot-phase": turnedShots}
	for check, shots := range want {
		if !slices.Equal(got[check], shots) {
			t.Errorf("%s names %v, planted %v", check, got[check], shots)
		}
		delete(got, check)
	}
	if len(got) != 0 {
		t.Errorf("others are named: %v", got)
	}
	if drift := valueOf(t, report, "frequency-drift"); !(math.Abs(drift/plantedDriftKHz-1) <= 0.05) { // the agreed 5 %
		t.Errorf("drift of %.2f kHz, planted %g", drift, plantedDriftKHz)
	}
	if late := valueOf(t, report, "time-zero"); !(math.Abs(late-plantedLateNS) <= 0.2) { // the agreed 0.2 ns
		t.Errorf("time zero %.3f ns late, planted %g", late, plantedLateNS)
	}
	if share := valueOf(t, report, "offset"); !(math.Abs(share-1) <= 0.1) {
		t.Errorf("offset of %.3f %%, planted 1", share)
	}
	truth := medians(t, clean, condition.Defaults())
	wrong, right := medians(t, spoilt, before), medians(t, spoilt, report.Proposed)
	t.Logf("medians: clean %.2f, spoilt %.2f, put right %.2f torr", truth, wrong, right)
	t.Logf("off by %.2f torr before, %.2f after", furthest(wrong, truth), furthest(right, truth))
	if off := furthest(right, truth); !(off <= 1) { // the agreed 1 torr
		t.Errorf("after conditioning the medians are off by %.2f torr", off)
	}
	if off := furthest(wrong, truth); !(off > furthest(right, truth)) {
		t.Errorf("the faults move the medians by %.2f torr only, no more than what is left", off)
	}
	again := quality.Examine(spoilt, report.Proposed, quality.Known{})
	for _, f := range again.Findings {
		if f.Level != quality.Fine {
			t.Errorf("after conditioning: %s %s: %s", f.Level, f.Check, f.Text)
		}
	}
}

func TestProposalsLeaveCleanDataAlone(t *testing.T) {
	a := scrambledDemo(t)
	report := quality.Examine(a, condition.Defaults(), quality.Known{})
	for _, f := range report.Findings {
		if f.Level != quality.Fine {
			t.Errorf("%s %s: %s", f.Level, f.Check, f.Text)
		}
	}
	off := furthest(medians(t, a, report.Proposed), medians(t, a, condition.Defaults()))
	t.Logf("proposals move the medians by %.3f torr", off)
	if !(off < 0.1) { // the agreed 0.1 torr
		t.Errorf("proposals move the medians of clean data by %.3f torr", off)
	}
}
