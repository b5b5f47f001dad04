package importer

import (
	"bytes"
	"compress/gzip"
	"compress/zlib"
	"errors"
	"fmt"
	"io"
	"strings"

	"torrloom/recon/fault"
)

// gzipped is one file of any other format packed by gzip, as NIfTI volumes often are.
// Source: P. Deutsch, GZIP file format specification, RFC 1952 (1996).
var gzipped = Format{
	Name:       "file packed by gzip",
	Extensions: []string{".gz"},
	Recognise:  func(head []byte) bool { return bytes.HasPrefix(head, []byte("\x1f\x8b\x08")) },
	Unpack: func(name string, data []byte, limits Limits) ([]File, error) {
		unpacked, err := gunzip(data, limits)
		if err != nil {
			return nil, err
		}
		return []File{{Name: strings.TrimSuffix(name, ".gz"), Data: unpacked}}, nil
	},
}

// gunzip unpacks as far as the limits let it; memory grows with what comes out, not with what is stated.
func gunzip(data []byte, limits Limits) ([]byte, error) {
	from, err := gzip.NewReader(bytes.NewReader(data))
	if err != nil {
		return nil, fault.New(fault.BadFile, "byte 0", "the head of a gzip file that cannot be read (%v)", err)
	}
	allowed := min(limits.UnpackedBytes, max(limits.Ratio*int64(len(data)), limits.HarmlessBytes))
	var out bytes.Buffer
	n, err := io.Copy(&out, io.LimitReader(from, allowed+1))
	if err != nil {
		return nil, fault.New(fault.BadFile, fmt.Sprintf("byte %d unpacked", n),
			"%d bytes do not unpack (%v); the file may be cut short or damaged", len(data), err)
	}
	if n > allowed {
		return nil, fault.New(fault.TooLarge, "",
			"%d bytes unpack to more than %d; write it without compression if that is meant", len(data), allowed)
	}
	return out.Bytes(), nil
}

// inflate returns the one element in a compressed one.
func (m *matFile) inflate(e matElement) (matElement, error) {
	packed := bytes.NewReader(e.data)
	from, err := zlib.NewReader(packed)
	if err != nil {
		return matElement{}, notInflated(e, err)
	}
	var tag [8]byte
	if _, err := io.ReadFull(from, tag[:]); err != nil {
		return matElement{}, notInflated(e, err)
	}
	n := int64(m.order.Uint32(tag[4:]))
	if err := m.spend(n, e.at.String()); err != nil {
		return matElement{}, err
	}
	data, err := readExactly(from, n, int64(len(e.data)))
	inner := matElement{m.order.Uint32(tag[:4]), data, place{e.at.String() + " unpacked ", len(tag)}, err != nil}
	if inner.kind == miCOMPRESSED {
		return matElement{}, fault.New(fault.BadFile, e.at.String(), "a compressed variable within a compressed variable")
	}
	if err != nil && m.salvage && e.cut {
		return inner, nil
	}
	if err != nil {
		return matElement{}, notInflated(e, err)
	}
	// The checksum is compared when the end is read.
	if extra, err := from.Read(tag[:1]); extra != 0 || !errors.Is(err, io.EOF) || packed.Len() != 0 {
		return matElement{}, fault.New(fault.BadFile, e.at.String(),
			"a compressed variable unpacks to something else than the %d bytes stated (%v); the file may be damaged", n, err)
	}
	return inner, nil
}

func notInflated(e matElement, err error) error {
	return fault.New(fault.BadFile, e.at.String(),
		"a compressed variable of %d bytes does not unpack (%v); the file may be cut short or damaged", len(e.data), err)
}

// readExactly returns n bytes. They are asked for at once only when the packed bytes make them likely.
func readExactly(from io.Reader, n, packed int64) ([]byte, error) {
	const likely = 8 // measured traces pack to half, whole numbers to an eighth
	if n <= likely*packed {
		data := make([]byte, n)
		got, err := io.ReadFull(from, data)
		return data[:got], err
	}
	var out bytes.Buffer
	got, err := io.CopyN(&out, from, n)
	if err == nil && got != n {
		err = io.ErrUnexpectedEOF
	}
	return out.Bytes(), err
}
