package acquisition

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"unicode/utf8"

	"torrloom/recon/fault"
)

// ElementKind is what the elements of an Array are.
type ElementKind byte

const (
	Bool    ElementKind = 'b'
	Int     ElementKind = 'i' // two's complement
	Uint    ElementKind = 'u'
	Float   ElementKind = 'f' // IEEE 754 binary16, binary32, binary64
	Complex ElementKind = 'c' // two floats, real part first
	Bytes   ElementKind = 'S' // text of one byte per character, filled up with NUL
	Text    ElementKind = 'U' // text of four bytes per character (UTF-32), filled up with NUL
)

// Layout says how the bytes of an Array are to be read.
type Layout struct {
	Kind             ElementKind
	Size             int  // bytes per element
	BigEndian        bool // most significant byte first
	FirstAxisFastest bool // column-major; otherwise the last axis is fastest
}

// check returns an unsupported fault unless the size is one that the kind comes in.
func (l Layout) check() error {
	var ok bool
	switch l.Kind {
	case Bool:
		ok = l.Size == 1
	case Int, Uint:
		ok = l.Size == 1 || l.Size == 2 || l.Size == 4 || l.Size == 8
	case Float:
		ok = l.Size == 2 || l.Size == 4 || l.Size == 8
	case Complex:
		ok = l.Size == 8 || l.Size == 16
	case Bytes:
		ok = l.Size >= 1
	case Text:
		ok = l.Size >= 4 && l.Size%4 == 0
	}
	if !ok {
		return fault.New(fault.Unsupported,
			"",
			"elements of kind %q with %d bytes; use bool, integers of 1 to 8 bytes, float16 to float64, "+
				"complex64, complex128 or text", string(l.Kind), l.Size)
	}
	return nil
}

// Word returns the element type in plain words: "complex64", "float32", "uint8", "bool", "text".
func (l Layout) Word() string {
	switch l.Kind {
	case Bool:
		return "bool"
	case Bytes, Text:
		return "text"
	}
	stem := map[ElementKind]string{Int: "int", Uint: "uint", Float: "float", Complex: "complex"}[l.Kind]
	return fmt.Sprintf("%s%d", stem, 8*l.Size)
}

// Array is one named array as a reader hands it over. Its values stay in the bytes of the file until they are asked
// for, so an Array holds no more memory than the file had bytes for it.
type Array struct {
	Name       string
	Type       string            // Layout.Word
	Shape      []int             // empty for a single value
	Unit       string            // as the file states it, or empty
	Attributes map[string]string // whatever else the file says of it
	AfterFile  bool              // Name is the file's, which held none for it
	Truncated  *Truncation       // nil when the file held all of it

	layout Layout
	raw    []byte
}

// NewArray returns the array whose elements lie in raw as layout says. It keeps raw and does not change it.
//
// Errors: unsupported when the layout is none that is read; bad-file when raw does not hold exactly the elements of
// shape.
func NewArray(name string, shape []int, layout Layout, raw []byte) (Array, error) {
	if err := layout.check(); err != nil {
		return Array{}, fault.Within(name, err)
	}
	if !fills(shape, len(raw), layout.Size) {
		return Array{}, fault.New(fault.BadFile, name,
			"%d bytes for %s of shape %s; each element takes %d bytes", len(raw), layout.Word(), ShapeText(shape), layout.Size)
	}
	// An empty list, unlike none, stays a list in JSON.
	return Array{Name: name, Type: layout.Word(), Shape: append([]int{}, shape...), layout: layout, raw: raw}, nil
}

// fills tells whether have bytes hold exactly the elements of shape. Dividing instead of multiplying keeps lengths from
// a hostile file from overflowing.
func fills(shape []int, have, size int) bool {
	if have%size != 0 {
		return false
	}
	left, empty := have/size, false
	for _, n := range shape {
		switch {
		case n < 0:
			return false
		case n == 0:
			empty = true
		case !empty && left%n != 0:
			return false
		case !empty:
			left /= n
		}
	}
	if empty {
		return have == 0
	}
	return left == 1
}

// ShapeText returns a shape as people write it: "[10, 208, 1024]"; "[]" for a single value.
func ShapeText(shape []int) string {
	var out bytes.Buffer
	for i, n := range shape {
		if i > 0 {
			out.WriteString(", ")
		}
		fmt.Fprint(&out, n)
	}
	return "[" + out.String() + "]"
}

// Layout returns how Raw is to be read.
func (a Array) Layout() Layout { return a.layout }

// Raw returns the bytes of the elements as the file held them. They must not be changed.
func (a Array) Raw() []byte { return a.raw }

// Len returns the number of elements.
func (a Array) Len() int {
	if a.layout.Size == 0 {
		return 0
	}
	return len(a.raw) / a.layout.Size
}

func (a Array) isText() bool    { return a.layout.Kind == Text || a.layout.Kind == Bytes }
func (a Array) isComplex() bool { return a.layout.Kind == Complex }

// Float64s returns the elements, last axis fastest. Integers past 2^53 are rounded to the nearest float64.
// Errors: bad-file when they are complex or text.
func (a Array) Float64s() ([]float64, error) {
	if a.isText() || a.isComplex() {
		return nil, fault.New(fault.BadFile, a.Name, "%s found, real numbers wanted", a.Type)
	}
	out := make([]float64, a.Len())
	number, size := a.layout.number(), a.layout.Size
	for i := range out {
		out[i] = number(a.raw[i*size:])
	}
	return inOrder(a, out), nil
}

// Complex64s returns the elements, last axis fastest; real numbers get an imaginary part of zero. A part past the range
// of float32 becomes infinite.
// Errors: bad-file when they are text.
func (a Array) Complex64s() ([]complex64, error) {
	if a.isText() {
		return nil, fault.New(fault.BadFile, a.Name, "text found, numbers wanted")
	}
	out := make([]complex64, a.Len())
	number, size := a.layout.number(), a.layout.Size
	for i := range out {
		at := a.raw[i*size:]
		if a.isComplex() {
			out[i] = complex(float32(number(at)), float32(number(at[size/2:])))
		} else {
			out[i] = complex(float32(number(at)), 0)
		}
	}
	return inOrder(a, out), nil
}

// Strings returns the elements of a text array, last axis fastest, without the NULs that fill them up. One-byte
// text is UTF-8 when it is valid as such, else ISO 8859-1.
// Errors: bad-file when the elements are numbers.
func (a Array) Strings() ([]string, error) {
	if !a.isText() {
		return nil, fault.New(fault.BadFile, a.Name, "%s found, text wanted", a.Type)
	}
	out := make([]string, a.Len())
	for i := range out {
		element := a.raw[i*a.layout.Size : (i+1)*a.layout.Size]
		if a.layout.Kind == Text {
			out[i] = a.layout.fromUTF32(element)
		} else {
			out[i] = fromBytes(element)
		}
	}
	return inOrder(a, out), nil
}

// Range returns the smallest and the largest finite value, for complex elements over their real and imaginary parts.
// Both are NaN when there is none.
func (a Array) Range() (least, most float64) {
	least, most = math.Inf(1), math.Inf(-1)
	if !a.isText() {
		number, step := a.layout.number(), a.layout.part()
		for at := 0; at < len(a.raw); at += step {
			if v := number(a.raw[at:]); v-v == 0 {
				least, most = math.Min(least, v), math.Max(most, v)
			}
		}
	}
	if least > most {
		return math.NaN(), math.NaN()
	}
	return least, most
}

// LooksSwapped tells whether the values are absurd as declared (mostly denormal or astronomical, or integers
// that use only their high bytes) and ordinary with the bytes of each number in the opposite order.
//
// Approximate: a rule of thumb on up to 4096 values that are not zero, for numbers of 4 and 8 bytes. Ordinary means
// 1e-12 to 1e12 for a float and an unused high byte for an integer. Numbers of random bytes are ordinary in one of
// three cases at most, so three in five, against nineteen in twenty when swapped, tells the two apart.
func (a Array) LooksSwapped() bool {
	part := a.layout.part()
	if part < 4 || a.isText() {
		return false
	}
	swapped := a.layout
	swapped.BigEndian = !swapped.BigEndian
	asDeclared, asSwapped := a.layout.number(), swapped.number()
	seen, declared, opposite := 0, 0, 0
	step := part * max(1, len(a.raw)/part/4096)
	for at := 0; at+part <= len(a.raw); at += step {
		v, w := asDeclared(a.raw[at:]), asSwapped(a.raw[at:])
		if v == 0 && w == 0 {
			continue
		}
		seen++
		declared += count(a.layout.ordinary(v))
		opposite += count(a.layout.ordinary(w))
	}
	return 5*declared < 3*seen && 20*opposite >= 19*seen && seen > 0
}

func count(yes bool) int {
	if yes {
		return 1
	}
	return 0
}

func (l Layout) ordinary(v float64) bool {
	if l.Kind == Float || l.Kind == Complex {
		return v == 0 || math.Abs(v) >= 1e-12 && math.Abs(v) <= 1e12
	}
	return math.Abs(v) < math.Ldexp(1, 8*l.Size-8)
}

// part returns the bytes of one number: half an element for complex ones.
func (l Layout) part() int {
	if l.Kind == Complex {
		return l.Size / 2
	}
	return l.Size
}

// number returns the function that reads the number at the head of some bytes, the real part for complex ones.
func (l Layout) number() func([]byte) float64 {
	var order binary.ByteOrder = binary.LittleEndian
	if l.BigEndian {
		order = binary.BigEndian
	}
	switch l.Kind {
	case Bool:
		return func(b []byte) float64 { return float64(count(b[0] != 0)) }
	case Int:
		return signed(order, l.Size)
	case Uint:
		return unsigned(order, l.Size)
	}
	return floating(order, l.part())
}

func signed(order binary.ByteOrder, size int) func([]byte) float64 {
	switch size {
	case 1:
		return func(b []byte) float64 { return float64(int8(b[0])) }
	case 2:
		return func(b []byte) float64 { return float64(int16(order.Uint16(b))) }
	case 4:
		return func(b []byte) float64 { return float64(int32(order.Uint32(b))) }
	}
	return func(b []byte) float64 { return float64(int64(order.Uint64(b))) }
}

func unsigned(order binary.ByteOrder, size int) func([]byte) float64 {
	switch size {
	case 1:
		return func(b []byte) float64 { return float64(b[0]) }
	case 2:
		return func(b []byte) float64 { return float64(order.Uint16(b)) }
	case 4:
		return func(b []byte) float64 { return float64(order.Uint32(b)) }
	}
	return func(b []byte) float64 { return float64(order.Uint64(b)) }
}

func floating(order binary.ByteOrder, size int) func([]byte) float64 {
	switch size {
	case 2:
		return func(b []byte) float64 { return half(order.Uint16(b)) }
	case 4:
		return func(b []byte) float64 { return float64(math.Float32frombits(order.Uint32(b))) }
	}
	return func(b []byte) float64 { return math.Float64frombits(order.Uint64(b)) }
}

// half returns the value of an IEEE 754 binary16: one sign bit, five exponent bits with bias 15, ten fraction bits.
func half(bits uint16) float64 {
	exponent, fraction := int(bits>>10&31), float64(bits&1023)
	v := math.Ldexp(1024+fraction, exponent-25)
	switch {
	case exponent == 31 && fraction == 0:
		v = math.Inf(1)
	case exponent == 31:
		v = math.NaN()
	case exponent == 0:
		v = math.Ldexp(fraction, -24)
	}
	if bits>>15 == 1 {
		return -v
	}
	return v
}

func (l Layout) fromUTF32(element []byte) string {
	var order binary.ByteOrder = binary.LittleEndian
	if l.BigEndian {
		order = binary.BigEndian
	}
	var out []byte
	for ; len(element) >= 4; element = element[4:] {
		// A code past Unicode, or one that would be negative as a rune, is written as U+FFFD.
		out = utf8.AppendRune(out, rune(order.Uint32(element)))
	}
	return string(bytes.TrimRight(out, "\x00"))
}

func fromBytes(element []byte) string {
	element = bytes.TrimRight(element, "\x00")
	if utf8.Valid(element) {
		return string(element)
	}
	var out []byte
	for _, b := range element {
		out = utf8.AppendRune(out, rune(b))
	}
	return string(out)
}

// inOrder returns the values, which stand in the order of the file, with the last axis fastest.
func inOrder[T any](a Array, values []T) []T {
	if !a.layout.FirstAxisFastest || len(a.Shape) < 2 {
		return values
	}
	stride := make([]int, len(a.Shape))
	for axis, step := 0, 1; axis < len(stride); axis++ {
		stride[axis] = step
		step *= a.Shape[axis]
	}
	out, index, from := make([]T, len(values)), make([]int, len(a.Shape)), 0
	for i := range out {
		out[i] = values[from]
		for axis := len(index) - 1; axis >= 0; axis-- {
			index[axis]++
			from += stride[axis]
			if index[axis] < a.Shape[axis] {
				break
			}
			from -= stride[axis] * a.Shape[axis]
			index[axis] = 0
		}
	}
	return out
}

// ArrayOf returns an array of the given values, little-endian, last axis fastest. It is the way from memory to a
// writer. Errors: bad-file when the values do not fill the shape.
func ArrayOf[T bool | int64 | float32 | float64 | complex64](name string, shape []int, values []T) (Array, error) {
	layout := Layout{Kind: Float}
	var raw []byte
	switch v := any(values).(type) {
	case []complex64:
		layout.Kind, raw = Complex, littleEndian(v)
	case []bool:
		layout.Kind = Bool
	case []int64:
		layout.Kind = Int
	}
	var zero T
	layout.Size = binary.Size(zero)
	if raw == nil {
		raw, _ = binary.Append(nil, binary.LittleEndian, values) // fails for types without a fixed size only
	}
	return NewArray(name, shape, layout, raw)
}

// littleEndian does what binary.Append does; that one walks complex values by reflection, ten times slower.
func littleEndian(values []complex64) []byte {
	raw := make([]byte, 0, 8*len(values))
	for _, v := range values {
		raw = binary.LittleEndian.AppendUint32(raw, math.Float32bits(real(v)))
		raw = binary.LittleEndian.AppendUint32(raw, math.Float32bits(imag(v)))
	}
	return raw
}

// TextOf returns a single text as an array without axes.
func TextOf(name, text string) Array {
	raw, _ := binary.Append(nil, binary.LittleEndian, []rune(text))
	if len(raw) == 0 {
		raw = make([]byte, 4) // an element has at least one character
	}
	layout := Layout{Kind: Text, Size: len(raw)}
	return Array{Name: name, Type: layout.Word(), Shape: []int{}, layout: layout, raw: raw}
}
