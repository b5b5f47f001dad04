package importer

import (
	"bytes"
	"fmt"
	"math"
	"regexp"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// curve is one table of a block: its symbols, factors and what is stated of it. A number that is not stated is NaN.
type curve struct {
	x, y             string // symbols
	xUnit, yUnit     string
	xFactor, yFactor float64
	first, last      float64
	points           float64
}

// arrays returns the tables of a block, its user-defined labels, and its other labels as attributes.
func (b block) arrays() ([]acquisition.Array, error) {
	attributes, stated, err := b.labels()
	if err != nil {
		return nil, err
	}
	var out []acquisition.Array
	if _, tuples := b.find("NTUPLES"); tuples {
		out, err = b.tuples()
	} else {
		out, err = b.single()
	}
	if err != nil || len(out) == 0 {
		return nil, err
	}
	for i := range out {
		if out[i].Name != "x" {
			out[i].Attributes = mergeAttributes(attributes, out[i].Attributes)
		}
	}
	return append(out, stated...), nil
}

func mergeAttributes(a, b map[string]string) map[string]string {
	out := map[string]string{}
	for _, m := range []map[string]string{a, b} {
		for k, v := range m {
			out[k] = v
		}
	}
	return out
}

// labels returns user-defined labels as arrays and all short ones as attributes.
func (b block) labels() (map[string]string, []acquisition.Array, error) {
	attributes := map[string]string{}
	var stated []acquisition.Array
	seen := map[string]bool{"x": true, "y": true, "real": true, "imaginary": true}
	for _, r := range b.records {
		value := r.value
		for _, line := range r.lines {
			value = joinWords(value, strings.TrimSpace(fromLatin(line.text)))
		}
		user, is := r.user()
		const longest = 1 << 12 // of an attribute; longer is data
		if !is && len(value) > longest || r.label == "" {
			continue
		}
		attributes[r.name] = value
		if !is || seen[user] || user == "" {
			continue
		}
		seen[user] = true
		name, unit := nameAndUnit(user)
		array, err := valueOf(name, value)
		if err != nil {
			return nil, nil, fault.Within(fmt.Sprintf("line %d", r.line), err)
		}
		if unit != "" {
			array.Unit = unit
		}
		stated = append(stated, array)
	}
	return attributes, stated, nil
}

// single returns the table of a block that has one.
func (b block) single() ([]acquisition.Array, error) {
	r, ok := b.find("XYDATA", "XYPOINTS", "RADATA", "PEAKTABLE")
	if !ok {
		return nil, nil
	}
	c := curve{
		x: "x", y: "y", xUnit: b.value("XUNITS"), yUnit: b.value("YUNITS"),
		xFactor: b.number("XFACTOR"), yFactor: b.number("YFACTOR"), first: b.number("FIRSTX"), last: b.number("LASTX"), points: b.number("NPOINTS"),
	}
	if c.xFactor != c.xFactor {
		c.xFactor = 1
	}
	if c.yFactor != c.yFactor {
		c.yFactor = 1
	}
	x, y, doubt, err := b.table(c, r)
	if err != nil {
		return nil, err
	}
	return arraysOf(c, x, y, doubt)
}

// number returns the value of a label, NaN when it is not stated.
func (b block) number(label string) float64 { return numberIn(b.value(label)) }

func numberIn(text string) float64 {
	if v, ok := parseReal([]byte(strings.TrimSpace(text)), '.'); ok {
		return v
	}
	return math.NaN()
}

// arraysOf returns abscissae and ordinates as arrays, with what is doubtful about them.
func arraysOf(c curve, x, y []float64, doubt string) ([]acquisition.Array, error) {
	xs, err := acquisition.ArrayOf("x", []int{len(x)}, x)
	if err != nil {
		return nil, err
	}
	ys, err := acquisition.ArrayOf(c.y, []int{len(y)}, y)
	xs.Unit, ys.Unit = plainUnitWord(c.xUnit), plainUnitWord(c.yUnit)
	if doubt != "" {
		ys.Attributes = map[string]string{"doubt": doubt}
	}
	return []acquisition.Array{xs, ys}, err
}

// plainUnitWord returns nothing for the words that JCAMP-DX has for no unit.
func plainUnitWord(unit string) string {
	if strings.EqualFold(unit, "ARBITRARY UNITS") || strings.EqualFold(unit, "ARBITRARYUNITS") {
		return ""
	}
	return unit
}

// The forms of a table: "(X++(Y..Y))" and "(XY..XY)".
var (
	steppedForm = regexp.MustCompile(`^\(\s*([A-Za-z]\w*)\s*\+\+\s*\(\s*([A-Za-z]\w*)\s*\.\.\s*([A-Za-z]\w*)\s*\)\s*\)`)
	pairedForm  = regexp.MustCompile(`^\(\s*([A-Za-z])\s*([A-Za-z])\s*\.\.`)
)

// table returns the abscissae and ordinates of one table.
func (b block) table(c curve, r record) (x, y []float64, doubt string, err error) {
	where := fmt.Sprintf("line %d", r.line)
	switch {
	case steppedForm.MatchString(r.value):
		x, y, doubt, err = b.stepped(c, r)
	case pairedForm.MatchString(r.value):
		x, y, err = pairs(c, r, b.most)
	default:
		return nil, nil, "", fault.New(fault.Unsupported, where,
			"##%s in the form %q; (X++(Y..Y)) and (XY..XY) are read", r.name, r.value[:min(len(r.value), 40)])
	}
	if err != nil {
		return nil, nil, "", err
	}
	if n := c.points; n == n && n != float64(len(y)) {
		return nil, nil, "", fault.New(fault.BadFile, where,
			"%d values in a table of %g points; the file may be cut short", len(y), n)
	}
	return x, y, doubt, nil
}

// stepped returns a table of ordinates at even steps.
func (b block) stepped(c curve, r record) (x, y []float64, doubt string, err error) {
	y, starts, err := decodeASDF(r.lines, b.most)
	if err != nil {
		return nil, nil, "", err
	}
	first, step := c.axis(starts, len(y))
	x = make([]float64, len(y))
	for i := range y {
		y[i] *= c.yFactor
		x[i] = first + step*float64(i)
	}
	return x, y, c.misplaced(starts, first, step), nil
}

// misplaced returns a doubt when a line begins at another abscissa than the values before it make. Some programs write
// those without the factor, so that both ways count.
func (c curve) misplaced(starts []abscissa, first, step float64) string {
	const most = 0.6 // of a step: half of one is lost when the abscissa is written as a whole number
	for _, s := range starts {
		want := first + step*float64(s.at)
		if !(math.Abs(s.x*c.xFactor-want) <= most*math.Abs(step)) && !(math.Abs(s.x-want) <= most*math.Abs(step)) {
			return fmt.Sprintf("line %d begins at %g, the values before it end at %g; lines may be missing, or FIRSTX, LASTX or XFACTOR are wrong",
				s.line, s.x*c.xFactor, want)
		}
	}
	return ""
}

// axis returns the first abscissa and the step: as FIRSTX and LASTX state them, else from the heads of the lines.
func (c curve) axis(starts []abscissa, n int) (first, step float64) {
	if len(starts) == 0 {
		return 0, 1
	}
	first, step = c.first, (c.last-c.first)/float64(max(n-1, 1))
	if first != first {
		first = starts[0].x * c.xFactor
	}
	if step != step {
		step = 1
		if end := starts[len(starts)-1]; end.at > 0 {
			step = (end.x*c.xFactor - first) / float64(end.at)
		}
	}
	return first, step
}

// pairs returns a table of pairs.
func pairs(c curve, r record, most int) (x, y []float64, err error) {
	for _, line := range r.lines {
		for _, field := range bytes.FieldsFunc(line.text, func(r rune) bool { return strings.ContainsRune(" \t,;", r) }) {
			v, _, ok := parseNumber(field, '.')
			if !ok {
				return nil, nil, fault.New(fault.BadFile, fmt.Sprintf("line %d", line.number), "%q is no number",
					field[:min(len(field), 20)])
			}
			if len(x)+len(y) >= most {
				return nil, nil, fault.New(fault.TooLarge, fmt.Sprintf("line %d", line.number), "more than %d values", most)
			}
			if len(x) == len(y) {
				x = append(x, v*c.xFactor)
			} else {
				y = append(y, v*c.yFactor)
			}
		}
	}
	if len(x) != len(y) {
		return nil, nil, fault.New(fault.BadFile, fmt.Sprintf("line %d", r.line), "%d abscissae and %d ordinates",
			len(x), len(y))
	}
	return x, y, nil
}
