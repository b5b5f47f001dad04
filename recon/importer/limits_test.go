package importer

import (
	"archive/zip"
	"bytes"
	"encoding/binary"
	"fmt"
	"hash/crc32"
	"strings"
	"testing"

	"torrloom/recon/fault"
)

type member struct {
	name string
	data []byte
}

// zipOf returns an archive whose members are stored without compression.
func zipOf(t testing.TB, members ...member) []byte {
	t.Helper()
	var out bytes.Buffer
	archive := zip.NewWriter(&out)
	for _, m := range members {
		size := uint64(len(m.data))
		w, err := archive.CreateRaw(&zip.FileHeader{Name: m.name, CRC32: crc32.ChecksumIEEE(m.data), CompressedSize64: size, UncompressedSize64: size})
		if err == nil {
			_, err = w.Write(m.data)
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	if err := archive.Close(); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

// npyOf returns an NPY file of version 2 with that type and shape.
func npyOf(descr, shape string, body []byte) []byte {
	return npyPadded(descr, shape, 0, body)
}

// npyPadded is npyOf with spaces in the header up to the given length.
func npyPadded(descr, shape string, length int, body []byte) []byte {
	text := fmt.Sprintf("{'descr': '%s', 'fortran_order': False, 'shape': %s}", descr, shape)
	text += strings.Repeat(" ", max(0, length-len(text)))
	out := binary.LittleEndian.AppendUint32([]byte("\x93NUMPY\x02\x00"), uint32(len(text)))
	return append(append(out, text...), body...)
}

// reads fails unless data is read at the limit.
func reads(t *testing.T, name string, data []byte, limits Limits) {
	t.Helper()
	if _, err := ReadWithin(limits, name, data); err != nil {
		t.Errorf("at the limit: %v", err)
	}
}

// tooLarge fails unless data is refused one past the limit.
func tooLarge(t *testing.T, name string, data []byte, limits Limits) {
	t.Helper()
	_, err := ReadWithin(limits, name, data)
	wantFault(t, err, fault.TooLarge)
}

func TestHeaderLimit(t *testing.T) {
	reads(t, "x.npy", npyPadded("<f8", "(0,)", 64<<10, nil), Default)
	tooLarge(t, "x.npy", npyPadded("<f8", "(0,)", 64<<10+1, nil), Default)
}

func TestDimensionLimit(t *testing.T) {
	ones := func(n int) string { return "(" + strings.Repeat("1,", n) + ")" }
	reads(t, "x.npy", npyOf("|u1", ones(8), make([]byte, 1)), Default)
	tooLarge(t, "x.npy", npyOf("|u1", ones(9), make([]byte, 1)), Default)
}

func TestElementLimit(t *testing.T) {
	// At the limit the shape passes and the body, which is not there, is the fault: nothing was allocated for it.
	for shape, kind := range map[string]fault.Kind{
		"(268435456,)": fault.BadFile, "(16384, 16384)": fault.BadFile, "(0, 268435456)": "",
		"(268435457,)": fault.TooLarge, "(16384, 16385)": fault.TooLarge, "(0, 268435457)": fault.TooLarge,
	} {
		_, err := Read("x.npy", npyOf("<f8", shape, nil))
		if kind == "" {
			if err != nil {
				t.Errorf("%s: %v", shape, err)
			}
			continue
		}
		wantFault(t, err, kind)
	}
	small := Default
	small.Elements = 100
	reads(t, "x.npy", npyOf("|u1", "(10, 10)", make([]byte, 100)), small)
	tooLarge(t, "x.npy", npyOf("|u1", "(101,)", make([]byte, 101)), small)
}

func TestMemberLimit(t *testing.T) {
	members := make([]member, 1001)
	for i := range members {
		members[i] = member{fmt.Sprintf("x%d.npy", i), npyOf("|u1", "()", make([]byte, 1))}
	}
	reads(t, "x.npz", zipOf(t, members[:1000]...), Default)
	tooLarge(t, "x.npz", zipOf(t, members...), Default)
}

func TestUnpackedLimit(t *testing.T) {
	const archive = 1 << 30 // large enough for the ratio to be out of play
	for total, ok := range map[uint64]bool{2 << 30: true, 2<<30 + 1: false, 1<<64 - 1: false} {
		for _, stated := range [][]uint64{{total}, {total - 1000, 1000}, {1 << 20, total - 1<<20}} {
			err := Default.checkUnpacked(stated, archive)
			if ok && err != nil {
				t.Errorf("%d: %v", stated, err)
			}
			if !ok {
				wantFault(t, err, fault.TooLarge)
			}
		}
	}
	wantFault(t, Default.checkUnpacked([]uint64{1 << 63, 1 << 63}, archive), fault.TooLarge) // the sum is 0 modulo 2^64
	file := npyOf("|u1", "(1000,)", make([]byte, 1000))
	small := Default
	small.UnpackedBytes = 2 * int64(len(file))
	reads(t, "x.npz", zipOf(t, member{"a.npy", file}, member{"b.npy", file}), small)
	small.UnpackedBytes--
	tooLarge(t, "x.npz", zipOf(t, member{"a.npy", file}, member{"b.npy", file}), small)
}

func TestRatioLimit(t *testing.T) {
	if err := Default.checkUnpacked([]uint64{200 * 512}, 512); err != nil {
		t.Error(err)
	}
	wantFault(t, Default.checkUnpacked([]uint64{200*512 + 1}, 512), fault.TooLarge)
	bomb := load(t, testdata+"/malformed/bomb.npz")
	wide := Default
	wide.Ratio = 8<<20/int64(len(bomb)) + 1 // 8 MiB and a header
	reads(t, "bomb.npz", bomb, wide)
	wide.Ratio--
	tooLarge(t, "bomb.npz", bomb, wide)
}
