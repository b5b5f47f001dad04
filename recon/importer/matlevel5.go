package importer

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"strconv"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// matLevel5 is a MAT-file of level 5: versions 6 (plain) and 7 (compressed variables) of the format, either byte order.
// Structs, objects and cells are walked: a field is named "s.field", an element of a cell or of a struct array by its
// number from 1, "c.3". Numbered elements of one layout become one array, "c.#".
// Source: The MathWorks, MAT-File Format (reference manual), chapter 1.
var matLevel5 = Format{
	Name:       "MAT-file, level 5",
	Extensions: []string{".mat"},
	Recognise: func(head []byte) bool {
		return len(head) >= matHeaderBytes && (string(head[124:128]) == "\x00\x01IM" ||
			string(head[124:128]) == "\x01\x00MI")
	},
	Read: func(_ string, data []byte, limits Limits) ([]acquisition.Array, error) {
		arrays, err := walkMAT(data, limits)
		if err != nil {
			return nil, err
		}
		return acquisition.Gather(arrays), nil
	},
	Salvage: salvageMAT,
}

const matHeaderBytes = 128

// Types of data elements.
const (
	miINT8       = 1
	miUINT8      = 2
	miINT16      = 3
	miUINT16     = 4
	miINT32      = 5
	miUINT32     = 6
	miSINGLE     = 7
	miDOUBLE     = 9
	miINT64      = 12
	miUINT64     = 13
	miMATRIX     = 14
	miCOMPRESSED = 15
	miUTF8       = 16
	miUTF16      = 17
	miUTF32      = 18
)

// matNumber says how the numbers of each numeric element type lie in the file.
var matNumber = map[uint32]acquisition.Layout{
	miINT8: {Kind: acquisition.Int, Size: 1}, miUINT8: {Kind: acquisition.Uint, Size: 1},
	miINT16: {Kind: acquisition.Int, Size: 2}, miUINT16: {Kind: acquisition.Uint, Size: 2},
	miINT32: {Kind: acquisition.Int, Size: 4}, miUINT32: {Kind: acquisition.Uint, Size: 4},
	miSINGLE: {Kind: acquisition.Float, Size: 4}, miDOUBLE: {Kind: acquisition.Float, Size: 8},
	miINT64: {Kind: acquisition.Int, Size: 8}, miUINT64: {Kind: acquisition.Uint, Size: 8},
}

// matFile walks one file. What it found so far is in arrays.
type matFile struct {
	order    binary.ByteOrder
	limits   Limits
	bytes    int64 // of the whole file
	unpacked int64 // bytes inflated and made so far
	salvage  bool  // elements that end too early are handed over as far as they go
	arrays   []acquisition.Array
}

// matElement is one data element: a type and its bytes.
type matElement struct {
	kind uint32
	data []byte
	at   place
	cut  bool // the file ended within it
}

// place says where some bytes stand: a byte of the file, or of an unpacked variable in it.
type place struct {
	prefix string
	offset int
}

func (p place) String() string            { return p.prefix + "byte " + strconv.Itoa(p.offset) }
func (p place) plus(n int) place          { return place{p.prefix, p.offset + n} }
func (p place) within(name string) string { return joinWords(name, p.String()) }

// joinWords puts a space between two words that are not empty.
func joinWords(a, b string) string {
	if a == "" || b == "" {
		return a + b
	}
	return a + " " + b
}

// walkMAT returns every variable, structs and cells taken apart.
func walkMAT(data []byte, limits Limits) ([]acquisition.Array, error) {
	return (&matFile{limits: limits}).walk(data)
}

// walk returns what stands before a fault too.
func (m *matFile) walk(data []byte) ([]acquisition.Array, error) {
	if len(data) < matHeaderBytes {
		return nil, fault.New(fault.BadFile, fmt.Sprintf("byte %d", len(data)),
			"ends within the header of %d bytes; the file may be cut short", matHeaderBytes)
	}
	m.order, m.bytes = binary.LittleEndian, int64(len(data))
	if string(data[126:128]) == "MI" {
		m.order = binary.BigEndian
	}
	// Objects of newer classes leave their parts in a variable without a name, which the header points to.
	subsystem := m.order.Uint64(data[116:124])
	for at := matHeaderBytes; at < len(data); {
		element, next, err := m.element(data, at, place{}, false)
		if err != nil {
			return m.arrays, err
		}
		if uint64(at) != subsystem {
			if err := m.variable(element); err != nil {
				return m.arrays, err
			}
		}
		at = next
	}
	return m.arrays, nil
}

// variable walks one element at the top of the file.
func (m *matFile) variable(e matElement) error {
	switch e.kind {
	case miCOMPRESSED:
		inner, err := m.inflate(e)
		if err != nil {
			return err
		}
		return m.variable(inner)
	case miMATRIX:
		return m.matrix("", e, 0)
	}
	return fault.New(fault.BadFile, e.at.String(),
		"element of type %d where a variable (14 or 15) should begin; the file may be damaged", e.kind)
}

// element returns the element that begins at data[at] and where the next begins. Inside a variable, elements are filled
// up to eight bytes; small ones hold up to four bytes in the second half of their tag.
func (m *matFile) element(data []byte, at int, from place, padded bool) (matElement, int, error) {
	const tag = 8
	where := place{from.prefix, from.offset + at}
	if len(data)-at < tag {
		return matElement{}, 0, fault.New(fault.BadFile, where.String(),
			"%d bytes are left, the tag of an element takes %d; the file may be cut short", len(data)-at, tag)
	}
	kind, n := m.order.Uint32(data[at:]), int64(m.order.Uint32(data[at+4:]))
	start := at + tag
	if small := kind >> 16; small != 0 {
		if small > 4 {
			return matElement{}, 0, fault.New(fault.BadFile, where.String(),
				"a small element states %d bytes, it holds 4 at most", small)
		}
		return matElement{kind & 0xffff, data[at+4 : at+4+int(small)], where.plus(4), false}, start, nil
	}
	if n > int64(len(data)-start) {
		if m.salvage {
			return matElement{kind, data[start:], where.plus(tag), true}, len(data), nil
		}
		return matElement{}, 0, fault.New(fault.BadFile, where.String(),
			"an element of %d bytes, %d are left; the file may be cut short", n, len(data)-start)
	}
	end := start + int(n)
	next := end
	if padded {
		next = min(len(data), start+(int(n)+7)/8*8)
	}
	return matElement{kind, data[start:end], where.plus(tag), false}, next, nil
}

// spend returns a fault when n more bytes of memory pass what the file's own bytes justify.
func (m *matFile) spend(n int64, where string) error {
	m.unpacked += n
	err := m.limits.checkUnpacked([]uint64{uint64(m.unpacked)}, m.bytes)
	if err != nil {
		return fault.Within(where, err)
	}
	return nil
}

// parts reads the elements inside a variable, one after the other; the first fault stays.
type parts struct {
	file *matFile
	all  matElement
	at   int
	name string
	err  error
}

func (p *parts) where() string { return p.all.at.plus(p.at).within(p.name) }

// next returns the next element, which must be of one of the given types.
func (p *parts) next(what string, kinds ...uint32) matElement {
	if p.err != nil {
		return matElement{}
	}
	here := p.where()
	element, next, err := p.file.element(p.all.data, p.at, p.all.at, true)
	if err != nil {
		p.err = fault.Within(p.name, err)
		return matElement{}
	}
	for _, kind := range kinds {
		if element.kind == kind {
			p.at = next
			return element
		}
	}
	p.err = fault.New(fault.BadFile, here, "element of type %d where %s is wanted; the file may be damaged",
		element.kind, what)
	return matElement{}
}

// ints returns an element of 32-bit integers. Some writers call them unsigned.
func (p *parts) ints(what string) []int {
	e := p.next(what, miINT32, miUINT32)
	if p.err == nil && len(e.data)%4 != 0 {
		p.err = fault.New(fault.BadFile, e.at.within(p.name), "%d bytes of 32-bit numbers", len(e.data))
		return nil
	}
	out := make([]int, len(e.data)/4)
	for i := range out {
		out[i] = int(int32(p.file.order.Uint32(e.data[4*i:])))
		if out[i] < 0 && p.err == nil {
			p.err = fault.New(fault.BadFile, e.at.within(p.name), "%s of %d; none may be negative", what, out[i])
		}
	}
	return out
}

// ascii returns an element of text in ASCII, as names are.
func (p *parts) ascii(what string) string {
	e := p.next(what, miINT8, miUINT8, miUTF8)
	for i, b := range e.data {
		if b >= 0x80 {
			p.err = fault.New(fault.BadFile, e.at.plus(i).within(p.name), "%s holds byte %d, which is no ASCII", what, b)
			return ""
		}
	}
	return string(bytes.TrimRight(e.data, "\x00"))
}
