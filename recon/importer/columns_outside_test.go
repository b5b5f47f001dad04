//go:build !js

package importer

import (
	"encoding/json"
	"path/filepath"
	"testing"
)

// The script writes the same random tables with numpy.savetxt, csv.writer and by hand as spreadsheets of other countries
// do, real and complex; and beside them the values.
const tables = `
import csv, json, pathlib, sys, numpy as np
folder = pathlib.Path(sys.argv[1])
random = np.random.default_rng(5)
truth = {}
for k in range(40):
    x = random.normal(size=(random.integers(4, 40), random.integers(2, 9))) * 10.0 ** random.integers(-12, 12)
    if k % 4 == 3:
        x = x + 1j * random.normal(size=x.shape)
    name = "%d.txt" % k
    path = folder / name
    if k % 4 == 0:
        np.savetxt(path, x, fmt="%.17g", delimiter=[" ", ",", "\t", ";"][k // 4 % 4])
    elif k % 4 == 1:
        with open(path, "w", newline="") as f:
            csv.writer(f, delimiter=";", quoting=csv.QUOTE_ALL).writerows([[repr(float(v)).replace(".", ",") for v in row] for row in x])
    elif k % 4 == 2:
        np.savetxt(path, x, fmt="%.17e")
    else:
        np.savetxt(path, x, fmt="%.17g", delimiter=",")
    truth[name] = {"shape": x.shape, "values": np.ascontiguousarray(x.astype("<c16")).tobytes().hex()}
json.dump(truth, open(folder / "truth.json", "w"))
`

func TestTablesThatPythonWrites(t *testing.T) {
	folder := t.TempDir()
	python(t, tables, folder)
	var want map[string]truth
	if err := json.Unmarshal(load(t, filepath.Join(folder, "truth.json")), &want); err != nil {
		t.Fatal(err)
	}
	if len(want) != 40 {
		t.Errorf("%d tables", len(want))
	}
	for name, w := range want {
		arrays, err := Read(name, load(t, filepath.Join(folder, name)))
		if err != nil || len(arrays) != 1 {
			t.Errorf("%s: %d arrays, %v", name, len(arrays), err)
			continue
		}
		compare(t, arrays[0], w)
	}
}
