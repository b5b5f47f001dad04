package importer

import (
	"bytes"
	"fmt"
	"slices"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// read takes the lines into values.
func (t *table) read() error {
	one, ok := try(t.dialect, t.sample())
	if !ok {
		return fault.New(fault.BadFile, "",
			"the first lines are no table with %s; choose another delimiter or decimal mark", t.dialect)
	}
	var sample [][][]byte
	for _, line := range t.sample() {
		sample = append(sample, fieldsOf(line.text, t.dialect.Delimiter, nil))
	}
	t.kinds = kindsOf(t.dialect, sample, one.fields)
	t.texts = make([][]string, one.fields)
	t.takeNames(sample[:one.header], one.fields)
	t.rows = len(t.lines) - one.header
	if err := t.limits.checkShape([]int{t.rows, one.fields}); err != nil {
		return err
	}
	// A field takes two bytes at least, so that the values take no more than four times the text.
	t.values = make([]float64, 0, t.rows*one.fields)
	var fields [][]byte
	first := t.lines[one.header].number
	for _, line := range t.lines[one.header:] {
		fields = fieldsOf(line.text, t.dialect.Delimiter, fields)
		if !fits(fields, one.fields) {
			return fault.New(fault.BadFile, fmt.Sprintf("line %d", line.number),
				"%d fields, line %d has %d; the file may be cut short or use another delimiter",
				len(fields), first, one.fields)
		}
		if err := t.takeRow(line.number, fields[:one.fields]); err != nil {
			return err
		}
	}
	return nil
}

// takeRow appends the fields of one line.
func (t *table) takeRow(number int, fields [][]byte) error {
	for c, field := range fields {
		if t.kinds[c] == ofText {
			t.texts[c] = append(t.texts[c], string(field))
			t.append(0, 0)
			continue
		}
		re, im, ok := parseNumber(field, t.dialect.Decimal)
		if !ok {
			return fault.New(fault.BadFile, fmt.Sprintf("line %d column %d", number, c+1),
				"%q is no number with %s; correct it, or write NaN for none", field[:min(len(field), 30)], t.dialect)
		}
		t.append(re, im)
	}
	return nil
}

func (t *table) append(re, im float64) {
	if im != 0 && t.imaginary == nil {
		t.imaginary = make([]float64, len(t.values), cap(t.values))
	}
	t.values = append(t.values, re)
	if t.imaginary != nil {
		t.imaginary = append(t.imaginary, im)
	}
}

// takeNames finds the names and units of the columns: in the rows before the numbers, or in the last comment before them.
func (t *table) takeNames(header [][][]byte, n int) {
	if len(header) > 0 && fits(header[0], n) {
		t.names = words(header[0][:n])
		if len(header) > 1 && fits(header[1], n) {
			t.units = words(header[1][:n])
		}
		return
	}
	first := t.lines[0].number
	for i := len(t.comments) - 1; i >= 0; i-- {
		comment := t.comments[i]
		if comment.number > first || bytes.ContainsAny(comment.text, ":=") {
			continue
		}
		for _, delimiter := range []byte{t.dialect.Delimiter, '\t', ',', ';', ' '} {
			fields := fieldsOf(comment.text, delimiter, nil)
			if len(fields) == n && n > 1 {
				t.names = words(fields)
				return
			}
		}
		return
	}
}

func words(fields [][]byte) []string {
	out := make([]string, len(fields))
	for i, field := range fields {
		out[i] = fromLatin(field)
	}
	return out
}

// fromLatin returns text that is UTF-8 when valid as such, else ISO 8859-1.
func fromLatin(text []byte) string {
	if strings.ToValidUTF8(string(text), "") == string(text) {
		return string(text)
	}
	runes := make([]rune, len(text))
	for i, b := range text {
		runes[i] = rune(b)
	}
	return string(runes)
}

// arrays returns the columns as arrays, and the values stated in comments.
func (t *table) arrays(file string) ([]acquisition.Array, error) {
	out, err := t.byName()
	if t.names == nil {
		out, err = t.unnamed(file)
	}
	if err != nil {
		return nil, err
	}
	stated, err := t.stated(out)
	if err != nil {
		return nil, err
	}
	out = append(out, stated...)
	if len(out) > t.limits.Arrays {
		return nil, fault.New(fault.TooLarge, "", "%d columns with names of their own, the limit is %d", len(out),
			t.limits.Arrays)
	}
	if t.guess != "" {
		for i := range out {
			out[i].Attributes = mergeAttributes(out[i].Attributes,
				map[string]string{"guess": joinSentences(out[i].Attributes["guess"], t.guess)})
		}
	}
	return out, nil
}

func joinSentences(a, b string) string {
	if a == "" || b == "" {
		return a + b
	}
	return a + "; " + b
}

// unnamed returns a table without names as one array [row, column] called after the file. A first column that rises in
// even steps is the axis of the others and stands apart.
func (t *table) unnamed(file string) ([]acquisition.Array, error) {
	n := len(t.kinds)
	if slices.Contains(t.kinds, ofText) {
		t.names = make([]string, n)
		for c := range t.names {
			t.names[c] = "column " + letters(c)
		}
		return t.byName()
	}
	if n == 1 {
		one, err := t.column(file, []int{0}, nil)
		one.AfterFile = true
		return []acquisition.Array{one}, err
	}
	start := 0
	var out []acquisition.Array
	if t.even() {
		axis, err := t.column("first column", []int{0}, nil)
		if err != nil {
			return nil, err
		}
		axis.Attributes = map[string]string{"guess": "the first column rises in even steps and was taken as the axis of the others"}
		out, start = append(out, axis), 1
	}
	rest, err := t.block(file, start)
	rest.AfterFile = true
	return append(out, rest), err
}

// letters numbers columns as spreadsheets do: a to z, aa, ab and so on.
func letters(c int) string {
	if c < 26 {
		return string(rune('a' + c))
	}
	return letters(c/26-1) + string(rune('a'+c%26))
}

// block returns the columns from start on as [row, column].
func (t *table) block(name string, start int) (acquisition.Array, error) {
	n := len(t.kinds)
	var places []int
	for r := range t.rows {
		for c := start; c < n; c++ {
			places = append(places, r*n+c)
		}
	}
	return t.pick(name, []int{t.rows, n - start}, places)
}

// even tells whether the first column rises in steps that are equal within the digits written.
func (t *table) even() bool {
	n := len(t.kinds)
	if t.rows < 3 || t.imaginary != nil {
		return false
	}
	first, last := t.values[0], t.values[(t.rows-1)*n]
	step := (last - first) / float64(t.rows-1)
	if !(step > 0) {
		return false
	}
	for r := range t.rows {
		// A hundredth of a step: times written with three digits more than the step differ by less.
		if off := t.values[r*n] - first - step*float64(r); !(off <= step/100 && off >= -step/100) {
			return false
		}
	}
	return true
}

// byName returns an array for every name, and one for all names that differ in running numbers only.
func (t *table) byName() ([]acquisition.Array, error) {
	groups := map[string][]int{}
	for c := range t.names {
		key := t.group(c)
		groups[key] = append(groups[key], c)
	}
	var out []acquisition.Array
	taken := map[string]int{}
	for c := range t.names {
		members := groups[t.group(c)]
		if members[0] != c {
			continue
		}
		name, unit := nameAndUnit(t.names[c])
		var leading []int
		if len(members) > 1 {
			name, leading, members = t.run(members)
		}
		taken[name]++
		if k := taken[name]; k > 1 {
			name = fmt.Sprintf("%s (%d)", name, k)
		}
		array, err := t.column(name, members, leading)
		if err != nil {
			return nil, err
		}
		array.Unit = unit
		if t.units != nil && unit == "" {
			array.Unit = strings.Trim(t.units[c], "[]() ")
		}
		out = append(out, array)
	}
	return out, nil
}

// group returns what the names of one group have in common.
func (t *table) group(c int) string {
	name, unit := nameAndUnit(t.names[c])
	pattern, numbers := numbersIn(name)
	if len(numbers) == 0 || t.kinds[c] == ofText {
		return fmt.Sprintf("%d", c) // alone
	}
	return pattern + "\x00" + unit
}

// run returns the columns of one group in the order of their numbers, with the axes those make.
func (t *table) run(members []int) (string, []int, []int) {
	named := make([]fileArrays, len(members))
	at := map[string]int{}
	for i, c := range members {
		name, _ := nameAndUnit(t.names[c])
		named[i] = fileArrays{name: name}
		at[name] = c
	}
	if len(at) < len(members) { // a name stands twice; their order in the file is all there is
		return named[0].name, []int{len(members)}, members
	}
	sortByNumbers(named)
	order := make([]int, len(named))
	for i, f := range named {
		order[i] = at[f.name]
	}
	return seriesName(named), leadingAxes(named), order
}

// column returns one array of the given columns: [row], or with leading axes [leading..., row].
func (t *table) column(name string, members, leading []int) (acquisition.Array, error) {
	n := len(t.kinds)
	if t.kinds[members[0]] == ofText {
		return textsOf(name, []int{t.rows}, t.texts[members[0]])
	}
	places := make([]int, 0, t.rows*len(members))
	for _, c := range members {
		for r := range t.rows {
			places = append(places, r*n+c)
		}
	}
	return t.pick(name, append(slices.Clone(leading), t.rows), places)
}

// pick returns the values at some places; they are complex when one of them has an imaginary part.
func (t *table) pick(name string, shape, places []int) (acquisition.Array, error) {
	values := make([]float64, len(places))
	complex := false
	for i, at := range places {
		values[i] = t.values[at]
		complex = complex || t.imaginary != nil && t.imaginary[at] != 0
	}
	if !complex {
		return acquisition.ArrayOf(name, shape, values)
	}
	part := acquisition.Layout{Kind: acquisition.Float, Size: 8}
	raw := make([]byte, 0, 16*len(places))
	for _, at := range places {
		raw = appendNumber(appendNumber(raw, part, t.values[at]), part, t.imaginary[at])
	}
	return acquisition.NewArray(name, shape, acquisition.Layout{Kind: acquisition.Complex, Size: 16}, raw)
}

// nameAndUnit parts "dwell (ns)", "dwell [ns]" and "dwell / ns" into name and unit.
func nameAndUnit(header string) (name, unit string) {
	header = strings.TrimSpace(header)
	for _, pair := range []string{"[]", "()"} {
		open := strings.IndexByte(header, pair[0])
		if open > 0 && header[len(header)-1] == pair[1] {
			return strings.TrimSpace(header[:open]), strings.TrimSpace(header[open+1 : len(header)-1])
		}
	}
	if before, after, found := strings.Cut(header, " / "); found && before != "" {
		return strings.TrimSpace(before), strings.TrimSpace(after)
	}
	return header, ""
}

// stated returns the values that comments state as "name: value" or "name = value", except for names that columns have.
func (t *table) stated(columns []acquisition.Array) ([]acquisition.Array, error) {
	var out []acquisition.Array
	seen := map[string]bool{}
	for _, c := range columns {
		seen[c.Name] = true
	}
	for _, comment := range t.comments {
		text := fromLatin(comment.text)
		at := strings.IndexAny(text, ":=")
		if at < 1 {
			continue
		}
		name, unit := nameAndUnit(text[:at])
		const longest = 40 // of a name; longer is prose
		if name == "" || len(name) > longest || seen[name] {
			continue
		}
		seen[name] = true
		array, err := valueOf(name, strings.TrimSpace(text[at+1:]))
		if err != nil {
			return nil, err
		}
		if unit != "" {
			array.Unit = unit
		}
		array.Attributes = map[string]string{statedAttribute: fmt.Sprintf("line %d", comment.number)}
		out = append(out, array)
	}
	return out, nil
}

// statedAttribute marks an array that a comment states, with its line.
const statedAttribute = "stated in a comment"

// valueOf returns a value written as text: a number, a number with its unit ("4 ns"), numbers with commas, semicolons or
// spaces between, in any brackets; else the text.
func valueOf(name, text string) (acquisition.Array, error) {
	inner := strings.Trim(text, "[](){}<> ")
	fields := strings.FieldsFunc(inner, func(r rune) bool { return strings.ContainsRune(" ,;\t\r\n", r) })
	var values []float64
	for i, field := range fields {
		v, ok := parseReal([]byte(field), '.')
		if !ok && i == 1 && len(fields) == 2 && acquisition.KnownUnit(field) {
			array, err := acquisition.ArrayOf(name, nil, values)
			array.Unit = field
			return array, err
		}
		if !ok {
			return acquisition.TextOf(name, strings.Trim(text, `"'<>`)), nil
		}
		values = append(values, v)
	}
	switch len(values) {
	case 0:
		return acquisition.TextOf(name, strings.Trim(text, `"'<>`)), nil
	case 1:
		return acquisition.ArrayOf(name, nil, values)
	}
	return acquisition.ArrayOf(name, []int{len(values)}, values)
}
