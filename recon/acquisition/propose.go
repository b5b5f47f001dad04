package acquisition

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"
)

// Propose returns a mapping for the arrays of a file, with the reason for every choice in words. What rests on more than
// a name of the dictionary and a stated unit is marked as guessed; a field that the dictionary needs and nothing was found
// for says so. It never fails: the worst proposal names no array.
func Propose(arrays []Array) Mapping {
	p := &proposer{labels: Labels(arrays), arrays: arrays, taken: map[int]bool{}}
	p.names()
	p.mapping = Mapping{Signature: Signature(arrays)}
	for _, a := range arrays {
		for _, key := range []string{"guess", "doubt"} {
			if text := a.Attributes[key]; text != "" {
				note := quoted(a.Name) + ": " + text
				if !slices.Contains(p.mapping.Notes, note) && len(p.mapping.Notes) < 20 {
					p.mapping.Notes = append(p.mapping.Notes, note)
				}
			}
		}
	}
	p.signal()
	p.gradient()
	p.delay()
	p.signalAxes()
	p.alongTrace()
	for _, f := range Dictionary {
		if f.Name != "signal" {
			p.mapping.Fields = append(p.mapping.Fields, p.source(f))
		}
	}
	return p.mapping
}

// proposer gathers a proposal.
type proposer struct {
	mapping Mapping
	arrays  []Array
	labels  []string
	words   [][]string // of every name
	units   []string   // in every name
	taken   map[int]bool
	found   []FieldSource

	signalAt int // -1 when there is none
	shots    int // as the gradients count them, 0 when not known
	delays   int
	samples  int
	real     bool // the signal has no imaginary part
}

func (p *proposer) names() {
	for _, a := range p.arrays {
		words, unit := nameWords(a.Name)
		p.words, p.units = append(p.words, words), append(p.units, unit)
	}
}

// candidate is a way to read the signal.
type candidate struct {
	at, imaginary int
	rank          int // ways that keep quadrature come first
	values        int
	reason        string
}

// signal chooses the arrays of the signal.
func (p *proposer) signal() {
	p.signalAt = -1
	p.real = p.statesProjection()
	var all []candidate
	for i, a := range p.arrays {
		if a.isText() || a.Len() < 2 {
			continue
		}
		all = append(all, p.candidate(i, a))
		if j, ok := p.partner(i); ok && !p.real {
			all = append(all, candidate{i, j, 1, 2 * a.Len(),
				fmt.Sprintf("%s and %s have one shape and the names of real and imaginary parts", quoted(a.Name),
					quoted(p.arrays[j].Name))})
		}
	}
	if len(all) == 0 {
		p.mapping.Signal.Reason = "no array of more than one number was found"
		return
	}
	best := slices.MinFunc(all, func(a, b candidate) int {
		// A way without quadrature must hold four times as much to be likelier.
		left, right := p.weight(a), p.weight(b)
		if a.rank != b.rank && (a.rank == 3 && left > 4*right || b.rank == 3 && right > 4*left || a.rank < 3 &&
			b.rank < 3 && max(left, right) > 2*min(left, right)) {
			return cmp.Compare(right, left)
		}
		return cmp.Or(cmp.Compare(a.rank, b.rank), cmp.Compare(right, left), cmp.Compare(a.at, b.at))
	})
	p.signalAt, p.real = best.at, best.rank == 3
	p.taken[best.at] = true
	s := &p.mapping.Signal
	s.Array, s.Reason = p.labels[best.at], best.reason
	s.Guessed = p.arrays[best.at].Name != "signal"
	if best.imaginary >= 0 {
		s.Imaginary = p.labels[best.imaginary]
		p.taken[best.imaginary] = true
	}
}

// statesProjection tells whether the file says itself that it holds projections.
func (p *proposer) statesProjection() bool {
	for _, a := range p.arrays {
		if a.Name == "domain" && a.Len() == 1 {
			texts, err := a.Strings()
			return err == nil && strings.TrimSpace(texts[0]) == string(Projection)
		}
	}
	return false
}

func (p *proposer) weight(c candidate) int {
	w := c.values
	if calls(p.words[c.at], signalPhrases) > 0 {
		w *= 4
	}
	if p.arrays[c.at].Name == "signal" {
		w = math.MaxInt / 8
	}
	return w
}

// candidate tells how one array alone could be the signal.
func (p *proposer) candidate(i int, a Array) candidate {
	c := candidate{at: i, imaginary: -1, rank: 3, values: a.Len(),
		reason: fmt.Sprintf("the largest array, %s of shape %s; real values without an imaginary part are taken as projections", a.Type, ShapeText(a.Shape))}
	switch {
	case a.isComplex():
		c.rank, c.values = 0, 2*a.Len()
		c.reason = fmt.Sprintf("the largest complex array, shape %s", ShapeText(a.Shape))
	case len(a.Shape) >= 3 && slices.Contains(a.Shape, 2) && !p.real:
		c.rank, c.reason = 2, fmt.Sprintf("shape %s has an axis of 2, taken as real and imaginary part", ShapeText(a.Shape))
	}
	return c
}

// partner returns the array of imaginary parts that belongs to array i as that of real parts.
func (p *proposer) partner(i int) (int, bool) {
	a := p.arrays[i]
	if a.isComplex() || p.words[i] == nil {
		return 0, false
	}
	for _, pair := range pairPhrases {
		for k, word := range p.words[i] {
			other, ok := swapWord(word, pair)
			if !ok {
				continue
			}
			wanted := slices.Clone(p.words[i])
			wanted[k] = other
			for j, b := range p.arrays {
				if j != i && !b.isComplex() && !b.isText() && slices.Equal(p.words[j], wanted) &&
					slices.Equal(a.Shape, b.Shape) {
					return j, true
				}
			}
		}
	}
	return 0, false
}

// swapWord returns the word for the imaginary part in the place of that for the real part, which may end a longer word
// ("sigRe", "tracesreal").
func swapWord(word string, pair [2]string) (string, bool) {
	if word == pair[0] {
		return pair[1], true
	}
	if stem, ok := strings.CutSuffix(word, pair[0]); ok && len(pair[0]) > 1 && stem != "" {
		return stem + pair[1], true
	}
	return "", false
}

func (p *proposer) signalShape() []int {
	if p.signalAt < 0 {
		return nil
	}
	return p.arrays[p.signalAt].Shape
}

// matches tells whether some axis of the signal has a length, or holds a multiple of it.
func (p *proposer) matches(n int) (exact, multiple bool) {
	for _, length := range p.signalShape() {
		exact = exact || length == n
		multiple = multiple || n > 1 && length%n == 0
	}
	return exact, multiple
}

func (p *proposer) add(s FieldSource, taken ...int) {
	p.found = append(p.found, s)
	for _, i := range taken {
		p.taken[i] = true
	}
}

// gradientChoice is one way to read the gradients.
type gradientChoice struct {
	source FieldSource
	at     []int // its arrays
	shots  int
	named  int // 0 by nothing, 1 by a name like it, 2 by the name of the field
	score  int
}

// gradient chooses the table of gradients, or the lists of its components.
func (p *proposer) gradient() {
	var best gradientChoice
	for _, c := range append(p.gradientTables(), p.gradientLists()...) {
		exact, multiple := p.matches(c.shots)
		c.score = []int{0, 4, 24}[c.named] + 3*count(exact) + count(multiple)
		said := "no axis of the signal has that length"
		if exact {
			said = "as many as the shot axis of " + quoted(p.arrays[p.signalAt].Name)
		}
		c.source.Reason += fmt.Sprintf("; %d entries, %s", c.shots, said)
		if c.score > best.score && (c.score > 3 || c.named > 0) {
			best = c
		}
	}
	if best.score == 0 {
		return
	}
	p.shots = best.shots
	best.source.Guessed = best.named < 2
	p.unit(&best.source, best.at[0], fieldNamed("gradient_mT_per_m"))
	p.add(best.source, best.at...)
}

// gradientTables returns the arrays that have an axis of two or three.
func (p *proposer) gradientTables() (out []gradientChoice) {
	for i, a := range p.arrays {
		if p.taken[i] || a.isText() || a.isComplex() || len(a.Shape) != 2 {
			continue
		}
		named := count(calls(p.words[i], hints[0].phrases) > 0)
		if a.Name == "gradient_mT_per_m" {
			named = 2
		}
		for axis, take := range []Take{Rows, Values} {
			// A table of three shots by three components is read as the dictionary has it.
			if n := a.Shape[axis]; (n == 2 || n == 3) && (axis == 1 || a.Shape[1] > 3) {
				reason := fmt.Sprintf("%s of shape %s", quoted(a.Name), ShapeText(a.Shape))
				s := FieldSource{Field: "gradient_mT_per_m", Arrays: []string{p.labels[i]}, Take: take, Reason: reason}
				out = append(out, gradientChoice{source: s, at: []int{i}, shots: a.Shape[1-axis], named: named})
			}
		}
	}
	return out
}

// gradientLists returns the lists of components, when there are two or three.
func (p *proposer) gradientLists() []gradientChoice {
	lists := p.componentLists()
	if len(lists) < 2 {
		return nil
	}
	c := gradientChoice{source: FieldSource{Field: "gradient_mT_per_m"}, at: lists, shots: 1, named: 1}
	var names []string
	for _, i := range lists {
		c.source.Arrays = append(c.source.Arrays, p.labels[i])
		names = append(names, quoted(p.arrays[i].Name))
		c.shots = max(c.shots, lastLong(p.arrays[i]))
	}
	c.source.Reason = "components " + strings.Join(names, ", ")
	return []gradientChoice{c}
}

// lastLong returns the length of the last axis that is longer than 1.
func lastLong(a Array) int {
	n := 1
	for _, length := range a.Shape {
		if length > 1 {
			n = length
		}
	}
	return n
}

// componentLists returns the arrays called gx, gy and gz, or otherwise by a name that ends in x, y and z.
func (p *proposer) componentLists() []int {
	for _, stem := range []string{"g", "grad", "gradient", ""} {
		var found []int
		for _, axis := range []string{"x", "y", "z"} {
			for at := range p.arrays {
				if p.isComponent(at, stem, axis) {
					found = append(found, at)
					break
				}
			}
		}
		if len(found) > 1 {
			return found
		}
	}
	return nil
}

func (p *proposer) isComponent(at int, stem, axis string) bool {
	a := p.arrays[at]
	if p.taken[at] || a.isText() || a.isComplex() {
		return false
	}
	words := p.words[at]
	n := len(words)
	switch {
	case n == 0:
		return false
	case words[n-1] == stem+axis:
		return stem != "" || lastLong(a) > 1 && lastLong(a) == p.firstMatch(lastLong(a))
	}
	return stem != "" && n > 1 && words[n-1] == axis && words[n-2] == stem
}

// firstMatch returns n when an axis of the signal has that length, else 0.
func (p *proposer) firstMatch(n int) int {
	if exact, _ := p.matches(n); exact {
		return n
	}
	return 0
}
