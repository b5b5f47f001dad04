//go:build !js

package importer

import (
	"encoding/json"
	"math"
	"path/filepath"
	"testing"

	"torrloom/recon/fault"
)

// The script loads every .nii and .nii.gz of nibabel's own tests as float64 with its affine, and writes volumes of every
// datatype, both byte orders and every way to place them.
const volumesOfNibabel = `
import json, pathlib, sys, warnings, numpy as np, nibabel as nib
warnings.simplefilter("ignore")
folder = pathlib.Path(sys.argv[1])
random = np.random.default_rng(3)

def save(name, data, endian, qform=None, sform=None, slope=None, unit="mm"):
    head = nib.Nifti1Header(endianness=endian)
    head.set_data_dtype(data.dtype)
    image = nib.Nifti1Image(data, None, head)
    image.header.set_xyzt_units(unit, "sec")
    if qform is not None: image.set_qform(qform, 1)
    if sform is not None: image.set_sform(sform, 2)
    if slope is not None: image.header.set_slope_inter(*slope)
    nib.save(image, folder / name)

for code in ["u1", "i1", "u2", "i2", "u4", "i4", "u8", "i8", "f4", "f8", "c8", "c16"]:
    for endian in "<>":
        x = np.array(random.integers(0, 100, (3, 4, 5)), dtype=code)
        if code[0] == "c": x = x + np.array(1j, code) * x[::-1]
        save("%s-%s.nii" % (code, "le" if endian == "<" else "be"), x, endian, sform=np.diag([1.5, 2, 2.5, 1]))
def turned():
    q, _ = np.linalg.qr(random.normal(size=(3, 3)))
    affine = np.eye(4)
    affine[:3, :3] = q @ np.diag(random.uniform(0.5, 3, 3))
    affine[:3, 3] = random.normal(size=3) * 20
    return affine
small = random.integers(-1000, 1000, (4, 3, 2)).astype("i2")
for k in range(20):  # half of them left-handed, with a qfac of -1
    save("turned%d.nii.gz" % k, small, "<>"[k % 2], qform=turned())
for k, axis in enumerate(np.eye(3)):  # half turns, whose quaternion has no real part
    affine = np.eye(4); affine[:3, :3] = 2 * np.outer(axis, axis) - np.eye(3)
    save("half-turn%d.nii" % k, small, "<", qform=affine)
save("both.nii", small, "<", qform=turned(), sform=turned())
save("micron.nii", small, "<", sform=np.diag([10, 20, 30, 1.]), unit="micron")
save("series.nii.gz", random.normal(size=(2, 3, 4, 5)).astype("f4"), ">", sform=np.eye(4))
save("unplaced.nii", small, "<")

# Stored integers with slope and intercept: the header is written by hand, because nibabel rescales.
raw = bytearray((folder / "i2-le.nii").read_bytes())
raw[112:120] = np.array([0.5, -3], "<f4").tobytes()
(folder / "scaled.nii").write_bytes(raw)
raw[112:116] = np.array([0], "<f4").tobytes()  # a slope of zero means unscaled
(folder / "slope-zero.nii").write_bytes(raw)

out = {}
for path in sorted(folder.glob("*.nii*")) + sorted((pathlib.Path(nib.__file__).parent / "tests" / "data").glob("*.nii*")):
    try:
        image = nib.load(path)
    except Exception as e:
        out[str(path)] = {"refused": str(e)}
        continue
    if type(image).__name__ != "Nifti1Image":
        out[str(path)] = {"class": type(image).__name__}
        continue
    data = np.asanyarray(image.dataobj)
    out[str(path)] = {"class": type(image).__name__, "shape": data.shape, "values": np.ascontiguousarray(data.astype("<c16")).tobytes().hex(),
        "affine": image.affine.ravel().tolist(),
        "placed": bool(int(image.header["qform_code"]) or int(image.header["sform_code"]))}
print(json.dumps(out))
`

func TestEveryVolumeOfNibabel(t *testing.T) {
	var want map[string]struct {
		truth
		Class  string
		Affine []float64
		Placed bool
	}
	if err := json.Unmarshal(python(t, volumesOfNibabel, t.TempDir()), &want); err != nil {
		t.Fatal(err)
	}
	read, refused := 0, 0
	for path, w := range want {
		name := filepath.Base(path)
		arrays, err := Read(name, load(t, path))
		if w.Class != "Nifti1Image" { // NIfTI-2 and what builds on it
			refused++
			wantFault(t, err, fault.Unsupported)
			continue
		}
		if err != nil || len(arrays) != 2 || arrays[1].Name != "affine" {
			t.Errorf("%s: %d arrays, %v", name, len(arrays), err)
			continue
		}
		read++
		arrays[0].Name = name
		compare(t, arrays[0], w.truth)
		if !w.Placed {
			continue // nibabel mirrors x then; tested below
		}
		affine, err := arrays[1].Float64s()
		if err != nil || len(affine) != len(w.Affine) {
			t.Fatalf("%s: %v, %v", name, affine, err)
		}
		for i, v := range affine {
			if name == "micron.nii" && i < 12 { // nibabel leaves the unit to its user
				v *= 1000
			}
			// Both compute in float64 from the same float32 header; a quaternion's real part is a difference of
			// squares, which leaves 1e-7 of its size.
			if tolerance := 1e-5 * (1 + math.Abs(w.Affine[i])); !(math.Abs(v-w.Affine[i]) <= tolerance) {
				t.Errorf("%s: affine[%d] = %g, nibabel has %g", name, i, v, w.Affine[i])
			}
		}
	}
	t.Logf("%d read, %d refused", read, refused)
	if read < 24+20+3+6+4 || refused < 2 { // written above; nibabel brings at least 4 more, and 2 of NIfTI-2
		t.Errorf("%d read, %d refused", read, refused)
	}
}

func TestAnUnplacedVolumeHasItsMiddleVoxelAtTheOrigin(t *testing.T) {
	folder := t.TempDir()
	python(t, volumesOfNibabel, folder)
	arrays, err := Read("unplaced.nii", load(t, filepath.Join(folder, "unplaced.nii")))
	if err != nil {
		t.Fatal(err)
	}
	got, err := arrays[1].Float64s()
	want := []float64{1, 0, 0, -2, 0, 1, 0, -1, 0, 0, 1, -1, 0, 0, 0, 1} // 4 x 3 x 2 voxels of 1 mm
	for i := range want {
		if err != nil || got[i] != want[i] {
			t.Fatalf("%v, %v", got, err)
		}
	}
	if arrays[0].Attributes["orientation"][:11] != "none stated" {
		t.Errorf("%v", arrays[0].Attributes)
	}
}
