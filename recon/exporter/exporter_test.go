package exporter

import (
	"bytes"
	"compress/gzip"
	"encoding/binary"
	"errors"
	"io"
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/importer"
	"torrloom/recon/volume"
)

// sample returns a map with three different lengths and voxel sizes, a NaN, both infinities and negative values.
func sample() volume.Map {
	m := volume.Map{Name: "pO2", Unit: "torr", Grid: volume.Grid{N: [3]int{4, 3, 2}, VoxelMM: [3]float64{0.5, 0.75, 1.25}}}
	for i := range m.Grid.Voxels() {
		m.Values = append(m.Values, float32(i)*1.5-7)
	}
	m.Values[3] = float32(math.NaN())
	m.Values[8], m.Values[9] = float32(math.Inf(1)), float32(math.Inf(-1))
	return m
}

func written(t *testing.T, write func(io.Writer) error) []byte {
	t.Helper()
	var out bytes.Buffer
	if err := write(&out); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

func wantFault(t *testing.T, err error, kind fault.Kind) {
	t.Helper()
	var f *fault.Fault
	if !errors.As(err, &f) || f.Kind != kind {
		t.Errorf("got %v, want a %s fault", err, kind)
	}
}

func TestEveryMapFormatGivesTheSameBytesTwice(t *testing.T) {
	for _, f := range MapFormats {
		write := func(w io.Writer) error { return f.Write(w, sample()) }
		if one, two := written(t, write), written(t, write); !bytes.Equal(one, two) || len(one) == 0 {
			t.Errorf("%s (%s): %d and %d bytes", f.Name, f.Extension, len(one), len(two))
		}
	}
}

func TestEveryMapFormatRefusesAMapThatDoesNotFillItsGrid(t *testing.T) {
	for _, f := range MapFormats {
		m := sample()
		m.Values = m.Values[1:]
		wantFault(t, f.Write(io.Discard, m), fault.Bug)
		m = sample()
		m.Grid.VoxelMM[1] = math.NaN()
		wantFault(t, f.Write(io.Discard, m), fault.BadSetting)
		m.Grid = volume.Grid{}
		wantFault(t, f.Write(io.Discard, m), fault.BadSetting)
	}
}

var errFull = errors.New("disk full")

// full lets some bytes pass and then fails, as a full disk does.
type full struct{ left int }

func (f *full) Write(p []byte) (int, error) {
	if f.left -= len(p); f.left < 0 {
		return 0, errFull
	}
	return len(p), nil
}

func TestEveryMapFormatHandsBackTheErrorOfItsWriter(t *testing.T) {
	for _, f := range MapFormats {
		size := len(written(t, func(w io.Writer) error { return f.Write(w, sample()) }))
		for n := range size {
			if err := f.Write(&full{n}, sample()); !errors.Is(err, errFull) {
				t.Fatalf("%s with room for %d of %d bytes: %v", f.Name, n, size, err)
			}
		}
	}
}

// Offsets and codes: the NIfTI-1 standard (nifti1.h).
func TestNIfTIHeaderFieldByField(t *testing.T) {
	packed := written(t, func(w io.Writer) error { return NIfTI(w, sample()) })
	if !bytes.Equal(packed[4:8], make([]byte, 4)) {
		t.Errorf("gzip carries a time: % x", packed[4:8])
	}
	unpacked, err := gzip.NewReader(bytes.NewReader(packed))
	if err != nil {
		t.Fatal(err)
	}
	raw, err := io.ReadAll(unpacked)
	if err != nil || len(raw) != 352+4*24 {
		t.Fatalf("%d bytes, %v", len(raw), err)
	}
	whole := func(at int) int { return int(int16(binary.LittleEndian.Uint16(raw[at:]))) }
	for at, want := range map[int]int{0: 348, 40: 3, 42: 4, 44: 3, 46: 2, 48: 1, 54: 1, 68: 0, 70: 16, 72: 32, 252: 1, 254: 1} {
		if got := whole(at); got != want {
			t.Errorf("short at %d: %d, want %d", at, got, want)
		}
	}
	for at, want := range map[int]float32{
		76: 1, 80: 0.5, 84: 0.75, 88: 1.25, 92: 0, 108: 352, 112: 1, 116: 0, 124: 27.5, 128: -7, 256: 0, 260: 0, 264: 0,
		// First voxel centres: -(4/2)*0.5, -(3/2)*0.75 with 3/2 rounded down, -(2/2)*1.25.
		268: -1, 272: -0.75, 276: -1.25, 280: 0.5, 284: 0, 288: 0, 292: -1, 300: 0.75, 308: -0.75, 320: 1.25, 324: -1.25,
	} {
		if got := math.Float32frombits(binary.LittleEndian.Uint32(raw[at:])); got != want {
			t.Errorf("float at %d: %g, want %g", at, got, want)
		}
	}
	if raw[123] != 2 || string(raw[148:159]) != "pO2 [torr]\x00" || string(raw[328:332]) != "pO2\x00" || string(raw[344:352]) != "n+1\x00\x00\x00\x00\x00" {
		t.Errorf("units %d, descrip %q, intent %q, magic %q", raw[123], raw[148:159], raw[328:332], raw[344:352])
	}
	for i, want := range sample().Values {
		if got := binary.LittleEndian.Uint32(raw[352+4*i:]); got != math.Float32bits(want) {
			t.Errorf("voxel %d: %08x, want %08x", i, got, math.Float32bits(want))
		}
	}
}

func TestNIfTITextsStayASCIIAndWithinTheirFields(t *testing.T) {
	if got := describe("R1 (²)", "1/µs"); got != "R1 (2) [1/us]" {
		t.Errorf("%q", got)
	}
	m := sample()
	m.Name = strings.Repeat("é", 100)
	packed, err := gzip.NewReader(bytes.NewReader(written(t, func(w io.Writer) error { return NIfTI(w, m) })))
	if err != nil {
		t.Fatal(err)
	}
	raw, err := io.ReadAll(packed)
	if err != nil || string(raw[148:228]) != strings.Repeat("?", 79)+"\x00" || string(raw[328:344]) != strings.Repeat("?", 15)+"\x00" {
		t.Errorf("%q %q %v", raw[148:228], raw[328:344], err)
	}
}

func TestNIfTIHoldsAsManyVoxelsPerAxisAsItsHeaderCanSay(t *testing.T) {
	for n, ok := range map[int]bool{32767: true, 32768: false} {
		g := volume.Grid{N: [3]int{n, 1, 1}, VoxelMM: [3]float64{1, 1, 1}}
		err := NIfTIMask(io.Discard, "tumour", g, make([]bool, n))
		if ok && err != nil {
			t.Errorf("%d: %v", n, err)
		}
		if !ok {
			wantFault(t, err, fault.TooLarge)
		}
	}
}

func TestAMapWithoutFiniteValuesHasNoDisplayRange(t *testing.T) {
	if least, most := finiteRange([]float32{float32(math.NaN()), float32(math.Inf(1))}); least != 0 || most != 0 {
		t.Errorf("%g to %g", least, most)
	}
}

// measured returns an acquisition with every kind of field.
func measured() *acquisition.Acquisition {
	celsius := 36.5
	a := &acquisition.Acquisition{
		Name: "traces", Delays: 2, Shots: 3, Samples: 5, Dim: 3, DelayUS: []float64{1, 4}, DwellNS: 5, TimeZeroSample: 1.5,
		GradientMTPerM: [][3]float64{{1, 2, 3}, {-4, 5, 6}, {0, 0, 0}}, ShotRole: []int{0, 0, 1},
		Sequence: acquisition.EchoDecay, Encoding: acquisition.Spoke, Domain: acquisition.Time,
		Optional: acquisition.Optional{TemperatureC: &celsius, Note: "µl\nsecond line"},
	}
	for i := range 30 {
		a.Signal = append(a.Signal, complex(float32(i)/3, float32(-i)))
	}
	return a
}

func TestAnAcquisitionWrittenIsReadTheSame(t *testing.T) {
	write := func(w io.Writer) error { return Acquisition(w, measured()) }
	data := written(t, write)
	if !bytes.Equal(data, written(t, write)) {
		t.Error("two writings differ")
	}
	got, warnings, err := importer.Open("traces.npz", data)
	if err != nil || len(warnings) != 0 || !reflect.DeepEqual(got, measured()) {
		t.Errorf("%q, %v\ngot  %+v\nwant %+v", warnings, err, got, measured())
	}
}

func TestArraysKeepByteOrderAndLayoutWhenWritten(t *testing.T) {
	for _, layout := range []acquisition.Layout{
		{Kind: acquisition.Float, Size: 4, BigEndian: true}, {Kind: acquisition.Complex, Size: 16, FirstAxisFastest: true},
		{Kind: acquisition.Bytes, Size: 3}, {Kind: acquisition.Text, Size: 8, BigEndian: true}, {Kind: acquisition.Bool, Size: 1},
	} {
		raw := make([]byte, 6*layout.Size)
		for i := range raw {
			raw[i] = byte(7 * i)
		}
		want, err := acquisition.NewArray("x", []int{3, 2}, layout, raw)
		if err != nil {
			t.Fatal(err)
		}
		data := written(t, func(w io.Writer) error { return WriteNPZ(w, []acquisition.Array{want}) })
		got, err := importer.Read("x.npz", data)
		if err != nil || len(got) != 1 || got[0].Layout() != layout || !slices.Equal(got[0].Raw(), raw) || !slices.Equal(got[0].Shape, want.Shape) {
			t.Errorf("%+v: %+v, %v", layout, got, err)
		}
	}
}

func TestArchiveNamesStandOnce(t *testing.T) {
	x := acquisition.TextOf("x", "")
	wantFault(t, WriteNPZ(io.Discard, []acquisition.Array{x, x}), fault.BadSetting)
	wantFault(t, WriteNPZ(io.Discard, []acquisition.Array{acquisition.TextOf("", "")}), fault.BadSetting)
}
