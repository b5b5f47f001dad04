//go:build !js

package importer

import (
	"encoding/json"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// The script reads every .mat file that Debian's python3-scipy brings, and walks structs, objects and cells as the importer
// names them: "s.field", "c.1". Values are complex128 in hexadecimal, last axis fastest; an empty list of members stands
// for a file that scipy refuses, with its reason.
const shippedMAT = `
import json, re, subprocess, warnings, numpy as np, scipy.io, scipy.sparse
from scipy.io.matlab import MatlabFunction, MatlabOpaque
warnings.simplefilter("ignore")

def walk(name, x, out):
    if scipy.sparse.issparse(x):
        x = x.toarray()
    if x is None or isinstance(x, (MatlabFunction, MatlabOpaque)):
        return  # None: a struct without fields
    if x.dtype.names is not None:
        flat = x.ravel(order="F")
        for i, one in enumerate(flat):
            for field in x.dtype.names:
                twice = re.match(r"_(\d+)_(.*)", field)  # scipy's way to tell fields of one name apart; "_" here
                plain = twice[2] + "_" * int(twice[1]) if twice else field
                walk(name + (".%d" % (i + 1) if len(flat) > 1 else "") + "." + plain, one[field], out)
        return
    if x.dtype == object:
        for i, one in enumerate(x.ravel(order="F")):
            walk("%s.%d" % (name, i + 1), one, out)
        return
    if x.dtype.kind == "U":
        out[name] = {"shape": list(x.shape), "texts": [str(v) for v in x.ravel()]}
        return
    out[name] = {"shape": list(x.shape), "values": np.ascontiguousarray(x.astype("<c16")).tobytes().hex(), "kind": x.dtype.kind}

out = {}
for path in subprocess.run(["dpkg", "-L", "python3-scipy"], capture_output=True, text=True, check=True).stdout.split():
    if not path.endswith(".mat"):
        continue
    try:
        members = {}
        for k, v in scipy.io.loadmat(path, chars_as_strings=True).items():
            if not k.startswith("__"):
                walk(k, v, members)
        out[path] = {"members": members}
    except Exception as e:
        out[path] = {"refused": "%s: %s" % (type(e).__name__, e)}
print(json.dumps(out))
`

// refusedMAT is what scipy refuses, with the kind of the fault it must be here.
var refusedMAT = map[string]fault.Kind{
	"bad_miuint32.mat":            fault.BadFile,     // a length that is negative as a 32-bit integer
	"bad_miutf8_array_name.mat":   fault.BadFile,     // a name with a byte past ASCII
	"corrupted_zlib_checksum.mat": fault.BadFile,     // a compressed variable whose checksum is another
	"corrupted_zlib_data.mat":     fault.BadFile,     // a compressed variable that ends before its bytes do
	"malformed1.mat":              fault.BadFile,     // more values than the shape takes
	"testhdf5_7.4_GLNX86.mat":     fault.Unsupported, // version 7.3, which is HDF5
}

func TestEveryMATFileThatComesWithSciPy(t *testing.T) {
	var want map[string]struct {
		Refused string
		Members map[string]truth
	}
	if err := json.Unmarshal(python(t, shippedMAT), &want); err != nil {
		t.Fatal(err)
	}
	read, refused := 0, 0
	for path, file := range want {
		name := filepath.Base(path)
		data := load(t, path)
		kind, refuse := refusedMAT[name]
		if refuse != (file.Refused != "") {
			t.Errorf("%s: scipy says %q, refused here: %v", name, file.Refused, refuse)
		}
		arrays, err := ungathered(name, data)
		if refuse {
			refused++
			wantFault(t, err, kind)
			t.Logf("refused: %v", err)
			continue
		}
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		read++
		compareMAT(t, name, arrays, file.Members)
	}
	t.Logf("%d read, %d refused", read, refused)
	if read+refused < 109 || refused != len(refusedMAT) { // python3-scipy 1.10.1 brings 109
		t.Errorf("%d files read and %d refused of at least 109", read, refused)
	}
}

// ungathered reads a MAT-file without joining numbered elements.
func ungathered(name string, data []byte) ([]acquisition.Array, error) {
	format, err := recognise(name, data)
	if err != nil {
		return nil, err
	}
	if format.Name == matLevel5.Name {
		format.Read = func(_ string, data []byte, limits Limits) ([]acquisition.Array, error) { return walkMAT(data, limits) }
	}
	return format.guarded(name, data, Default)
}

func compareMAT(t *testing.T, file string, arrays []acquisition.Array, want map[string]truth) {
	t.Helper()
	seen := 0
	for _, a := range arrays {
		if a.Attributes["left out"] != "" {
			continue
		}
		truth, there := want[a.Name]
		if !there {
			t.Errorf("%s: scipy has no %s, only %d others", file, a.Name, len(want))
			continue
		}
		seen++
		a.Name = file + " " + a.Name
		switch {
		case a.Type == "text":
			texts, err := a.Strings()
			if err != nil || !slices.EqualFunc(texts, truth.Texts, sameText) && !(len(truth.Texts) == 0 && strings.Join(texts, "") == "") {
				t.Errorf("%s: %q, want %q, %v", a.Name, texts, truth.Texts, err)
			}
		case a.Len() == 0 && truth.Values == "": // an empty cell has shape [0, 0] in MATLAB and (1, 0) in scipy
		default:
			compare(t, a, truth)
		}
	}
	if seen != len(want) {
		t.Errorf("%s: %d arrays, scipy reads %d", file, seen, len(want))
	}
}

// sameText ignores the spaces and NULs that fill a row up: scipy cuts none, NumPy text cuts NULs.
func sameText(a, b string) bool {
	return strings.TrimRight(a, " \x00") == strings.TrimRight(b, " \x00")
}
