package importer

import (
	"encoding/binary"
	"slices"
	"strconv"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// Classes of MATLAB arrays.
const (
	mxCELL     = 1
	mxSTRUCT   = 2
	mxOBJECT   = 3
	mxCHAR     = 4
	mxSPARSE   = 5
	mxDOUBLE   = 6
	mxUINT64   = 15
	mxFUNCTION = 16
	mxOPAQUE   = 17
)

// matClass says what a numeric class is, from mxDOUBLE to mxUINT64. The file may hold its numbers in a smaller type.
var matClass = []acquisition.Layout{
	{Kind: acquisition.Float, Size: 8}, {Kind: acquisition.Float, Size: 4},
	{Kind: acquisition.Int, Size: 1}, {Kind: acquisition.Uint, Size: 1},
	{Kind: acquisition.Int, Size: 2}, {Kind: acquisition.Uint, Size: 2},
	{Kind: acquisition.Int, Size: 4}, {Kind: acquisition.Uint, Size: 4},
	{Kind: acquisition.Int, Size: 8}, {Kind: acquisition.Uint, Size: 8},
}

// matArray is what stands at the head of a variable.
type matArray struct {
	class            uint32
	logical, complex bool
	shape            []int
	name             string
}

// matrix walks one variable. Its parts take the name of what they are part of; at the top it has its own.
func (m *matFile) matrix(name string, e matElement, depth int) error {
	if depth > m.limits.Nesting {
		return fault.New(fault.TooLarge, name, "structs and cells nested more than %d deep", m.limits.Nesting)
	}
	if len(e.data) == 0 {
		return m.keep(acquisition.NewArray(name, []int{0, 0}, acquisition.Layout{Kind: acquisition.Float, Size: 8}, nil))
	}
	p := &parts{file: m, all: e, name: name}
	head := m.head(p)
	if p.err != nil {
		return p.err
	}
	if name == "" {
		p.name = head.name
	}
	if err := m.limits.checkShape(head.shape); err != nil {
		return fault.Within(p.name, err)
	}
	switch class := head.class; {
	case class == mxCELL:
		return m.elements(p, elements(head.shape), nil, depth)
	case class == mxSTRUCT || class == mxOBJECT:
		return m.structs(p, head, depth)
	case class == mxCHAR:
		return m.chars(p, head.shape)
	case class == mxSPARSE:
		return m.sparse(p, head)
	case class >= mxDOUBLE && class <= mxUINT64:
		return m.numbers(p, head)
	case class == mxFUNCTION || class == mxOPAQUE:
		return m.keep(leftOut(p.name, "a function or an object of a newer class, which hold no numbers to read"), nil)
	}
	return fault.New(fault.Unsupported, p.name, "array of class %d; save numbers, text, structs or cells", head.class)
}

// elements returns the product of lengths that checkShape has bounded.
func elements(shape []int) int {
	n := 1
	for _, length := range shape {
		n *= length
	}
	return n
}

// head reads flags, lengths and name.
func (m *matFile) head(p *parts) (h matArray) {
	const logicalBit, complexBit = 0x200, 0x800
	flags := p.next("array flags", miUINT32)
	if p.err == nil && len(flags.data) < 4 {
		p.err = fault.New(fault.BadFile, flags.at.within(p.name), "array flags of %d bytes, 8 wanted", len(flags.data))
	}
	if p.err != nil {
		return h
	}
	word := m.order.Uint32(flags.data)
	h.class, h.logical, h.complex = word&0xff, word&logicalBit != 0, word&complexBit != 0
	if h.class != mxOPAQUE { // the only class without lengths
		h.shape = p.ints("lengths of axes")
	}
	h.name = p.ascii("a name")
	return h
}

func (m *matFile) keep(a acquisition.Array, err error) error {
	if err == nil && len(m.arrays) >= m.limits.Arrays {
		err = fault.New(fault.TooLarge, "", "more than %d arrays; save them in fewer, larger ones", m.limits.Arrays)
	}
	if err == nil {
		m.arrays = append(m.arrays, a)
	}
	return err
}

// leftOut stands for something that is not read: the reader of a file shall see that it was there.
func leftOut(name, why string) acquisition.Array {
	a := acquisition.TextOf(name, "not read: "+why)
	a.Attributes = map[string]string{"left out": why}
	return a
}

// elements walks n cells, or n structs with the given fields, which stand one after the other.
func (m *matFile) elements(p *parts, n int, fields []string, depth int) error {
	if keepsNone(n, fields) {
		return m.keep(leftOut(p.name, "empty"), nil)
	}
	for i := range n {
		name := p.name
		if n > 1 || fields == nil {
			name += "." + strconv.Itoa(i+1)
		}
		for f := range max(len(fields), 1) {
			part := name
			if fields != nil {
				part += "." + fields[f]
			}
			e := p.next("an array", miMATRIX)
			if p.err != nil {
				return p.err
			}
			if err := m.matrix(part, e, depth+1); err != nil {
				return err
			}
		}
	}
	return nil
}

func keepsNone(n int, fields []string) bool {
	return n == 0 || fields != nil && len(fields) == 0
}

// structs walks a struct array or an object, which has the name of its class before the rest.
func (m *matFile) structs(p *parts, h matArray, depth int) error {
	if h.class == mxOBJECT {
		p.ascii("the name of a class")
	}
	length := p.ints("length of field names")
	names := p.next("field names", miINT8, miUINT8)
	if p.err == nil && (len(length) != 1 || length[0] < 1 || len(names.data)%length[0] != 0) {
		p.err = fault.New(fault.BadFile, names.at.within(p.name), "%d bytes of field names, each %v long",
			len(names.data), length)
	}
	if p.err != nil {
		return p.err
	}
	fields := []string{}
	for text := names.data; len(text) > 0; text = text[length[0]:] {
		field, _, _ := strings.Cut(string(text[:length[0]]), "\x00")
		for slices.Contains(fields, field) {
			field += "_" // a damaged struct may say a name twice; both parts are kept
		}
		fields = append(fields, field)
	}
	return m.elements(p, elements(h.shape), fields, depth)
}

// numbers keeps a numeric array.
func (m *matFile) numbers(p *parts, h matArray) error {
	class := matClass[h.class-mxDOUBLE]
	re := p.next("numbers", matNumberTypes...)
	var im matElement
	if h.complex {
		im = p.next("imaginary parts", matNumberTypes...)
	}
	if p.err != nil {
		return p.err
	}
	n := elements(h.shape)
	if re.cut || im.cut {
		return m.cutNumbers(p.name, h, class, re, im)
	}
	for _, e := range []matElement{re, im} {
		if size := matNumber[e.kind].Size; e.kind != 0 && len(e.data) != n*size {
			return fault.New(fault.BadFile, e.at.within(p.name), "%d bytes for shape %s, which takes %d of %d bytes",
				len(e.data), acquisition.ShapeText(h.shape), n, size)
		}
	}
	switch {
	case h.complex:
		return m.complexNumbers(p.name, h.shape, class, re, im)
	case h.logical:
		class = acquisition.Layout{Kind: acquisition.Bool, Size: 1}
	}
	stored := m.stored(re.kind)
	if stored.Kind == class.Kind && stored.Size == class.Size || h.logical && stored.Size == 1 {
		class.BigEndian, class.FirstAxisFastest = stored.BigEndian, true
		return m.keep(acquisition.NewArray(p.name, h.shape, class, re.data))
	}
	return m.converted(p.name, h.shape, class, re)
}

// cutNumbers keeps the complete entries of an array within which the file ends.
func (m *matFile) cutNumbers(name string, h matArray, class acquisition.Layout, re, im matElement) error {
	whole := &matFile{order: m.order, limits: m.limits, bytes: m.bytes}
	have := len(re.data) / matNumber[re.kind].Size
	var err error
	if h.complex {
		have = min(have, len(im.data)/matNumber[im.kind].Size)
		re.data, im.data = re.data[:have*matNumber[re.kind].Size], im.data[:have*matNumber[im.kind].Size]
		err = whole.complexNumbers("", []int{have}, class, re, im)
	} else {
		re.data = re.data[:have*matNumber[re.kind].Size]
		err = whole.converted("", []int{have}, class, re)
	}
	if err != nil {
		return fault.Within(name, err)
	}
	found := whole.arrays[0]
	layout := found.Layout()
	layout.FirstAxisFastest = true
	return m.keep(acquisition.CutArray(name, h.shape, layout, found.Raw()))
}

var matNumberTypes = []uint32{miINT8, miUINT8, miINT16, miUINT16, miINT32, miUINT32, miSINGLE, miDOUBLE, miINT64, miUINT64}

// stored returns how the numbers of an element lie in this file.
func (m *matFile) stored(kind uint32) acquisition.Layout {
	l := matNumber[kind]
	l.BigEndian = m.order == binary.ByteOrder(binary.BigEndian) && l.Size > 1
	return l
}

// converted keeps numbers that are stored in another type than they are. A float class is kept exactly in float64 or
// float32; every smaller integer type fits its class.
func (m *matFile) converted(name string, shape []int, class acquisition.Layout, e matElement) error {
	values, err := m.values(e)
	if err != nil {
		return fault.Within(name, err)
	}
	if err := m.spend(int64(len(values)*class.Size), name); err != nil {
		return err
	}
	raw := make([]byte, 0, len(values)*class.Size)
	for _, v := range values {
		raw = appendNumber(raw, class, v)
	}
	class.FirstAxisFastest = true
	return m.keep(acquisition.NewArray(name, shape, class, raw))
}

// values returns the numbers of an element.
func (m *matFile) values(e matElement) ([]float64, error) {
	layout := m.stored(e.kind)
	if layout.Size == 0 {
		return nil, nil
	}
	a, err := acquisition.NewArray("", []int{len(e.data) / layout.Size}, layout, e.data)
	if err != nil {
		return nil, err
	}
	return a.Float64s()
}

// complexNumbers keeps numbers whose imaginary parts stand behind all real ones.
func (m *matFile) complexNumbers(name string, shape []int, class acquisition.Layout, re, im matElement) error {
	layout := acquisition.Layout{Kind: acquisition.Complex, Size: 16, FirstAxisFastest: true}
	part := acquisition.Layout{Kind: acquisition.Float, Size: 8}
	if class.Kind == acquisition.Float && class.Size == 4 {
		layout.Size, part.Size = 8, 4
	}
	real, err := m.values(re)
	if err != nil {
		return fault.Within(name, err)
	}
	imaginary, err := m.values(im)
	if err != nil {
		return fault.Within(name, err)
	}
	if err := m.spend(int64(len(real)*layout.Size), name); err != nil {
		return err
	}
	raw := make([]byte, 0, len(real)*layout.Size)
	for i := range real {
		raw = appendNumber(appendNumber(raw, part, real[i]), part, imaginary[i])
	}
	return m.keep(acquisition.NewArray(name, shape, layout, raw))
}

// sparse keeps a sparse matrix with its zeros written out. The file lists for every column where its values begin.
func (m *matFile) sparse(p *parts, h matArray) error {
	rows := p.ints("row numbers")
	begins := p.ints("beginnings of columns")
	kinds := append([]uint32{}, matNumberTypes...)
	re := p.next("numbers", kinds...)
	var im matElement
	if h.complex {
		im = p.next("imaginary parts", kinds...)
	}
	if p.err != nil {
		return p.err
	}
	if n := len(begins); h.logical && n > 0 && begins[n-1] == len(re.data) {
		re.kind = miUINT8 // a byte for each, though the element calls them doubles
	}
	values, err := m.values(re)
	if err != nil {
		return fault.Within(p.name, err)
	}
	imaginary, err := m.values(im)
	if err != nil {
		return fault.Within(p.name, err)
	}
	s := sparseMatrix{rows: rows, begins: begins, real: values, imaginary: imaginary}
	return m.dense(p.name, h, s)
}

// sparseMatrix holds the values of column c at begins[c] to begins[c+1], in the rows listed there.
type sparseMatrix struct {
	rows, begins    []int
	real, imaginary []float64
}

func (m *matFile) dense(name string, h matArray, s sparseMatrix) error {
	if len(h.shape) != 2 || len(s.begins) != h.shape[1]+1 {
		return fault.New(fault.BadFile, name, "sparse matrix of shape %s lists %d columns",
			acquisition.ShapeText(h.shape), len(s.begins)-1)
	}
	layout := acquisition.Layout{Kind: acquisition.Float, Size: 8, FirstAxisFastest: true}
	switch {
	case h.complex:
		layout = acquisition.Layout{Kind: acquisition.Complex, Size: 16, FirstAxisFastest: true}
	case h.logical:
		layout = acquisition.Layout{Kind: acquisition.Bool, Size: 1, FirstAxisFastest: true}
	}
	total := elements(h.shape) * layout.Size
	if err := m.spend(int64(total), name); err != nil {
		return err
	}
	raw := make([]byte, total)
	for c := range h.shape[1] {
		for i := s.begins[c]; i < s.begins[c+1]; i++ {
			if i >= len(s.rows) || i >= len(s.real) || h.complex && i >= len(s.imaginary) || s.rows[i] >= h.shape[0] {
				return fault.New(fault.BadFile, name,
					"value %d of a sparse matrix of shape %s is not there or lies outside", i, acquisition.ShapeText(h.shape))
			}
			put(raw[(c*h.shape[0]+s.rows[i])*layout.Size:], layout, s.real[i])
			if h.complex {
				put(raw[(c*h.shape[0]+s.rows[i])*layout.Size+8:], layout, s.imaginary[i])
			}
		}
	}
	return m.keep(acquisition.NewArray(name, h.shape, layout, raw))
}

// chars keeps text: one text for every row of characters.
func (m *matFile) chars(p *parts, shape []int) error {
	kinds := append([]uint32{miUTF8, miUTF16, miUTF32}, matNumberTypes...)
	e := p.next("characters", kinds...)
	if p.err != nil {
		return p.err
	}
	runes, err := m.runes(e)
	if err != nil {
		return fault.Within(p.name, err)
	}
	if err := m.spend(4*int64(len(runes)), p.name); err != nil {
		return err
	}
	last := len(shape) - 1
	if last < 0 || elements(shape[:last]) <= 1 || len(runes) == 0 {
		return m.keep(acquisition.TextOf(p.name, string(runes)), nil)
	}
	count := elements(shape[:last])
	if len(runes) != count*shape[last] {
		return fault.New(fault.BadFile, e.at.within(p.name), "%d characters for shape %s", len(runes),
			acquisition.ShapeText(shape))
	}
	texts := make([]string, count)
	for i := range texts {
		row := make([]rune, shape[last])
		for j := range row {
			row[j] = runes[i+count*j]
		}
		texts[i] = string(row)
	}
	array, err := textsOf(p.name, shape[:last], texts)
	return m.keep(array, err)
}

// textsOf returns texts as an array, the first axis fastest.
func textsOf(name string, shape []int, texts []string) (acquisition.Array, error) {
	longest := 1
	runes := make([][]rune, len(texts))
	for i, text := range texts {
		runes[i] = []rune(text)
		longest = max(longest, len(runes[i]))
	}
	raw := make([]byte, 0, 4*longest*len(texts))
	for _, row := range runes {
		for j := range longest {
			var r rune
			if j < len(row) {
				r = row[j]
			}
			raw = binary.LittleEndian.AppendUint32(raw, uint32(r))
		}
	}
	layout := acquisition.Layout{Kind: acquisition.Text, Size: 4 * longest, FirstAxisFastest: true}
	return acquisition.NewArray(name, shape, layout, raw)
}

// runes returns the characters of an element: UTF-8, UTF-16 or UTF-32 as its type says, 16-bit numbers as UTF-16, any
// other numbers one character each.
func (m *matFile) runes(e matElement) ([]rune, error) {
	switch e.kind {
	case miUTF8:
		return []rune(string(e.data)), nil
	case miUTF16:
		e.kind = miUINT16
	case miUTF32:
		e.kind = miUINT32
	}
	values, err := m.values(e)
	if err != nil {
		return nil, err
	}
	if e.kind == miUINT16 {
		return fromUTF16(values), nil
	}
	out := make([]rune, len(values))
	for i, v := range values {
		out[i] = '\uFFFD'
		if v >= 0 && v <= 0x10ffff {
			out[i] = rune(v)
		}
	}
	return out, nil
}
