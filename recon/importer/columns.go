package importer

import (
	"bytes"
	"fmt"
	"slices"
	"strings"
	"unicode/utf16"
	"unicode/utf8"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// columns is a table of numbers as text: comma-separated values (RFC 4180) and what else programs write under that name.
//
// Delimiter and decimal mark are told together: the pair that makes a table of all lines, with the most numbers in it. What
// could be read in another way too says so in the attribute "guess" of every array. Up to three rows of names and units
// may stand before the numbers. Columns whose names differ in a running number become one array with a leading axis for
// it; a table without names is one array [row, column]. Lines beginning with #, % or // are comments; "name: value" or
// "name = value" in one becomes a small array.
var columns = Format{
	Name:       "columns of numbers as text",
	Extensions: []string{".csv", ".tsv", ".txt", ".dat", ".asc"},
	Recognise:  looksLikeColumns,
	Read: func(name string, data []byte, limits Limits) ([]acquisition.Array, error) {
		return ReadColumns(limits, name, data, Dialect{})
	},
	Salvage: salvageColumns,
}

// Dialect says how a table of text is written. The zero value is told from the text.
type Dialect struct {
	Delimiter byte // ',', ';', '\t', '|', or ' ' for any run of white space
	Decimal   byte // '.' or ','
}

// Dialects lists every way to write a table that is tried, the likelier first where both fit.
var Dialects = []Dialect{
	{',', '.'}, {';', '.'}, {'\t', '.'}, {'|', '.'}, {' ', '.'}, {';', ','}, {'\t', ','}, {'|', ','}, {' ', ','},
}

func (d Dialect) String() string {
	delimiter := map[byte]string{',': "comma", ';': "semicolon", '\t': "tabulator", '|': "bar",
		' ': "white space"}[d.Delimiter]
	decimal := map[byte]string{'.': "decimal point", ',': "decimal comma"}[d.Decimal]
	return delimiter + " between fields, " + decimal
}

// ReadColumns reads a table of text as the dialect says, as a person may have chosen after a guess.
//
// Errors: bad-file with the line; too-large; bad-setting for a dialect that is not among Dialects.
func ReadColumns(limits Limits, name string, data []byte, dialect Dialect) ([]acquisition.Array, error) {
	text, err := plainText(data)
	if err != nil {
		return nil, err
	}
	t := &table{limits: limits, lines: splitLines(text)}
	t.takeComments()
	if dialect == (Dialect{}) {
		dialect, t.guess, err = t.detect()
		if err != nil {
			return nil, err
		}
	} else if !slices.Contains(Dialects, dialect) {
		return nil, fault.New(fault.BadSetting, "", "delimiter %q with decimal mark %q; use a pair of the list",
			dialect.Delimiter, dialect.Decimal)
	}
	t.dialect = dialect
	if err := t.read(); err != nil {
		return nil, err
	}
	return t.arrays(stem(name))
}

// plainText returns text as UTF-8 without the mark that some editors put first. UTF-16 needs that mark.
func plainText(data []byte) ([]byte, error) {
	big := bytes.HasPrefix(data, []byte("\xfe\xff"))
	if !big && !bytes.HasPrefix(data, []byte("\xff\xfe")) {
		return bytes.TrimPrefix(data, []byte("\xef\xbb\xbf")), nil
	}
	if len(data)%2 != 0 {
		return nil, fault.New(fault.BadFile, fmt.Sprintf("byte %d", len(data)),
			"ends within a character of two bytes; the file may be cut short")
	}
	units := make([]uint16, 0, len(data)/2)
	for at := 2; at < len(data); at += 2 {
		a, b := uint16(data[at]), uint16(data[at+1])
		if big {
			a, b = b, a
		}
		units = append(units, a|b<<8)
	}
	out := make([]byte, 0, len(units))
	for _, r := range utf16.Decode(units) {
		out = utf8.AppendRune(out, r)
	}
	return out, nil
}

// textLine is one line with its number from 1.
type textLine struct {
	number int
	text   []byte
}

// splitLines returns the lines that hold something. They end with LF, CR LF or CR.
func splitLines(text []byte) (lines []textLine) {
	for number := 1; len(text) > 0; number++ {
		end := bytes.IndexAny(text, "\r\n")
		line, rest := text, []byte(nil)
		if end >= 0 {
			line, rest = text[:end], text[end+1:]
			if text[end] == '\r' && len(rest) > 0 && rest[0] == '\n' {
				rest = rest[1:]
			}
		}
		if len(bytes.TrimSpace(line)) > 0 {
			lines = append(lines, textLine{number, line})
		}
		text = rest
	}
	return lines
}

// table is a table of text on its way to arrays.
type table struct {
	limits   Limits
	lines    []textLine // without comments
	comments []textLine // without the marks before them
	dialect  Dialect
	guess    string

	names, units []string // of the columns, or nil
	rows         int
	kinds        []columnKind
	values       []float64  // [row, column], zero where there is text
	imaginary    []float64  // as values, or nil when no field is complex
	texts        [][]string // [column][row], nil for numbers
}

type columnKind bool

const (
	ofNumbers columnKind = false
	ofText    columnKind = true
)

// takeComments parts comments from the rest.
func (t *table) takeComments() {
	rest := t.lines[:0:0]
	for _, line := range t.lines {
		text := bytes.TrimSpace(line.text)
		switch {
		case text[0] == '#' && !bytes.HasPrefix(bytes.ToLower(text),
			[]byte("#n/a")), text[0] == '%', bytes.HasPrefix(text, []byte("//")):
			t.comments = append(t.comments, textLine{line.number, bytes.TrimSpace(bytes.TrimLeft(text, "#%/"))})
		default:
			rest = append(rest, line)
		}
	}
	t.lines = rest
}

// looksLikeColumns tells whether the beginning of a file is text in which a table of numbers begins.
func looksLikeColumns(head []byte) bool {
	text, err := plainText(head[:len(head)/2*2])
	if err != nil || len(text) == 0 {
		return false
	}
	for _, b := range text {
		if b < ' ' && !strings.ContainsRune("\t\r\n\f", rune(b)) || b == 0x7f {
			return false
		}
	}
	t := &table{lines: splitLines(text)}
	if len(head) >= HeadBytes && len(t.lines) > 0 {
		t.lines = t.lines[:len(t.lines)-1] // may be cut
		if len(t.lines) == 0 {
			return bytes.Count(text, []byte{','})+bytes.Count(text, []byte{';'})+bytes.Count(text, []byte{'\t'}) >= 20
		}
	}
	t.takeComments()
	if len(t.lines) == 0 {
		return len(head) >= HeadBytes && len(t.comments) > 0
	}
	_, _, err = t.detect()
	return err == nil
}

// trial is what a dialect makes of some lines.
type trial struct {
	dialect Dialect
	fields  int
	numeric int // columns of numbers
	header  int // lines before the first row
	rows    int
	misfits int // rows of another number of fields, or with text in a column of numbers
	first   []float64
}

// detect returns the dialect of a table and what else it could be, in words.
func (t *table) detect() (Dialect, string, error) {
	sample := t.sample()
	var best []trial
	for _, d := range Dialects {
		one, ok := try(d, sample)
		if !ok {
			continue
		}
		if len(best) > 0 && one.better(best[0]) {
			best = best[:0]
		}
		if len(best) == 0 || !best[0].better(one) {
			best = append(best, one)
		}
	}
	if len(best) == 0 {
		return Dialect{}, "", t.noTable(sample)
	}
	chosen := best[0]
	guess := chosen.thousands(sample)
	for _, other := range best[1:] {
		if other.fields != chosen.fields || !slices.EqualFunc(other.first, chosen.first, sameNumber) {
			guess = fmt.Sprintf("read with %s: %d columns; with %s it would be %d", chosen.dialect, chosen.fields,
				other.dialect, other.fields)
			break
		}
	}
	return chosen.dialect, guess, nil
}

func sameNumber(a, b float64) bool { return a == b || a != a && b != b }

// sample returns the lines on which a dialect is tried: enough for names, units and some numbers.
func (t *table) sample() []textLine { return t.lines[:min(len(t.lines), 100)] }

// noTable says why nothing fits.
func (t *table) noTable(sample []textLine) error {
	if len(sample) == 0 {
		return fault.New(fault.BadFile, "", "comments and empty lines only; numbers in columns wanted")
	}
	counts := map[int]int{}
	for i, line := range sample[1:] {
		n := len(fieldsOf(line.text, ',', nil))
		counts[n]++
		if i > 0 && counts[n] == 1 {
			return fault.New(fault.BadFile, fmt.Sprintf("line %d", line.number),
				"no delimiter makes columns of equal number; with a comma this line has %d fields, line %d has %d", n, sample[0].number, len(fieldsOf(sample[0].text, ',', nil)))
		}
	}
	return fault.New(fault.BadFile, fmt.Sprintf("line %d", sample[0].number),
		"no column of numbers was found; use one delimiter and one decimal mark throughout")
}

// try reads the sample in one dialect. It fits when the lines behind the names have as many fields, some of them numbers.
func try(d Dialect, sample []textLine) (trial, bool) {
	if len(sample) == 0 {
		return trial{}, false
	}
	var rows [][][]byte
	for _, line := range sample {
		rows = append(rows, fieldsOf(line.text, d.Delimiter, nil))
	}
	n := width(rows)
	one := trial{dialect: d, fields: n}
	kinds := kindsOf(d, rows, n)
	for _, kind := range kinds {
		if kind == ofNumbers {
			one.numeric++
		}
	}
	if one.numeric == 0 {
		return one, false
	}
	one.header = headerRows(d, rows, kinds)
	one.rows = len(rows) - one.header
	for _, row := range rows[one.header:] {
		one.misfits += count(!one.takes(row, kinds))
	}
	// A few lines that do not fit are named when the table is read; of many, this is no table.
	const most = 4 // of so many rows, one
	return one, one.rows > 0 && most*one.misfits <= one.rows &&
		(one.rows > 1 || one.numeric == n) // a single line may be prose
}

// takes tells whether a row fits, and remembers its numbers.
func (a *trial) takes(row [][]byte, kinds []columnKind) bool {
	if !fits(row, a.fields) {
		return false
	}
	for c, kind := range kinds {
		v, _, ok := parseNumber(row[c], a.dialect.Decimal)
		if kind == ofNumbers && !ok {
			return false
		}
		a.first = append(a.first, v)
	}
	return true
}

func count(yes bool) int {
	if yes {
		return 1
	}
	return 0
}

// width returns the number of columns: that of most rows, the greatest of equals, without the empty field behind a
// delimiter that ends every row.
func width(rows [][][]byte) int {
	times := map[int]int{}
	n := 0
	for _, row := range rows {
		times[len(row)]++
	}
	for length, k := range times {
		if k > times[n] || k == times[n] && length > n {
			n = length
		}
	}
	ends := n > 1
	for _, row := range rows {
		ends = ends && (len(row) != n || len(row[n-1]) == 0)
	}
	if ends {
		return n - 1
	}
	return n
}

// fits tells whether a row has n fields, or one more that is empty.
func fits(row [][]byte, n int) bool {
	return len(row) == n || len(row) == n+1 && len(row[n]) == 0
}

// better tells whether a fits better: more of its columns are numbers, in more of the rows.
func (a trial) better(b trial) bool { return a.share() > b.share() }

func (a trial) share() float64 {
	return float64(a.numeric) / float64(a.fields) * float64(a.rows-a.misfits) / float64(a.rows)
}

// thousands returns a warning when every decimal comma could part thousands.
func (a trial) thousands(sample []textLine) string {
	if a.dialect.Decimal != ',' {
		return ""
	}
	seen := ""
	for _, line := range sample[a.header:] {
		for _, field := range fieldsOf(line.text, a.dialect.Delimiter, nil) {
			whole, decimals, found := strings.Cut(strings.TrimLeft(string(field), "+-"), ",")
			if !found {
				continue
			}
			if len(decimals) != 3 || whole == "" || whole[0] == '0' || len(whole) > 3 {
				return ""
			}
			seen = string(field)
		}
	}
	if seen == "" {
		return ""
	}
	return fmt.Sprintf("%q was read with a decimal comma; write it without the comma if it parts thousands", seen)
}

// kindsOf tells columns of numbers from columns of text, by most of the rows behind the first three.
func kindsOf(d Dialect, rows [][][]byte, n int) []columnKind {
	behind := rows[min(3, len(rows)-1):]
	kinds := make([]columnKind, n)
	for c := range kinds {
		numbers := 0
		for _, row := range behind {
			if c >= len(row) {
				continue
			}
			if _, _, ok := parseNumber(row[c], d.Decimal); ok {
				numbers++
			}
		}
		kinds[c] = columnKind(2*numbers <= len(behind))
	}
	return kinds
}

// headerRows returns how many rows stand before the numbers: at most three, each with text in a column of numbers.
func headerRows(d Dialect, rows [][][]byte, kinds []columnKind) int {
	const most = 3
	for i, row := range rows[:min(most, len(rows)-1)] {
		names := !fits(row, len(kinds)) && i == 0
		for c, kind := range kinds {
			if c < len(row) && kind == ofNumbers {
				_, _, ok := parseNumber(row[c], d.Decimal)
				names = names || !ok
			}
		}
		if !names {
			return i
		}
	}
	return min(most, len(rows)-1)
}
