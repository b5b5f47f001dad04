package exporter

import (
	"compress/gzip"
	"encoding/binary"
	"io"
	"math"
	"strings"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// niftiHeader is the header of a NIfTI-1 file, field by field as the standard lays it out, little-endian.
// Source: R. W. Cox et al., "A (sort of) new image data format standard: NIfTI-1", NeuroImage 22 (2004) e1440, and
// the header file nifti1.h of the standard.
type niftiHeader struct {
	SizeofHdr                     int32
	_                             [35]byte // ANALYZE fields, unused
	DimInfo                       byte
	Dim                           [8]int16
	IntentP                       [3]float32
	IntentCode, Datatype, Bitpix  int16
	SliceStart                    int16
	Pixdim                        [8]float32
	VoxOffset, SclSlope, SclInter float32
	SliceEnd                      int16
	SliceCode, XyztUnits          byte
	CalMax, CalMin                float32
	SliceDuration, Toffset        float32
	_                             [2]int32
	Descrip                       [80]byte
	AuxFile                       [24]byte
	QformCode, SformCode          int16
	QuaternB, QuaternC, QuaternD  float32
	QoffsetX, QoffsetY, QoffsetZ  float32
	SrowX, SrowY, SrowZ           [4]float32
	IntentName                    [16]byte
	Magic                         [4]byte
	Extension                     [4]byte // behind the 348 bytes of the header proper: zero, no extensions follow
}

// Codes of the standard.
const (
	niftiHeaderBytes  = 348
	niftiVoxelOffset  = 352 // header and the four bytes that announce extensions
	niftiUint8        = 2
	niftiFloat32      = 16
	niftiUnitMM       = 2
	niftiScannerFrame = 1 // coordinates of the instrument: here of its gradients
	niftiMaxLength    = math.MaxInt16
)

// NIfTI writes a map as a compressed single-file NIfTI-1 image (.nii.gz) of float32. Both the sform and the qform
// place voxel centres at Grid.Affine, in mm; descrip reads "quantity [unit]"; the display range spans the finite
// values.
//
// Errors: too-large when an axis has more voxels than the header can say.
func NIfTI(w io.Writer, m volume.Map) error {
	header, err := headerFor(m.Grid, len(m.Values), describe(m.Name, m.Unit))
	if err != nil {
		return err
	}
	header.Datatype, header.Bitpix = niftiFloat32, 32
	header.CalMin, header.CalMax = finiteRange(m.Values)
	copy(header.IntentName[:15], ascii(m.Name))
	return writeNIfTI(w, header, m.Values)
}

// NIfTIMask writes a mask as NIfTI does a map, as uint8: 1 inside, 0 outside.
func NIfTIMask(w io.Writer, name string, g volume.Grid, inside []bool) error {
	header, err := headerFor(g, len(inside), describe(name, ""))
	if err != nil {
		return err
	}
	header.Datatype, header.Bitpix = niftiUint8, 8
	header.CalMax = 1
	copy(header.IntentName[:15], ascii(name))
	return writeNIfTI(w, header, inside)
}

// headerFor returns what the header says of the grid.
func headerFor(g volume.Grid, values int, description string) (niftiHeader, error) {
	if err := checkGrid("NIfTI", g, values); err != nil {
		return niftiHeader{}, err
	}
	h := niftiHeader{SizeofHdr: niftiHeaderBytes, VoxOffset: niftiVoxelOffset, SclSlope: 1, XyztUnits: niftiUnitMM}
	h.Dim = [8]int16{3, 1, 1, 1, 1, 1, 1, 1}
	h.Pixdim[0] = 1 // qfac: right-handed
	for axis, n := range g.N {
		if n > niftiMaxLength {
			return niftiHeader{}, fault.New(fault.TooLarge,
				"NIfTI", "%d voxels along an axis, the format holds %d", n, niftiMaxLength)
		}
		h.Dim[axis+1] = int16(n)
		h.Pixdim[axis+1] = float32(g.VoxelMM[axis])
	}
	h.QformCode, h.SformCode = niftiScannerFrame, niftiScannerFrame
	rows := g.Affine()
	for axis, row := range []*[4]float32{&h.SrowX, &h.SrowY, &h.SrowZ} {
		for i := range row {
			row[i] = float32(rows[axis][i])
		}
	}
	h.QoffsetX, h.QoffsetY, h.QoffsetZ = h.SrowX[3], h.SrowY[3], h.SrowZ[3]
	copy(h.Descrip[:79], description) // the last byte stays NUL
	copy(h.Magic[:], "n+1\x00")
	return h, nil
}

func describe(quantity, unit string) string {
	if unit == "" {
		return ascii(quantity)
	}
	return ascii(quantity) + " [" + ascii(unit) + "]"
}

// ascii returns s for a header that holds ASCII only.
func ascii(s string) string {
	s = strings.NewReplacer("µ", "u", "μ", "u", "³", "3", "²", "2", "₂", "2").Replace(s)
	return strings.Map(func(r rune) rune {
		if r < ' ' || r > '~' {
			return '?'
		}
		return r
	}, s)
}

// finiteRange returns the least and the greatest finite value, or zeros, which mean "not stated", when there is none.
func finiteRange(values []float32) (least, most float32) {
	least, most = float32(math.Inf(1)), float32(math.Inf(-1))
	for _, v := range values {
		if v-v == 0 {
			least, most = min(least, v), max(most, v)
		}
	}
	if least > most {
		return 0, 0
	}
	return least, most
}

// writeNIfTI compresses header and values; a gzip header without name and time keeps the bytes the same.
func writeNIfTI[T bool | float32](w io.Writer, header niftiHeader, values []T) error {
	packed := gzip.NewWriter(w)
	if err := binary.Write(packed, binary.LittleEndian, header); err != nil {
		return err
	}
	const block = 1 << 16 // binary.Write encodes what it is given in one piece
	for ; len(values) > 0; values = values[min(block, len(values)):] {
		if err := binary.Write(packed, binary.LittleEndian, values[:min(block, len(values))]); err != nil {
			return err
		}
	}
	return packed.Close()
}
