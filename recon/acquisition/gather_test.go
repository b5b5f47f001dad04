package acquisition

import (
	"fmt"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/fault"
)

func TestNumberedArraysBecomeOne(t *testing.T) {
	var arrays []Array
	for _, s := range []int{10, 9, 8} { // in any order
		arrays = append(arrays, named(t, fmt.Sprintf("shots.%d.re", s), "V", []int{2}, []float64{float64(s), -1}))
	}
	for d := range 2 {
		for s := range 2 {
			arrays = append(arrays, named(t, fmt.Sprintf("c.%d.%d", d+1, s+1), "", nil, []float64{float64(10*d + s)}))
		}
	}
	arrays = append(arrays, named(t, "odd.1", "", []int{2}, []float64{1, 2}),
		named(t, "odd.2", "", []int{3}, []float64{1, 2, 3}),
		named(t, "lone.1", "", nil, []float64{1}), named(t, "r1_zero", "", nil, []float64{1}), named(t, "r2_zero", "",
			nil, []float64{2}))
	got := Gather(arrays)
	var names []string
	for _, a := range got {
		names = append(names, a.Name+" "+ShapeText(a.Shape))
	}
	want := []string{"shots.#.re [3, 2]", "c.#.# [2, 2]", "odd.1 [2]", "odd.2 [3]", "lone.1 []", "r1_zero []", "r2_zero []"}
	if !slices.Equal(names, want) {
		t.Fatalf("%q, want %q", names, want)
	}
	re, _ := got[0].Float64s()
	c, _ := got[1].Float64s()
	if !slices.Equal(re, []float64{8, -1, 9, -1, 10, -1}) || !slices.Equal(c, []float64{0, 1, 10, 11}) ||
		got[0].Unit != "V" {
		t.Errorf("%v, %v", re, c)
	}
}

func TestStackingKeepsElementsInPlace(t *testing.T) {
	column := Layout{Kind: Uint, Size: 1, FirstAxisFastest: true}
	a := mustArray(t, "a", []int{2, 3}, column, []byte{1, 2, 3, 4, 5, 6})
	b := mustArray(t, "b", []int{2, 3}, column, []byte{7, 8, 9, 10, 11, 12})
	got, err := Stack("x", []int{2}, []Array{a, b})
	if err != nil {
		t.Fatal(err)
	}
	values, _ := got.Float64s()
	if !slices.Equal(values, []float64{1, 3, 5, 2, 4, 6, 7, 9, 11, 8, 10, 12}) || !slices.Equal(got.Shape, []int{2, 2, 3}) {
		t.Errorf("%v of shape %v", values, got.Shape)
	}
	_, err = Stack("x", []int{2}, []Array{a, mustArray(t, "c", []int{6}, column, []byte{1, 2, 3, 4, 5, 6})})
	if f := wantFault(t, err, fault.BadFile); !strings.Contains(f.Text, "[6]") || !strings.Contains(f.Text, "[2, 3]") {
		t.Error(f)
	}
}

func TestCutArraysKeepWhatIsComplete(t *testing.T) {
	bytes := Layout{Kind: Uint, Size: 1}
	columns := Layout{Kind: Uint, Size: 1, FirstAxisFastest: true}
	for _, c := range []struct {
		layout Layout
		shape  []int
		have   int
		want   []int // nil for a fault
		axis   int
	}{
		{bytes, []int{4, 3, 2}, 23, []int{3, 3, 2}, 0},
		{bytes, []int{4, 3, 2}, 6, []int{1, 3, 2}, 0},
		{bytes, []int{4, 3, 2}, 5, nil, 0},
		{bytes, []int{1, 3, 2}, 5, []int{1, 2, 2}, 1},
		{columns, []int{2, 3, 4}, 23, []int{2, 3, 3}, 2},
		{columns, []int{2, 3, 1}, 5, []int{2, 2, 1}, 1},
		{bytes, nil, 0, nil, 0},
	} {
		a, err := CutArray("x", c.shape, c.layout, make([]byte, c.have))
		if c.want == nil {
			wantFault(t, err, fault.BadFile)
			continue
		}
		if err != nil || !slices.Equal(a.Shape, c.want) || a.Truncated == nil || a.Truncated.Axis != c.axis ||
			a.Truncated.Stated != c.shape[c.axis] {
			t.Errorf("%v: %v %+v, %v", c, a.Shape, a.Truncated, err)
		}
	}
}

// A signal that was cut takes its delays or its shots with it, and says so for good.
func TestACutSignalOpensWithAWarningThatStays(t *testing.T) {
	want := measured()
	cut := func(shape []int, have int) Array {
		whole, err := ArrayOf("signal", shape, want.Signal[:shape[0]*shape[1]*shape[2]])
		if err != nil {
			t.Fatal(err)
		}
		a, err := CutArray("signal", shape, whole.Layout(), whole.Raw()[:have*8])
		if err != nil {
			t.Fatal(err)
		}
		return a
	}
	for words, c := range map[string]struct {
		shape         []int
		have          int
		delays, shots int
	}{
		"2 complete delays of 3 are used": {[]int{3, 5, 8}, 2*40 + 17, 2, 5},
		"4 complete shots of 5 are used":  {[]int{1, 5, 8}, 39, 1, 4},
	} {
		source := *want
		source.Delays, source.DelayUS, source.Signal = c.shape[0], want.DelayUS[:c.shape[0]], want.Signal[:c.shape[0]*40]
		arrays, err := Arrays(&source)
		if err != nil {
			t.Fatal(err)
		}
		for i := range arrays {
			if arrays[i].Name == "signal" {
				arrays[i] = cut(c.shape, c.have)
			}
		}
		direct, warnings, err := FromArrays("traces.npz", arrays)
		if err != nil || len(warnings) != 1 {
			t.Fatal(warnings, err)
		}
		mapped, _, err := Apply("traces.npz", arrays, Propose(arrays))
		if err != nil {
			t.Fatal(err)
		}
		for _, a := range []*Acquisition{direct, mapped} {
			if a.Delays != c.delays || a.Shots != c.shots || len(a.Warnings) != 1 ||
				!strings.Contains(a.Warnings[0], words) {
				t.Errorf("%d delays, %d shots, %q", a.Delays, a.Shots, a.Warnings)
			}
		}
		again, err := Arrays(direct)
		if err != nil {
			t.Fatal(err)
		}
		back, _, err := FromArrays("saved.npz", again)
		if err != nil || !slices.Equal(back.Warnings, direct.Warnings) {
			t.Errorf("%q, %v", back.Warnings, err)
		}
	}
}
