package oxygen

import (
	"encoding/csv"
	"errors"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"

	"torrloom/recon/fault"
)

// tableColumn is one column that a table of readings may have.
type tableColumn struct {
	Name string
	Help string
	set  func(r *Reading, v float64)
}

// TableColumns lists the number columns of a table of readings, by the name in its header; "label" is a text column.
var TableColumns = []tableColumn{
	{"oxygen_percent", "oxygen in the dry gas", func(r *Reading, v float64) { r.OxygenFraction = at(v / 100) }},
	{"oxygen_percent_se", "its standard error", func(r *Reading, v float64) { r.FractionSE = v / 100 }},
	{"oxygen_fraction", "oxygen in the dry gas, 0 to 1", func(r *Reading, v float64) { r.OxygenFraction = at(v) }},
	{"po2_torr", "instead of a gas", func(r *Reading, v float64) { r.PO2Torr = at(v) }},
	{"po2_mmhg", "instead of a gas", func(r *Reading, v float64) { r.PO2Torr = at(v * PascalPerMMHg / PascalPerTorr) }},
	{"po2_kpa", "instead of a gas", func(r *Reading, v float64) { r.PO2Torr = at(Torr(v)) }},
	{"po2_se_torr", "standard error of pO2", func(r *Reading, v float64) { r.PO2SETorr = v }},
	{"rate_per_us", "measured rate", func(r *Reading, v float64) { r.RatePerUS = v }},
	{"rate_se_per_us", "its standard error", func(r *Reading, v float64) { r.RateSEPerUS = v }},
	{"concentration_um", "of the probe, µM", func(r *Reading, v float64) { r.ConcentrationUM = at(v) }},
	{"temperature_c", "of this sample", func(r *Reading, v float64) { r.TemperatureC = at(v) }},
}

func at(v float64) *float64 { return &v }

// ReadTable reads a table of readings: a header with names of TableColumns, then one line per reading. Fields are parted
// by tab, semicolon or comma; with tab or semicolon the decimal mark may be a comma. An empty field means: not known.
// Lines that start with # are passed over.
//
// Errors: bad-file naming line and column.
func ReadTable(text []byte) ([]Reading, error) {
	plain := strings.TrimPrefix(string(text), "\ufeff")
	header := firstLine(plain)
	reader := csv.NewReader(strings.NewReader(plain))
	reader.Comment, reader.Comma, reader.TrimLeadingSpace = '#', ',', true
	for _, comma := range []rune{'\t', ';'} {
		if strings.ContainsRune(header, comma) {
			reader.Comma = comma
			break
		}
	}
	names, err := reader.Read()
	if err != nil {
		return nil, fault.New(fault.BadFile, "table", "no header; the first line names the columns, as in oxygen_percent, rate_per_us")
	}
	columns, err := columnsOf(names)
	if err != nil {
		return nil, err
	}
	return readRows(reader, names, columns)
}

func firstLine(text string) string {
	for line := range strings.Lines(text) {
		if trimmed := strings.TrimSpace(line); trimmed != "" && trimmed[0] != '#' {
			return line
		}
	}
	return ""
}

// columnsOf returns the row of TableColumns for each name, nil for the label.
func columnsOf(names []string) ([]*tableColumn, error) {
	out := make([]*tableColumn, len(names))
	for i, name := range names {
		name = strings.ToLower(strings.TrimSpace(name))
		if name == "label" {
			continue
		}
		k := slices.IndexFunc(TableColumns, func(c tableColumn) bool { return c.Name == name })
		if k < 0 {
			return nil, fault.New(fault.BadFile, "table header", "column %q is not known; known are label, %s", name, strings.Join(columnNames(), ", "))
		}
		out[i] = &TableColumns[k]
	}
	return out, nil
}

func columnNames() []string {
	var out []string
	for _, c := range TableColumns {
		out = append(out, c.Name)
	}
	return out
}

func readRows(reader *csv.Reader, names []string, columns []*tableColumn) ([]Reading, error) {
	var out []Reading
	for {
		fields, err := reader.Read()
		if errors.Is(err, io.EOF) {
			return out, nil
		}
		if err != nil {
			return nil, fault.New(fault.BadFile, "table", "after %d readings: %v; %d fields per line are wanted, as in the header", len(out), err, len(names))
		}
		line, _ := reader.FieldPos(0)
		var r Reading
		for i, field := range fields {
			if err := setField(&r, columns[i], field, reader.Comma); err != nil {
				return nil, fault.New(fault.BadFile, "table line "+strconv.Itoa(line)+" column "+names[i], "%q is not a number; leave a field empty when it is not known", field)
			}
		}
		out = append(out, r)
	}
}

func setField(r *Reading, column *tableColumn, field string, comma rune) error {
	field = strings.TrimSpace(field)
	if column == nil {
		r.Label = field
		return nil
	}
	if field == "" {
		return nil
	}
	if comma != ',' {
		field = strings.Replace(field, ",", ".", 1)
	}
	v, err := strconv.ParseFloat(field, 64)
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return strconv.ErrSyntax
	}
	column.set(r, v)
	return nil
}
