//go:build !js

package exporter

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"reflect"
	"slices"
	"testing"

	"torrloom/recon/volume"
)

// python runs a script with Debian's Python and returns what it prints. A missing tool fails the test.
func python(t *testing.T, script string, args ...string) []byte {
	t.Helper()
	out, err := exec.Command("/usr/bin/python3", append([]string{"-c", script}, args...)...).CombinedOutput()
	if err != nil {
		t.Fatalf("python: %v\n%s\nto install what is needed: apt-get install python3-numpy python3-nibabel", err, out)
	}
	return out
}

// reading writes a file, runs a script on it and decodes the JSON that it prints.
func reading(t *testing.T, name, script string, into any, write func(io.Writer) error) {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, written(t, write), 0o600); err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(python(t, script, path), into); err != nil {
		t.Fatal(err)
	}
}

// image is what nibabel, an independent reader of NIfTI, makes of a file.
type image struct {
	Shape                   []int
	Type, Unit, Description string
	Affine, SForm, QForm    [4][4]float64
	SCode, QCode            int
	Zooms                   []float64
	Slope, Inter            float64
	Calibration             [2]float64
	Bytes                   []byte // values, first index fastest, little-endian
}

const throughNibabel = `
import base64, json, sys, nibabel, numpy as np
i = nibabel.load(sys.argv[1])
h = i.header
data = np.asanyarray(i.dataobj)
print(json.dumps({
    "Shape": i.shape, "Type": str(h.get_data_dtype()), "Unit": h.get_xyzt_units()[0], "Description": h["descrip"].item().decode(),
    "Affine": i.affine.tolist(), "SForm": h.get_sform().tolist(), "QForm": h.get_qform().tolist(),
    "SCode": int(h["sform_code"]), "QCode": int(h["qform_code"]), "Zooms": [float(z) for z in h.get_zooms()],
    "Slope": float(i.dataobj.slope), "Inter": float(i.dataobj.inter), "Calibration": [float(h["cal_min"]), float(h["cal_max"])],
    "Bytes": base64.b64encode(data.astype(data.dtype.newbyteorder("<")).tobytes(order="F")).decode()}))`

func TestNibabelReadsMapsAsWritten(t *testing.T) {
	flat := volume.Map{Name: "R1", Unit: "1/us", Grid: volume.Grid{N: [3]int{3, 3, 1}, VoxelMM: [3]float64{2, 2, 2}}, Values: make([]float32, 9)}
	for _, m := range []volume.Map{sample(), flat} {
		var got image
		reading(t, "map.nii.gz", throughNibabel, &got, func(w io.Writer) error { return NIfTI(w, m) })
		checkPlace(t, got, m.Grid)
		if got.Type != "float32" || got.Description != m.Name+" ["+m.Unit+"]" || got.Slope != 1 || got.Inter != 0 {
			t.Errorf("%+v", got)
		}
		least, most := finiteRange(m.Values)
		if got.Calibration != [2]float64{float64(least), float64(most)} {
			t.Errorf("display range %v, want %g to %g", got.Calibration, least, most)
		}
		values := make([]float32, len(m.Values))
		if _, err := binary.Decode(got.Bytes, binary.LittleEndian, values); err != nil || len(got.Bytes) != 4*len(values) {
			t.Fatalf("%d bytes, %v", len(got.Bytes), err)
		}
		for i, want := range m.Values {
			if math.Float32bits(values[i]) != math.Float32bits(want) {
				t.Errorf("voxel %d: %g, want %g", i, values[i], want)
			}
		}
	}
}

func TestNibabelReadsMasksAsWritten(t *testing.T) {
	g := sample().Grid
	inside := make([]bool, g.Voxels())
	want := make([]byte, g.Voxels())
	for i := 0; i < len(inside); i += 3 {
		inside[i], want[i] = true, 1
	}
	var got image
	reading(t, "mask.nii.gz", throughNibabel, &got, func(w io.Writer) error { return NIfTIMask(w, "tumour", g, inside) })
	checkPlace(t, got, g)
	if got.Type != "uint8" || got.Description != "tumour" || !bytes.Equal(got.Bytes, want) {
		t.Errorf("%+v", got)
	}
}

// checkPlace fails unless every form of the orientation places voxels where the grid does. The numbers in use are
// binary fractions, so that float32 holds them exactly.
func checkPlace(t *testing.T, got image, g volume.Grid) {
	t.Helper()
	rows := g.Affine()
	want := [4][4]float64{rows[0], rows[1], rows[2], {0, 0, 0, 1}}
	if got.Affine != want || got.SForm != want || got.QForm != want || got.SCode != 1 || got.QCode != 1 {
		t.Errorf("affine %v, sform %d %v, qform %d %v; want code 1 and %v", got.Affine, got.SCode, got.SForm, got.QCode, got.QForm, want)
	}
	if !slices.Equal(got.Shape, g.N[:]) || !slices.Equal(got.Zooms, g.VoxelMM[:]) || got.Unit != "mm" {
		t.Errorf("shape %v, zooms %v %s; want %v, %v mm", got.Shape, got.Zooms, got.Unit, g.N, g.VoxelMM)
	}
}

// member is what NumPy makes of one array.
type member struct {
	Type  string
	Shape []int
	List  any // nested lists, complex numbers as text
}

const throughNumPy = `
import json, sys, numpy as np
print(json.dumps({k: {"Type": x.dtype.str, "Shape": x.shape, "List": (x.astype(str) if x.dtype.kind == "c" else x).tolist()}
    for k, x in np.load(sys.argv[1]).items()}))`

func TestNumPyReadsAcquisitionsAsWritten(t *testing.T) {
	var got map[string]member
	reading(t, "traces.npz", throughNumPy, &got, func(w io.Writer) error { return Acquisition(w, measured()) })
	for name, want := range map[string]member{
		"gradient_mT_per_m": {"<f8", []int{3, 3}, []any{[]any{1., 2., 3.}, []any{-4., 5., 6.}, []any{0., 0., 0.}}},
		"delay_us":          {"<f8", []int{2}, []any{1., 4.}},
		"dwell_ns":          {"<f8", []int{}, 5.},
		"time_zero_sample":  {"<f8", []int{}, 1.5},
		"sequence":          {"<U10", []int{}, "echo-decay"},
		"encoding":          {"<U5", []int{}, "spoke"},
		"domain":            {"<U4", []int{}, "time"},
		"shot_role":         {"<i8", []int{3}, []any{0., 0., 1.}},
		"temperature_C":     {"<f8", []int{}, 36.5},
		"note":              {"<U14", []int{}, "µl\nsecond line"},
	} {
		if !reflect.DeepEqual(got[name], want) {
			t.Errorf("%s: %+v, want %+v", name, got[name], want)
		}
		delete(got, name)
	}
	signal := got["signal"]
	if len(got) != 1 || signal.Type != "<c8" || !slices.Equal(signal.Shape, []int{2, 3, 5}) {
		t.Errorf("beside the fields: %+v", got)
	}
	// The last value of the first shot of the second delay, 19: 19/3 - 19i in float32.
	if last := signal.List.([]any)[1].([]any)[0].([]any)[4]; last != "(6.3333335-19j)" {
		t.Errorf("signal[1, 0, 4] is %v", last)
	}
}

func TestNumPyReadsMapsAsWritten(t *testing.T) {
	m := sample()
	m.Values[3], m.Values[8], m.Values[9] = 1, 2, 3 // JSON has no NaN
	var got map[string]member
	reading(t, "map.npz", throughNumPy, &got, func(w io.Writer) error { return MapNPZ(w, m) })
	if values := got["values"]; values.Type != "<f4" || !slices.Equal(values.Shape, []int{2, 3, 4}) {
		t.Errorf("%+v", values)
	}
	for iz := range 2 {
		for iy := range 3 {
			for ix := range 4 {
				have := got["values"].List.([]any)[iz].([]any)[iy].([]any)[ix]
				if want := float64(m.Values[m.Grid.Index(ix, iy, iz)]); have != want {
					t.Errorf("values[%d, %d, %d] is %v, want %g", iz, iy, ix, have, want)
				}
			}
		}
	}
	affine := []any{[]any{.5, 0., 0., -1.}, []any{0., .75, 0., -.75}, []any{0., 0., 1.25, -1.25}, []any{0., 0., 0., 1.}}
	if !reflect.DeepEqual(got["affine"].List, affine) || got["quantity"].List != "pO2" || got["unit"].List != "torr" {
		t.Errorf("%+v", got)
	}
}
