package importer

import (
	"bytes"
	"fmt"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// jcamp is a JCAMP-DX file: one spectrum or trace, or a LINK of several blocks. XYDATA in every packing, XYPOINTS and
// NTUPLES are read. A block gives "x" and its ordinates ("y", or "real" and "imaginary" for the symbols R and I);
// every user-defined label ##$NAME gives a small array of its own, every other label an attribute of the ordinates. Blocks
// that hold the same arrays become one, with a leading axis for the block.
// Source: R. Cammack, Y. Fann, R. J. Lancashire, J. P. Maher, P. S. McIntyre and R. Morse, JCAMP-DX for electron magnetic
// resonance (EMR), Pure and Applied Chemistry 78 (2006) 613-631; NTUPLES after A. N. Davies and P. Lampen, JCAMP-DX for
// NMR, Applied Spectroscopy 47 (1993) 1093-1099.
var jcamp = Format{
	Name:       "JCAMP-DX",
	Extensions: []string{".dx", ".jdx", ".jcamp", ".jcm"},
	Recognise: func(head []byte) bool {
		text, err := plainText(head[:len(head)/2*2])
		if err != nil {
			return false
		}
		for _, line := range splitLines(text) {
			if r, ok := recordAt(line); ok {
				return r.label == "TITLE" || r.label == "JCAMPDX" || r.label == "JCAMPCS"
			}
			if before, _, _ := bytes.Cut(line.text, []byte("$$")); len(bytes.TrimSpace(before)) > 0 {
				return false
			}
		}
		return false
	},
	Read: readJCAMP,
}

// record is one labelled record: what stands behind the label, and the lines that follow.
type record struct {
	label string // capital letters without the blanks and signs that do not count
	name  string // as written
	value string
	line  int
	lines []textLine
}

// user returns the name of a user-defined label ##$NAME.
func (r record) user() (string, bool) { return strings.CutPrefix(r.name, "$") }

// recordAt reads the label at the head of a line.
func recordAt(line textLine) (record, bool) {
	text, _, _ := bytes.Cut(bytes.TrimSpace(line.text), []byte("$$"))
	rest, begins := bytes.CutPrefix(text, []byte("##"))
	name, value, found := bytes.Cut(rest, []byte("="))
	if !begins || !found {
		return record{}, false
	}
	r := record{name: strings.TrimSpace(fromLatin(name)), value: strings.TrimSpace(fromLatin(value)), line: line.number}
	r.label = strings.ToUpper(strings.NewReplacer(" ", "", "-", "", "/", "", "_", "").Replace(r.name))
	return r, true
}

// records parts a file into labelled records. Comments, which begin with $$, are dropped.
func records(text []byte) (out []record) {
	for _, line := range splitLines(text) {
		if r, ok := recordAt(line); ok {
			out = append(out, r)
			continue
		}
		line.text, _, _ = bytes.Cut(line.text, []byte("$$"))
		if len(out) > 0 && len(bytes.TrimSpace(line.text)) > 0 {
			last := &out[len(out)-1]
			last.lines = append(last.lines, line)
		}
	}
	return out
}

func readJCAMP(_ string, data []byte, limits Limits) ([]acquisition.Array, error) {
	text, err := plainText(data)
	if err != nil {
		return nil, err
	}
	blocks, err := blocksOf(records(text), limits)
	if err != nil {
		return nil, err
	}
	most := int(min(limits.Elements, limits.Ratio*int64(len(data))))
	var read []fileArrays
	for i, b := range blocks {
		b.most = most
		arrays, err := b.arrays()
		if err != nil {
			return nil, err
		}
		for _, a := range arrays {
			if a.Layout().Kind == acquisition.Float {
				most -= a.Len()
			}
		}
		most = max(most, 0)
		if len(arrays) > 0 {
			read = append(read, fileArrays{name: fmt.Sprintf("block %d", i+1), arrays: arrays})
		}
	}
	if len(read) == 0 {
		return nil, fault.New(fault.BadFile, "", "no data among %d blocks; ##XYDATA, ##XYPOINTS or ##NTUPLES wanted",
			len(blocks))
	}
	if len(read) > 1 {
		if joined, err := join(read); err == nil {
			return joined.arrays, nil
		}
	}
	return named(read), nil
}

// block is what stands between ##TITLE and ##END.
type block struct {
	records []record
	most    int
}

// blocksOf returns the blocks that are no LINK, in their order. A block that is not ended was cut.
func blocksOf(all []record, limits Limits) (out []block, err error) {
	var open []block
	for _, r := range all {
		switch {
		case r.label == "TITLE":
			if len(open) >= limits.Nesting {
				return nil, fault.New(fault.TooLarge, fmt.Sprintf("line %d", r.line), "blocks nested more than %d deep",
					limits.Nesting)
			}
			open = append(open, block{})
		case len(open) == 0:
			return nil, fault.New(fault.BadFile, fmt.Sprintf("line %d", r.line),
				"##%s outside of a block; a block begins with ##TITLE=", r.name)
		}
		if r.label == "END" {
			last := open[len(open)-1]
			open = open[:len(open)-1]
			if !strings.EqualFold(last.value("DATATYPE"), "LINK") {
				out = append(out, last)
			}
			if len(out) > limits.Arrays {
				return nil, fault.New(fault.TooLarge, "", "more than %d blocks", limits.Arrays)
			}
			continue
		}
		open[len(open)-1].records = append(open[len(open)-1].records, r)
	}
	if len(open) > 0 {
		last := all[len(all)-1]
		line := last.line
		if n := len(last.lines); n > 0 {
			line = last.lines[n-1].number
		}
		return nil, fault.New(fault.BadFile, fmt.Sprintf("line %d", line), "ends without ##END=; the file may be cut short")
	}
	return out, nil
}

// find returns the first record with one of the labels.
func (b block) find(labels ...string) (record, bool) {
	for _, r := range b.records {
		for _, label := range labels {
			if r.label == label {
				return r, true
			}
		}
	}
	return record{}, false
}

func (b block) value(label string) string {
	r, _ := b.find(label)
	return r.value
}
