package importer

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// nifti is a volume as a single NIfTI-1 file, either byte order. It holds two arrays: the values by the name of the file,
// first axis fastest, scaled as the header asks; and "affine", the [4, 4] matrix from voxel indices (x, y, z, 1) to mm.
// Source: R. W. Cox et al., "A (sort of) new image data format standard: NIfTI-1", NeuroImage 22 (2004) e1440, and the
// header file nifti1.h of the standard, whose field names are kept below.
var nifti = Format{
	Name:       "NIfTI-1 volume",
	Extensions: []string{".nii", ".nii.gz"},
	Recognise: func(head []byte) bool {
		return len(head) >= 8 && niftiOrder(head) != nil ||
			bytes.HasPrefix(head[min(4, len(head)):], []byte("n+2\x00\r\n\x1a\n"))
	},
	Read: readNIfTI,
}

// Places in the header.
const (
	niftiHeaderBytes = 348
	niftiDim         = 40
	niftiDatatype    = 70
	niftiPixdim      = 76
	niftiVoxOffset   = 108
	niftiSclSlope    = 112
	niftiSclInter    = 116
	niftiXyztUnits   = 123
	niftiDescrip     = 148
	niftiQform       = 252
	niftiSform       = 254
	niftiQuatern     = 256
	niftiQoffset     = 268
	niftiSrow        = 280
	niftiIntentName  = 328
	niftiMagic       = 344
)

// niftiLayout is what a datatype code stands for, of those that are read.
var niftiLayout = map[int16]acquisition.Layout{
	2: {Kind: acquisition.Uint, Size: 1}, 4: {Kind: acquisition.Int, Size: 2}, 8: {Kind: acquisition.Int, Size: 4},
	16: {Kind: acquisition.Float, Size: 4}, 32: {Kind: acquisition.Complex, Size: 8}, 64: {Kind: acquisition.Float,
		Size: 8},
	256: {Kind: acquisition.Int, Size: 1}, 512: {Kind: acquisition.Uint, Size: 2}, 768: {Kind: acquisition.Uint, Size: 4},
	1024: {Kind: acquisition.Int, Size: 8}, 1280: {Kind: acquisition.Uint, Size: 8}, 1792: {Kind: acquisition.Complex,
		Size: 16},
}

// niftiMM is the length in mm of a unit of space by its code.
var niftiMM = map[byte]float64{0: 1, 1: 1000, 2: 1, 3: 0.001}

// niftiTime names the units of the fourth axis by their code.
var niftiTime = map[byte]string{8: "s", 16: "ms", 24: "us", 32: "Hz", 40: "ppm", 48: "rad/s"}

// niftiOrder returns the byte order in which the header states its own length, or nil.
func niftiOrder(head []byte) binary.ByteOrder {
	switch {
	case binary.LittleEndian.Uint32(head) == niftiHeaderBytes:
		return binary.LittleEndian
	case binary.BigEndian.Uint32(head) == niftiHeaderBytes:
		return binary.BigEndian
	}
	return nil
}

// niftiFile is a header with its byte order.
type niftiFile struct {
	order binary.ByteOrder
	head  []byte
}

func (f niftiFile) short(at int) int16 { return int16(f.order.Uint16(f.head[at:])) }
func (f niftiFile) float(at int) float64 {
	return float64(math.Float32frombits(f.order.Uint32(f.head[at:])))
}
func (f niftiFile) text(at, n int) string { return strings.TrimRight(string(f.head[at:at+n]), "\x00 ") }

func readNIfTI(name string, data []byte, limits Limits) ([]acquisition.Array, error) {
	order := niftiOrder(data)
	if order == nil {
		return nil, fault.New(fault.Unsupported, "", "a NIfTI-2 volume; save it as NIfTI-1")
	}
	if len(data) < niftiHeaderBytes {
		return nil, fault.New(fault.BadFile, fmt.Sprintf("byte %d", len(data)),
			"ends within the header of %d bytes; the file may be cut short", niftiHeaderBytes)
	}
	f := niftiFile{order, data[:niftiHeaderBytes]}
	switch magic := string(data[niftiMagic : niftiMagic+4]); magic {
	case "n+1\x00":
	case "ni1\x00":
		return nil, fault.New(fault.Unsupported, "",
			"the header of a volume in two files (.hdr and .img); save it as a single file (.nii)")
	default:
		return nil, fault.New(fault.Unsupported, "byte 344",
			"%q found, \"n+1\" wanted; this may be an ANALYZE header, save it as NIfTI-1", magic)
	}
	volume, err := f.volume(data, limits)
	if err != nil {
		return nil, err
	}
	volume.Name, volume.AfterFile = stem(strings.TrimSuffix(name, ".gz")), true
	affine, source, err := f.affine(volume.Shape)
	if err != nil {
		return nil, err
	}
	volume.Attributes = f.attributes(source)
	return []acquisition.Array{volume, affine}, nil
}

// attributes returns what the header says in words. cal_min, cal_max and the like are for display only.
func (f niftiFile) attributes(source string) map[string]string {
	out := map[string]string{"orientation": source}
	if text := f.text(niftiDescrip, 80); text != "" {
		out["descrip"] = text
	}
	if text := f.text(niftiIntentName, 16); text != "" {
		out["intent_name"] = text
	}
	if unit := niftiTime[f.head[niftiXyztUnits]&0x38]; unit != "" {
		out["fourth axis"] = fmt.Sprintf("%g %s", f.float(niftiPixdim+4*4), unit)
	}
	return out
}

// shape returns the lengths of the axes. The order of bytes has been told by the length of the header already.
func (f niftiFile) shape(limits Limits) ([]int, error) {
	axes := int(f.short(niftiDim))
	if axes < 1 || axes > 7 {
		return nil, fault.New(fault.BadFile, "byte 40", "%d axes; 1 to 7 wanted", axes)
	}
	shape := make([]int, axes)
	for i := range shape {
		shape[i] = int(f.short(niftiDim + 2 + 2*i))
	}
	return shape, limits.checkShape(shape)
}

// volume returns the values, which must be all there; bytes behind them are let pass, as tools fill up to blocks.
func (f niftiFile) volume(data []byte, limits Limits) (acquisition.Array, error) {
	none := acquisition.Array{}
	code := f.short(niftiDatatype)
	layout, known := niftiLayout[code]
	if !known {
		return none, fault.New(fault.Unsupported, "byte 70",
			"datatype %d; integers, floats and complex numbers of up to 64 bits each are read", code)
	}
	shape, err := f.shape(limits)
	if err != nil {
		return none, err
	}
	offset := f.float(niftiVoxOffset)
	const least = niftiHeaderBytes + 4 // the four bytes that announce extensions
	if !(offset >= least && offset <= float64(len(data))) || offset != math.Trunc(offset) {
		return none, fault.New(fault.BadFile, "byte 108", "values at byte %g of %d; %d or later wanted", offset,
			len(data), least)
	}
	start, n := int(offset), elements(shape)*layout.Size
	if n > len(data)-start {
		return none, fault.New(fault.BadFile, fmt.Sprintf("byte %d", len(data)),
			"ends after %d bytes of values, shape %s takes %d; the file may be cut short", len(data)-start, acquisition.ShapeText(shape), n)
	}
	layout.BigEndian = f.order == binary.ByteOrder(binary.BigEndian) && layout.Size > 1
	layout.FirstAxisFastest = true
	array, err := acquisition.NewArray("", shape, layout, data[start:start+n])
	if err != nil {
		return none, err
	}
	return f.scaled(array)
}

// scaled returns scl_slope·v + scl_inter. A slope of zero means that the values are as they are.
func (f niftiFile) scaled(array acquisition.Array) (acquisition.Array, error) {
	slope, inter := f.float(niftiSclSlope), f.float(niftiSclInter)
	if slope == 0 || slope-slope != 0 || inter-inter != 0 || slope == 1 && inter == 0 {
		return array, nil
	}
	stored := array.Layout()
	part := acquisition.Layout{Kind: acquisition.Float, Size: 8}
	count := array.Len()
	if stored.Kind == acquisition.Complex {
		stored.Kind, stored.Size = acquisition.Float, stored.Size/2
		count *= 2
	}
	flat, err := acquisition.NewArray("", []int{count}, stored, array.Raw())
	if err != nil {
		return array, err
	}
	values, err := flat.Float64s()
	if err != nil {
		return array, err
	}
	raw := make([]byte, 0, 8*len(values))
	for i, v := range values {
		v *= slope
		if count == array.Len() || i%2 == 0 { // the intercept of complex values is real
			v += inter
		}
		raw = appendNumber(raw, part, v)
	}
	layout := acquisition.Layout{Kind: acquisition.Float, Size: 8, FirstAxisFastest: true}
	if count != array.Len() {
		layout.Kind, layout.Size = acquisition.Complex, 16
	}
	return acquisition.NewArray("", array.Shape, layout, raw)
}

// affine returns the matrix from voxel indices to mm, and where it comes from: the sform, else the qform, else the voxel
// sizes alone with the middle voxel at the origin.
func (f niftiFile) affine(shape []int) (acquisition.Array, string, error) {
	rows, source := f.bySizes(shape), "none stated; middle voxel at the origin, axes taken as x, y, z"
	if f.short(niftiQform) > 0 {
		rows, source = f.byQuaternion(), "qform"
	}
	if f.short(niftiSform) > 0 {
		rows, source = f.byRows(), "sform"
	}
	unit := f.head[niftiXyztUnits] & 7
	mm, known := niftiMM[unit]
	if !known {
		return acquisition.Array{}, "", fault.New(fault.BadFile, "byte 123",
			"unit of space %d; 1 (m), 2 (mm) or 3 (µm) wanted", unit)
	}
	if unit == 0 {
		source += "; unit not stated, mm taken"
	}
	values := make([]float64, 0, 16)
	for _, row := range rows {
		for _, v := range row {
			if v-v != 0 {
				return acquisition.Array{}, "", fault.New(fault.BadFile, "header",
					"the place of the voxels is not finite (%s)", source)
			}
			values = append(values, v*mm)
		}
	}
	affine, err := acquisition.ArrayOf("affine", []int{4, 4}, append(values, 0, 0, 0, 1))
	affine.Unit = "mm"
	return affine, source, err
}

func (f niftiFile) bySizes(shape []int) (rows [3][4]float64) {
	for axis := range 3 {
		rows[axis][axis] = 1
		if axis < len(shape) {
			rows[axis][axis] = math.Abs(f.float(niftiPixdim + 4*(axis+1)))
			rows[axis][3] = -rows[axis][axis] * float64(shape[axis]/2)
		}
	}
	return rows
}

func (f niftiFile) byRows() (rows [3][4]float64) {
	for axis := range 3 {
		for i := range 4 {
			rows[axis][i] = f.float(niftiSrow + 4*(4*axis+i))
		}
	}
	return rows
}

// byQuaternion returns the matrix of the qform: the rotation of the unit quaternion (a, b, c, d) with a >= 0, the voxel
// sizes, and qfac = pixdim[0], which turns the third axis round when it is negative.
// Source: nifti1.h, "METHOD 2".
func (f niftiFile) byQuaternion() (rows [3][4]float64) {
	b, c, d := f.float(niftiQuatern), f.float(niftiQuatern+4), f.float(niftiQuatern+8)
	a := 0.0
	if rest := 1 - b*b - c*c - d*d; rest > 1e-7 { // the size of what rounding to float32 leaves of a zero
		a = math.Sqrt(rest)
	} else { // a half turn
		norm := math.Sqrt(b*b + c*c + d*d)
		b, c, d = b/norm, c/norm, d/norm
	}
	rotation := [3][3]float64{
		{a*a + b*b - c*c - d*d, 2 * (b*c - a*d), 2 * (b*d + a*c)},
		{2 * (b*c + a*d), a*a + c*c - b*b - d*d, 2 * (c*d - a*b)},
		{2 * (b*d - a*c), 2 * (c*d + a*b), a*a + d*d - b*b - c*c},
	}
	for axis := range 3 {
		for i := range 3 {
			size := f.float(niftiPixdim + 4*(i+1))
			if i == 2 && f.float(niftiPixdim) < 0 {
				size = -size
			}
			rows[axis][i] = rotation[axis][i] * size
		}
		rows[axis][3] = f.float(niftiQoffset + 4*axis)
	}
	return rows
}
