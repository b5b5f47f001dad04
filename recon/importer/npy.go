package importer

import (
	"bytes"
	"encoding/binary"
	"path"
	"strconv"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// numpyArray is a single array in the NPY format, versions 1 to 3.
// Source: NumPy documentation, "NPY format" (numpy.lib.format).
var numpyArray = Format{
	Name:       "NumPy array",
	Extensions: []string{".npy"},
	Recognise:  func(head []byte) bool { return bytes.HasPrefix(head, npyMagic) },
	Read: func(name string, data []byte, limits Limits) ([]acquisition.Array, error) {
		array, err := parseNPY(data, limits)
		array.Name = strings.TrimSuffix(path.Base(name), ".npy")
		array.AfterFile = true
		return []acquisition.Array{array}, err
	},
	Salvage: salvageNPY,
}

var npyMagic = []byte("\x93NUMPY")

// parseNPY returns the array of one NPY file, without a name. It keeps data.
func parseNPY(data []byte, limits Limits) (acquisition.Array, error) {
	header, layout, body, err := npyParts(data, limits)
	if err != nil {
		return acquisition.Array{}, err
	}
	if err := checkBody(header, layout, len(data)-len(body), len(body)); err != nil {
		return acquisition.Array{}, err
	}
	return acquisition.NewArray("", header.shape, layout, body)
}

// npyParts returns what the header states, within the limits, and the bytes behind it.
func npyParts(data []byte, limits Limits) (npyText, acquisition.Layout, []byte, error) {
	text, body, err := npyHeader(data, limits)
	if err != nil {
		return npyText{}, acquisition.Layout{}, nil, err
	}
	header, err := parseHeader(text)
	if err != nil {
		return npyText{}, acquisition.Layout{}, nil, err
	}
	layout, err := parseDescr(header.descr)
	if err != nil {
		return npyText{}, acquisition.Layout{}, nil, err
	}
	layout.FirstAxisFastest = header.fortran
	return header, layout, body, limits.checkShape(header.shape)
}

// npyHeader returns the text of the header and the bytes behind it.
func npyHeader(data []byte, limits Limits) (string, []byte, error) {
	if !bytes.HasPrefix(data, npyMagic) {
		return "", nil, fault.New(fault.BadFile, "byte 0", "%q found, %q wanted", data[:min(len(data), len(npyMagic))], npyMagic)
	}
	const versionEnd = 8
	lengthBytes := 4
	if len(data) > 6 && data[6] == 1 {
		lengthBytes = 2
	}
	start := versionEnd + lengthBytes
	if len(data) < start {
		return "", nil, fault.New(fault.BadFile, "byte "+strconv.Itoa(len(data)),
			"ends within the first %d bytes; the file may be cut short", start)
	}
	if major := data[6]; major < 1 || major > 3 {
		return "", nil, fault.New(fault.Unsupported, "byte 6", "NPY version %d.%d; versions 1 to 3 are read", major, data[7])
	}
	stated := int64(binary.LittleEndian.Uint16(data[versionEnd:]))
	if lengthBytes == 4 {
		stated = int64(binary.LittleEndian.Uint32(data[versionEnd:]))
	}
	if err := limits.checkHeader(stated); err != nil {
		return "", nil, err
	}
	if stated > int64(len(data)-start) {
		return "", nil, fault.New(fault.BadFile, "byte "+strconv.Itoa(len(data)),
			"ends within a header of %d bytes; the file may be cut short", stated)
	}
	end := start + int(stated)
	return string(data[start:end]), data[end:], nil
}

// checkBody returns a bad-file fault unless the body holds exactly the stated elements.
func checkBody(header npyText, layout acquisition.Layout, offset, have int) error {
	want := uint64(layout.Size)
	for _, n := range header.shape {
		// checkShape has bounded the product of lengths, parseDescr the size: it stays below 2^28 * 2^31.
		want *= uint64(n)
	}
	shape, word := acquisition.ShapeText(header.shape), layout.Word()
	switch {
	case uint64(have) < want:
		return fault.New(fault.BadFile, "byte "+strconv.Itoa(offset+have),
			"ends after %d bytes of values, %s of shape %s takes %d; the file may be cut short", have, word, shape, want)
	case uint64(have) > want:
		return fault.New(fault.BadFile, "byte "+strconv.FormatUint(uint64(offset)+want, 10),
			"%d bytes follow the values, %s of shape %s takes %d", uint64(have)-want, word, shape, want)
	}
	return nil
}

// parseDescr returns the layout of a type string such as "<c8", "|S5" or ">U7".
func parseDescr(descr string) (acquisition.Layout, error) {
	if strings.HasPrefix(descr, "|O") {
		return acquisition.Layout{}, fault.New(fault.Unsupported,
			"header", "an array of Python objects; save plain numbers or text, for instance with numpy.asarray(x, dtype=float)")
	}
	if len(descr) < 3 || !strings.Contains("<>|=", descr[:1]) {
		return acquisition.Layout{}, fault.New(fault.BadFile, "header", "type %q is not a byte order, a letter and a size", descr)
	}
	if !strings.Contains("biufcSU", descr[1:2]) {
		return acquisition.Layout{}, fault.New(fault.Unsupported,
			"header", "type %q; use bool, integers, floats, complex numbers or text", descr)
	}
	size, err := strconv.ParseInt(descr[2:], 10, 32)
	if err != nil || size < 1 || descr[2] == '+' {
		return acquisition.Layout{}, fault.New(fault.BadFile, "header", "type %q has no size that can be", descr)
	}
	kind := acquisition.ElementKind(descr[1])
	if kind == acquisition.Text {
		size *= 4
	}
	orderless := size == 1 || kind == acquisition.Bytes
	if descr[0] == '|' && !orderless {
		return acquisition.Layout{}, fault.New(fault.BadFile, "header", "type %q states no byte order; use < or >", descr)
	}
	// "=" is the writer's own order; every machine this is likely to come from is little-endian.
	return acquisition.Layout{Kind: kind, Size: int(size), BigEndian: descr[0] == '>'}, nil
}

// npyText is what the header of an NPY file states.
type npyText struct {
	descr   string
	fortran bool
	shape   []int
}

// parseHeader reads the dictionary of an NPY header: the keys descr, fortran_order and shape once each, in any order.
// It knows no more of Python than that.
func parseHeader(text string) (npyText, error) {
	var h npyText
	s := scanner{text: text}
	seen := map[string]bool{}
	s.expect('{')
	for s.fault == nil && !s.accept('}') {
		key := s.quoted()
		if seen[key] {
			s.fail("each key once, not a second " + strconv.Quote(key))
		}
		seen[key] = true
		s.expect(':')
		s.value(key, &h)
		if !s.accept(',') {
			s.expect('}')
			break
		}
	}
	if s.rest() != "" {
		s.fail("the end of the header")
	}
	if len(seen) != 3 {
		s.fail("the keys descr, fortran_order and shape")
	}
	if s.fault != nil {
		return npyText{}, s.fault
	}
	return h, nil
}

// scanner walks a header text and keeps the first fault; after that it yields nothing.
type scanner struct {
	text  string
	at    int
	fault *fault.Fault
}

func (s *scanner) fail(wanted string) {
	if s.fault != nil {
		return
	}
	rest := s.text[s.at:]
	s.fault = fault.New(fault.BadFile, "header", "%q at character %d, wanted %s", rest[:min(len(rest), 20)], s.at, wanted)
}

// rest returns what is left behind white space; nothing after a fault.
func (s *scanner) rest() string {
	if s.fault != nil {
		return ""
	}
	left := strings.TrimLeft(s.text[s.at:], " \t\n")
	s.at = len(s.text) - len(left)
	return left
}

func (s *scanner) accept(c byte) bool {
	if rest := s.rest(); rest == "" || rest[0] != c {
		return false
	}
	s.at++
	return true
}

func (s *scanner) expect(c byte) {
	if !s.accept(c) {
		s.fail(strconv.Quote(string(c)))
	}
}

func (s *scanner) value(key string, h *npyText) {
	switch key {
	case "descr":
		h.descr = s.descr()
	case "fortran_order":
		h.fortran = s.boolean()
	case "shape":
		h.shape = s.shape()
	default:
		s.fail("no key but descr, fortran_order and shape")
	}
}

// quoted reads 'text' or "text". Escapes are refused; no type string needs one.
func (s *scanner) quoted() string {
	rest := s.rest()
	if rest == "" || rest[0] != '\'' && rest[0] != '"' {
		s.fail("a quoted word")
		return ""
	}
	end := strings.IndexByte(rest[1:], rest[0])
	if end < 0 || strings.Contains(rest[1:1+end], `\`) {
		s.fail("a quoted word without escapes")
		return ""
	}
	s.at += end + 2
	return rest[1 : 1+end]
}

func (s *scanner) descr() string {
	if rest := s.rest(); strings.HasPrefix(rest, "[") || strings.HasPrefix(rest, "(") {
		s.fault = fault.New(fault.Unsupported,
			"header", "a structured type with named or nested parts; save each part as an array of its own")
		return ""
	}
	return s.quoted()
}

func (s *scanner) boolean() bool {
	for word, value := range map[string]bool{"True": true, "False": false} {
		if strings.HasPrefix(s.rest(), word) {
			s.at += len(word)
			return value
		}
	}
	s.fail("True or False")
	return false
}

// shape reads "()", "(5,)" or "(2, 3)".
func (s *scanner) shape() []int {
	var shape []int
	s.expect('(')
	for s.fault == nil && !s.accept(')') {
		shape = append(shape, s.length())
		if s.accept(',') {
			continue
		}
		if len(shape) == 1 {
			s.fail("a comma behind the only length") // "(5)" is a number in Python, not a shape
		}
		s.expect(')')
		break
	}
	return shape
}

// length reads a whole number; Python 2 wrote long ones with an L behind.
func (s *scanner) length() int {
	rest := s.rest()
	digits := rest[:len(rest)-len(strings.TrimLeft(rest, "0123456789"))]
	n, err := strconv.Atoi(digits)
	if err != nil {
		s.fail("a length, a whole number that is not negative")
		return 0
	}
	s.at += len(digits)
	s.accept('L')
	return n
}
