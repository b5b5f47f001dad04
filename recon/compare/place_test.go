package compare

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// plane fills a grid with a linear function, which trilinear interpolation reproduces.
func plane(g volume.Grid) ([]float32, func(mm [3]float64) float64) {
	f := func(mm [3]float64) float64 { return 3 + 0.5*mm[0] - 0.25*mm[1] + 2*mm[2] }
	out := make([]float32, g.Voxels())
	for i := range out {
		out[i] = float32(f([3]float64{g.MM(0, i%g.N[0]), g.MM(1, i/g.N[0]%g.N[1]), g.MM(2, i/g.N[0]/g.N[1])}))
	}
	return out, f
}

func TestProfileOfALinearMapIsExact(t *testing.T) {
	for _, g := range []volume.Grid{{N: [3]int{7, 6, 5}, VoxelMM: [3]float64{1, 0.5, 2}}, {N: [3]int{7, 6, 1}, VoxelMM: [3]float64{1, 0.5, 1}}} {
		values, f := plane(g)
		from, to := [3]float64{-2.5, 0.8, -3.1}, [3]float64{2.9, -1.4, 3.9}
		if g.Dim() == 2 {
			from[2], to[2] = 0, 0
		}
		p, err := ProfileOf(values, g, from, to, 9)
		if err != nil {
			t.Fatal(err)
		}
		for i, at := range p.AtMM {
			u := at / distance(from, to)
			mm := [3]float64{from[0] + u*(to[0]-from[0]), from[1] + u*(to[1]-from[1]), from[2] + u*(to[2]-from[2])}
			if !near(p.Values[i], f(mm), 1e-5) { // float32 of values near 10
				t.Errorf("%v: %g, want %g", mm, p.Values[i], f(mm))
			}
		}
	}
}

func TestProfileHasNoAnswerWhereAVoxelHasNone(t *testing.T) {
	g := volume.Grid{N: [3]int{6, 1, 1}, VoxelMM: [3]float64{1, 1, 1}} // centres -3..2
	values := []float32{0, 1, 2, nan32, 4, 5}
	p, err := ProfileOf(values, g, [3]float64{-3.5, 0, 0}, [3]float64{2.5, 0, 0}, 13)
	want := []float64{math.NaN(), 0, 0.5, 1, 1.5, 2, math.NaN(), math.NaN(), math.NaN(), 4, 4.5, 5, math.NaN()}
	for i, v := range p.Values {
		if v != v != (want[i] != want[i]) || v == v && !near(v, want[i], 1e-12) {
			t.Errorf("at %g mm: %g, want %g", p.AtMM[i]-3.5, v, want[i])
		}
	}
	if err != nil || len(p.Values) != len(want) {
		t.Errorf("%d values, %v", len(p.Values), err)
	}
	for _, bad := range []error{
		second(ProfileOf(values, g, [3]float64{}, [3]float64{}, 5)), second(ProfileOf(values, g, [3]float64{}, [3]float64{1}, 1)),
	} {
		if bad == nil || fault.From(bad).Kind != fault.BadSetting {
			t.Errorf("a line without length or points gives %v", bad)
		}
	}
}

func TestMapMovesOntoAnotherGrid(t *testing.T) {
	from := volume.Grid{N: [3]int{16, 16, 16}, VoxelMM: [3]float64{1, 1, 1}}
	to := volume.Grid{N: [3]int{20, 20, 20}, VoxelMM: [3]float64{0.7, 0.7, 0.7}}
	values, f := plane(from)
	got, err := OntoGrid(values, from, to)
	if err != nil {
		t.Fatal(err)
	}
	for i, v := range got {
		mm := [3]float64{to.MM(0, i%20), to.MM(1, i/20%20), to.MM(2, i/400)}
		if want := f(mm); !near(float64(v), want, 1e-5) { // float32
			t.Fatalf("%v: %g, want %g", mm, v, want)
		}
	}
	if same, err := OntoGrid(values, from, from); err != nil || !slices.Equal(same, values) {
		t.Errorf("a map on its own grid changes (%v)", err)
	}
	if _, err := OntoGrid(values, from, volume.Grid{N: [3]int{4, 4, 1}, VoxelMM: [3]float64{1, 1, 1}}); err == nil || fault.From(err).Kind != fault.Unsupported {
		t.Errorf("a volume onto a slice gives %v", err)
	}
}

func TestHistogramsShareTheirBinsAndLoseNothing(t *testing.T) {
	r := rand.New(rand.NewPCG(10, 10))
	a, b := make([]float32, 3000), make([]float32, 3000)
	region := make([]bool, 3000)
	for i := range a {
		a[i], b[i] = float32(r.NormFloat64()), float32(5+r.NormFloat64())
		region[i] = i >= 100
	}
	a[200], b[300] = nan32, 1e6
	h, err := HistogramsOf([][]float32{a, b}, region, 40)
	if err != nil {
		t.Fatal(err)
	}
	for m, want := range []int{2899, 2900} {
		total := h.Below[m] + h.Above[m]
		for _, c := range h.Counts[m] {
			total += c
		}
		if total != want {
			t.Errorf("map %d: %d values counted, want %d", m, total, want)
		}
	}
	if !(h.Edges[0] < -2 && h.Edges[40] > 7 && h.Edges[40] < 10) || h.Above[1] < 1 {
		t.Errorf("edges from %g to %g", h.Edges[0], h.Edges[40])
	}
	if _, err := HistogramsOf([][]float32{{nan32}}, nil, 4); err == nil || fault.From(err).Kind != fault.NoAnswer {
		t.Errorf("no values give %v", err)
	}
}
