package exporter

import (
	"archive/zip"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// Acquisition writes an acquisition as a NumPy archive by the field dictionary; the importer makes the same again.
func Acquisition(w io.Writer, a *acquisition.Acquisition) error {
	arrays, err := acquisition.Arrays(a)
	if err != nil {
		return err
	}
	return WriteNPZ(w, arrays)
}

// MapNPZ writes a map as a NumPy archive: values [z, y, x] in float32, affine [4, 4] from voxel indices (x, y, z, 1) to
// mm, quantity and unit.
func MapNPZ(w io.Writer, m volume.Map) error {
	if err := checkGrid("NumPy archive", m.Grid, len(m.Values)); err != nil {
		return err
	}
	n := m.Grid.N
	values, err := acquisition.ArrayOf("values", []int{n[2], n[1], n[0]}, m.Values)
	if err != nil {
		return err
	}
	var rows []float64
	for _, row := range m.Grid.Affine() {
		rows = append(rows, row[:]...)
	}
	affine, err := acquisition.ArrayOf("affine", []int{4, 4}, append(rows, 0, 0, 0, 1))
	if err != nil {
		return err
	}
	quantity, unit := acquisition.TextOf("quantity", m.Name), acquisition.TextOf("unit", m.Unit)
	return WriteNPZ(w, []acquisition.Array{values, affine, quantity, unit})
}

// WriteNPZ writes arrays as a compressed NumPy archive in the given order, each in its own byte order and layout.
//
// Errors: bad-setting when two arrays have one name, or an array none.
func WriteNPZ(w io.Writer, arrays []acquisition.Array) error {
	archive := zip.NewWriter(w)
	seen := map[string]bool{"": true}
	for _, array := range arrays {
		if seen[array.Name] {
			return fault.New(fault.BadSetting,
				"NumPy archive", "name %q stands twice or is empty; each array needs a name of its own", array.Name)
		}
		seen[array.Name] = true
		// A header without a time keeps the bytes the same.
		member, err := archive.CreateHeader(&zip.FileHeader{Name: array.Name + ".npy", Method: zip.Deflate})
		if err != nil {
			return err
		}
		if err := writeNPY(member, array); err != nil {
			return err
		}
	}
	return archive.Close()
}

// writeNPY writes one array in NPY version 1.
// Source: NumPy documentation, "NPY format" (numpy.lib.format): the header is padded with spaces to a multiple of 64
// bytes and ends with a line feed.
func writeNPY(w io.Writer, array acquisition.Array) error {
	fortran := "False"
	if array.Layout().FirstAxisFastest {
		fortran = "True"
	}
	text := fmt.Sprintf("{'descr': '%s', 'fortran_order': %s, 'shape': %s, }", descr(array.Layout()), fortran, tuple(array.Shape))
	const before, alignment = 10, 64 // magic, version and length stand before the text
	text += strings.Repeat(" ", alignment-1-(before+len(text))%alignment) + "\n"
	if len(text) > math.MaxUint16 {
		return fault.New(fault.TooLarge, array.Name, "%d axes; NPY version 1 cannot hold that many", len(array.Shape))
	}
	head := binary.LittleEndian.AppendUint16([]byte("\x93NUMPY\x01\x00"), uint16(len(text)))
	if _, err := w.Write(append(head, text...)); err != nil {
		return err
	}
	_, err := w.Write(array.Raw())
	return err
}

// descr returns a layout as NumPy's type string: byte order, kind, size; text counts characters.
func descr(l acquisition.Layout) string {
	order, size := "<", l.Size
	switch {
	case l.Size == 1 || l.Kind == acquisition.Bytes:
		order = "|"
	case l.BigEndian:
		order = ">"
	}
	if l.Kind == acquisition.Text {
		size /= 4
	}
	return fmt.Sprintf("%s%c%d", order, l.Kind, size)
}

// tuple returns a shape as Python writes it: "()", "(5,)", "(2, 3)".
func tuple(shape []int) string {
	if len(shape) == 1 {
		return fmt.Sprintf("(%d,)", shape[0])
	}
	return "(" + strings.Trim(acquisition.ShapeText(shape), "[]") + ")"
}
