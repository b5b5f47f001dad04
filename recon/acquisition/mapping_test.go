package acquisition

import (
	"encoding/json"
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/fault"
)

// measured returns an acquisition of 3 delays, 5 shots and 8 samples, whose numbers are exact in float32 and in every unit
// used below.
func measured() *Acquisition {
	a := &Acquisition{Name: "traces", Delays: 3, Shots: 5, Samples: 8, Dim: 3, DelayUS: []float64{0.5, 2, 8},
		DwellNS: 4, TimeZeroSample: 2,
		Sequence: InversionRecovery, Encoding: Spoke, Domain: Time, ShotRole: make([]int, 5)}
	for s := range 5 {
		angle := float64(s)
		a.GradientMTPerM = append(a.GradientMTPerM,
			[3]float64{15 * math.Cos(angle), 12 * math.Sin(angle), 9 * math.Sin(angle)})
	}
	for d := range 3 {
		for s := range 5 {
			for j := range 8 {
				a.Signal = append(a.Signal, complex(float32(100*d+10*s-j), float32(j*j-5*s+d)))
			}
		}
	}
	return a
}

// disguise makes one way to write the acquisition under other names.
type disguise struct {
	name    string
	arrays  func(*testing.T, *Acquisition) []Array
	typed   map[string]FieldSource // what the person adds
	missing []string               // what the proposal lacks before that
}

func named(t *testing.T, name, unit string, shape []int, values []float64) Array {
	t.Helper()
	a, err := ArrayOf(name, shape, values)
	if err != nil {
		t.Fatal(err)
	}
	a.Unit = unit
	return a
}

func scaledBy(factor float64, values []float64) []float64 {
	out := slices.Clone(values)
	for i := range out {
		out[i] *= factor
	}
	return out
}

func component(a *Acquisition, c int, factor float64) (out []float64) {
	for _, g := range a.GradientMTPerM {
		out = append(out, g[c]*factor)
	}
	return out
}

// permuted returns real parts (0) or imaginary parts (1), or both in turn (2), with the axes in the order of the word:
// d, s, j and p, the last fastest.
func permuted(a *Acquisition, order string, part int) []float64 {
	n := map[byte]int{'d': a.Delays, 's': a.Shots, 'j': a.Samples, 'p': 1}
	if part == 2 {
		n['p'] = 2
	}
	if !strings.Contains(order, "p") {
		order += "p"
	}
	var out []float64
	at := map[byte]int{}
	var walk func(k int)
	walk = func(k int) {
		if k == len(order) {
			v := a.Trace(at['d'], at['s'])[at['j']]
			if part == 1 || at['p'] == 1 {
				out = append(out, float64(imag(v)))
			} else {
				out = append(out, float64(real(v)))
			}
			return
		}
		for at[order[k]] = 0; at[order[k]] < n[order[k]]; at[order[k]]++ {
			walk(k + 1)
		}
	}
	walk(0)
	return out
}

func complexes(t *testing.T, name string, shape []int, pairs []float64) Array {
	t.Helper()
	values := make([]complex64, len(pairs)/2)
	for i := range values {
		values[i] = complex(float32(pairs[2*i]), float32(pairs[2*i+1]))
	}
	a, err := ArrayOf(name, shape, values)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

var typedSequence = FieldSource{Text: string(InversionRecovery)}

var disguises = []disguise{
	{
		name: "a struct with other names, axes the other way round, SI units",
		arrays: func(t *testing.T, a *Acquisition) []Array {
			g := slices.Concat(component(a, 0, 1e-3), component(a, 1, 1e-3), component(a, 2, 1e-3))
			return []Array{
				complexes(t, "exp.fid", []int{8, a.Shots, 3}, permuted(a, "jsd", 2)), named(t, "exp.G", "T/m",
					[]int{3, a.Shots}, g),
				named(t, "exp.tau", "s", []int{1, 3}, scaledBy(1e-6, a.DelayUS)), named(t, "exp.dt_s", "", []int{1, 1},
					[]float64{4e-9}),
				named(t, "exp.t0", "points", []int{1, 1}, []float64{2}), TextOf("exp.seq",
					"Inversion recovery with echo"), TextOf("exp.encoding", "spoke"),
			}
		},
	},
	{
		name: "real and imaginary parts apart, lists of gradients in G/cm, a time axis",
		arrays: func(t *testing.T, a *Acquisition) []Array {
			return []Array{
				named(t, "t", "us", []int{8}, []float64{-0.008, -0.004, 0, 0.004, 0.008, 0.012, 0.016, 0.020}),
				named(t, "d#s#_re", "", []int{3, a.Shots, 8}, permuted(a, "dsj", 0)), named(t, "d#s#_im", "",
					[]int{3, a.Shots, 8}, permuted(a, "dsj", 1)),
				named(t, "gx [G/cm]", "G/cm", []int{a.Shots}, component(a, 0, 0.1)), named(t, "gy", "G/cm",
					[]int{a.Shots}, component(a, 1, 0.1)),
				named(t, "gz", "G/cm", []int{a.Shots}, component(a, 2, 0.1)), named(t, "delays_ns", "", []int{3},
					scaledBy(1000, a.DelayUS)),
			}
		},
		typed: map[string]FieldSource{"sequence": typedSequence}, missing: []string{"sequence"},
	},
	{
		name: "an axis of two for the parts, delays and shots along one axis, a sampling rate",
		arrays: func(t *testing.T, a *Acquisition) []Array {
			g := slices.Concat(component(a, 0, 1), component(a, 1, 1), component(a, 2, 1))
			return []Array{
				named(t, "raw", "", []int{2, 8, 3 * a.Shots}, permuted(a, "pjds", 2)), named(t, "gradient", "mT/m",
					[]int{3, a.Shots}, g),
				named(t, "TI", "", []int{3}, a.DelayUS), named(t, "fs_MHz", "", nil, []float64{250}), named(t,
					"echo_centre", "ns", nil, []float64{8}),
			}
		},
		typed: map[string]FieldSource{"sequence": typedSequence}, missing: []string{"sequence"},
	},
	{
		name: "the gradients repeated at every delay, as a series of files leaves them",
		arrays: func(t *testing.T, a *Acquisition) []Array {
			gx, gy, gz := component(a, 0, 1), component(a, 1, 1), component(a, 2, 1)
			return []Array{
				named(t, "real", "", []int{3, a.Shots, 8}, permuted(a, "dsj", 0)), named(t, "imaginary", "",
					[]int{3, a.Shots, 8}, permuted(a, "dsj", 1)),
				named(t, "GX", "mT/m", []int{3, a.Shots}, slices.Concat(gx, gx, gx)), named(t, "GY", "mT/m",
					[]int{3, a.Shots}, slices.Concat(gy, gy, gy)),
				named(t, "GZ", "mT/m", []int{3, a.Shots}, slices.Concat(gz, gz, gz)), named(t, "DWELL", "ns", nil,
					[]float64{4}),
			}
		},
		typed: map[string]FieldSource{
			"sequence": typedSequence, "delay_us": {Numbers: []float64{500, 2000, 8000},
				Unit: "ns"}, "time_zero_sample": {Numbers: []float64{2}, Unit: "points"},
		},
		missing: []string{"delay_us", "sequence"},
	},
}

// with returns the mapping with the sources that a person typed in.
func with(m Mapping, typed map[string]FieldSource) Mapping {
	m.Fields = slices.Clone(m.Fields)
	for i, f := range m.Fields {
		if s, there := typed[f.Field]; there {
			s.Field = f.Field
			m.Fields[i] = s
		}
	}
	return m
}

// near compares up to the rounding of units: a part in 1e12.
func near(a, b *Acquisition) bool {
	left, right := *a, *b
	round := func(v float64) float64 { return math.Round(v*1e9) / 1e9 }
	for _, x := range []*Acquisition{&left, &right} {
		x.GradientMTPerM, x.DelayUS = slices.Clone(x.GradientMTPerM), slices.Clone(x.DelayUS)
		for i := range x.GradientMTPerM {
			for c := range 3 {
				x.GradientMTPerM[i][c] = round(x.GradientMTPerM[i][c])
			}
		}
		for i := range x.DelayUS {
			x.DelayUS[i] = round(x.DelayUS[i])
		}
		x.DwellNS, x.TimeZeroSample = round(x.DwellNS), round(x.TimeZeroSample)
	}
	return reflect.DeepEqual(left, right)
}

func TestEveryDisguiseIsProposedAndOpensTheSame(t *testing.T) {
	for _, d := range disguises {
		want := measured()
		arrays := d.arrays(t, want)
		m := Propose(arrays)
		if got := m.Lacking(); !slices.Equal(got, d.missing) {
			t.Errorf("%s: lacks %q, want %q", d.name, got, d.missing)
		}
		text, err := json.MarshalIndent(with(m, d.typed), "", " ")
		if err != nil {
			t.Fatal(err)
		}
		back, err := ParseMapping(text)
		if err != nil {
			t.Errorf("%s: %v\n%s", d.name, err, text)
			continue
		}
		got, _, err := Apply("folder/traces.mat", arrays, back)
		if err != nil || !near(got, want) {
			t.Errorf("%s: %v\ngot  %+v\nwant %+v\n%s", d.name, err, got, want, text)
		}
		if len(m.Guesses()) == 0 {
			t.Errorf("%s: nothing was guessed", d.name)
		}
	}
}

func TestADictionaryFileIsMappedWithoutAGuess(t *testing.T) {
	for _, domain := range []Domain{Time, Projection} {
		want := full(domain)
		arrays, err := Arrays(want)
		if err != nil {
			t.Fatal(err)
		}
		for i := range arrays {
			arrays[i].Unit = "" // npz files state none
		}
		m := Propose(arrays)
		got, _, err := Apply("traces.npz", arrays, m)
		if err != nil || !reflect.DeepEqual(got, want) {
			t.Errorf("%s: %v\ngot  %+v\nwant %+v", domain, err, got, want)
		}
		if guesses := m.Guesses(); len(guesses) != 0 {
			t.Errorf("%s: guessed %q", domain, guesses)
		}
	}
}

func TestReasonsSayWhatWasSeen(t *testing.T) {
	m := Propose(disguises[0].arrays(t, measured()))
	for field, words := range map[string]string{
		"delay_us": `length 3 matches the delay axis of "exp.fid"; the file states s`, "dwell_ns": "the name says s", "gradient_mT_per_m": `5 entries, as many as the shot axis of "exp.fid"`,
		"sequence": `says "Inversion recovery with echo"`,
	} {
		if reason := m.field(field).Reason; !strings.Contains(reason, words) {
			t.Errorf("%s: %q lacks %q", field, reason, words)
		}
	}
	m = Propose([]Array{complexes(t, "sig", []int{10, 4, 64}, make([]float64, 2*10*4*64)),
		named(t, "times", "", []int{10}, []float64{1e-3, 2e-3, 3e-3, 5e-3, 7e-3, 9e-3, 12e-3, 17e-3, 22e-3,
			3e-2}), named(t, "tau", "", []int{10}, []float64{.3e-6, 1e-6, 2e-6, 3e-6, 4e-6, 5e-6, 6e-6, 7e-6, 8e-6, 9e-6})})
	if s := m.field("delay_us"); s.Unit != "s" || !s.Guessed ||
		!strings.Contains(s.Reason, "values 3e-07..9e-06: s? choose the unit") {
		t.Errorf("%+v", s)
	}
}

func TestAMappingOpensTheNextFileOfItsLayout(t *testing.T) {
	first, second := measured(), measured()
	second.GradientMTPerM, second.Shots, second.ShotRole = second.GradientMTPerM[:4], 4, make([]int, 4)
	var shorter []complex64
	for d := range 3 {
		for s := range 4 {
			shorter = append(shorter, first.Trace(d, s)...)
		}
	}
	second.Signal = shorter
	for _, d := range disguises {
		a, b := d.arrays(t, first), d.arrays(t, second)
		slices.Reverse(b) // the order of arrays in a file does not count
		if Signature(a) != Signature(b) {
			t.Errorf("%s: signatures differ", d.name)
		}
		if got, _, err := Apply("traces.x", b, with(Propose(a), d.typed)); err != nil || !near(got, second) {
			t.Errorf("%s: %v", d.name, err)
		}
		c := d.arrays(t, first)
		c[0].Name = "other"
		if Signature(a) == Signature(c) {
			t.Errorf("%s: another name, the same signature", d.name)
		}
	}
}

func TestAnArrayCalledAfterItsFileIsFoundInTheNext(t *testing.T) {
	monday, tuesday := named(t, "monday", "", []int{3}, make([]float64, 3)), named(t, "tuesday", "", []int{3},
		make([]float64, 3))
	monday.AfterFile, tuesday.AfterFile = true, true
	if Signature([]Array{monday}) != Signature([]Array{tuesday}) || Labels([]Array{monday})[0] != "*" {
		t.Errorf("%q", Labels([]Array{monday}))
	}
	if labels := Labels([]Array{monday, tuesday}); !slices.Equal(labels, []string{"monday", "tuesday"}) {
		t.Errorf("%q", labels)
	}
}

func TestContradictionsAreFaultsWithBothNumbers(t *testing.T) {
	base := func() ([]Array, Mapping) {
		a := measured()
		arrays := disguises[1].arrays(t, a)
		return arrays, with(Propose(arrays), disguises[1].typed)
	}
	for name, c := range map[string]struct {
		change func([]Array, *Mapping)
		kind   fault.Kind
		words  string
	}{
		"4 gradients for 5 shots": {func(a []Array, m *Mapping) {
			for i := 3; i < 6; i++ {
				a[i] = named(t, a[i].Name, a[i].Unit, []int{4}, make([]float64, 4))
			}
		}, fault.BadFile, "4 gradients for 5 shots"},
		"components of unequal length": {func(a []Array,
			m *Mapping) {
			a[4] = named(t, "gy", "G/cm", []int{4}, make([]float64, 4))
		},
			fault.BadFile, "5 values in component 1, 4 in another"[2:9]},
		"2 delays for 3": {func(a []Array, m *Mapping) { a[6] = named(t, "delays_ns", "", []int{2}, []float64{1, 2}) },
			fault.BadFile, "2 delays"},
		"parts of other shapes": {func(a []Array, m *Mapping) {
			a[2] = named(t, a[2].Name, "", []int{3, 5, 7},
				make([]float64, 105))
		},
			fault.BadFile, "[3, 5, 7] for the imaginary parts, the real ones have shape [3, 5, 8]"},
		"an uneven axis": {func(a []Array, m *Mapping) {
			a[0] = named(t, "t", "us", []int{8}, []float64{0, 1, 2, 3, 4,
				5, 6, 9})
		}, fault.BadFile, "even steps"},
		"an array gone": {func(a []Array, m *Mapping) { a[0].Name = "tt" }, fault.BadSetting, `wants array "t"`},
		"no unit": {func(a []Array, m *Mapping) { setUnit(m, "delay_us", "") }, fault.BadSetting,
			"no unit chosen; use ns, us, ms, s"},
		"a wrong unit": {func(a []Array, m *Mapping) { setUnit(m, "delay_us", "mm") }, fault.BadSetting,
			`unit "mm"; use ns, us, ms, s`},
		"an axis twice": {func(a []Array, m *Mapping) { m.Signal.Axes = []string{"shot", "shot", "sample"} },
			fault.BadSetting, `"shot" stands twice`},
		"an unknown axis": {func(a []Array, m *Mapping) { m.Signal.Axes[0] = "echo" }, fault.BadSetting,
			`"echo" is no axis`},
		"too few axes": {func(a []Array, m *Mapping) { m.Signal.Axes = m.Signal.Axes[1:] }, fault.BadSetting,
			"2 axes named, shape [3, 5, 8] has 3"},
		"no imaginary": {func(a []Array, m *Mapping) { m.Signal.Imaginary = "" }, fault.BadFile,
			"traces need an imaginary part"},
		"no signal": {func(a []Array, m *Mapping) { m.Signal.Array = "" }, fault.BadSetting, "no array chosen"},
		"an unknown field": {func(a []Array, m *Mapping) { m.Fields[0].Field = "dwel_ns" }, fault.BadSetting,
			"did you mean dwell_ns?"},
		"no multiple": {func(a []Array, m *Mapping) { m.Signal.Axes = []string{"one", "delay shot", "sample"} },
			fault.BadFile, "5 is no multiple of 3"},
	} {
		arrays, m := base()
		m.Signal.Axes = slices.Clone(m.Signal.Axes)
		c.change(arrays, &m)
		got, _, err := Apply("traces.csv", arrays, m)
		if f := wantFault(t, err, c.kind); got != nil || !strings.Contains(f.Error(), c.words) ||
			!strings.HasPrefix(f.Error(), "traces.csv") && c.kind == fault.BadFile {
			t.Errorf("%s: %v lacks %q", name, f, c.words)
		}
	}
}

func setUnit(m *Mapping, field, unit string) {
	for i := range m.Fields {
		if m.Fields[i].Field == field {
			m.Fields[i].Unit = unit
		}
	}
}

func TestAMappingIsStrictAboutItsKeys(t *testing.T) {
	for text, words := range map[string]string{
		`{"signal": {"array": "x", "Axes": []}}`:                            `key "Axes" is not known`,
		`{"signal": {"array": 3}}`:                                          "mapping signal.array",
		`{"fields": [{"field": "dwell_ns", "value": 3}]}`:                   `mapping.fields[0]: key "value" is not known`,
		`{"fields": [{"field": "dwell_ns"}, {"field": "dwell_ns"}]}`:        "stands twice",
		`{"fields": [{"field": "dwell_ns", "take": "rate"}]}`:               `take "rate" is not known`,
		`{"fields": [{"field": "dwell_ns", "arrays": ["a", "b"]}]}`:         "2 arrays; one is wanted",
		`{"fields": [{"field": "dwell_ns", "arrays": ["a"], "text": "4"}]}`: "choose one",
		`{"fields": [{"field": "dwell_ns", "numbers": [4], "unit": "m"}]}`:  `unit "m"; use ns`,
		`{`: "no JSON",
	} {
		_, err := ParseMapping([]byte(text))
		if f := wantFault(t, err, fault.BadSetting); !strings.Contains(f.Error(), words) {
			t.Errorf("%s: %v lacks %q", text, f, words)
		}
	}
}

func TestUnitsOfTheTable(t *testing.T) {
	for _, c := range []struct {
		value float64
		unit  string
		base  string
		want  float64
	}{
		{0.015, "T/m", "mT/m", 15}, {1.5, "G/cm", "mT/m", 15}, {15, "mT/m", "mT/m", 15}, {250, "MHz", "ns", 4}, {250e6,
			"Hz", "ns", 4}, {0.25, "GHz", "ns", 4},
		{4e-9, "s", "ns", 4}, {4e-3, "µs", "ns", 4}, {8e-6, "seconds", "us", 8}, {300, "K", "degC", 26.85}, {1,
			"1/us/kPa", "1/us/torr", 0.133322368421},
		{9.6, "GHz", "MHz", 9600}, {0.5, "m", "mm", 500},
	} {
		u, ok := UnitFor(c.unit, c.base)
		// Factors are exact to a rounding of float64; the last is 101.325/760 to twelve digits.
		if got := u.to(c.value); !ok || !(math.Abs(got-c.want) <= 1e-11*c.want) {
			t.Errorf("%g %s = %g %s, want %g", c.value, c.unit, got, c.base, c.want)
		}
	}
	for _, unit := range []string{"MT/M", "mhz", "lightyear", "", "US"} {
		if _, ok := UnitFor(unit, "ns"); ok && unit != "US" {
			t.Errorf("%q is a unit of time", unit)
		}
	}
	for _, u := range Units {
		if found, ok := UnitFor(u.Name, u.Base); !ok || found.Name != u.Name || u.Factor == 0 {
			t.Errorf("%+v", u)
		}
	}
}
