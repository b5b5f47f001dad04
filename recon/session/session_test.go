package session

import (
	"encoding/json"
	"fmt"
	"math"
	"reflect"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/oxygen"
	"torrloom/recon/phantom"
	"torrloom/recon/recipe"
)

// small is a quick 2D acquisition of a disc with a sequence and its own calibration.
func small(t testing.TB, sequence acquisition.Sequence) *acquisition.Acquisition {
	t.Helper()
	s := phantom.Shape{Dim: 2, SemiMM: [3]float64{8, 7}, CentreMM: [3]float64{1, -1}}
	p := phantom.Sum(2, phantom.Body{Shape: s, Density: 2, R1PerUS: 0.3, R2PerUS: 0.5})
	a, err := p.Acquire(phantom.Protocol{Sequence: sequence, DelayUS: []float64{0.4, 0.8, 1.5, 3, 6, 25}, Inversion: 1.8,
		Directions: phantom.EqualAngles(60), GradientMTPerM: 18, DwellNS: 8, Samples: 240, TimeZeroSample: 119.6, PhaseRad: 2, NoiseSD: 0.3, Seed: 2})
	if err != nil {
		t.Fatal(err)
	}
	zero1, slope1, zero2, slope2 := 0.2, 0.005, 0.3, 0.01
	a.Optional.R1ZeroPerUS, a.Optional.R1SlopePerUSPerTorr = &zero1, &slope1
	a.Optional.R2ZeroPerUS, a.Optional.R2SlopePerUSPerTorr = &zero2, &slope2
	return a
}

func TestEverySequenceGivesItsRateAndPO2(t *testing.T) {
	for sequence, want := range map[acquisition.Sequence]struct{ rate, pO2 float64 }{
		acquisition.InversionRecovery: {0.3, 20}, acquisition.SaturationRecovery: {0.3, 20}, acquisition.EchoDecay: {0.5, 20},
	} {
		r, err := Run(small(t, sequence), "data", nil, 2)
		if err != nil {
			t.Fatal(sequence, err)
		}
		rate, pO2 := r.Derived.Numbers.Rate, r.Derived.Numbers.PO2
		// The disc is uniform; its rim and the noise keep the median within a hundredth of the rate.
		if !(math.Abs(rate.Median-want.rate) <= 0.01*want.rate) || !(math.Abs(pO2.Median-want.pO2) <= 1) {
			t.Errorf("%s: median rate %.4f, want %g; median pO2 %.2f, want %g", sequence, rate.Median, want.rate, pO2.Median, want.pO2)
		}
	}
}

func TestSameDataAndRecipeGiveTheSameNumbers(t *testing.T) {
	a := small(t, acquisition.InversionRecovery)
	text := []byte(`{"reconstruction":{"matrix":40,"window":"cosine","cutoff":0.8},"mask":{"amplitudeFraction":0.3}}`)
	first, err := Run(a, "data", text, 1)
	if err != nil {
		t.Fatal(err)
	}
	whole, err := json.Marshal(first.Plan.Recipe)
	if err != nil {
		t.Fatal(err)
	}
	again, err := Run(a, "data", whole, 2) // the written recipe, another number of workers
	if err != nil {
		t.Fatal(err)
	}
	for i, p := range first.Derived.PO2 {
		if q := again.Derived.PO2[i]; p != q && (p == p || q == q) {
			t.Fatalf("voxel %d: %v, then %v", i, p, q)
		}
	}
	if first.Plan.Keys != again.Plan.Keys {
		t.Errorf("keys %v, then %v", first.Plan.Keys, again.Plan.Keys)
	}
}

func planOf(t *testing.T, a *acquisition.Acquisition, data string, text string) *Plan {
	t.Helper()
	r, err := recipe.Parse([]byte(text), recipe.Defaults(a, 20))
	if err != nil {
		t.Fatal(err)
	}
	p, err := NewPlan(a, data, 20, r, 2)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// Every setting changes the keys from its own stage on and no earlier one, as its catalogue row says. Settings of another
// encoding are left out where they cannot be planned.
func TestASettingChangesTheKeysFromItsStageOn(t *testing.T) {
	a := small(t, acquisition.InversionRecovery)
	base := planOf(t, a, "data", `{}`)
	stages := []string{"measure", "reconstruct", "fit", "derive"}
	for _, s := range recipe.Catalogue() {
		value := otherValue(t, base.Recipe, s)
		if value == "" {
			continue
		}
		group, leaf, _ := strings.Cut(s.Path, ".")
		text := `{"` + group + `":{"` + leaf + `":` + value + `}}`
		if strings.HasPrefix(leaf, "reference") { // a reference is a concentration and an amplitude
			text = `{"sample":{"referenceUM":10,"referenceAmplitude":1,"` + leaf + `":` + value + `}}`
		}
		changed := planOf(t, a, "data", text)
		before, after := reflect.ValueOf(base.Keys), reflect.ValueOf(changed.Keys)
		reached := false
		for i, stage := range stages {
			reached = reached || stage == s.Stage
			if differs := before.Field(i).String() != after.Field(i).String(); differs != reached {
				t.Errorf("%s: key of stage %s differs: %v", s.Path, stage, differs)
			}
		}
	}
	if planOf(t, a, "other data", `{}`).Keys.Measure == base.Keys.Measure {
		t.Error("other data share a key")
	}
}

// otherValue returns a valid value of a setting that differs from the recipe's, as JSON; "" where these data allow none.
func otherValue(t *testing.T, r recipe.Recipe, s recipe.Setting) string {
	t.Helper()
	now, there := r.Value(s.Path)
	if !there {
		t.Errorf("%s is not in the recipe", s.Path)
		return ""
	}
	if s.Path == "calibration.rate" || s.Path == "conditioning.offset" {
		return map[string]string{"conditioning.offset": `"none"`}[s.Path] // the data give R1 and have no baseline shots
	}
	switch v := now.(type) {
	case string:
		for _, c := range s.Choices {
			if c.Value != v && (s.Path != "reconstruction.method" || c.Value == "gridding") {
				return `"` + c.Value + `"`
			}
		}
		t.Errorf("%s has no other choice", s.Path)
	case []int:
		return `[1]`
	case int:
		return fmt.Sprint(min(v+8, int(s.Max)))
	case float64:
		for _, other := range []float64{v + s.Step, v - s.Step, v + s.Step/8} {
			if other >= s.Min && other <= s.Max && other != v {
				return fmt.Sprint(other)
			}
		}
		t.Errorf("%s has no other value", s.Path)
	}
	return ""
}

func TestJobsCoverEveryDelayAndVoxelOnce(t *testing.T) {
	for _, delays := range []int{1, 2, 7, 10} {
		for _, workers := range []int{1, 2, 3, 16} {
			next := 0
			for _, job := range splitFrames(delays, workers) {
				if len(job) == 0 {
					t.Errorf("%d delays, %d workers: an empty job", delays, workers)
				}
				for _, d := range job {
					if d != next {
						t.Errorf("%d delays, %d workers: delay %d comes after %d", delays, workers, d, next-1)
					}
					next++
				}
			}
			if next != delays {
				t.Errorf("%d delays, %d workers: %d covered", delays, workers, next)
			}
		}
	}
	for _, voxels := range []int{1, 5, 4096} {
		at := 0
		for _, job := range splitVoxels(voxels, 3) {
			if job[0] != at || job[1] <= at {
				t.Errorf("%d voxels: job %v after %d", voxels, job, at)
			}
			at = job[1]
		}
		if at != voxels {
			t.Errorf("%d voxels: %d covered", voxels, at)
		}
	}
}

func TestImpossibleRunsAreRefusedBeforeTheyStart(t *testing.T) {
	a := small(t, acquisition.InversionRecovery)
	for text, want := range map[string]fault.Kind{
		`{"calibration":{"rate":"R2","zeroPerUS":0.3,"slopePerUSPerTorr":0.01}}`: fault.BadSetting,
		`{"reconstruction":{"window":"blackmail"}}`:                              fault.BadSetting,
	} {
		if _, err := Run(a, "data", []byte(text), 1); err == nil || fault.From(err).Kind != want {
			t.Errorf("%s gives %v, want kind %s", text, err, want)
		}
	}
	big, err := phantom.DemoAcquisition(false)
	if err != nil {
		t.Fatal(err)
	}
	_, err = Run(big, "demo", []byte(`{"reconstruction":{"matrix":512}}`), 1)
	if err == nil || fault.From(err).Kind != fault.TooLarge || !strings.Contains(err.Error(), "GiB") {
		t.Errorf("512³ voxels give %v, want a too-large fault with the numbers", err)
	}
}

// The fate of every voxel, by hand.
func TestDeriveDecidesTheFateOfEachVoxel(t *testing.T) {
	nan := float32(math.NaN())
	r := recipe.Defaults(small(t, acquisition.InversionRecovery), 20)
	r.Mask.AmplitudeFraction = 0.5
	r.Calibration.ZeroPerUS, r.Calibration.SlopePerUSPerTorr = 0.2, 0.01
	reference := []float32{nan, 0.4, 1, 1, 1, 1, 1, 1, 1}
	rate := []float32{nan, 0.3, 0.29, 0.15, nan, nan, nan, nan, 0.25}
	se := []float32{nan, 0.01, 0.01, 0.01, nan, nan, nan, nan, 0.02}
	status := []uint8{0, 1, 1, 1, 2, 3, 4, 5, 1}
	d, err := Derive(r, Fitted{Reference: reference, Rates: oxygen.Rates{Rate: rate, RateSE: se}, Status: status})
	if err != nil {
		t.Fatal(err)
	}
	want := []Fate{OutsideView, BelowMask, Answered, Negative, NoSignal, BelowRange, AboveRange, WrongSign, Answered}
	for i, f := range want {
		if Fate(d.Fate[i]) != f {
			t.Errorf("voxel %d: %s, want %s", i, Fates[d.Fate[i]], Fates[f])
		}
	}
	for i, pO2 := range []float64{2: 9, 3: -5, 8: 5} {
		answered := i == 2 || i == 3 || i == 8
		if got := float64(d.PO2[i]); answered != (got == got) || answered && !(math.Abs(got-pO2) <= 1e-5) {
			t.Errorf("voxel %d: pO2 %v, want %v", i, got, pO2)
		}
	}
	n := d.Numbers
	if n.Negative != 1 || n.PO2.Count != 3 || !(math.Abs(n.PO2.Median-5) <= 1e-5) || !(math.Abs(n.PO2.MedianSE-1) <= 1e-5) {
		t.Errorf("numbers %+v", *n.PO2)
	}
	// At or below 2.5, 5 and 10 torr, the negative one counted, of three.
	for i, share := range []float64{1. / 3, 2. / 3, 1} {
		if !(math.Abs(n.PO2.Fractions[i].Share-share) <= 1e-12) {
			t.Errorf("fraction at %g torr is %g, want %g", n.PO2.Fractions[i].Threshold, n.PO2.Fractions[i].Share, share)
		}
	}
	if len(Fates) != int(WrongSign)+1 || len(fateOfStatus) != 6 {
		t.Errorf("%d fates, %d of a status", len(Fates), len(fateOfStatus))
	}
}

// Quantiles as R's type 7 and numpy's default define them: 1..5 at 0.25 is 2, at 0.1 is 1.4.
func TestQuantilesInterpolateBetweenOrderStatistics(t *testing.T) {
	v := []float64{1, 2, 3, 4, 5}
	for q, want := range map[float64]float64{0: 1, 0.1: 1.4, 0.25: 2, 0.5: 3, 1: 5} {
		if got := quantile(v, q); !(math.Abs(got-want) <= 1e-15) {
			t.Errorf("quantile %g is %g, want %g", q, got, want)
		}
	}
}

func TestHistogramCountsEveryVoxelOnce(t *testing.T) {
	var values, se []float32
	var fates []uint8
	for i := range 1000 {
		values, se, fates = append(values, float32(i*i)), append(se, 1), append(fates, uint8(Answered))
	}
	s := summarise("torr", fates, values, se, nil)
	total := s.Below + s.Above
	for _, c := range s.Counts {
		total += c
	}
	if total != 1000 || len(s.Edges) != len(s.Counts)+1 || s.Below == 0 || s.Above == 0 {
		t.Errorf("%d voxels counted, %d below and %d above", total, s.Below, s.Above)
	}
	if flat := summarise("torr", []uint8{3, 3}, []float32{7, 7}, []float32{1, 1}, nil); flat.Counts == nil {
		t.Error("equal values have no histogram")
	}
}

func TestEveryMethodIsThere(t *testing.T) {
	for _, m := range recipe.Methods {
		if m.Value != singlePointMethod && spokeMethods[m.Value] == nil {
			t.Errorf("method %s has no reconstruction", m.Value)
		}
	}
	if len(spokeMethods)+1 != len(recipe.Methods) {
		t.Errorf("%d methods for spokes and single point, %d rows", len(spokeMethods), len(recipe.Methods))
	}
}

func TestAPanicInAJobBecomesABugFault(t *testing.T) {
	err := (&runner{}).beside(2, func(j int) error {
		if j == 1 {
			panic("planted")
		}
		return nil
	})
	if err == nil || fault.From(err).Kind != fault.Bug {
		t.Errorf("a panic gives %v", err)
	}
}
