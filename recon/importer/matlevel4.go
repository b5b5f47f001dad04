package importer

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// matLevel4 is a MAT-file of level 4: matrices of numbers or characters, one behind the other, without a file header.
// Source: The MathWorks, MAT-File Format (reference manual), chapter 2.
var matLevel4 = Format{
	Name:       "MAT-file, level 4",
	Extensions: []string{".mat"},
	Recognise: func(head []byte) bool {
		h, err := parseMAT4(head, 0)
		return err == nil && h.name != ""
	},
	Read: func(_ string, data []byte, limits Limits) ([]acquisition.Array, error) { return walkMAT4(data, limits) },
}

const (
	mat4HeaderBytes = 20
	mat4NameBytes   = 64 // longest name that MATLAB lets pass, with its NUL
)

// mat4Number is the element type by the digit P of the type word.
var mat4Number = []acquisition.Layout{
	{Kind: acquisition.Float, Size: 8}, {Kind: acquisition.Float, Size: 4}, {Kind: acquisition.Int, Size: 4},
	{Kind: acquisition.Int, Size: 2}, {Kind: acquisition.Uint, Size: 2}, {Kind: acquisition.Uint, Size: 1},
}

// What a matrix is, by the digit T of the type word.
const (
	mat4Full   = 0
	mat4Text   = 1
	mat4Sparse = 2
)

type mat4Header struct {
	big           bool
	layout        acquisition.Layout
	what          int
	rows, columns int
	complex       bool
	name          string
	start         int // of the values
}

// parseMAT4 reads the header that begins at data[at]. A name of NULs is returned empty.
func parseMAT4(data []byte, at int) (h mat4Header, err error) {
	where := fmt.Sprintf("byte %d", at)
	if len(data)-at < mat4HeaderBytes {
		return h, fault.New(fault.BadFile, where,
			"%d bytes are left, the header of a matrix takes %d; the file may be cut short", len(data)-at, mat4HeaderBytes)
	}
	var order binary.ByteOrder = binary.LittleEndian
	const orders = 1000 // weight of the digit that tells the byte order
	if word := order.Uint32(data[at:]); word >= 5*orders {
		order, h.big = binary.BigEndian, true
	}
	word := int(order.Uint32(data[at:]))
	m, o, p, t := word/orders, word/100%10, word/10%10, word%10
	if m > 1 || o != 0 || p >= len(mat4Number) || t > mat4Sparse || (m == 1) != h.big {
		return h, fault.New(fault.BadFile, where,
			"type %d; little- or big-endian numbers, text or sparse matrices wanted", word)
	}
	h.layout, h.what = mat4Number[p], t
	h.layout.BigEndian = h.big && h.layout.Size > 1
	h.layout.FirstAxisFastest = true
	var words [4]int64
	for i := range words {
		words[i] = int64(int32(order.Uint32(data[at+4+4*i:])))
	}
	name := words[3]
	if words[0] < 0 || words[1] < 0 || words[2] < 0 || words[2] > 1 || name < 1 || name > mat4NameBytes ||
		at+mat4HeaderBytes+int(name) > len(data) {
		return h, fault.New(fault.BadFile, where,
			"%d rows, %d columns, complex %d, name of %d bytes; this is no header of a matrix", words[0], words[1], words[2], name)
	}
	h.rows, h.columns, h.complex = int(words[0]), int(words[1]), words[2] == 1
	text := data[at+mat4HeaderBytes : at+mat4HeaderBytes+int(name)]
	h.name = string(bytes.TrimRight(text, "\x00"))
	h.start = at + mat4HeaderBytes + int(name)
	return h, checkMAT4Name(h.name, where)
}

// checkMAT4Name refuses what MATLAB calls no name; this is also what tells level 4, which has no mark of its own, from
// other files.
func checkMAT4Name(name, where string) error {
	for i, c := range []byte(name) {
		letter := c|0x20 >= 'a' && c|0x20 <= 'z' || c == '_'
		if !letter && (i == 0 || c < '0' || c > '9') {
			return fault.New(fault.BadFile, where, "%q is no name of a variable", name)
		}
	}
	return nil
}

func walkMAT4(data []byte, limits Limits) ([]acquisition.Array, error) {
	var arrays []acquisition.Array
	for at := 0; at < len(data); {
		h, err := parseMAT4(data, at)
		if err != nil {
			return arrays, err
		}
		if len(arrays) >= limits.Arrays {
			return arrays, fault.New(fault.TooLarge, "", "more than %d arrays; save them in fewer, larger ones",
				limits.Arrays)
		}
		if err := limits.checkShape([]int{h.rows, h.columns}); err != nil {
			return arrays, fault.Within(h.name, err)
		}
		array, next, err := h.read(data, limits)
		if err != nil {
			return arrays, fault.Within(h.name, err)
		}
		arrays = append(arrays, array)
		at = next
	}
	return arrays, nil
}

// read returns the array of one matrix and where the next begins.
func (h mat4Header) read(data []byte, limits Limits) (acquisition.Array, int, error) {
	n := h.rows * h.columns
	size := n * h.layout.Size
	parts := 1
	if h.complex && h.what != mat4Sparse { // a sparse matrix has a column for its imaginary parts
		parts = 2
	}
	next := h.start + parts*size
	if next > len(data) {
		return acquisition.Array{}, 0, fault.New(fault.BadFile, fmt.Sprintf("byte %d", len(data)),
			"ends after %d bytes of values, %d rows of %d take %d; the file may be cut short", len(data)-h.start, h.rows, h.columns, parts*size)
	}
	raw := data[h.start:next]
	array, err := acquisition.NewArray(h.name, []int{h.rows, h.columns}, h.layout, raw[:size])
	if err != nil {
		return array, next, err
	}
	switch {
	case h.what == mat4Text:
		array, err = h.text(array)
	case h.what == mat4Sparse:
		array, err = h.sparse(array, int64(len(data)), limits)
	case h.complex:
		array, err = h.pair(array, raw[size:])
	}
	return array, next, err
}

// pair joins real parts with the imaginary ones, which stand behind all of them.
func (h mat4Header) pair(real acquisition.Array, imaginary []byte) (acquisition.Array, error) {
	size := h.layout.Size
	part, whole := acquisition.Layout{Kind: acquisition.Float, Size: 8}, acquisition.Layout{Kind: acquisition.Complex,
		Size: 16}
	raw := make([]byte, 0, 2*8*h.rows*h.columns)
	flat := func(b []byte) ([]float64, error) {
		a, err := acquisition.NewArray(h.name, []int{len(b) / size}, h.layout, b)
		if err != nil {
			return nil, err
		}
		return a.Float64s()
	}
	re, err := flat(real.Raw())
	if err != nil {
		return real, err
	}
	im, err := flat(imaginary)
	if err != nil {
		return real, err
	}
	for i := range re {
		raw = appendNumber(appendNumber(raw, part, re[i]), part, im[i])
	}
	whole.FirstAxisFastest = true
	return acquisition.NewArray(h.name, []int{h.rows, h.columns}, whole, raw)
}

// text returns the rows of characters as texts.
func (h mat4Header) text(codes acquisition.Array) (acquisition.Array, error) {
	values, err := codes.Float64s()
	if err != nil {
		return codes, err
	}
	texts := make([]string, h.rows)
	for r := range texts {
		row := make([]rune, h.columns)
		for c := range row {
			row[c] = rune(values[r*h.columns+c])
		}
		texts[r] = string(row)
	}
	if len(texts) == 1 {
		return acquisition.TextOf(h.name, texts[0]), nil
	}
	return textsOf(h.name, []int{h.rows}, texts)
}

// sparse writes the zeros out. Every row of the table holds row, column and value; the last one the lengths of axes.
func (h mat4Header) sparse(table acquisition.Array, bytes int64, limits Limits) (acquisition.Array, error) {
	v, err := table.Float64s()
	columns := h.columns
	if err != nil || h.rows < 1 || columns != 3 && columns != 4 {
		return table, fault.New(fault.BadFile, "",
			"a sparse matrix as a table of %d rows and %d columns; 3 columns are wanted, 4 for complex values", h.rows, columns)
	}
	lengths := v[(h.rows-1)*columns:]
	if !(lengths[0] >= 0 && lengths[1] >= 0 && lengths[0] <= math.MaxInt32 && lengths[1] <= math.MaxInt32) {
		return table, fault.New(fault.BadFile, "", "a sparse matrix of %g rows and %g columns", lengths[0], lengths[1])
	}
	shape := []int{int(lengths[0]), int(lengths[1])}
	layout := acquisition.Layout{Kind: acquisition.Float, Size: 8, FirstAxisFastest: true}
	if columns == 4 {
		layout.Kind, layout.Size = acquisition.Complex, 16
	}
	if err := limits.checkShape(shape); err != nil {
		return table, err
	}
	if err := limits.checkUnpacked([]uint64{uint64(elements(shape) * layout.Size)}, bytes); err != nil {
		return table, err
	}
	raw := make([]byte, elements(shape)*layout.Size)
	for i := range h.rows - 1 {
		entry := v[i*columns:]
		r, c := entry[0]-1, entry[1]-1
		if !(r >= 0 && c >= 0 && r < lengths[0] && c < lengths[1]) {
			return table, fault.New(fault.BadFile, "",
				"value %d of a sparse matrix of shape %s lies at row %g, column %g", i, acquisition.ShapeText(shape), r+1, c+1)
		}
		at := raw[(int(c)*shape[0]+int(r))*layout.Size:]
		put(at, layout, entry[2])
		if columns == 4 {
			put(at[8:], layout, entry[3])
		}
	}
	return acquisition.NewArray(h.name, shape, layout, raw)
}
