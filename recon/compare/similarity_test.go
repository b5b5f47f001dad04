package compare

import (
	"math"
	"math/rand/v2"
	"testing"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

func flat(n int) volume.Grid { return volume.Grid{N: [3]int{n, n, 1}, VoxelMM: [3]float64{1, 1, 1}} }

func filled(n int, v float32) []float32 {
	out := make([]float32, n)
	for i := range out {
		out[i] = v
	}
	return out
}

// Expected values: evaluated independently of this project from the published formula, for L = 255.
func TestSimilarityAgainstKnownValues(t *testing.T) {
	s, err := SimilarityOf(filled(225, 100), filled(225, 110), flat(15), 255)
	if err != nil || !near(s.Mean, 0.995476444, 1e-9) || s.Windows != 25 { // nine digits; 15-10 windows each way
		t.Errorf("two constants give %.10f over %d windows, want 0.995476444 over 25 (%v)", s.Mean, s.Windows, err)
	}
	m := moments{meanX: 100, meanY: 110, varX: 400, varY: 225, cov: 240}
	if got := m.index(6.5025, 58.5225); !near(got, 0.784299659, 1e-9) {
		t.Errorf("index %.10f, want 0.784299659", got)
	}
}

func TestSimilarityEqualsTheSlowSum(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 9))
	for _, g := range []volume.Grid{flat(14), {N: [3]int{12, 13, 11}, VoxelMM: [3]float64{1, 1, 1}}} {
		x, y := make([]float32, g.Voxels()), make([]float32, g.Voxels())
		for i := range x {
			x[i] = float32(40 + 10*r.NormFloat64())
			y[i] = x[i]/2 + float32(20+5*r.NormFloat64())
		}
		s, err := SimilarityOf(x, y, g, 100)
		if err != nil {
			t.Fatal(err)
		}
		checked := 0
		for i, got := range s.Values {
			at := [3]int{i % g.N[0], i / g.N[0] % g.N[1], i / g.N[0] / g.N[1]}
			want := slowIndex(x, y, g, at)
			if !(want != want && got != got) && !near(float64(got), want, 1e-6) { // float32
				t.Fatalf("%v: %g, want %g", at, got, want)
			}
			if got == got {
				checked++
			}
		}
		if checked != s.Windows || checked == 0 {
			t.Errorf("%d windows, counted %d", checked, s.Windows)
		}
	}
}

// slowIndex evaluates the published formulas over the voxels of one window, with centred moments.
func slowIndex(x, y []float32, g volume.Grid, at [3]int) float64 {
	var weights, vx, vy []float64
	reach := [3]int{5, 5, 5}
	if g.N[2] == 1 {
		reach[2] = 0
	}
	for dz := -reach[2]; dz <= reach[2]; dz++ {
		for dy := -5; dy <= 5; dy++ {
			for dx := -5; dx <= 5; dx++ {
				ix, iy, iz := at[0]+dx, at[1]+dy, at[2]+dz
				if ix < 0 || iy < 0 || iz < 0 || ix >= g.N[0] || iy >= g.N[1] || iz >= g.N[2] {
					return math.NaN()
				}
				weights = append(weights, math.Exp(-float64(dx*dx+dy*dy+dz*dz)/(2*1.5*1.5)))
				vx, vy = append(vx, float64(x[g.Index(ix, iy, iz)])), append(vy, float64(y[g.Index(ix, iy, iz)]))
			}
		}
	}
	total, mx, my, sxx, syy, sxy := 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
	for i, w := range weights {
		total, mx, my = total+w, mx+w*vx[i], my+w*vy[i]
	}
	mx, my = mx/total, my/total
	for i, w := range weights {
		w /= total
		sxx, syy, sxy = sxx+w*(vx[i]-mx)*(vx[i]-mx), syy+w*(vy[i]-my)*(vy[i]-my), sxy+w*(vx[i]-mx)*(vy[i]-my)
	}
	const c1, c2 = 1, 9 // (0.01·100)², (0.03·100)²
	return (2*mx*my + c1) * (2*sxy + c2) / ((mx*mx + my*my + c1) * (sxx + syy + c2))
}

func TestSimilarityUsesWholeWindowsOnly(t *testing.T) {
	x, y := filled(225, 10), filled(225, 10)
	x[0] = nan32 // in the window of one voxel alone
	s, err := SimilarityOf(x, y, flat(15), 100)
	if err != nil || s.Windows != 24 || s.Mean != 1 {
		t.Errorf("%d windows of mean %g, want 24 of 1 (%v)", s.Windows, s.Mean, err)
	}
	y[7*15+7] = nan32 // in every window
	if _, err := SimilarityOf(x, y, flat(15), 100); err == nil || fault.From(err).Kind != fault.NoAnswer {
		t.Errorf("no whole window gives %v", err)
	}
	if _, err := SimilarityOf(x, y, flat(15), 0); err == nil || fault.From(err).Kind != fault.BadSetting {
		t.Errorf("no range gives %v", err)
	}
	if _, err := SimilarityOf(x, y[1:], flat(15), 1); err == nil || fault.From(err).Kind != fault.Bug {
		t.Errorf("maps of different size give %v", err)
	}
}

func TestSliceTakesThePlaneAskedFor(t *testing.T) {
	g := volume.Grid{N: [3]int{2, 3, 4}, VoxelMM: [3]float64{1, 2, 3}}
	values := make([]float32, g.Voxels())
	for i := range values {
		values[i] = float32(i)
	}
	for _, c := range []struct {
		axis, index int
		n           [3]int
		last        float32
	}{{0, 1, [3]int{3, 4, 1}, 23}, {1, 0, [3]int{2, 4, 1}, 19}, {2, 3, [3]int{2, 3, 1}, 23}, {2, 0, [3]int{2, 3, 1}, 5}} {
		got, flat, err := Slice(values, g, c.axis, c.index)
		if err != nil || flat.N != c.n || got[len(got)-1] != c.last || len(got) != flat.Voxels() {
			t.Errorf("%+v: %v %v %v", c, flat, got, err)
		}
	}
	if _, _, err := Slice(values, g, 1, 3); err == nil || fault.From(err).Kind != fault.BadSetting {
		t.Errorf("a slice beyond the image gives %v", err)
	}
}
