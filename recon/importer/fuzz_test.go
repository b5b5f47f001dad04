package importer

import (
	"testing"

	"torrloom/recon/acquisition"
)

// FuzzNPY asserts that a reader of any bytes neither panics nor hands over an array whose values do not fit its shape.
func FuzzNPY(f *testing.F) {
	for _, path := range files(f, "malformed/*.npy") {
		f.Add(load(f, path))
	}
	for _, descr := range []string{"|b1", "<i2", ">u4", "<f2", ">f4", "=f8", "<c8", ">c16", "|S5", "<U2"} {
		f.Add(npyOf(descr, "(2, 0)", nil))
		f.Add(npyOf(descr, "()", make([]byte, 16)))
	}
	f.Fuzz(func(t *testing.T, data []byte) { holdsTogether(t, numpyArray, data) })
}

// FuzzNPZ is FuzzNPY for archives.
func FuzzNPZ(f *testing.F) {
	for _, pattern := range []string{"malformed/*.npz", "numpy/*.npz"} {
		for _, path := range files(f, pattern) {
			f.Add(load(f, path))
		}
	}
	f.Add(zipOf(f, member{"a.npy", npyOf("<f8", "(1,)", make([]byte, 8))}))
	f.Fuzz(func(t *testing.T, data []byte) { holdsTogether(t, numpyArchive, data) })
}

// holdsTogether reads with one format, past the guard that would hide a panic.
func holdsTogether(t *testing.T, format Format, data []byte) {
	limits := Default
	limits.Elements, limits.UnpackedBytes = 1<<20, 8<<20 // so that a run stays fast
	arrays, err := format.Read("x", data, limits)
	if err != nil {
		return
	}
	for _, a := range arrays {
		checkValues(t, a)
	}
	_, _, _ = acquisition.FromArrays("x", arrays) // must not panic
}

func checkValues(t *testing.T, a acquisition.Array) {
	elements := 1
	for _, n := range a.Shape {
		elements *= n
	}
	if elements != a.Len() || a.Len()*a.Layout().Size != len(a.Raw()) {
		t.Fatalf("%s: shape %v, %d elements in %d bytes", a.Name, a.Shape, a.Len(), len(a.Raw()))
	}
	numbers, err := a.Complex64s()
	if err == nil && len(numbers) != elements {
		t.Fatalf("%s: %d numbers for %d elements", a.Name, len(numbers), elements)
	}
	if err != nil {
		texts, err := a.Strings()
		if err != nil || len(texts) != elements {
			t.Fatalf("%s: neither numbers nor texts: %d, %v", a.Name, len(texts), err)
		}
	}
	a.Range()
	a.LooksSwapped()
}
