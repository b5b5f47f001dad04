package acquisition

import (
	"math"
	"path"
	"slices"
	"strings"

	"torrloom/recon/fault"
)

// Apply returns the acquisition that a mapping makes of the arrays of one file, after Check. The warnings say what looks
// wrong in the arrays used; they are returned beside a fault too. An array that the mapping does not name is left out.
//
// Errors: bad-setting when the mapping names arrays that are not there or units that are not chosen; bad-file when the
// arrays contradict each other, with both numbers.
func Apply(name string, arrays []Array, m Mapping) (*Acquisition, []string, error) {
	if err := m.Check(); err != nil {
		return nil, nil, err
	}
	w := &workshop{mapping: m, arrays: map[string]Array{}, members: map[string]Array{}}
	labels := Labels(arrays)
	for i, a := range arrays {
		w.arrays[labels[i]] = a
	}
	a, err := w.make(strings.TrimSuffix(path.Base(name), path.Ext(name)))
	if err != nil {
		return nil, w.warnings, fault.Within(name, err)
	}
	a.Warnings = append(a.Warnings, w.lasting...)
	return a, w.warnings, nil
}

// workshop turns the arrays of a file into those of the dictionary.
type workshop struct {
	mapping  Mapping
	arrays   map[string]Array // by label
	members  map[string]Array // of the dictionary
	warnings []string
	lasting  []string // that stay with the acquisition
	used     map[string]bool
}

func (w *workshop) make(stem string) (*Acquisition, error) {
	for _, field := range Dictionary {
		source := w.mapping.field(field.Name)
		if field.Name == "signal" || source.absent() {
			continue
		}
		array, err := w.field(field, source)
		if err != nil {
			return nil, fault.Within(field.Name, err)
		}
		array.Name = field.Name
		w.members[field.Name] = array
	}
	cut, err := w.signal()
	if err != nil {
		return nil, fault.Within("signal", err)
	}
	a := &Acquisition{Name: stem}
	if cut != nil {
		w.lasting = append(w.lasting, shorten(w.members, *cut)...)
	}
	return assemble(a, w.members)
}

// array returns an array by its label, and hears what is doubtful about it.
func (w *workshop) array(label string) (Array, error) {
	a, there := w.arrays[label]
	if !there {
		var names []string
		for name := range w.arrays {
			names = append(names, quoted(name))
		}
		slices.Sort(names)
		return a, fault.New(fault.BadSetting, "", "the mapping wants array %s; the file has %s", quoted(label),
			strings.Join(names[:min(len(names), 30)], ", "))
	}
	if !w.used[label] {
		if w.used == nil {
			w.used = map[string]bool{}
		}
		w.used[label] = true
		w.warnings = append(w.warnings, Doubts(a)...)
	}
	return a, nil
}

// field makes the array of one field of the dictionary, other than the signal.
func (w *workshop) field(field Field, source FieldSource) (Array, error) {
	if source.Text != "" {
		return TextOf("", source.Text), nil
	}
	if field.Name == "gradient_mT_per_m" {
		return w.gradients(field, source)
	}
	if len(source.Arrays) == 1 {
		a, err := w.array(source.Arrays[0])
		if err != nil || a.isText() {
			return a, err
		}
	}
	values, err := w.numbers(field, source)
	if err != nil {
		return Array{}, err
	}
	if field.Name == "time_zero_sample" {
		values, err = w.samples(source, values)
	}
	if err != nil {
		return Array{}, err
	}
	return ArrayOf("", []int{len(values)}, values)
}

// numbers returns the values of a source in the unit of its field.
func (w *workshop) numbers(field Field, source FieldSource) ([]float64, error) {
	values := slices.Clone(source.Numbers)
	if len(source.Arrays) == 1 {
		a, err := w.array(source.Arrays[0])
		if err != nil {
			return nil, err
		}
		if values, err = flatList(a); err != nil {
			return nil, err
		}
	}
	if source.Take == Step || source.Take == Zero {
		first, step, err := evenSteps(values)
		if err != nil {
			return nil, err
		}
		if source.Take == Zero {
			return []float64{-first / step}, nil
		}
		values = []float64{step}
	}
	return source.converted(field, values)
}

// converted returns values times the factor, in the unit of the field.
func (s FieldSource) converted(field Field, values []float64) ([]float64, error) {
	unit := Unit{Factor: 1}
	if units := field.units(); len(units) > 0 {
		u, known := s.unit(field)
		if !known {
			return nil, fault.New(fault.BadSetting, "", "no unit chosen; use %s", strings.Join(units, ", "))
		}
		unit = u
	}
	out := make([]float64, len(values))
	for i, v := range values {
		if s.Factor != 0 {
			v *= s.Factor
		}
		out[i] = unit.to(v)
	}
	return out, nil
}

// samples returns a time zero as a sample index. One given as a time counts from the first sample.
func (w *workshop) samples(source FieldSource, values []float64) ([]float64, error) {
	if source.Take == Zero {
		return values, nil
	}
	if _, points := UnitFor(source.Unit, "points"); points {
		return values, nil
	}
	dwell, err := single(w.members["dwell_ns"])
	if err != nil || !(dwell > 0) {
		return nil, fault.New(fault.BadFile, "",
			"given as a time, which needs the sampling interval; say that too, or give a sample index")
	}
	for i := range values {
		values[i] /= dwell
	}
	return values, nil
}

// flatList returns the values of a list. A table whose rows, or whose columns, are all alike stands for one of them, as
// in a series of files that repeats the gradients at every delay.
func flatList(a Array) ([]float64, error) {
	values, err := a.Float64s()
	if err != nil {
		return nil, err
	}
	var long []int
	for _, n := range a.Shape {
		if n != 1 {
			long = append(long, n)
		}
	}
	switch {
	case len(long) < 2:
		return values, nil
	case len(long) == 2:
		if rows, ok := alike(values, long[1], 1, long[0]); ok {
			return rows, nil
		}
		if columns, ok := alike(values, long[0], long[1], long[1]); ok {
			return columns, nil
		}
	}
	return nil, fault.New(fault.BadFile, a.Name,
		"shape %s found; a list with one axis is wanted, or a table of equal rows or columns", ShapeText(a.Shape))
}

// alike returns n values step apart, when the same stand in all of the given number of rows or columns.
func alike(values []float64, n, step, times int) ([]float64, bool) {
	out := make([]float64, n)
	other := n
	if step > 1 {
		other = 1
	}
	for i := range out {
		out[i] = values[i*step]
		for k := range times {
			if values[i*step+k*other] != out[i] {
				return nil, false
			}
		}
	}
	return out, true
}

// evenSteps returns the first value and the step of an axis.
func evenSteps(values []float64) (first, step float64, err error) {
	n := len(values)
	if n < 2 {
		return 0, 0, fault.New(fault.BadFile, "", "%d values; an axis has two or more", n)
	}
	first, step = values[0], (values[n-1]-values[0])/float64(n-1)
	// An axis written with three digits more than its step differs by less than a hundredth of it.
	const most = 0.01
	for i, v := range values {
		if off := math.Abs(v - first - float64(i)*step); !(off <= most*math.Abs(step)) || step == 0 {
			return 0, 0, fault.New(fault.BadFile, "",
				"value %d is %g, even steps of %g from %g would make it %g; an axis in even steps is wanted",
				i, v, step, first, first+float64(i)*step)
		}
	}
	return first, step, nil
}

// gradients makes the [shot, 2 or 3] array of gradients, from one table or from lists of components. A component that is a
// single value counts for every shot.
func (w *workshop) gradients(field Field, source FieldSource) (Array, error) {
	lists, err := w.components(source)
	if err != nil {
		return Array{}, err
	}
	shots := 1
	for _, list := range lists {
		shots = max(shots, len(list))
	}
	values := make([]float64, shots*len(lists))
	for c, list := range lists {
		if len(list) != shots && len(list) != 1 {
			return Array{}, fault.New(fault.BadFile, "",
				"%d values in component %d, %d in another; one value per shot is needed", len(list), c+1, shots)
		}
		for s := range shots {
			values[s*len(lists)+c] = list[min(s, len(list)-1)]
		}
	}
	values, err = source.converted(field, values)
	if err != nil {
		return Array{}, err
	}
	return ArrayOf("", []int{shots, len(lists)}, values)
}

// components returns the lists of x, y and perhaps z components.
func (w *workshop) components(source FieldSource) (lists [][]float64, err error) {
	if len(source.Numbers) > 0 {
		return nil, fault.New(fault.BadSetting, "", "gradients come from arrays")
	}
	if len(source.Arrays) == 1 {
		a, err := w.array(source.Arrays[0])
		if err != nil {
			return nil, err
		}
		return tableLists(a, source.Take)
	}
	for _, label := range source.Arrays {
		a, err := w.array(label)
		if err != nil {
			return nil, err
		}
		list, err := flatList(a)
		if err != nil {
			return nil, err
		}
		lists = append(lists, list)
	}
	return lists, nil
}

// tableLists returns the columns of a table [shot, component], or its rows.
func tableLists(a Array, take Take) ([][]float64, error) {
	values, err := a.Float64s()
	if err != nil {
		return nil, err
	}
	if len(a.Shape) != 2 {
		return nil, fault.New(fault.BadFile, a.Name, "shape %s found; [shot, 3] wanted, or [shot, 2] in 2D",
			ShapeText(a.Shape))
	}
	shots, parts, step, next := a.Shape[0], a.Shape[1], a.Shape[1], 1
	if take == Rows {
		shots, parts, step, next = a.Shape[1], a.Shape[0], 1, a.Shape[1]
	}
	if parts != 2 && parts != 3 {
		return nil, fault.New(fault.BadFile, a.Name, "%d components in shape %s; 3 are wanted, 2 in 2D", parts,
			ShapeText(a.Shape))
	}
	lists := make([][]float64, parts)
	for c := range lists {
		lists[c] = make([]float64, shots)
		for s := range shots {
			lists[c][s] = values[s*step+c*next]
		}
	}
	return lists, nil
}
