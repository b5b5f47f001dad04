package acquisition

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// delay chooses the list of delays.
func (p *proposer) delay() {
	best, score := -1, 0
	for i, a := range p.arrays {
		if p.taken[i] || a.isText() || a.isComplex() || p.length(i) == 0 {
			continue
		}
		n := p.length(i)
		exact, multiple := p.matches(n)
		named := calls(p.words[i], hints[1].phrases)
		s := 4*named + 3*count(exact && n > 1 && n != p.shots) + count(multiple && n > 1)
		if a.Name == "delay_us" {
			s += 20
		}
		if named == 0 && (n < 2 || !exact || n == p.shots || !rises(a) || calls(p.words[i], axisPhrases) > 0 ||
			n == slices.Max(p.signalShape())) {
			continue
		}
		if s > score {
			best, score = i, s
		}
	}
	if best < 0 {
		return
	}
	a := p.arrays[best]
	p.delays = p.length(best)
	s := FieldSource{Field: "delay_us", Arrays: []string{p.labels[best]}, Guessed: a.Name != "delay_us"}
	s.Reason = quoted(a.Name)
	if exact, _ := p.matches(p.delays); exact && p.delays > 1 {
		s.Reason += fmt.Sprintf("; length %d matches the delay axis of %s", p.delays, quoted(p.arrays[p.signalAt].Name))
	}
	p.unit(&s, best, fieldNamed("delay_us"))
	p.add(s, best)
}

// length returns the length of a list, 0 for what is none.
func (p *proposer) length(i int) int {
	long := 0
	for _, n := range p.arrays[i].Shape {
		long += count(n != 1)
	}
	if long > 1 {
		return 0
	}
	return p.arrays[i].Len()
}

// rises tells whether a list has values that rise, none of them negative, as delays do.
func rises(a Array) bool {
	v, err := a.Float64s()
	if err != nil || len(v) == 0 || !(v[0] >= 0) {
		return false
	}
	for i := range v[1:] {
		if !(v[i+1] > v[i]) {
			return false
		}
	}
	return true
}

// signalAxes says what the axes of the signal count: those whose lengths the gradients and the delays have, one of 2 for
// the parts, and the longest left for the samples.
func (p *proposer) signalAxes() {
	if p.signalAt < 0 {
		return
	}
	a := p.arrays[p.signalAt]
	axes := make([]string, len(a.Shape))
	var why []string
	mark := func(at int, word, reason string) {
		axes[at] = word
		why = append(why, fmt.Sprintf("axis %d is the %s (%s)", at+1, word, reason))
	}
	if p.real && len(a.Shape) >= 3 || p.mapping.Signal.Imaginary == "" && !a.isComplex() {
		if at := partAxis(a.Shape); at >= 0 && !p.real {
			mark(at, "part", "length 2")
		}
	}
	if at := p.sampleAxis(a.Shape, axes); at >= 0 {
		mark(at, "sample", p.sampleReason(a.Shape[at]))
		p.samples = a.Shape[at]
	}
	if at := freeAxis(a.Shape, axes, p.shots); at >= 0 {
		mark(at, "shot", fmt.Sprintf("%d gradients", p.shots))
	}
	if at := freeAxis(a.Shape, axes, p.delays); at >= 0 && p.delays > 0 {
		mark(at, "delay", fmt.Sprintf("%d delays", p.delays))
	}
	p.remaining(a.Shape, axes, mark)
	p.mapping.Signal.Axes = axes
	// The dictionary states its own order; an array of that name and shape is as stated.
	own := a.Name == "signal" && (slices.Equal(axes, []string{"delay", "shot", "sample"}) || slices.Equal(axes,
		[]string{"shot", "sample"}))
	p.mapping.Signal.Guessed = !own
	p.mapping.Signal.Reason = strings.Join(append([]string{p.mapping.Signal.Reason}, why...), "; ")
}

// partAxis returns the axis of 2: the last if it is one, else the first.
func partAxis(shape []int) int {
	if n := len(shape); n > 0 && shape[n-1] == 2 {
		return n - 1
	}
	return slices.Index(shape, 2)
}

func freeAxis(shape []int, axes []string, n int) int {
	for i, length := range shape {
		if axes[i] == "" && length == n && n > 0 {
			return i
		}
	}
	return -1
}

// sampleAxis returns the axis along which an axis of time or position runs, else the longest that neither gradients nor
// delays count, the last of equals.
func (p *proposer) sampleAxis(shape []int, axes []string) int {
	for i := range p.arrays {
		if n := p.length(i); n > 2 && !p.taken[i] && n != p.shots && calls(p.words[i], axisPhrases) > 0 {
			if at := freeAxis(shape, axes, n); at >= 0 {
				return at
			}
		}
	}
	best := -1
	spared := map[int]bool{}
	for _, n := range []int{p.shots, p.delays} {
		if n > 1 {
			spared[freeAxis(shape, axes, n)] = true
		}
	}
	if p.shots > 1 && !slices.Contains(shape, p.shots) { // the shots share an axis with the delays or the parts
		spared[freeAxis(shape, axes, p.shots*p.delays)] = true
		spared[freeAxis(shape, axes, p.shots*2)] = p.real
	}
	for i, n := range shape {
		if axes[i] == "" && !spared[i] && (best < 0 || n >= shape[best]) {
			best = i
		}
	}
	return best
}

func (p *proposer) sampleReason(n int) string {
	for i := range p.arrays {
		if p.length(i) == n && !p.taken[i] && n > 2 && calls(p.words[i], axisPhrases) > 0 {
			return fmt.Sprintf("length %d matches %s", n, quoted(p.arrays[i].Name))
		}
	}
	return fmt.Sprintf("length %d, the longest that neither gradients nor delays count", n)
}

// remaining names the axes that are left: of length 1; the delay when it is missing; delays and shots together; the shot.
func (p *proposer) remaining(shape []int, axes []string, mark func(int, string, string)) {
	for i, n := range shape {
		if axes[i] != "" {
			continue
		}
		hasShot, hasDelay := slices.Contains(axes, "shot"), slices.Contains(axes, "delay")
		switch {
		case !hasShot && !hasDelay && p.delays > 1 && p.shots > 1 && n == p.delays*p.shots:
			mark(i, "delay shot",
				fmt.Sprintf("%d delays times %d gradients; which of them runs faster is to be checked", p.delays, p.shots))
		case !hasShot && p.shots > 1 && n == 2*p.shots && p.real:
			mark(i, "shot part", fmt.Sprintf("two for each of %d gradients", p.shots))
			p.real = false
		case n == 1 && (hasShot || slices.Contains(shape[i+1:], p.shots)):
			mark(i, "one", "length 1")
		case !hasShot && (p.delays == n || hasDelay || i == lastFree(axes)):
			mark(i, "shot", "no other axis is left for it")
		case !hasDelay:
			mark(i, "delay", "no other axis is left for it")
		default:
			mark(i, "one", "left over; the array has too many axes")
		}
	}
}

func lastFree(axes []string) int {
	last := -1
	for i, word := range axes {
		if word == "" {
			last = i
		}
	}
	return last
}

// alongTrace finds sampling interval and time zero, or the step of positions, in an axis that runs along the trace, and
// else the time zero in the signal.
func (p *proposer) alongTrace() {
	for i, a := range p.arrays {
		v, err := a.Float64s()
		if p.taken[i] || err != nil || calls(p.words[i], axisPhrases) == 0 || p.length(i) != p.samples {
			continue
		}
		first, step, err := evenSteps(v)
		if err != nil {
			continue
		}
		reason := fmt.Sprintf("%s rises from %g in even steps of %g along the %d samples", quoted(a.Name), first, step,
			p.samples)
		field := fieldNamed("dwell_ns")
		if p.real {
			field = fieldNamed("position_step_mm")
		}
		s := FieldSource{Field: field.Name, Arrays: []string{p.labels[i]}, Take: Step, Reason: reason, Guessed: true}
		p.unitOf(&s, i, field, []float64{step})
		if !slices.ContainsFunc(p.arrays, func(b Array) bool { return b.Name == field.Name }) {
			p.add(s, i)
		}
		zero := -first / step
		if !slices.ContainsFunc(p.arrays, func(b Array) bool { return b.Name == "time_zero_sample" }) {
			p.add(FieldSource{Field: "time_zero_sample", Arrays: []string{p.labels[i]}, Take: Zero, Unit: "points",
				Guessed: true,
				Reason:  fmt.Sprintf("%s is zero at sample %.6g", quoted(a.Name), zero)}, i)
		}
		return
	}
}

// strongestSample returns the sample index at which the signal is largest over a part of its traces.
func (p *proposer) strongestSample() (int, bool) {
	at := slices.Index(p.mapping.Signal.Axes, "sample")
	if at < 0 || p.signalAt < 0 || p.samples < 2 {
		return 0, false
	}
	a := p.arrays[p.signalAt]
	stride := 1
	for k := range a.Shape {
		if a.layout.FirstAxisFastest && k < at || !a.layout.FirstAxisFastest && k > at {
			stride *= a.Shape[k]
		}
	}
	sums := make([]float64, p.samples)
	number, size := a.layout.number(), a.layout.Size
	const most = 1 << 20 // values looked at: whole traces up to there
	for i := range min(a.Len(), most) {
		v := number(a.raw[i*size:])
		if v-v == 0 {
			sums[i/stride%p.samples] += v * v
		}
		if a.isComplex() {
			if v := number(a.raw[i*size+size/2:]); v-v == 0 {
				sums[i/stride%p.samples] += v * v
			}
		}
	}
	best := 0
	for j, s := range sums {
		if s > sums[best] {
			best = j
		}
	}
	return best, sums[best] > 0 && !math.IsInf(sums[best], 0)
}
