package acquisition

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// source returns the proposal for one field: what was found already, an array of its name, one that is called alike, or a
// guess from the others.
func (p *proposer) source(f Field) FieldSource {
	for _, s := range p.found {
		if s.Field == f.Name {
			return s
		}
	}
	if s, ok := p.byName(f); ok {
		return s
	}
	if s, ok := p.byHint(f); ok {
		return s
	}
	if s, ok := p.fromOthers(f); ok {
		return s
	}
	s := FieldSource{Field: f.Name}
	if slices.Contains(lacking(p.domain(), map[string]Array{}), f.Name) {
		s.Reason = "not found; type it in or choose an array"
	}
	return s
}

func (p *proposer) domain() Domain {
	if p.real {
		return Projection
	}
	return Time
}

// byName takes the array that has the name of the field.
func (p *proposer) byName(f Field) (FieldSource, bool) {
	for i, a := range p.arrays {
		if a.Name != f.Name || p.taken[i] {
			continue
		}
		p.taken[i] = true
		s := FieldSource{Field: f.Name, Arrays: []string{p.labels[i]}, Reason: "has the name of the field"}
		if !a.isText() {
			p.unit(&s, i, f)
		}
		return s, true
	}
	return FieldSource{}, false
}

// byHint takes the array whose name says the same in other words.
func (p *proposer) byHint(f Field) (FieldSource, bool) {
	best, words := -1, 0
	for _, hint := range hints {
		if hint.field != f.Name {
			continue
		}
		for i, a := range p.arrays {
			n := calls(p.words[i], hint.phrases)
			if n > words && !p.taken[i] && p.fits(f, a) {
				best, words = i, n
			}
		}
	}
	if best < 0 {
		return FieldSource{}, false
	}
	p.taken[best] = true
	a := p.arrays[best]
	s := FieldSource{Field: f.Name, Arrays: []string{p.labels[best]}, Reason: quoted(a.Name) + " sounds like it",
		Guessed: true}
	if a.isText() {
		return p.fromText(s, f, a), true
	}
	p.unit(&s, best, f)
	return s, true
}

// fits tells whether an array has the kind and size that a field wants.
func (p *proposer) fits(f Field, a Array) bool {
	switch {
	case strings.HasPrefix(f.Wanted, "text"):
		return a.isText() && a.Len() == 1
	case strings.Contains(f.Wanted, "[shot]"):
		return !a.isText() && !a.isComplex() && p.shots > 1 && lastLong(a) == p.shots
	}
	return !a.isText() && !a.isComplex() && a.Len() == 1
}

// sequenceWords tell a sequence from a word within its usual names.
var sequenceWords = []struct {
	word     string
	sequence Sequence
}{
	{"inversion", InversionRecovery}, {"saturation", SaturationRecovery}, {"echo-decay", EchoDecay}, {"echo decay",
		EchoDecay},
	{"free", FreeDecay}, {"fid", FreeDecay}, {"t2", EchoDecay}, {"hahn", EchoDecay},
}

// fromText takes a text as it is when the dictionary knows it, else what it seems to mean.
func (p *proposer) fromText(s FieldSource, f Field, a Array) FieldSource {
	texts, err := a.Strings()
	if err != nil || f.Name != "sequence" && f.Name != "encoding" {
		return s
	}
	text := strings.TrimSpace(texts[0])
	if slices.Contains(Sequences, Sequence(text)) || text == string(Spoke) || text == string(SinglePoint) {
		return s
	}
	s.Arrays = nil
	small := strings.ToLower(text)
	if f.Name == "sequence" {
		for _, row := range sequenceWords {
			if strings.Contains(small, row.word) {
				s.Text, s.Reason = string(row.sequence), fmt.Sprintf("%s says %s", quoted(a.Name), quoted(text))
				return s
			}
		}
	}
	s.Guessed = false
	s.Reason = fmt.Sprintf("%s says %s, which is none of %s; choose one", quoted(a.Name), quoted(text),
		strings.TrimPrefix(f.Wanted, "text: "))
	return s
}

// fromOthers guesses a field that no array holds.
func (p *proposer) fromOthers(f Field) (FieldSource, bool) {
	s := FieldSource{Field: f.Name, Guessed: true}
	switch f.Name {
	case "domain":
		if p.real {
			s.Text, s.Reason = string(Projection), "the signal is real, without an imaginary part"
			return s, true
		}
	case "time_zero_sample":
		if at, ok := p.strongestSample(); ok {
			s.Numbers, s.Unit = []float64{float64(at)}, "points"
			s.Reason = fmt.Sprintf("the signal is strongest at sample %d; the echo centre, or the pulse of a free decay?", at)
			return s, true
		}
	case "encoding":
		if p.real {
			return s, false
		}
		return p.encoding(s)
	}
	return s, false
}

// encoding guesses from the strengths of the gradients: spokes share a few, single points have many.
func (p *proposer) encoding(s FieldSource) (FieldSource, bool) {
	strengths := p.strengths()
	if len(strengths) < 4 {
		return s, false
	}
	slices.Sort(strengths)
	most := strengths[len(strengths)-1]
	distinct := 1
	for i := range strengths[1:] {
		distinct += count(strengths[i+1]-strengths[i] > 0.01*most) // gradients are set to a hundredth
	}
	if distinct <= 3 {
		s.Text, s.Reason = string(Spoke), fmt.Sprintf("%d gradients have %d different strengths, as spokes do",
			len(strengths), distinct)
		return s, true
	}
	s.Text, s.Reason = string(SinglePoint), fmt.Sprintf("%d gradients have %d different strengths, as single points do",
		len(strengths), distinct)
	return s, true
}

// strengths returns |G| of every shot in whatever unit.
func (p *proposer) strengths() []float64 {
	w := &workshop{arrays: map[string]Array{}}
	for i, label := range p.labels {
		w.arrays[label] = p.arrays[i]
	}
	for _, s := range p.found {
		if s.Field != "gradient_mT_per_m" {
			continue
		}
		lists, err := w.components(s)
		if err != nil {
			return nil
		}
		out := make([]float64, p.shots)
		for _, list := range lists {
			for i := range out {
				if len(list) > 0 {
					v := list[min(i, len(list)-1)]
					out[i] = math.Hypot(out[i], v)
				}
			}
		}
		return out
	}
	return nil
}

// unit finds the unit of the values of array i.
func (p *proposer) unit(s *FieldSource, i int, f Field) {
	values, err := p.arrays[i].Float64s()
	if err != nil {
		return
	}
	p.unitOf(s, i, f, values)
}

// unitOf finds the unit: as the file states it, as the name says it, or by the size of the values.
func (p *proposer) unitOf(s *FieldSource, i int, f Field, values []float64) {
	if len(f.units()) == 0 {
		return
	}
	a := p.arrays[i]
	own := a.Name == f.Name // the dictionary's names say their units
	ways := []struct{ unit, reason string }{{a.Unit, "the file states %s"}}
	if !own {
		ways = append(ways, struct{ unit, reason string }{p.units[i], "the name says %s"})
	}
	for _, way := range ways {
		s.Unit = way.unit
		if u, known := s.unit(f); known && way.unit != "" {
			s.Unit = u.Name
			s.Reason += "; " + fmt.Sprintf(way.reason, u.Name)
			return
		}
	}
	s.Unit = ""
	if own {
		s.Unit = f.Unit
		if f.Name == "time_zero_sample" {
			s.Unit = "points"
		}
		return
	}
	least, most := extremes(values)
	s.Unit = likelyUnit(f.Name, most)
	s.Guessed = true
	if s.Unit == "" {
		s.Reason += "; choose its unit"
		return
	}
	s.Reason += fmt.Sprintf("; values %.3g..%.3g: %s? choose the unit", least, most, s.Unit)
}

func extremes(values []float64) (least, most float64) {
	least, most = math.Inf(1), 0
	for _, v := range values {
		if v = math.Abs(v); v-v == 0 {
			least, most = min(least, v), max(most, v)
		}
	}
	return min(least, most), most
}

// unitSizes gives, for a field, the unit that is likely when the greatest value lies below a bound: the first that does.
// The bounds lie between what imagers of today use: delays of 0.3 to 300 us, dwell times of 1 to 100 ns, gradients of 5 to
// 300 mT/m, carriers of 0.2 to 10 GHz.
var unitSizes = []struct {
	field string
	below float64
	unit  string
}{
	{"delay_us", 1e-3, "s"}, {"delay_us", 0.3, "ms"}, {"delay_us", 1000, "us"}, {"delay_us", math.Inf(1), "ns"},
	{"dwell_ns", 1e-7, "s"}, {"dwell_ns", 1e-4, "ms"}, {"dwell_ns", 0.3, "us"}, {"dwell_ns", 5000, "ns"}, {"dwell_ns",
		math.Inf(1), "Hz"},
	{"gradient_mT_per_m", 0.3, "T/m"}, {"gradient_mT_per_m", 5, "G/cm"}, {"gradient_mT_per_m", math.Inf(1), "mT/m"},
	{"carrier_MHz", 50, "GHz"}, {"carrier_MHz", 50_000, "MHz"}, {"carrier_MHz", math.Inf(1), "Hz"},
	{"temperature_C", 150, "degC"}, {"temperature_C", math.Inf(1), "K"},
	{"echo_time_us", 1e-3, "s"}, {"echo_time_us", 100, "us"}, {"echo_time_us", math.Inf(1), "ns"},
	{"repetition_us", 0.1, "s"}, {"repetition_us", math.Inf(1), "us"},
	{"time_zero_sample", 1e-3, "s"}, {"time_zero_sample", math.Inf(1), "points"},
	{"position_step_mm", 0.005, "m"}, {"position_step_mm", math.Inf(1), "mm"},
	{"shot_time_s", math.Inf(1), "s"},
}

func likelyUnit(field string, most float64) string {
	for _, row := range unitSizes {
		if row.field == field && most < row.below {
			return row.unit
		}
	}
	return ""
}
