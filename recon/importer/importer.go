// Package importer turns the bytes of a file into named arrays, and those into an acquisition.
//
// Every reader promises: the content decides, never the file's extension; a length stated in a file is believed only as
// far as the bytes present bear it out, and before anything is allocated; values are taken as declared, nothing is
// guessed; what cannot be read is a fault that names the byte, member or line.
//
// To add a format, write one file with a Format and add its row to Formats.
package importer

import (
	"fmt"
	"runtime/debug"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// Format is one kind of file.
type Format struct {
	Name       string
	Extensions []string // with the point; for file pickers only

	// Recognise tells from the first bytes of a file whether it is of this format.
	Recognise func(head []byte) bool

	// Read returns the arrays in data. The arrays may keep data, which must not change afterwards. A format of
	// one unnamed array names it after the file.
	Read func(name string, data []byte, limits Limits) ([]acquisition.Array, error)

	// Salvage returns what is complete of a file that is cut short, the last array perhaps with Truncated set; nil when a
	// cut file of this format is of no use.
	Salvage func(name string, data []byte, limits Limits) ([]acquisition.Array, error)

	// Unpack stands in the place of Read when the format holds other files: it returns them.
	Unpack func(name string, data []byte, limits Limits) ([]File, error)
}

// File is the bytes of one file. Name may have folders, parted by slashes.
type File struct {
	Name string
	Data []byte
}

// Formats lists what can be read. The first row that recognises a file reads it.
var Formats = []Format{numpyArray, numpyArchive, hdf5, zipArchive, matLevel5, gzipped, nifti, matLevel4, jcamp, columns}

// HeadBytes is how much of a file's beginning a format may ask for to recognise it.
const HeadBytes = 4096

// Read returns the named arrays of a file within the default limits.
//
// Errors: bad-file, unsupported, too-large; a bug when a reader breaks its promise.
func Read(name string, data []byte) ([]acquisition.Array, error) {
	return ReadWithin(Default, name, data)
}

// ReadWithin is Read with limits that a person has confirmed.
func ReadWithin(limits Limits, name string, data []byte) ([]acquisition.Array, error) {
	tree, err := readTree(limits, name, data, 0)
	return tree.Arrays, err
}

// Open returns the acquisition in a file that uses the field dictionary, and warnings as of acquisition.FromArrays.
func Open(name string, data []byte) (*acquisition.Acquisition, []string, error) {
	tree, err := readTree(Default, name, data, 0)
	if err != nil {
		return nil, nil, err
	}
	a, warnings, err := acquisition.FromArrays(name, tree.Arrays)
	return a, append(tree.Notes, warnings...), err
}

// readTree reads one file, and the files in it when it is a container.
func readTree(limits Limits, name string, data []byte, depth int) (Tree, error) {
	if depth > limits.Nesting {
		return Tree{}, fault.New(fault.TooLarge, name, "packed more than %d times", limits.Nesting)
	}
	format, err := recognise(name, data)
	if err != nil {
		return Tree{}, err
	}
	if format.Unpack == nil {
		arrays, err := format.guarded(name, data, limits)
		return Tree{Arrays: arrays}, err
	}
	files, err := format.unpack(name, data, limits)
	if err != nil {
		return Tree{}, err
	}
	for _, f := range files { // archives in archives share what the outermost may unpack to
		limits.UnpackedBytes -= int64(len(f.Data))
	}
	if len(files) == 1 {
		return readTree(limits, files[0].Name, files[0].Data, depth+1)
	}
	tree, err := readSet(limits, files, depth+1)
	if err != nil {
		return Tree{}, fault.Within(name, err)
	}
	return tree, nil
}

func recognise(name string, data []byte) (Format, error) {
	if len(data) == 0 {
		return Format{}, fault.New(fault.BadFile, name, "the file is empty")
	}
	head := data[:min(len(data), HeadBytes)]
	var known []string
	for _, f := range Formats {
		if f.Recognise(head) {
			return f, nil
		}
		known = append(known, fmt.Sprintf("%s (%s)", f.Name, strings.Join(f.Extensions, ", ")))
	}
	return Format{}, fault.New(fault.Unsupported, name,
		"begins with bytes % x, which no known format does; use %s", head[:min(len(head), 8)], strings.Join(known, " or "))
}

// guarded reads with the file's name put before the place of a fault, and a panic of the reader made a bug fault.
func (f Format) guarded(name string, data []byte, limits Limits) (arrays []acquisition.Array, err error) {
	defer f.catch(name, &err)
	arrays, err = f.Read(name, data, limits)
	if err != nil {
		return nil, fault.Within(name, err)
	}
	return arrays, nil
}

// unpack is guarded for containers.
func (f Format) unpack(name string, data []byte, limits Limits) (files []File, err error) {
	defer f.catch(name, &err)
	files, err = f.Unpack(name, data, limits)
	if err != nil {
		return nil, fault.Within(name, err)
	}
	return files, nil
}

func (f Format) catch(name string, err *error) {
	if cause := recover(); cause != nil {
		*err = fault.New(fault.Bug, name, "the %s reader failed: %v\n%s", f.Name, cause, debug.Stack())
	}
}
