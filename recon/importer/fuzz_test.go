package importer

import (
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
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

// seed adds files of testdata.
func seed(f *testing.F, patterns ...string) {
	for _, pattern := range patterns {
		for _, path := range files(f, pattern) {
			if data := load(f, path); len(data) < 1<<14 { // longer seeds make a run slow
				f.Add(data)
			}
		}
	}
}

// FuzzMATLevel5 is FuzzNPY for MAT-files, and for what is salvaged of them.
func FuzzMATLevel5(f *testing.F) {
	seed(f, "formats/*.mat", "malformed/*.mat")
	f.Fuzz(func(t *testing.T, data []byte) { holdsTogether(t, matLevel5, data) })
}

// FuzzMATLevel4 is FuzzNPY for the older MAT-files.
func FuzzMATLevel4(f *testing.F) {
	seed(f, "formats/level-4.mat")
	f.Add([]byte("\xe8\x03\x00\x00\x02\x00\x00\x00\x03\x00\x00\x00\x00\x00\x00\x00\x02\x00\x00\x00x\x00"))
	f.Fuzz(func(t *testing.T, data []byte) { holdsTogether(t, matLevel4, data) })
}

// FuzzColumns is FuzzNPY for tables of text.
func FuzzColumns(f *testing.F) {
	seed(f, "formats/*.csv", "formats/*.tsv", "formats/*.txt", "malformed/*.csv")
	f.Add([]byte("# dwell: 4 ns\n# delay_us = [0.5, 1, 8]\na [T/m];b1;b2\n1,5;(1+2j);-1.#IND\n"))
	f.Fuzz(func(t *testing.T, data []byte) { holdsTogether(t, columns, data) })
}

// FuzzJCAMP is FuzzNPY for JCAMP-DX.
func FuzzJCAMP(f *testing.F) {
	seed(f, "formats/*.dx", "malformed/*.dx")
	f.Add([]byte(quadrature(3)))
	f.Add([]byte(spectrum(53, "599.860@VKT%TLkj%J%KLJ%njKjL%kL%jJULJ%kLK1%lLMNPNPRLJ0QTOJ1P\n700.158A28")))
	f.Fuzz(func(t *testing.T, data []byte) { holdsTogether(t, jcamp, data) })
}

// FuzzNIfTI is FuzzNPY for volumes.
func FuzzNIfTI(f *testing.F) {
	seed(f, "formats/*.nii", "malformed/*.nii")
	f.Fuzz(func(t *testing.T, data []byte) {
		if len(data) >= 8 { // what Recognise asks for
			holdsTogether(t, nifti, data)
		}
	})
}

// FuzzContainers is FuzzNPY for whatever the content says it is, and what that holds.
func FuzzContainers(f *testing.F) {
	seed(f, "formats/*.zip", "formats/*.gz", "malformed/*.zip", "malformed/*.gz")
	f.Fuzz(func(t *testing.T, data []byte) {
		limits := small()
		tree, err := ReadSetWithin(limits, []File{{"a1.x", data}, {"a2.x", data}})
		if err != nil {
			if fault.From(err).Kind == fault.Bug {
				t.Fatal(err)
			}
			return
		}
		sound(t, tree.Arrays)
	})
}

// small are limits that keep a run fast.
func small() Limits {
	limits := Default
	limits.Elements, limits.UnpackedBytes, limits.HarmlessBytes = 1<<20, 8<<20, 1<<20
	return limits
}

// holdsTogether reads with one format, past the guard that would hide a panic.
func holdsTogether(t *testing.T, format Format, data []byte) {
	for _, read := range []func(string, []byte, Limits) ([]acquisition.Array, error){format.Read, format.Salvage} {
		if read == nil {
			continue
		}
		arrays, err := read("x", data, small())
		if err == nil {
			sound(t, arrays)
		}
	}
}

// sound fails unless the values of arrays fit their shapes; what is made of them must not panic.
func sound(t *testing.T, arrays []acquisition.Array) {
	for _, a := range arrays {
		checkValues(t, a)
		acquisition.Doubts(a)
	}
	_, _, _ = acquisition.FromArrays("x", arrays)
	m := acquisition.Propose(arrays)
	if err := m.Check(); err != nil {
		t.Fatalf("a proposal that cannot be: %v", err)
	}
	_, _, _ = acquisition.Apply("x", arrays, m)
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
