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
}

// Formats lists what can be read. The first row that recognises a file reads it.
var Formats = []Format{numpyArray, numpyArchive}

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
	format, err := recognise(name, data)
	if err != nil {
		return nil, err
	}
	return format.guarded(name, data, limits)
}

// Open returns the acquisition in a file that uses the field dictionary, and warnings as of acquisition.FromArrays.
func Open(name string, data []byte) (*acquisition.Acquisition, []string, error) {
	arrays, err := Read(name, data)
	if err != nil {
		return nil, nil, err
	}
	return acquisition.FromArrays(name, arrays)
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
	defer func() {
		if cause := recover(); cause != nil {
			arrays, err = nil, fault.New(fault.Bug, name, "the %s reader failed: %v\n%s", f.Name, cause, debug.Stack())
		}
	}()
	arrays, err = f.Read(name, data, limits)
	if err != nil {
		return nil, fault.Within(name, err)
	}
	return arrays, nil
}
