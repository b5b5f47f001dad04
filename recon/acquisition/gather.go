package acquisition

import (
	"slices"
	"strconv"
	"strings"

	"torrloom/recon/fault"
)

// Stack joins arrays of one layout and shape behind each other along new leading axes, whose lengths have the product
// len(arrays). The result has the given name and the unit and attributes of the first. Bytes stay as they are, except
// that a first axis that ran fastest no longer does.
//
// Errors: bad-file, naming the array, when one differs from the first, with both shapes.
func Stack(name string, leading []int, arrays []Array) (Array, error) {
	first := arrays[0]
	total := 0
	for _, a := range arrays {
		if a.Type != first.Type || !slices.Equal(a.Shape, first.Shape) {
			return Array{}, fault.New(fault.BadFile, a.Name,
				"%s of shape %s, %s has %s of shape %s; they must be alike to belong together",
				a.Type, ShapeText(a.Shape), first.Name, first.Type, ShapeText(first.Shape))
		}
		total += len(a.raw)
	}
	// The layout of the first may differ from the others' in byte order and in the room for text.
	layout := first.layout
	layout.FirstAxisFastest = false
	for _, a := range arrays {
		if a.layout.Size != layout.Size || a.layout.BigEndian != layout.BigEndian || a.layout.Kind != layout.Kind {
			return Array{}, fault.New(fault.BadFile, a.Name, "%s is written in another way than in %s; write all alike",
				a.Type, first.Name)
		}
	}
	raw := make([]byte, 0, total)
	for _, a := range arrays {
		raw = append(raw, lastAxisFastest(a)...)
	}
	out, err := NewArray(name, append(slices.Clone(leading), first.Shape...), layout, raw)
	out.Unit, out.Attributes = first.Unit, first.Attributes
	return out, err
}

// lastAxisFastest returns the bytes of the elements with the last axis fastest.
func lastAxisFastest(a Array) []byte {
	if !a.layout.FirstAxisFastest || len(a.Shape) < 2 {
		return a.raw
	}
	places := make([]int, a.Len())
	for i := range places {
		places[i] = i
	}
	out := make([]byte, 0, len(a.raw))
	for _, at := range inOrder(a, places) {
		out = append(out, a.raw[at*a.layout.Size:(at+1)*a.layout.Size]...)
	}
	return out
}

// Gather makes arrays of one layout whose names differ in nothing but a number between points or slashes ("c.1", "c.2";
// "s.3.re", "s.4.re") into one array with a leading axis for the number, named with # in its place ("c.#", "s.#.re").
// Two numbers that run through every pair give two axes. Whatever does not fit stays as it is.
func Gather(arrays []Array) []Array {
	groups := map[string][]numbered{}
	for i, a := range arrays {
		if n := numberedAt(i, a.Name); len(n.numbers) > 0 {
			groups[n.pattern] = append(groups[n.pattern], n)
		}
	}
	replaced, gone := map[int]Array{}, map[int]bool{}
	for _, group := range groups {
		array, ok := gathered(arrays, group)
		if !ok {
			continue
		}
		for _, n := range group {
			gone[n.at] = true
		}
		replaced[group[0].at] = array
	}
	var out []Array
	for i, a := range arrays {
		if array, ok := replaced[i]; ok {
			out = append(out, array)
		} else if !gone[i] {
			out = append(out, a)
		}
	}
	return out
}

// numbered is an array in whose name some parts are numbers.
type numbered struct {
	at      int
	pattern string // the name with # for every number
	numbers []int
}

func numberedAt(i int, name string) numbered {
	n := numbered{at: i}
	for part := range strings.FieldsFuncSeq(name, func(r rune) bool { return r == '.' || r == '/' }) {
		if number, err := strconv.Atoi(part); err == nil && number >= 0 {
			n.numbers = append(n.numbers, number)
			part = "#"
		}
		n.pattern += "." + part
	}
	n.pattern = strings.TrimPrefix(n.pattern, ".")
	return n
}

// gathered stacks one group when its numbers run through every combination.
func gathered(arrays []Array, group []numbered) (Array, bool) {
	leading, order := productOrder(group)
	if len(leading) == 0 {
		return Array{}, false
	}
	parts := make([]Array, len(order))
	for i, n := range order {
		parts[i] = arrays[n.at]
	}
	array, err := Stack(group[0].pattern, leading, parts)
	return array, err == nil
}

// productOrder returns how many values each number takes, and the group in the order of its numbers; nothing unless the
// group holds every combination once.
func productOrder(group []numbered) (leading []int, order []numbered) {
	order = slices.Clone(group)
	slices.SortFunc(order, func(a, b numbered) int { return slices.Compare(a.numbers, b.numbers) })
	product := 1
	for axis := range order[0].numbers {
		seen := map[int]bool{}
		for _, n := range order {
			seen[n.numbers[axis]] = true
		}
		if len(seen) > 1 {
			leading = append(leading, len(seen))
			product *= len(seen)
		}
		if product > len(order) {
			return nil, nil
		}
	}
	for i := range len(order) - 1 {
		if slices.Equal(order[i].numbers, order[i+1].numbers) {
			return nil, nil
		}
	}
	if product != len(order) {
		return nil, nil
	}
	return leading, order
}
