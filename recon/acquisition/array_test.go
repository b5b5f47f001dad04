package acquisition

import (
	"encoding/binary"
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"torrloom/recon/fault"
)

// wantFault fails unless err is a fault of that kind, and returns it.
func wantFault(t *testing.T, err error, kind fault.Kind) *fault.Fault {
	t.Helper()
	var f *fault.Fault
	if !errors.As(err, &f) || f.Kind != kind {
		t.Fatalf("got %v, want a %s fault", err, kind)
	}
	return f
}

func mustArray(t *testing.T, name string, shape []int, layout Layout, raw []byte) Array {
	t.Helper()
	a, err := NewArray(name, shape, layout, raw)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// Source of the values: IEEE 754-2008, binary16: largest, smallest normal and smallest subnormal number, and 1/3 rounded
// to eleven bits.
func TestHalfFloatsAtTheEdgesOfTheirFormat(t *testing.T) {
	for bits, want := range map[uint16]float64{
		0x0000: 0, 0x3c00: 1, 0xc000: -2, 0x7bff: 65504, 0x0400: 0x1p-14, 0x0001: 0x1p-24, 0x3555: 1365.0 / 4096,
		0x7c00: math.Inf(1), 0xfc00: math.Inf(-1),
	} {
		if got := half(bits); got != want {
			t.Errorf("%04x: %g, want %g", bits, got, want)
		}
	}
	if got := half(0x7e00); !math.IsNaN(got) {
		t.Errorf("7e00: %g, want NaN", got)
	}
}

func TestNumbersOfEveryWidthAndOrder(t *testing.T) {
	for _, c := range []struct {
		kind ElementKind
		raw  []byte // most significant byte first
		want float64
	}{
		{Bool, []byte{2}, 1}, {Int, []byte{0x80}, -128}, {Uint, []byte{0x80}, 128},
		{Int, []byte{0x80, 1}, -32767}, {Uint, []byte{0x80, 1}, 32769},
		{Int, []byte{0xff, 0xff, 0xff, 0xfe}, -2}, {Uint, []byte{0xff, 0xff, 0xff, 0xfe}, 1<<32 - 2},
		{Int, []byte{0x80, 0, 0, 0, 0, 0, 0, 0}, -1 << 63}, {Uint, []byte{0x80, 0, 0, 0, 0, 0, 0, 0}, 1 << 63},
		{Float, []byte{0xc0, 0}, -2}, {Float, []byte{0xc0, 0, 0, 0}, -2}, {Float, []byte{0xc0, 0, 0, 0, 0, 0, 0, 0}, -2},
	} {
		for _, big := range []bool{true, false} {
			raw := slices.Clone(c.raw)
			if !big {
				slices.Reverse(raw)
			}
			a := mustArray(t, "x", nil, Layout{Kind: c.kind, Size: len(raw), BigEndian: big}, raw)
			got, err := a.Float64s()
			if err != nil || got[0] != c.want {
				t.Errorf("%s big-endian %t: %v, %v; want %g", a.Type, big, got, err, c.want)
			}
		}
	}
}

func TestColumnMajorComesOutLastAxisFastest(t *testing.T) {
	shape := []int{2, 3, 4}
	raw := make([]byte, 24)
	for i := range 2 {
		for j := range 3 {
			for k := range 4 {
				raw[i+2*(j+3*k)] = byte((i*3+j)*4 + k) // the value is the place it must come to
			}
		}
	}
	a := mustArray(t, "x", shape, Layout{Kind: Uint, Size: 1, FirstAxisFastest: true}, raw)
	got, err := a.Float64s()
	for at, v := range got {
		if v != float64(at) {
			t.Errorf("place %d holds %g", at, v)
		}
	}
	if err != nil || len(got) != 24 {
		t.Errorf("%d values, %v", len(got), err)
	}
}

func TestRawMustHoldExactlyTheShape(t *testing.T) {
	layout := Layout{Kind: Float, Size: 4}
	for _, c := range []struct {
		shape []int
		bytes int
		ok    bool
	}{
		{nil, 4, true}, {nil, 0, false}, {nil, 8, false},
		{[]int{2, 3}, 24, true}, {[]int{2, 3}, 23, false}, {[]int{2, 3}, 25, false}, {[]int{2, 3}, 28, false},
		{[]int{0, 3}, 0, true}, {[]int{3, 0}, 4, false}, {[]int{0, -1}, 0, false}, {[]int{-1, -6}, 24, false},
		{[]int{1 << 62, 4}, 0, false}, {[]int{1 << 32, 1 << 32}, 0, false}, {[]int{1 << 32, 1 << 31}, 4, false},
	} {
		_, err := NewArray("x", c.shape, layout, make([]byte, c.bytes))
		if c.ok && err != nil {
			t.Errorf("%v in %d bytes: %v", c.shape, c.bytes, err)
		}
		if !c.ok {
			wantFault(t, err, fault.BadFile)
		}
	}
}

func TestElementsOfOddSizesAreUnsupported(t *testing.T) {
	for _, layout := range []Layout{
		{Kind: Float, Size: 16}, {Kind: Complex, Size: 32}, {Kind: Int, Size: 3}, {Kind: Bool, Size: 2}, {Kind: Text, Size: 6}, {Kind: Bytes}, {Kind: 'V', Size: 8},
	} {
		_, err := NewArray("x", nil, layout, make([]byte, layout.Size))
		wantFault(t, err, fault.Unsupported)
	}
}

func TestRangeLeavesOutWhatIsNotFinite(t *testing.T) {
	inf := float32(math.Inf(1))
	nan := float32(math.NaN())
	a, err := ArrayOf("x", []int{3}, []complex64{complex(nan, -3), complex(inf, 2), complex(1, -inf)})
	if err != nil {
		t.Fatal(err)
	}
	if least, most := a.Range(); least != -3 || most != 2 {
		t.Errorf("range %g to %g, want -3 to 2", least, most)
	}
	for _, none := range []Array{TextOf("x", "word"), mustArray(t, "x", []int{0}, Layout{Kind: Float, Size: 8}, nil)} {
		if least, most := none.Range(); !math.IsNaN(least) || !math.IsNaN(most) {
			t.Errorf("%s: range %g to %g, want NaN", none.Type, least, most)
		}
	}
}

func TestSwappedBytesAreNoticedAndOrdinaryOnesAreNot(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	for _, scale := range []float64{1e-6, 1, 3e4} {
		for _, layout := range []Layout{{Kind: Float, Size: 4}, {Kind: Float, Size: 8}, {Kind: Complex, Size: 8}, {Kind: Complex, Size: 16}, {Kind: Int, Size: 4}, {Kind: Int, Size: 8}} {
			var raw []byte
			for range 1000 {
				v := scale * random.NormFloat64()
				switch {
				case layout.Kind == Int:
					raw = append(raw, binary.LittleEndian.AppendUint64(nil, uint64(int64(100*v)))[:layout.Size]...)
				case layout.part() == 4:
					raw = binary.LittleEndian.AppendUint32(raw, math.Float32bits(float32(v)))
				default:
					raw = binary.LittleEndian.AppendUint64(raw, math.Float64bits(v))
				}
			}
			shape := []int{len(raw) / layout.Size}
			if mustArray(t, "x", shape, layout, raw).LooksSwapped() {
				t.Errorf("%s of scale %g: ordinary values are called swapped", layout.Word(), scale)
			}
			layout.BigEndian = true
			allZero := layout.Kind == Int && scale < 1e-3 // all round to zero, which has no order
			if got := mustArray(t, "x", shape, layout, raw).LooksSwapped(); got == allZero {
				t.Errorf("%s of scale %g: swapped values, noticed %t", layout.Word(), scale, got)
			}
		}
	}
}

func TestTextOfEveryKind(t *testing.T) {
	for _, c := range []struct {
		layout Layout
		raw    string
		want   []string
	}{
		{Layout{Kind: Bytes, Size: 3}, "ab\x00\x00\x00\x00xyz", []string{"ab", "", "xyz"}},
		{Layout{Kind: Bytes, Size: 2}, "\xc2\xb5", []string{"µ"}}, // UTF-8
		{Layout{Kind: Bytes, Size: 2}, "\xb5s", []string{"µs"}},   // ISO 8859-1
		{Layout{Kind: Text, Size: 8}, "\xb5\x00\x00\x00s\x00\x00\x00", []string{"µs"}},
		{Layout{Kind: Text, Size: 8, BigEndian: true}, "\x00\x00\x00\xb5\x00\x00\x00s", []string{"µs"}},
		{Layout{Kind: Text, Size: 4}, "\xff\xff\xff\xff", []string{"\ufffd"}}, // no code of Unicode
	} {
		a := mustArray(t, "x", []int{len(c.raw) / c.layout.Size}, c.layout, []byte(c.raw))
		got, err := a.Strings()
		if err != nil || !slices.Equal(got, c.want) {
			t.Errorf("%q: %q, %v; want %q", c.raw, got, err, c.want)
		}
	}
}

func TestTextIsNoNumberAndComplexIsNotReal(t *testing.T) {
	text := TextOf("x", "4")
	if _, err := text.Float64s(); err != nil {
		wantFault(t, err, fault.BadFile)
	} else {
		t.Error("text was read as real numbers")
	}
	_, err := text.Complex64s()
	wantFault(t, err, fault.BadFile)
	number, _ := ArrayOf("x", nil, []complex64{1})
	_, err = number.Float64s()
	wantFault(t, err, fault.BadFile)
	_, err = number.Strings()
	wantFault(t, err, fault.BadFile)
}

func TestArrayOfKeepsWhatItIsGiven(t *testing.T) {
	numbers := []float64{math.Pi, -2, math.Inf(1)}
	a, err := ArrayOf("x", []int{3}, numbers)
	got, errRead := a.Float64s()
	if err != nil || errRead != nil || !slices.Equal(got, numbers) || a.Type != "float64" {
		t.Errorf("%s %v %v %v", a.Type, got, err, errRead)
	}
	traces := []complex64{1 + 2i, -3.5i}
	b, err := ArrayOf("x", []int{2, 1}, traces)
	back, errRead := b.Complex64s()
	if err != nil || errRead != nil || !slices.Equal(back, traces) || b.Type != "complex64" {
		t.Errorf("%s %v %v %v", b.Type, back, err, errRead)
	}
	for _, word := range []string{"", "trityl, 1 mM, µ"} {
		if got, err := TextOf("x", word).Strings(); err != nil || got[0] != word {
			t.Errorf("%q: %q, %v", word, got, err)
		}
	}
	_, err = ArrayOf("x", []int{2}, numbers)
	wantFault(t, err, fault.BadFile)
}
