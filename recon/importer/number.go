package importer

import (
	"encoding/binary"
	"math"
	"unicode/utf16"

	"torrloom/recon/acquisition"
)

// appendNumber appends a number as one little-endian element of a bool, integer or float layout.
func appendNumber(raw []byte, layout acquisition.Layout, v float64) []byte {
	at := len(raw)
	raw = append(raw, make([]byte, layout.Size)...)
	put(raw[at:], layout, v)
	return raw
}

// put writes a number at the head of raw as appendNumber does; for a complex layout, as one part.
func put(raw []byte, layout acquisition.Layout, v float64) {
	switch {
	case layout.Kind == acquisition.Bool:
		raw[0] = 0
		if v != 0 {
			raw[0] = 1
		}
	case layout.Kind == acquisition.Complex || layout.Kind == acquisition.Float && layout.Size == 8:
		binary.LittleEndian.PutUint64(raw, math.Float64bits(v))
	case layout.Kind == acquisition.Float:
		binary.LittleEndian.PutUint32(raw, math.Float32bits(float32(v)))
	default:
		bits := uint64(int64(v))
		if v >= math.MaxInt64 {
			bits = uint64(v)
		}
		for i := range layout.Size {
			raw[i] = byte(bits >> (8 * i))
		}
	}
}

// fromUTF16 returns the characters of 16-bit code units.
func fromUTF16(units []float64) []rune {
	words := make([]uint16, len(units))
	for i, v := range units {
		words[i] = uint16(v)
	}
	return utf16.Decode(words)
}
