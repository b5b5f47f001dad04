package importer

import (
	"archive/zip"
	"bytes"
	"compress/flate"
	"encoding/binary"
	"fmt"
	"hash/crc32"
	"io"
	"path"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// Salvaged is what a file that was cut short still holds.
type Salvaged struct {
	Arrays []acquisition.Array // the last has Truncated set when the file ended within it
	Text   string              // what is complete and what is lost, in words
}

// Salvage returns the complete arrays of a file that Read refused because it ends too early, and of the array in which it
// ends the entries that are complete along its slowest axis. A person decides whether to use them; an acquisition made
// of them carries a warning that stays.
//
// Errors: as of Read; unsupported for a format whose files are of no use when cut; bad-file when nothing is complete.
func Salvage(limits Limits, name string, data []byte) (Salvaged, error) {
	format, err := recognise(name, data)
	if err != nil {
		return Salvaged{}, err
	}
	if format.Salvage == nil {
		return Salvaged{}, fault.New(fault.Unsupported, name, "cut short; nothing can be used of a cut %s", format.Name)
	}
	format.Read = format.Salvage
	arrays, err := format.guarded(name, data, limits)
	if err != nil {
		return Salvaged{}, err
	}
	if len(arrays) == 0 {
		return Salvaged{}, fault.New(fault.BadFile, name, "ends before the first array is complete")
	}
	return Salvaged{Arrays: arrays, Text: salvageText(arrays)}, nil
}

func salvageText(arrays []acquisition.Array) string {
	whole := len(arrays)
	var cut string
	for _, a := range arrays {
		if a.Truncated == nil {
			continue
		}
		whole--
		stated := ""
		if a.Truncated.Stated > 0 {
			stated = fmt.Sprintf(" of %d", a.Truncated.Stated)
		}
		cut += fmt.Sprintf("; of %q %d%s entries along axis %d", a.Name, a.Shape[a.Truncated.Axis], stated,
			a.Truncated.Axis+1)
	}
	return fmt.Sprintf("the file was cut short; complete are %d arrays%s; what stood behind is lost", whole, cut)
}

// salvageNPY returns the one array of a file.
func salvageNPY(name string, data []byte, limits Limits) ([]acquisition.Array, error) {
	array, err := cutNPY(data, limits)
	array.Name, array.AfterFile = strings.TrimSuffix(path.Base(name), ".npy"), true
	return []acquisition.Array{array}, err
}

// cutNPY is parseNPY for a body that may be too short.
func cutNPY(data []byte, limits Limits) (acquisition.Array, error) {
	header, layout, body, err := npyParts(data, limits)
	if err != nil {
		return acquisition.Array{}, err
	}
	if elements(header.shape)*layout.Size == len(body) {
		return acquisition.NewArray("", header.shape, layout, body)
	}
	return acquisition.CutArray("", header.shape, layout, body)
}

// localHeader is what stands before every member of a ZIP archive.
// Source: PKWARE, .ZIP File Format Specification (APPNOTE 6.3), 4.3.7 and 4.5.3.
type localHeader struct {
	name           string
	method, flags  uint16
	crc            uint32
	packed, actual uint64
	start          int // of the data
}

// salvageNPZ walks an archive member by member from its beginning, without the directory at its end.
func salvageNPZ(_ string, data []byte, limits Limits) ([]acquisition.Array, error) {
	left := min(limits.UnpackedBytes, limits.Ratio*int64(len(data)))
	var arrays []acquisition.Array
	for at := 0; at < len(data); {
		h, ok := parseLocal(data, at)
		if !ok || len(arrays) >= limits.Members {
			break
		}
		body, next, whole := h.body(data, left)
		left -= int64(len(body))
		name := strings.TrimSuffix(h.name, ".npy")
		if whole && h.flags&zipSizesBehind == 0 && crc32.ChecksumIEEE(body) != h.crc {
			return nil, fault.New(fault.BadFile, name,
				"has another checksum than stated; the file is damaged, not only cut")
		}
		if strings.HasSuffix(h.name, ".npy") {
			array, err := cutNPY(body, limits)
			if err != nil && (whole || fault.From(err).Kind == fault.TooLarge) {
				return nil, fault.Within(name, err)
			}
			if err == nil {
				array.Name = name
				arrays = append(arrays, array)
			}
		}
		if !whole {
			break
		}
		at = next
	}
	return arrays, nil
}

// zipSizesBehind is the flag of members whose sizes stand behind their data, not before.
const zipSizesBehind = 1 << 3

// parseLocal reads the header of a member.
func parseLocal(data []byte, at int) (h localHeader, ok bool) {
	const fixed = 30
	if len(data)-at < fixed || !bytes.HasPrefix(data[at:], []byte(zipMember)) {
		return h, false
	}
	le := binary.LittleEndian
	b := data[at:]
	h.flags, h.method, h.crc = le.Uint16(b[6:]), le.Uint16(b[8:]), le.Uint32(b[14:])
	h.packed, h.actual = uint64(le.Uint32(b[18:])), uint64(le.Uint32(b[22:]))
	name, extra := int(le.Uint16(b[26:])), int(le.Uint16(b[28:]))
	if len(b) < fixed+name+extra {
		return h, false
	}
	h.name, h.start = string(b[fixed:fixed+name]), at+fixed+name+extra
	const zip64 = 1
	for field := b[fixed+name : fixed+name+extra]; len(field) >= 4; {
		n := int(le.Uint16(field[2:]))
		if n > len(field)-4 {
			break
		}
		if le.Uint16(field) == zip64 && n >= 16 {
			h.actual, h.packed = le.Uint64(field[4:]), le.Uint64(field[12:])
		}
		field = field[4+n:]
	}
	return h, h.flags&1 == 0 && (h.method == zip.Store || h.method == zip.Deflate)
}

// body returns the bytes of a member as far as they are there and the limit lets them, where the next member begins, and
// whether this one is whole.
func (h localHeader) body(data []byte, most int64) (body []byte, next int, whole bool) {
	rest := data[h.start:]
	known := h.flags&zipSizesBehind == 0 || h.packed > 0
	if known && h.packed < uint64(len(rest)) {
		rest = rest[:h.packed]
		whole = true
	}
	whole = whole || known && h.packed == uint64(len(rest))
	if h.method == zip.Store {
		if !known || uint64(len(rest)) > uint64(max(most, 0)) {
			return nil, 0, false
		}
		return rest, h.start + len(rest), whole
	}
	from := bytes.NewReader(rest)
	var out bytes.Buffer
	_, err := io.Copy(&out, io.LimitReader(flate.NewReader(from), max(most, 0)))
	next = h.start + len(rest)
	if !known {
		whole = err == nil
		next = h.start + len(rest) - from.Len()
		next += descriptorBytes(data[next:])
	}
	return out.Bytes(), next, whole && err == nil
}

// descriptorBytes returns the length of the record behind a member whose sizes stand there: with or without a mark, with
// sizes of four or eight bytes, told by where the next member begins.
func descriptorBytes(rest []byte) int {
	for _, n := range []int{16, 24, 12, 20} {
		if len(rest) >= n+4 && bytes.HasPrefix(rest[n:], []byte("PK")) {
			return n
		}
	}
	return len(rest)
}

// salvageMAT returns what is complete of a level 5 file.
func salvageMAT(_ string, data []byte, limits Limits) ([]acquisition.Array, error) {
	arrays, err := (&matFile{limits: limits, salvage: true}).walk(data)
	if err != nil && fault.From(err).Kind != fault.BadFile {
		return nil, err
	}
	return acquisition.Gather(arrays), nil
}

// salvageColumns drops the last line, which was cut when no line end follows it.
func salvageColumns(name string, data []byte, limits Limits) ([]acquisition.Array, error) {
	end := bytes.LastIndexAny(data, "\r\n")
	if end < 0 {
		return nil, fault.New(fault.BadFile, "line 1", "ends within the first line")
	}
	arrays, err := ReadColumns(limits, name, data[:end+1], Dialect{})
	if err != nil || end+1 == len(data) {
		return arrays, err
	}
	rows := 0
	for _, a := range arrays {
		if len(a.Shape) > 0 && a.Attributes[statedAttribute] == "" {
			rows = max(rows, a.Shape[rowAxis(a)])
		}
	}
	for i, a := range arrays {
		if len(a.Shape) > 0 && a.Shape[rowAxis(a)] == rows {
			arrays[i].Truncated = &acquisition.Truncation{Axis: rowAxis(a)}
		}
	}
	return arrays, nil
}

// rowAxis returns the axis of an array of columns that counts rows: the first of a whole table, else the last.
func rowAxis(a acquisition.Array) int {
	if a.AfterFile {
		return 0
	}
	return len(a.Shape) - 1
}
