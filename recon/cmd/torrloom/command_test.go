package main

import (
	"bytes"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/exporter"
	"torrloom/recon/phantom"
)

// writeDisc writes a quick 2D inversion recovery into folder and returns its path.
func writeDisc(t *testing.T, folder string, calibrated bool) string {
	t.Helper()
	s := phantom.Shape{Dim: 2, SemiMM: [3]float64{8, 7}, CentreMM: [3]float64{1, -1}}
	p := phantom.Sum(2, phantom.Body{Shape: s, Density: 2, R1PerUS: 0.3})
	a, err := p.Acquire(phantom.Protocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{0.4, 0.8, 1.5, 3, 6, 25}, Inversion: 1.8,
		Directions: phantom.EqualAngles(60), GradientMTPerM: 18, DwellNS: 8, Samples: 240, TimeZeroSample: 119.6, NoiseSD: 0.3})
	if err != nil {
		t.Fatal(err)
	}
	if calibrated {
		zero, slope := 0.2, 0.005
		a.Optional.R1ZeroPerUS, a.Optional.R1SlopePerUSPerTorr = &zero, &slope
	}
	var file bytes.Buffer
	if err := exporter.Acquisition(&file, a); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(folder, "disc.npz")
	write(t, path, file.Bytes())
	return path
}

func write(t *testing.T, path string, data []byte) {
	t.Helper()
	if err := os.WriteFile(path, data, 0o644); err != nil {
		t.Fatal(err)
	}
}

func run(args ...string) (code int, stdout, stderr string) {
	var out, errs bytes.Buffer
	code = command(args, &out, &errs)
	return code, out.String(), errs.String()
}

func readRecord(t *testing.T, folder string) record {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(folder, "run.json"))
	if err != nil {
		t.Fatal(err)
	}
	var r record
	if err := json.Unmarshal(text, &r); err != nil {
		t.Fatal(err)
	}
	return r
}

func exists(path string) bool { _, err := os.Stat(path); return err == nil }

func TestRunWritesMapsAndRecord(t *testing.T) {
	folder := t.TempDir()
	path, out := writeDisc(t, folder, true), filepath.Join(folder, "out")
	code, stdout, stderr := run("run", "-out", out, path)
	if code != exitDone || stderr != "" || !strings.Contains(stdout, "median pO2") {
		t.Fatalf("code %d, output %q, errors %q", code, stdout, stderr)
	}
	for _, name := range []string{"po2.nii.gz", "po2-se.nii.gz", "rate.nii.gz", "amplitude.nii.gz", "mask.nii.gz", "run.json"} {
		if !exists(filepath.Join(out, "disc", name)) {
			t.Errorf("%s is missing", name)
		}
	}
	r := readRecord(t, filepath.Join(out, "disc"))
	if len(r.Inputs) != 1 || len(r.Inputs[0].SHA256) != 64 || r.Recipe.Reconstruction.Method != "back-projection" || r.Counts["in the map"] == 0 || len(r.Timings) != 5 || len(r.Findings) < 20 || !r.MadeUp {
		t.Errorf("record %+v", r)
	}
	if left, _ := filepath.Glob(filepath.Join(out, ".torrloom-*")); len(left) != 0 {
		t.Errorf("work folders stay behind: %v", left)
	}
}

// The recipe of the record, run again, gives the same maps to the bit.
func TestRecordedRecipeGivesTheSameMaps(t *testing.T) {
	folder := t.TempDir()
	path := writeDisc(t, folder, true)
	recipePath := filepath.Join(folder, "r.json")
	write(t, recipePath, []byte(`{"recipe":1,"reconstruction":{"method":"back-projection","matrix":48,"fieldOfViewMM":24,"window":"hann","cutoff":0.9},"mask":{"amplitudeFraction":0.3}}`))
	first, second := filepath.Join(folder, "a"), filepath.Join(folder, "b")
	if code, _, stderr := run("run", "-recipe", recipePath, "-out", first, path); code != exitDone {
		t.Fatal(stderr)
	}
	whole, err := json.Marshal(readRecord(t, filepath.Join(first, "disc")).Recipe)
	if err != nil {
		t.Fatal(err)
	}
	write(t, recipePath, whole)
	if code, _, stderr := run("run", "-recipe", recipePath, "-out", second, "-workers", "3", path); code != exitDone {
		t.Fatal(stderr)
	}
	for _, name := range []string{"po2.nii.gz", "rate.nii.gz", "amplitude.nii.gz", "mask.nii.gz"} {
		a, errA := os.ReadFile(filepath.Join(first, "disc", name))
		b, errB := os.ReadFile(filepath.Join(second, "disc", name))
		if errA != nil || errB != nil || !bytes.Equal(a, b) {
			t.Errorf("%s differs between the runs", name)
		}
	}
}

func TestWithoutCalibrationTheRateMapIsMadeAndPO2IsNot(t *testing.T) {
	folder := t.TempDir()
	out := filepath.Join(folder, "out")
	if code, _, stderr := run("run", "-out", out, writeDisc(t, folder, true)); code != exitDone {
		t.Fatal(stderr)
	}
	code, stdout, _ := run("run", "-out", out, writeDisc(t, folder, false)) // over the results of a calibrated run
	if code != exitDone || !strings.Contains(stdout, "no calibration") {
		t.Errorf("code %d, output %q", code, stdout)
	}
	if exists(filepath.Join(out, "disc", "po2.nii.gz")) || !exists(filepath.Join(out, "disc", "rate.nii.gz")) {
		t.Error("a pO2 map lies beside a run without calibration, or the rate map is missing")
	}
}

func TestExitCodes(t *testing.T) {
	folder := t.TempDir()
	path := writeDisc(t, folder, true)
	broken := filepath.Join(folder, "broken.npz")
	write(t, broken, []byte("PK\x03\x04 not an archive"))
	wrong, empty := filepath.Join(folder, "wrong.json"), filepath.Join(folder, "nothing.json")
	write(t, wrong, []byte(`{"reconstruction":{"matix":64}}`))
	write(t, empty, []byte(`{"rates":{"minPerUS":5,"maxPerUS":6}}`))
	out := filepath.Join(folder, "out")
	for _, c := range []struct {
		args []string
		code int
		says string
	}{
		{nil, exitUsage, "usage"},
		{[]string{"paint"}, exitUsage, `"paint" is not known`},
		{[]string{"run"}, exitUsage, "usage"},
		{[]string{"run", "-colour", path}, exitUsage, "-colour"},
		{[]string{"run", "-out", out, broken}, exitRefused, "broken.npz"},
		{[]string{"run", "-out", out, filepath.Join(folder, "absent.npz")}, exitRefused, "cannot be read"},
		{[]string{"run", "-out", out, "-recipe", wrong, path}, exitRefused, `key "matix" is not known`},
		{[]string{"run", "-out", out, "-recipe", empty, path}, exitNothing, "no voxel has a rate"},
		{[]string{"demo"}, exitUsage, "usage"},
	} {
		code, _, stderr := run(c.args...)
		if code != c.code || !strings.Contains(stderr, c.says) {
			t.Errorf("%v: code %d, want %d; errors %q, want %q", c.args, code, c.code, stderr, c.says)
		}
	}
}

func TestARefusedFileDoesNotStopTheNext(t *testing.T) {
	folder := t.TempDir()
	path, broken := writeDisc(t, folder, true), filepath.Join(folder, "broken.npz")
	write(t, broken, []byte("no"))
	out := filepath.Join(folder, "out")
	code, _, stderr := run("run", "-out", out, broken, path)
	if code != exitRefused || !strings.Contains(stderr, "broken.npz") || !exists(filepath.Join(out, "disc", "run.json")) {
		t.Errorf("code %d, errors %q", code, stderr)
	}
}

func TestDemoFileOpensAgain(t *testing.T) {
	folder := t.TempDir()
	path := filepath.Join(folder, "demo.npz")
	if code, _, stderr := run("demo", path); code != exitDone {
		t.Fatal(stderr)
	}
	out := filepath.Join(folder, "out")
	if code, _, stderr := run("run", "-out", out, path); code != exitDone {
		t.Fatal(stderr)
	}
	if r := readRecord(t, filepath.Join(out, "demo")); !r.MadeUp || r.PO2 == nil || r.PO2.Count < 20000 {
		t.Errorf("record of the demo: made up %v, %+v", r.MadeUp, r.PO2)
	}
}

func TestCheckSaysWhatIsWrongAndStops(t *testing.T) {
	folder := t.TempDir()
	good := writeDisc(t, folder, true)
	code, stdout, stderr := run("check", good)
	if code != exitDone || stderr != "" || !strings.Contains(stdout, "disc.npz: ") || !strings.Contains(stdout, "signal-to-noise") {
		t.Errorf("clean file: code %d, output %q, errors %q", code, stdout, stderr)
	}
	bad := filepath.Join(folder, "bad.npz")
	writeNoise(t, bad)
	code, stdout, _ = run("check", "-json", good, bad)
	lines := strings.Split(strings.TrimSpace(stdout), "\n")
	if code != exitStop || len(lines) != 2 {
		t.Fatalf("noise: code %d, %d lines", code, len(lines))
	}
	var said struct {
		Findings []struct{ Level, Check, Advice string }
	}
	if err := json.Unmarshal([]byte(lines[1]), &said); err != nil {
		t.Fatal(err)
	}
	if said.Findings[0].Level != "stop" || said.Findings[0].Advice == "" {
		t.Errorf("the first finding is %+v", said.Findings[0])
	}
}

// writeNoise writes an acquisition of nothing but noise.
func writeNoise(t *testing.T, path string) {
	t.Helper()
	a, err := phantom.DemoAcquisition(true)
	if err != nil {
		t.Fatal(err)
	}
	for s := range a.Shots {
		phantom.Silence(a, s, 10, uint64(s))
	}
	var file bytes.Buffer
	if err := exporter.Acquisition(&file, a); err != nil {
		t.Fatal(err)
	}
	write(t, path, file.Bytes())
}
