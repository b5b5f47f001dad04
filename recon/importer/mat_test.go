package importer

import (
	"encoding/binary"
	"strings"
	"testing"

	"torrloom/recon/fault"
)

// mat5 returns a little-endian MAT-file of level 5 that holds the given elements.
func mat5(variables ...[]byte) []byte {
	out := append([]byte(strings.Repeat(" ", 116)), make([]byte, 8)...)
	out = append(out, "\x00\x01IM"...)
	for _, v := range variables {
		out = append(out, v...)
	}
	return out
}

// mi returns an element, filled up to eight bytes.
func mi(kind uint32, body []byte) []byte {
	out := binary.LittleEndian.AppendUint32(nil, kind)
	out = binary.LittleEndian.AppendUint32(out, uint32(len(body)))
	return append(append(out, body...), make([]byte, (8-len(body)%8)%8)...)
}

func words32(values ...uint32) (out []byte) {
	for _, v := range values {
		out = binary.LittleEndian.AppendUint32(out, v)
	}
	return out
}

// variable returns an array of bytes as class uint8.
func variable(name string, body []byte, shape ...uint32) []byte {
	return mi(miMATRIX, append(append(append(mi(miUINT32, words32(9, 0)), mi(miINT32, words32(shape...))...), mi(miINT8,
		[]byte(name))...), mi(miUINT8, body)...))
}

// cells returns a cell of the given variables.
func cells(name string, inner ...[]byte) []byte {
	body := append(append(mi(miUINT32, words32(mxCELL, 0)), mi(miINT32, words32(uint32(len(inner)), 1))...),
		mi(miINT8, []byte(name))...)
	for _, v := range inner {
		body = append(body, v...)
	}
	return mi(miMATRIX, body)
}

func TestMATLimits(t *testing.T) {
	small := Default
	small.Elements = 12
	reads(t, "x.mat", mat5(variable("x", make([]byte, 12), 3, 4)), small)
	tooLarge(t, "x.mat", mat5(variable("x", make([]byte, 13), 13, 1)), small)

	axes := func(n int) []uint32 {
		out := make([]uint32, n)
		for i := range out {
			out[i] = 1
		}
		return out
	}
	reads(t, "x.mat", mat5(variable("x", make([]byte, 1), axes(8)...)), Default)
	tooLarge(t, "x.mat", mat5(variable("x", make([]byte, 1), axes(9)...)), Default)

	nested := func(depth int) []byte {
		v := variable("", []byte{7}, 1, 1)
		for range depth {
			v = cells("c", v)
		}
		return mat5(v)
	}
	reads(t, "x.mat", nested(32), Default)
	tooLarge(t, "x.mat", nested(33), Default)

	small = Default
	small.Arrays = 2
	one := variable("", []byte{7}, 1, 1)
	reads(t, "x.mat", mat5(cells("c", one, one)), small)
	tooLarge(t, "x.mat", mat5(cells("c", one, one, one)), small)
}

// A sparse matrix may not take more memory than its bytes justify.
func TestSparseMatrixLimit(t *testing.T) {
	sparse := func(rows uint32) []byte {
		body := append(append(mi(miUINT32, words32(mxSPARSE, 1)), mi(miINT32, words32(rows, 1))...),
			mi(miINT8, []byte("s"))...)
		body = append(append(body, mi(miINT32, words32(0))...), mi(miINT32, words32(0, 1))...)
		return mat5(mi(miMATRIX, append(body, mi(miUINT8, []byte{5})...)))
	}
	most := uint32(200 * len(sparse(1)) / 8)
	reads(t, "x.mat", sparse(most), Default)
	tooLarge(t, "x.mat", sparse(most+1), Default)
}

func TestMATLevel4Limits(t *testing.T) {
	matrix := func(n uint32) []byte {
		return append(append(words32(50, n, 1, 0, 2), "x\x00"...), make([]byte, n)...)
	}
	small := Default
	small.Elements = 10
	reads(t, "x.mat", matrix(10), small)
	tooLarge(t, "x.mat", matrix(11), small)
	small = Default
	small.Arrays = 2
	reads(t, "x.mat", append(matrix(3), matrix(3)...), small)
	tooLarge(t, "x.mat", append(append(matrix(3), matrix(3)...), matrix(3)...), small)
}

func TestNIfTILimits(t *testing.T) {
	small := Default
	volume := load(t, testdata+"/formats/little-endian.nii") // 2 x 3 x 4
	small.Elements = 24
	reads(t, "x.nii", volume, small)
	small.Elements--
	tooLarge(t, "x.nii", volume, small)
	small = Default
	small.Dimensions = 3
	reads(t, "x.nii", volume, small)
	small.Dimensions--
	tooLarge(t, "x.nii", volume, small)
}

func TestHDF5IsToldApartWithAWayAround(t *testing.T) {
	signature := "\x89HDF\r\n\x1a\n"
	for _, data := range []string{signature, strings.Repeat("\x00", 512) + signature,
		strings.Repeat("\x00", 2048) + signature, strings.Repeat(" ", 124) + "\x00\x02IM"} {
		_, err := Read("x.mat", []byte(data))
		f := wantFault(t, err, fault.Unsupported)
		if !strings.Contains(f.Text, "HDF5") || !strings.Contains(f.Text, "-v7") {
			t.Error(f)
		}
	}
}
