package acquisition

import (
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/fault"
)

// full returns a small acquisition in which every field of its domain is set.
func full(domain Domain) *Acquisition {
	some := func(v float64) *float64 { return &v }
	a := &Acquisition{
		Name: "traces", MadeUp: true, Delays: 2, Shots: 3, Samples: 4, Dim: 3,
		Signal:         make([]complex64, 24),
		GradientMTPerM: [][3]float64{{0, 0, 15}, {12, 9, 0}, {0, 0, 0}},
		DelayUS:        []float64{0.5, 8}, TimeZeroSample: 1.25, Sequence: InversionRecovery, Encoding: Spoke, Domain: domain,
		ShotRole: []int{RoleImage, RoleImage, RoleZeroGradient},
		Warnings: []string{"the file was cut short", "and another"},
		Optional: Optional{
			EchoTimeUS: some(0.6), RepetitionUS: some(60), CarrierMHz: some(721.5), TemperatureC: some(37),
			ShotTimeS: []float64{0, 1, 2}, Probe: "trityl", Note: "two lines\nof text",
			R1ZeroPerUS: some(0.16), R1SlopePerUSPerTorr: some(0.0046), R2ZeroPerUS: some(0.2), R2SlopePerUSPerTorr: some(0.005),
		},
	}
	if domain == Projection {
		a.PositionStepMM = 0.5
	} else {
		a.DwellNS = 5
	}
	for i := range a.Signal {
		a.Signal[i] = complex(float32(i), 0)
		if domain == Time {
			a.Signal[i] += complex(0, float32(-2*i))
		}
	}
	return a
}

// arraysOf returns what a file holds, by name.
func arraysOf(t *testing.T, a *Acquisition) map[string]Array {
	t.Helper()
	list, err := Arrays(a)
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]Array{}
	for _, array := range list {
		out[array.Name] = array
	}
	return out
}

func open(members map[string]Array) (*Acquisition, []string, error) {
	var list []Array
	for name, array := range members {
		array.Name = name
		list = append(list, array)
	}
	return FromArrays("some/traces.npz", list)
}

func TestEveryFieldOfTheDictionaryComesBack(t *testing.T) {
	written := map[string]bool{}
	for _, domain := range []Domain{Time, Projection} {
		want := full(domain)
		members := arraysOf(t, want)
		for name := range members {
			written[name] = true
		}
		got, warnings, err := open(members)
		if err != nil || len(warnings) != 0 {
			t.Fatal(warnings, err)
		}
		if !reflect.DeepEqual(got, want) {
			t.Errorf("%s domain:\ngot  %+v\nwant %+v", domain, got, want)
		}
	}
	for _, f := range Dictionary {
		if !written[f.Name] {
			t.Errorf("%s was never written", f.Name)
		}
	}
}

// misfits returns arrays that are certainly not what the field wants: text for a number, a number for text, three axes
// too many.
func misfits(t *testing.T, f Field) []Array {
	deep := mustArray(t, f.Name, []int{2, 2, 2, 2, 2}, Layout{Kind: Uint, Size: 1}, make([]byte, 32))
	texts := mustArray(t, f.Name, []int{2}, Layout{Kind: Bytes, Size: 1}, []byte("ab"))
	if strings.HasPrefix(f.Wanted, "text") {
		number, _ := ArrayOf(f.Name, nil, []float64{1})
		return []Array{deep, texts, number}
	}
	return []Array{deep, texts, TextOf(f.Name, "four")}
}

func TestEveryFieldRefusesWhatItDoesNotWant(t *testing.T) {
	for _, f := range Dictionary {
		for _, misfit := range misfits(t, f) {
			members := arraysOf(t, full(Time))
			members[f.Name] = misfit
			_, _, err := open(members)
			if found := wantFault(t, err, fault.BadFile); found.Where != "some/traces.npz "+f.Name {
				t.Errorf("%s given %s %v: fault at %q: %s", f.Name, misfit.Type, misfit.Shape, found.Where, found.Text)
			}
		}
	}
}

func TestEveryMissingFieldIsListed(t *testing.T) {
	for _, domain := range []Domain{Time, Projection} {
		for _, f := range Dictionary {
			members := arraysOf(t, full(domain))
			delete(members, f.Name)
			_, _, err := open(members)
			needed := f.Need == Always || f.Need == ForTraces && domain == Time || f.Need == ForProjections && domain == Projection
			if !needed && f.Name != "domain" && err != nil {
				t.Errorf("%s domain without %s: %v", domain, f.Name, err)
			}
			if needed && !strings.Contains(wantFault(t, err, fault.BadFile).Text, "missing "+f.Name+"; found ") {
				t.Errorf("%s domain without %s: %v", domain, f.Name, err)
			}
		}
	}
	_, _, err := open(map[string]Array{"Gradient": TextOf("", ""), "x": TextOf("", "")})
	const want = `missing signal, gradient_mT_per_m, delay_us, dwell_ns, time_zero_sample, sequence, encoding; ` +
		`found "Gradient" (did you mean gradient_mT_per_m?), "x"; add what is missing or rename what is there`
	if got := wantFault(t, err, fault.BadFile); got.Text != want {
		t.Errorf("got  %s\nwant %s", got.Text, want)
	}
}

func TestUnknownNamesAreNamedWithTheFieldNearby(t *testing.T) {
	for name, want := range map[string]string{
		"shot_rol": "shot_role", "Signals": "signal", "carrier_mhz": "carrier_MHz", "delay": "delay_us", "delays_us": "delay_us",
		"gradient_mT_m": "gradient_mT_per_m", "r1_slope": "r1_slope_per_us_per_torr", "phantom_centre": "", "xy": "",
	} {
		members := arraysOf(t, full(Time))
		members[name] = TextOf(name, "?")
		_, warnings, err := open(members)
		expect := `"` + name + `" is no field of the dictionary and was left out`
		if want != "" {
			expect += " (did you mean " + want + "?)"
		}
		if err != nil || !slices.Equal(warnings, []string{expect}) {
			t.Errorf("%q, %v; want %q", warnings, err, expect)
		}
	}
}

// Source: the worked example of edit distance, "kitten" to "sitting" takes 3 changes.
func TestEditDistanceOfTheTextbookExample(t *testing.T) {
	for _, c := range []struct {
		a, b string
		want int
	}{{"kitten", "sitting", 3}, {"sitting", "kitten", 3}, {"", "abc", 3}, {"abc", "", 3}, {"abc", "abc", 0}} {
		if got := editDistance(c.a, c.b); got != c.want {
			t.Errorf("%s to %s: %d, want %d", c.a, c.b, got, c.want)
		}
	}
}

func TestOneNameTwiceIsAFault(t *testing.T) {
	_, _, err := FromArrays("traces.npz", []Array{TextOf("note", "a"), TextOf("note", "b")})
	wantFault(t, err, fault.BadFile)
}

func TestRealPairsAreTheSameAsComplex(t *testing.T) {
	want := full(Time)
	var parts []float32
	for _, v := range want.Signal {
		parts = append(parts, real(v), imag(v))
	}
	members := arraysOf(t, want)
	members["signal"], _ = ArrayOf("signal", []int{2, 3, 4, 2}, parts)
	got, _, err := open(members)
	if err != nil || !slices.Equal(got.Signal, want.Signal) || got.Samples != 4 {
		t.Errorf("%v, %v", got, err)
	}
}

func TestOneDelayMayLackItsAxis(t *testing.T) {
	members := arraysOf(t, full(Time))
	signal, err := ArrayOf("signal", []int{3, 8}, full(Time).Signal)
	if err != nil {
		t.Fatal(err)
	}
	members["signal"] = signal
	members["delay_us"], _ = ArrayOf("delay_us", nil, []float64{3})
	got, _, err := open(members)
	if err != nil || got.Delays != 1 || got.Shots != 3 || got.Samples != 8 || got.DelayUS[0] != 3 {
		t.Errorf("%+v, %v", got, err)
	}
}

func TestTwoGradientAxesMeanTwoDimensions(t *testing.T) {
	members := arraysOf(t, full(Time))
	members["gradient_mT_per_m"], _ = ArrayOf("", []int{3, 2}, []float64{1, 2, 3, 4, 0, 0})
	got, _, err := open(members)
	if err != nil || got.Dim != 2 || got.GradientMTPerM[1] != [3]float64{3, 4, 0} {
		t.Fatalf("%+v, %v", got, err)
	}
	if back := arraysOf(t, got)["gradient_mT_per_m"]; !slices.Equal(back.Shape, []int{3, 2}) {
		t.Errorf("written with shape %v", back.Shape)
	}
}

func TestSingleValuesMayHaveAxesOfLengthOne(t *testing.T) {
	members := arraysOf(t, full(Time))
	members["dwell_ns"], _ = ArrayOf("", []int{1, 1}, []float64{7})
	members["delay_us"], _ = ArrayOf("", []int{1, 2}, []float64{1, 2})
	members["sequence"] = mustArray(t, "", []int{1}, Layout{Kind: Bytes, Size: 11}, []byte("echo-decay\n"))
	got, _, err := open(members)
	if err != nil || got.DwellNS != 7 || got.Sequence != EchoDecay || !slices.Equal(got.DelayUS, []float64{1, 2}) {
		t.Errorf("%+v, %v", got, err)
	}
}

func TestContradictionsSayBothNumbers(t *testing.T) {
	for _, c := range []struct {
		field string
		shape []int
		want  string
	}{
		{"gradient_mT_per_m", []int{2, 3}, "2 gradients for 3 shots of signal"},
		{"delay_us", []int{5}, "5 delays listed, signal has 2"},
		{"shot_role", []int{4}, "4 roles for 3 shots"},
		{"shot_time_s", []int{4}, "4 times for 3 shots"},
		{"gradient_mT_per_m", []int{3, 4}, "shape [3, 4] found; [shot, 3] wanted"},
	} {
		count := 1
		for _, n := range c.shape {
			count *= n
		}
		members := arraysOf(t, full(Time))
		members[c.field], _ = ArrayOf("", c.shape, make([]float64, count))
		_, _, err := open(members)
		if got := wantFault(t, err, fault.BadFile); !strings.Contains(got.Text, c.want) || !strings.HasSuffix(got.Where, c.field) {
			t.Errorf("%s %v: %v", c.field, c.shape, got)
		}
	}
}

func TestPermutedSignalAxesAreAFaultNotAGuess(t *testing.T) {
	for _, shape := range [][]int{{2, 4, 3}, {3, 2, 4}, {3, 4, 2}, {4, 2, 3}, {4, 3, 2}} {
		members := arraysOf(t, full(Time))
		members["signal"], _ = ArrayOf("", shape, full(Time).Signal)
		_, _, err := open(members)
		want := "shape " + ShapeText(shape) + " found; 2 delays and 3 gradients want [2, 3, sample]"
		if got := wantFault(t, err, fault.BadFile); !strings.Contains(got.Text, want) {
			t.Errorf("%v: %v", shape, got)
		}
	}
}

func TestSignalAndDomainMustAgree(t *testing.T) {
	traces, projections := arraysOf(t, full(Time)), arraysOf(t, full(Projection))
	for want, c := range map[string]struct{ in, from map[string]Array }{
		"traces are complex":   {traces, projections},
		"projections are real": {projections, traces},
	} {
		c.in["signal"], c.from["signal"] = c.from["signal"], c.in["signal"]
		_, _, err := open(c.in)
		if got := wantFault(t, err, fault.BadFile); !strings.Contains(got.Text, want) {
			t.Errorf("want %q: %v", want, got)
		}
		c.in["signal"], c.from["signal"] = c.from["signal"], c.in["signal"]
	}
}

func TestAnotherUnitThanTheFieldsIsAFault(t *testing.T) {
	for unit, ok := range map[string]bool{"us": true, "µs": true, "": true, "ms": false, "s": false} {
		members := arraysOf(t, full(Time))
		delay := members["delay_us"]
		delay.Unit = unit
		members["delay_us"] = delay
		_, _, err := open(members)
		if ok && err != nil {
			t.Errorf("%q: %v", unit, err)
		}
		if !ok {
			wantFault(t, err, fault.BadFile)
		}
	}
}

func TestAnOptionalNaNMeansAbsentAndInfinityIsAFault(t *testing.T) {
	members := arraysOf(t, full(Time))
	members["temperature_C"], _ = ArrayOf("", nil, []float64{math.NaN()})
	got, _, err := open(members)
	if err != nil || got.Optional.TemperatureC != nil {
		t.Errorf("%v, %v", got, err)
	}
	members["temperature_C"], _ = ArrayOf("", nil, []float64{math.Inf(1)})
	_, _, err = open(members)
	wantFault(t, err, fault.BadFile)
}

func TestDoubtfulByteOrderIsAWarningAndNothingIsSwapped(t *testing.T) {
	members := arraysOf(t, full(Time))
	dwell := members["dwell_ns"]
	members["dwell_ns"] = mustArray(t, "", nil, Layout{Kind: Float, Size: 8, BigEndian: true}, dwell.Raw())
	got, warnings, err := open(members)
	// 5.0 is 4014000000000000; read backwards it is the denormal with fraction 0x1440.
	if err != nil || got.DwellNS != 0x1440*math.SmallestNonzeroFloat64 {
		t.Errorf("%v, %v", got, err)
	}
	if len(warnings) != 1 || !strings.Contains(warnings[0], "dwell_ns") || !strings.Contains(warnings[0], "byte order may be wrong") {
		t.Errorf("warnings %q", warnings)
	}
}
