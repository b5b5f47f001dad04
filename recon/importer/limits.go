package importer

import (
	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// Limits holds what a file may ask for. Each value is the largest that is let pass.
type Limits struct {
	HeaderBytes   int64 // text header of one array
	Dimensions    int   // axes of one array
	Elements      int64 // elements of one array
	Members       int   // arrays in one archive
	UnpackedBytes int64 // all members of one archive together
	Ratio         int64 // unpacked bytes per byte of archive
	HarmlessBytes int64 // a gzip file may unpack to so many, whatever the ratio
	Nesting       int   // structs, cells, blocks and archives within each other
	Arrays        int   // arrays in one file, or files in one set
}

// Default is what is read without asking. The largest acquisition expected, 3000 shots of 2048 samples at 10 delays,
// has 2^26 elements and half a GiB. A browser worker can hold 2 GiB beside its own work. Measured traces do not pack
// below half their size, so 200:1 is either constant data or an attack; but a mask, which comes as a NIfTI volume packed by
// gzip, is nearly all zeros and may pack 1000:1, so one of 256 voxels along each axis passes. Ten delays of 3000 shots,
// each a cell or a file of its own, are 30000.
var Default = Limits{
	HeaderBytes:   64 << 10,
	Dimensions:    8,
	Elements:      1 << 28,
	Members:       1000,
	UnpackedBytes: 2 << 30,
	Ratio:         200,
	HarmlessBytes: 32 << 20,
	Nesting:       32,
	Arrays:        1 << 16,
}

// checkHeader returns a too-large fault when a header states more bytes than are let pass.
func (l Limits) checkHeader(stated int64) error {
	if stated > l.HeaderBytes {
		return fault.New(fault.TooLarge, "header", "%d bytes stated, the limit is %d", stated, l.HeaderBytes)
	}
	return nil
}

// checkShape returns a fault when an array of that shape has a negative length, too many axes or too many elements.
// Lengths beside an axis of length 0 count as well, so that no later product of lengths can overflow.
func (l Limits) checkShape(shape []int) error {
	if len(shape) > l.Dimensions {
		return fault.New(fault.TooLarge, "", "%d axes, the limit is %d", len(shape), l.Dimensions)
	}
	elements := int64(1)
	for _, n := range shape {
		if n < 0 {
			return fault.New(fault.BadFile, "", "shape %s has a negative length", acquisition.ShapeText(shape))
		}
		if int64(n) > l.Elements/elements {
			return fault.New(fault.TooLarge,
				"",
				"shape %s has more elements than the limit of %d; split it or keep fewer shots or delays",
				acquisition.ShapeText(shape), l.Elements)
		}
		elements *= int64(max(n, 1))
	}
	return nil
}

// checkMembers returns a too-large fault when an archive has too many members.
func (l Limits) checkMembers(n int) error {
	if n > l.Members {
		return fault.New(fault.TooLarge, "", "%d members, the limit is %d", n, l.Members)
	}
	return nil
}

// checkUnpacked returns a too-large fault when members of the stated sizes pass the limit together, or unpack to too
// many times the bytes of the archive.
func (l Limits) checkUnpacked(stated []uint64, archive int64) error {
	total := int64(0)
	for _, n := range stated {
		if n > uint64(l.UnpackedBytes-total) {
			return fault.New(fault.TooLarge,
				"",
				"the members unpack to more than the limit of %.1f GiB; keep fewer shots or delays", float64(l.UnpackedBytes)/(1<<30))
		}
		total += int64(n)
	}
	if total > l.Ratio*archive {
		return fault.New(fault.TooLarge,
			"", "%d bytes unpack to %d, more than %d:1; write it without compression if that is meant", archive, total, l.Ratio)
	}
	return nil
}
