package oxygen

import (
	"bytes"
	"encoding/json"
	"errors"
	"io"
	"strings"

	"torrloom/recon/fault"
)

// RecordVersion is the format version of a calibration file.
const RecordVersion = 1

// Record is a calibration file: the line, and where it came from. Either Calibration or Published is given by hand; a
// file written after a fit also holds the bench, so that anybody can fit it again.
type Record struct {
	Version     int          `json:"calibrationFile"`
	Calibration *Calibration `json:"calibration,omitempty"`
	Published   *Published   `json:"published,omitempty"` // as a paper prints it, instead of Calibration
	Provenance  Provenance   `json:"provenance"`
	Bench       *Bench       `json:"bench,omitempty"`
	Fit         *Fit         `json:"fit,omitempty"`
}

// Provenance says where a calibration comes from, in the words of the person who made it.
type Provenance struct {
	Source  string `json:"source,omitempty"`  // "fitted here", a citation, a notebook
	Probe   string `json:"probe,omitempty"`   // and its batch
	Made    string `json:"made,omitempty"`    // RFC 3339 time
	Program string `json:"program,omitempty"` // name and version
	Note    string `json:"note,omitempty"`
}

// ReadRecord reads a calibration file. The Calibration of the result is always set, turned over from Published when that
// is what the file holds.
//
// Errors: bad-file for text that is not such a file or has unknown keys; unsupported for another version; those of
// Calibration.Check and Published.Calibration.
func ReadRecord(text []byte) (*Record, error) {
	var r Record
	decoder := json.NewDecoder(bytes.NewReader(text))
	decoder.DisallowUnknownFields()
	if err := decoder.Decode(&r); err != nil {
		return nil, recordFault(err)
	}
	if _, err := decoder.Token(); !errors.Is(err, io.EOF) {
		return nil, fault.New(fault.BadFile, "calibration file", "text goes on after the closing brace; a calibration file is one JSON object")
	}
	if r.Version != RecordVersion {
		return nil, fault.New(fault.Unsupported, "calibration file", "format %d in calibrationFile; this version reads format %d", r.Version, RecordVersion)
	}
	return &r, r.complete()
}

func recordFault(err error) error {
	var wrong *json.UnmarshalTypeError
	if errors.As(err, &wrong) {
		return fault.New(fault.BadFile, "calibration file "+wrong.Field, "a JSON %s was found; %s is wanted", wrong.Value, wrong.Type.Kind())
	}
	return fault.New(fault.BadFile, "calibration file", "%s; a calibration file is one JSON object with the known keys", strings.TrimPrefix(err.Error(), "json: "))
}

func (r *Record) complete() error {
	if (r.Calibration == nil) == (r.Published == nil) {
		return fault.New(fault.BadFile, "calibration file", "either calibration or published is needed, not both or neither")
	}
	if r.Published != nil {
		c, err := r.Published.Calibration()
		if err != nil {
			return fault.Within("calibration file", err)
		}
		r.Calibration, r.Published = &c, nil
	}
	if err := r.Calibration.Check(); err != nil {
		return fault.Within("calibration file", err)
	}
	return nil
}

// Text returns the calibration file, indented, with a line feed at its end.
func (r Record) Text() ([]byte, error) {
	r.Version = RecordVersion
	text, err := json.MarshalIndent(r, "", "  ")
	if err != nil {
		return nil, fault.New(fault.Bug, "calibration file", "%v", err)
	}
	return append(text, '\n'), nil
}
