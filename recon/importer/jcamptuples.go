package importer

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// pages are the data tables of NTUPLES by ordinate.
type pages struct {
	x      acquisition.Array
	order  []string // names of ordinates
	arrays map[string][]acquisition.Array
	places map[string][]string // the value of the page label before each
}

// tuples returns the pages of NTUPLES. Pages of one ordinate are put together, with a leading axis for the page, and the
// values of the page variable stand in an array of its name.
func (b block) tuples() ([]acquisition.Array, error) {
	p := pages{arrays: map[string][]acquisition.Array{}, places: map[string][]string{}}
	place := ""
	for _, r := range b.records {
		if r.label == "PAGE" {
			place = r.value
		}
		if r.label != "DATATABLE" {
			continue
		}
		n, err := b.page(&p, r, place)
		if err != nil {
			return nil, err
		}
		b.most -= n
	}
	if len(p.order) == 0 {
		return nil, nil
	}
	return b.stackPages(p)
}

// page adds one data table to p and returns how many values it has.
func (b block) page(p *pages, r record, place string) (int, error) {
	c, err := b.variable(r)
	if err != nil {
		return 0, err
	}
	xs, ys, doubt, err := b.table(c, r)
	if err != nil {
		return 0, err
	}
	both, err := arraysOf(c, xs, ys, doubt)
	if err != nil {
		return 0, err
	}
	if len(p.order) == 0 {
		p.x = both[0]
	}
	if !slices.Equal(p.x.Raw(), both[0].Raw()) {
		return 0, fault.New(fault.BadFile, fmt.Sprintf("line %d", r.line),
			"page %q runs over other abscissae than the first page", place)
	}
	if !slices.Contains(p.order, c.y) {
		p.order = append(p.order, c.y)
	}
	p.arrays[c.y] = append(p.arrays[c.y], both[1])
	p.places[c.y] = append(p.places[c.y], place)
	return len(xs), nil
}

func (b block) stackPages(p pages) ([]acquisition.Array, error) {
	out := []acquisition.Array{p.x}
	for _, name := range p.order {
		array := p.arrays[name][0]
		if n := len(p.arrays[name]); n > 1 {
			stacked, err := acquisition.Stack(name, []int{n}, p.arrays[name])
			if err != nil {
				return nil, err
			}
			array = stacked
		}
		out = append(out, array)
	}
	first := p.places[p.order[0]]
	if len(first) < 2 {
		return out, nil
	}
	variable, unit, values := b.pageValues(first)
	along, err := acquisition.ArrayOf(variable, []int{len(values)}, values)
	along.Unit = unit
	return append(out, along), err
}

// pageValues returns the page variable, its unit, and its values, counted from 1 where they are no numbers.
func (b block) pageValues(places []string) (string, string, []float64) {
	variable := "page"
	values := make([]float64, len(places))
	for i, place := range places {
		name, value, _ := strings.Cut(place, "=")
		if name = strings.TrimSpace(name); name != "" && name != "x" {
			variable = name
		}
		if values[i] = numberIn(value); values[i] != values[i] {
			values[i] = float64(i + 1)
		}
	}
	return variable, b.entry("UNITS", variable), values
}

// entry returns what a list of NTUPLES states for a symbol.
func (b block) entry(label, symbol string) string {
	list := strings.Split(b.value(label), ",")
	for i, s := range strings.Split(b.value("SYMBOL"), ",") {
		if strings.EqualFold(strings.TrimSpace(s), symbol) && i < len(list) {
			return strings.TrimSpace(list[i])
		}
	}
	return ""
}

// variable returns what is stated of the symbols in the form of a data table.
func (b block) variable(r record) (curve, error) {
	form := steppedForm.FindStringSubmatch(r.value)
	if form == nil {
		form = pairedForm.FindStringSubmatch(r.value)
	}
	if form == nil {
		return curve{}, fault.New(fault.Unsupported, fmt.Sprintf("line %d", r.line),
			"a data table in the form %q; (X++(Y..Y)) and (XY..XY) are read",
			r.value[:min(len(r.value), 40)])
	}
	x, y := form[1], form[2]
	c := curve{x: x, y: y, xUnit: b.entry("UNITS", x), yUnit: b.entry("UNITS", y), xFactor: numberIn(b.entry("FACTOR", x)),
		yFactor: numberIn(b.entry("FACTOR", y)), first: numberIn(b.entry("FIRST", x)), last: numberIn(b.entry("LAST",
			x)), points: numberIn(b.entry("VARDIM", y))}
	for _, factor := range []*float64{&c.xFactor, &c.yFactor} {
		if math.IsNaN(*factor) {
			*factor = 1
		}
	}
	switch strings.ToUpper(y) {
	case "R":
		c.y = "real"
	case "I":
		c.y = "imaginary"
	}
	return c, nil
}
