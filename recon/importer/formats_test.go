package importer

import (
	"fmt"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// typed are the fields that no format of the family but the MAT-files can hold.
func typed() map[string]acquisition.FieldSource {
	return map[string]acquisition.FieldSource{
		"sequence": {Text: "inversion-recovery"}, "encoding": {Text: "spoke"}, "delay_us": {Numbers: []float64{0.5, 1},
			Unit: "us"},
		"temperature_C": {Numbers: []float64{37},
			Unit: "degC"}, "note": {Text: "20 µl, pH 7.4"}, "dwell_ns": {Numbers: []float64{250}, Unit: "MHz"},
		"time_zero_sample": {Numbers: []float64{-5}, Unit: "ns"},
	}
}

// completed returns the proposal with what a person types in, the first delay only when there is one.
func completed(m acquisition.Mapping, delays int) acquisition.Mapping {
	for i, f := range m.Fields {
		s, there := typed()[f.Field]
		if !there || len(f.Arrays) > 0 {
			continue
		}
		s.Field = f.Field
		if f.Field == "delay_us" {
			s.Numbers = s.Numbers[:delays]
		}
		m.Fields[i] = s
	}
	return m
}

// firstDelay keeps only the first delay.
func firstDelay(a *acquisition.Acquisition) *acquisition.Acquisition {
	a.Signal, a.DelayUS, a.Delays = a.Signal[:a.Shots*a.Samples], a.DelayUS[:1], 1
	return a
}

func TestEveryFormatOfTheSameAcquisitionOpensEqual(t *testing.T) {
	gradients := File{"gradients.csv", []byte("gx [mT/m],gy [mT/m],gz [mT/m]\n1,2,-1\n2,1,0\n3,0,1\n4,-1,-1\n5,-2,0\n")}
	for file, delays := range map[string]int{
		"plain.mat": 2, "compressed.mat": 2, "struct.mat": 2, "point.csv": 2, "comma.csv": 2, "tabs.tsv": 2, "utf-16.csv": 2, "linked.dx": 1, "shots.zip": 1,
	} {
		set := []File{{file, load(t, filepath.Join(testdata, "formats", file))}}
		if ext := filepath.Ext(file); ext == ".csv" || ext == ".tsv" {
			set = append(set, gradients)
		}
		tree, err := ReadSet(set)
		if err != nil {
			t.Errorf("%s: %v", file, err)
			continue
		}
		m := completed(acquisition.Propose(tree.Arrays), delays)
		got, warnings, err := acquisition.Apply("x.npz", tree.Arrays, m)
		want := exact()
		if want.Name = "x"; delays == 1 {
			want = firstDelay(want)
		}
		if err != nil || len(warnings) != 0 || !reflect.DeepEqual(got, want) {
			t.Errorf("%s: %v, warnings %q\ngot  %+v\nwant %+v\n%+v", file, err, warnings, got, want, m)
		}
	}
}

func TestAMATFileOfTheDictionaryOpensWithNoQuestions(t *testing.T) {
	for _, file := range []string{"plain.mat", "compressed.mat"} {
		got, warnings, err := Open(file, load(t, filepath.Join(testdata, "formats", file)))
		want := exact()
		want.Name = strings.TrimSuffix(file, ".mat")
		if err != nil || len(warnings) != 0 || !reflect.DeepEqual(got, want) {
			t.Errorf("%s: %v, %q\ngot  %+v", file, err, warnings, got)
		}
	}
}

// A table without names holds the time axis, then real and imaginary part of every delay and shot in turn.
func TestATableWithoutNamesIsMappedByOneAxisOfThree(t *testing.T) {
	arrays, err := Read("plain.txt", load(t, filepath.Join(testdata, "formats/plain.txt")))
	if err != nil {
		t.Fatal(err)
	}
	gradients, err := Read("g.csv", []byte("gx,gy,gz\n1,2,-1\n2,1,0\n3,0,1\n4,-1,-1\n5,-2,0\n"))
	if err != nil {
		t.Fatal(err)
	}
	m := acquisition.Mapping{Signal: acquisition.SignalSource{Array: "*", Axes: []string{"sample", "delay shot part"}},
		Fields: []acquisition.FieldSource{
			{Field: "gradient_mT_per_m", Arrays: []string{"gx", "gy", "gz"}, Unit: "mT/m"},
			{Field: "dwell_ns", Arrays: []string{"first column"}, Take: acquisition.Step, Unit: "ns"},
			{Field: "time_zero_sample", Arrays: []string{"first column"}, Take: acquisition.Zero},
		}}
	for name, s := range typed() {
		if s.Field = name; name != "dwell_ns" && name != "time_zero_sample" {
			m.Fields = append(m.Fields, s)
		}
	}
	got, _, err := acquisition.Apply("x.txt", append(arrays, gradients...), m)
	want := exact()
	want.Name = "x"
	if err != nil || !reflect.DeepEqual(got, want) {
		t.Errorf("%v\ngot  %+v\nwant %+v", err, got, want)
	}
}

// A sinogram is a table of projections, a row for each; the angles make the gradients.
func TestAPlainSinogramOpens(t *testing.T) {
	var table, gradients strings.Builder
	want := &acquisition.Acquisition{Name: "sinogram", Delays: 1, Shots: 4, Samples: 5, Dim: 2, DelayUS: []float64{8},
		TimeZeroSample: 2, PositionStepMM: 0.5,
		Sequence: acquisition.InversionRecovery, Encoding: acquisition.Spoke, Domain: acquisition.Projection, ShotRole: make([]int, 4)}
	for s := range 4 {
		g := [3]float64{float64(3 - s), float64(4 * s), 0}
		want.GradientMTPerM = append(want.GradientMTPerM, g)
		for j := range 5 {
			v := (s + 1) * (j*j + 3) % 11
			want.Signal = append(want.Signal, complex(float32(v), 0))
			fmt.Fprintf(&table, "%d,", v)
		}
		table.WriteString("\n")
		fmt.Fprintf(&gradients, "%g,%g\n", g[0], g[1])
	}
	tree, err := ReadSet([]File{{"sinogram.csv", []byte(table.String())},
		{"gradient.csv", []byte("gx,gy\n" + gradients.String())}})
	if err != nil {
		t.Fatal(err)
	}
	m := acquisition.Propose(tree.Arrays)
	for i, f := range m.Fields {
		switch f.Field {
		case "gradient_mT_per_m":
			m.Fields[i].Unit = "mT/m"
		case "delay_us":
			m.Fields[i].Numbers, m.Fields[i].Unit = []float64{8}, "us"
		case "position_step_mm":
			m.Fields[i].Numbers, m.Fields[i].Unit = []float64{0.05}, "cm"
		case "time_zero_sample":
			m.Fields[i] = acquisition.FieldSource{Field: f.Field, Numbers: []float64{2}, Unit: "points"}
		case "sequence":
			m.Fields[i].Text = "inversion-recovery"
		}
	}
	got, _, err := acquisition.Apply("sinogram.csv", tree.Arrays, m)
	if err != nil || !reflect.DeepEqual(got, want) {
		t.Errorf("%v\ngot  %+v\nwant %+v\n%+v", err, got, want, m)
	}
	arrays, err := acquisition.Arrays(want) // as an npz holds them
	if err != nil {
		t.Fatal(err)
	}
	direct, warnings, err := acquisition.FromArrays("sinogram.npz", arrays)
	if err != nil || len(warnings) != 0 || !reflect.DeepEqual(direct, want) {
		t.Errorf("%v, %q\ngot  %+v", err, warnings, direct)
	}
}

func TestSalvageOffersWhatIsComplete(t *testing.T) {
	whole := exact()
	for _, file := range []string{"numpy/stored.npz", "numpy/deflated.npz", "formats/plain.mat"} {
		data := load(t, filepath.Join(testdata, file))
		sound := 0
		for n := range data {
			s, err := Salvage(Default, file, data[:n])
			if err != nil {
				if f := fault.From(err); f.Kind == fault.Bug || f.Kind == fault.TooLarge {
					t.Fatalf("%s cut to %d: %v", file, n, err)
				}
				continue
			}
			for _, a := range s.Arrays {
				if a.Name == "signal" && a.Truncated != nil {
					sound++
					wholeRows(t, file, a, whole)
				}
			}
		}
		if sound < 100 { // the second delay alone takes 640 bytes unpacked
			t.Errorf("%s: the signal was salvaged at %d lengths", file, sound)
		}
	}
}

// wholeRows fails unless a salvaged signal holds exactly the first values along its slowest axis.
func wholeRows(t *testing.T, file string, a acquisition.Array, whole *acquisition.Acquisition) {
	t.Helper()
	values, err := a.Complex64s()
	if err != nil {
		t.Fatal(err)
	}
	n := a.Shape
	for d := range n[0] {
		for s := range n[1] {
			for j := range n[2] {
				if got := values[(d*n[1]+s)*n[2]+j]; got != whole.Trace(d, s)[j] {
					t.Fatalf("%s: %v at delay %d shot %d sample %d of %v, want %v", file, got, d, s, j, n,
						whole.Trace(d, s)[j])
				}
			}
		}
	}
}

func TestSalvagedColumnsAndArrays(t *testing.T) {
	s, err := Salvage(Default, "x.csv", []byte("re,im\n1,2\n3,4\n5,"))
	if err != nil || len(s.Arrays) != 2 || s.Arrays[0].Truncated == nil || s.Arrays[0].Len() != 2 ||
		!strings.Contains(s.Text, `of "re" 2 entries along axis 1`) {
		t.Errorf("%+v, %v", s, err)
	}
	whole := npyOf("<f8", "(4, 2)", make([]byte, 64))
	s, err = Salvage(Default, "x.npy", whole[:len(whole)-17])
	if err != nil || s.Arrays[0].Shape[0] != 2 || s.Arrays[0].Truncated.Stated != 4 ||
		!strings.Contains(s.Text, "2 of 4 entries along axis 1") {
		t.Errorf("%+v, %v", s, err)
	}
	_, err = Salvage(Default, "x.nii", load(t, filepath.Join(testdata, "malformed/cut-short.nii")))
	wantFault(t, err, fault.Unsupported)
}
