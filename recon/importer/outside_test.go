//go:build !js

package importer

import (
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// python runs a script with Debian's Python and returns what it prints. A missing tool fails the test.
func python(t *testing.T, script string, args ...string) []byte {
	t.Helper()
	out, err := exec.Command("/usr/bin/python3", append([]string{"-c", script}, args...)...).CombinedOutput()
	if err != nil {
		t.Fatalf("python: %v\n%s\nto install what is needed: apt-get install python3-numpy python3-scipy python3-nibabel", err, out)
	}
	return out
}

// The script saves arrays of every element type, byte order, axis order and shape with numpy's own writers, and beside
// them the values as NumPy reads them: little-endian, last axis fastest, as complex128 or as a list of texts.
const everyType = `
import json, sys, numpy as np
from numpy.lib import format
folder = sys.argv[1]
random = np.random.default_rng(7)
arrays, truth = {}, {}
for code in ["b1", "i1", "i2", "i4", "i8", "u1", "u2", "u4", "u8", "f2", "f4", "f8", "c8", "c16"]:
    for order in "<>":
        for shape in [(), (1,), (7,), (3, 4), (2, 3, 4), (2, 1, 3, 2), (0, 3)]:
            for layout in "CF":
                size = np.dtype(code).itemsize * int(np.prod(shape))
                if code[0] == "b":
                    x = random.integers(0, 2, shape).astype(bool)
                else:  # random bits: denormals, infinities and NaN among the floats
                    x = np.frombuffer(random.bytes(size), order + code).reshape(shape)
                x = np.array(x, dtype=order + code, order=layout, copy=True)
                name = "%s%s_%s_%d" % (code, "le" if order == "<" else "be", layout, len(truth))
                arrays[name] = x
                with np.errstate(all="ignore"):
                    truth[name] = {"shape": x.shape, "values": np.ascontiguousarray(x.astype("<c16")).tobytes().hex()}
for k, text in enumerate([["", "a"], ["\u00b5l", "trityl"], ["\U0001f9ea", "x"]]):
    for order in "<>":
        x = np.array(text, dtype=order + "U8")
        arrays["text%d%s" % (k, order)] = x
        truth["text%d%s" % (k, order)] = {"shape": x.shape, "texts": x.tolist()}
arrays["bytes"] = np.array([[b"ab", b"c"], [b"", b"defg"]], order="F")
truth["bytes"] = {"shape": (2, 2), "texts": ["ab", "c", "", "defg"]}
np.savez(folder + "/stored.npz", **arrays)
np.savez_compressed(folder + "/deflated.npz", **arrays)
for version in (1, 2, 3):
    for name, x in arrays.items():
        with open("%s/%d-%s.npy" % (folder, version, name.replace("<", "le").replace(">", "be")), "wb") as f:
            format.write_array(f, x, version=(version, 0))
json.dump(truth, open(folder + "/truth.json", "w"))
`

type truth struct {
	Shape  []int
	Values string // complex128 in hexadecimal, little-endian
	Texts  []string
}

func TestEveryArrayNumPyWritesIsReadAsNumPyReadsIt(t *testing.T) {
	folder := t.TempDir()
	python(t, everyType, folder)
	var want map[string]truth
	if err := json.Unmarshal(load(t, filepath.Join(folder, "truth.json")), &want); err != nil {
		t.Fatal(err)
	}
	for _, archive := range []string{"stored.npz", "deflated.npz"} {
		arrays, err := Read(archive, load(t, filepath.Join(folder, archive)))
		if err != nil {
			t.Fatal(err)
		}
		if len(arrays) != len(want) || len(want) < 390 {
			t.Errorf("%s: %d arrays of %d", archive, len(arrays), len(want))
		}
		for _, a := range arrays {
			compare(t, a, want[a.Name])
		}
	}
	paths, _ := filepath.Glob(filepath.Join(folder, "*.npy"))
	if len(paths) != 3*len(want) {
		t.Errorf("%d single arrays of %d", len(paths), 3*len(want))
	}
	for _, path := range paths {
		arrays, err := Read(path, load(t, path))
		if err != nil {
			t.Fatal(err)
		}
		name := arrays[0].Name[2:]
		if strings.HasPrefix(name, "text") {
			name = strings.NewReplacer("le", "<", "be", ">").Replace(name)
		}
		compare(t, arrays[0], want[name])
	}
}

// compare fails unless the array holds exactly the values: complex64 results are the float32 rounding of NumPy's, real
// ones equal bit for bit.
func compare(t *testing.T, a acquisition.Array, want truth) {
	t.Helper()
	if !slices.Equal(a.Shape, want.Shape) {
		t.Errorf("%s: shape %v, want %v", a.Name, a.Shape, want.Shape)
		return
	}
	if a.Type == "text" {
		texts, err := a.Strings()
		if err != nil || !slices.Equal(texts, want.Texts) {
			t.Errorf("%s: %q, %v; want %q", a.Name, texts, err, want.Texts)
		}
		return
	}
	parts := floatsFromHex(t, want.Values)
	numbers, err := a.Complex64s()
	if err != nil || len(parts) != 2*len(numbers) {
		t.Errorf("%s: %d numbers, %d parts, %v", a.Name, len(numbers), len(parts), err)
		return
	}
	for i, z := range numbers {
		if !same(float64(real(z)), float64(float32(parts[2*i]))) || !same(float64(imag(z)), float64(float32(parts[2*i+1]))) {
			t.Errorf("%s at %d: %v, want %v", a.Name, i, z, parts[2*i:2*i+2])
		}
	}
	if reals, err := a.Float64s(); err == nil {
		for i, v := range reals {
			if !same(v, parts[2*i]) {
				t.Errorf("%s at %d: %v, want %v", a.Name, i, v, parts[2*i])
			}
		}
	}
}

// same tells whether two numbers are equal, signs of zero included, or both NaN.
func same(a, b float64) bool {
	return math.Float64bits(a) == math.Float64bits(b) || math.IsNaN(a) && math.IsNaN(b)
}

func floatsFromHex(t *testing.T, text string) []float64 {
	t.Helper()
	raw, err := hex.DecodeString(text)
	if err != nil {
		t.Fatal(err)
	}
	out := make([]float64, len(raw)/8)
	if _, err := binary.Decode(raw, binary.LittleEndian, out); err != nil {
		t.Fatal(err)
	}
	return out
}

// The script loads every small .npy and .npz file of the installed packages with numpy.load; one that NumPy refuses to
// load without unpickling has no members. Long doubles and what is no number go without values.
const shippedFiles = `
import json, pathlib, warnings, numpy as np, scipy
warnings.simplefilter("ignore")

def truth(x):
    plain = x.dtype.kind in "biu" or x.dtype.name in ("float16", "float32", "float64", "complex64", "complex128")
    values = np.ascontiguousarray(x.astype("<c16")).tobytes().hex() if plain else ""
    return {"shape": x.shape, "values": values}

out = {}
for package in (np, scipy):
    for path in sorted(pathlib.Path(package.__file__).parent.rglob("*.np[yz]")):
        if path.stat().st_size > 1 << 20:
            continue
        try:
            opened = np.load(path)
            out[str(path)] = {k: truth(opened[k]) for k in opened.files} if path.suffix == ".npz" else {path.stem: truth(opened)}
        except ValueError:
            out[str(path)] = {}
print(json.dumps(out))
`

// NumPy and SciPy bring .npy and .npz files of their own, some written by Python 2, some with pickled objects, some with
// long doubles. Each is read as NumPy reads it or refused as unsupported.
func TestTheFilesThatComeWithNumPyAndSciPy(t *testing.T) {
	list := python(t, shippedFiles)
	var want map[string]map[string]truth
	if err := json.Unmarshal(list, &want); err != nil {
		t.Fatal(err)
	}
	read, refused := 0, 0
	for path, members := range want {
		arrays, err := Read(path, load(t, path))
		if err != nil {
			refused++
			wantFault(t, err, fault.Unsupported)
			t.Logf("refused: %v", err)
			continue
		}
		read++
		if len(arrays) != len(members) {
			t.Errorf("%s: %d arrays, NumPy reads %d", path, len(arrays), len(members))
		}
		for _, a := range arrays {
			if a.Type != "text" { // NumPy's own reading of text is compared above
				compare(t, a, members[a.Name])
			}
		}
	}
	t.Logf("%d read, %d refused", read, refused)
	if read < 10 || refused < 4 { // numpy alone brings 2 to read and 4 with objects
		t.Errorf("%d files read and %d refused; the installed packages hold more", read, refused)
	}
}

func TestAnAcquisitionSavedWithOneLineOfNumPyOpens(t *testing.T) {
	path := filepath.Join(t.TempDir(), "traces.npz")
	python(t, `
import sys, numpy as np
np.savez(sys.argv[1], signal=np.ones((2, 3, 8), complex), gradient_mT_per_m=[[1, 0, 0], [0, 1, 0], [0, 0, 1]],
    delay_us=[1, 5], dwell_ns=4, time_zero_sample=3.5, sequence="inversion-recovery", encoding="spoke")`, path)
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	a, warnings, err := Open("traces.npz", data)
	if err != nil || len(warnings) != 0 || a.Delays != 2 || a.Shots != 3 || a.Samples != 8 || a.Dim != 3 || a.DwellNS != 4 {
		t.Errorf("%+v, %q, %v", a, warnings, err)
	}
}
