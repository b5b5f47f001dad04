package region

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"testing"

	"torrloom/recon/volume"
)

func grid(t *testing.T, dim, n int) volume.Grid {
	t.Helper()
	g, err := volume.Cube(dim, n, float64(n)*0.5)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

func scattered(g volume.Grid, share float64, seed uint64) Mask {
	r, m := rand.New(rand.NewPCG(seed, 1)), make(Mask, g.Voxels())
	for i := range m {
		m[i] = r.Float64() < share
	}
	return m
}

func centre(g volume.Grid, i int) [3]float64 {
	return [3]float64{g.MM(0, i%g.N[0]), g.MM(1, i/g.N[0]%g.N[1]), g.MM(2, i/(g.N[0]*g.N[1]))}
}

// Every voxel against every marked one: the definition of the distance, which the fast transform must reproduce.
func TestSquaredDistanceEqualsTheSlowSearch(t *testing.T) {
	for _, dim := range []int{2, 3} {
		g := grid(t, dim, 9)
		m := scattered(g, 0.05, uint64(dim))
		for i, got := range SquaredDistance(g, m) {
			want := math.Inf(1)
			for j, in := range m {
				if in {
					want = math.Min(want, math.Pow(distanceMM(centre(g, i), centre(g, j)), 2))
				}
			}
			if !(math.Abs(got-want) <= 1e-9) { // rounding of squares of some mm
				t.Fatalf("%dD voxel %d: %g, want %g", dim, i, got, want)
			}
		}
	}
}

// A sphere holds its volume, and grown by a margin it is the larger sphere but for voxels of its rim.
func TestSphereHasItsVolumeAndGrowsByItsMargin(t *testing.T) {
	g := grid(t, 3, 48)
	for _, c := range []struct{ radius, margin float64 }{{6, 0}, {6, 2}, {8, -2}} {
		d := Definition{Name: "ball", MarginMM: c.margin, Parts: []Part{{Combine: "add", Ellipsoid: &Ellipsoid{CentreMM: [3]float64{0.3, -0.2, 0.1}, SemiMM: [3]float64{c.radius, c.radius, c.radius}}}}}
		m, err := d.Make(g, Context{})
		if err != nil {
			t.Fatal(err)
		}
		want := 4 * math.Pi / 3 * math.Pow(c.radius+c.margin, 3)
		got := float64(m.Count()) * g.VoxelMM[0] * g.VoxelMM[1] * g.VoxelMM[2]
		if !(math.Abs(got/want-1) <= 0.1) { // margins run from voxel centre to voxel centre: half a voxel of the radius
			t.Errorf("radius %g, margin %g: %.0f mm³, want %.0f", c.radius, c.margin, got, want)
		}
	}
}

func TestCombinationsFollowSetAlgebra(t *testing.T) {
	g := grid(t, 2, 20)
	a, b := scattered(g, 0.4, 1), scattered(g, 0.5, 2)
	u, i, d := Union(a, b), Intersection(a, b), Minus(a, b)
	if u.Count() != a.Count()+b.Count()-i.Count() || d.Count() != a.Count()-i.Count() {
		t.Errorf("%d or %d: union %d, both %d, difference %d", a.Count(), b.Count(), u.Count(), i.Count(), d.Count())
	}
	for v := range a {
		if u[v] != (a[v] || b[v]) || i[v] != (a[v] && b[v]) || d[v] != (a[v] && !b[v]) {
			t.Fatalf("voxel %d is wrong", v)
		}
	}
}

// Two balls that do not touch are two pieces: a seed finds its own, and the largest is the larger.
func TestConnectedPiecesAreToldApart(t *testing.T) {
	g := grid(t, 3, 24)
	ball := func(x, r float64) Mask {
		m, err := (&Ellipsoid{CentreMM: [3]float64{x, 0, 0}, SemiMM: [3]float64{r, r, r}}).mask(g, Context{})
		if err != nil {
			t.Fatal(err)
		}
		return m
	}
	small, large := ball(-3.5, 1.2), ball(2.5, 2)
	both := Union(small, large)
	seed, inside := VoxelAt(g, [3]float64{-3.5, 0, 0})
	for _, neighbours := range []int{6, 26} {
		got := Connected(g, both, seed, neighbours)
		if !inside || got.Count() != small.Count() || Minus(got, small).Count() != 0 {
			t.Errorf("%d neighbours: %d voxels from the seed, want %d", neighbours, got.Count(), small.Count())
		}
		if most := Largest(g, both, neighbours); most.Count() != large.Count() || Minus(most, large).Count() != 0 {
			t.Errorf("%d neighbours: the largest piece has %d voxels, want %d", neighbours, most.Count(), large.Count())
		}
	}
}

func TestAlignmentFindsAKnownTurnAndShift(t *testing.T) {
	sin, cos := math.Sincos(0.7)
	known := Rigid{Turn: [3][3]float64{{cos, -sin, 0}, {sin, cos, 0}, {0, 0, 1}}, ShiftMM: [3]float64{3, -2, 5}}
	var marks []Landmark
	for _, p := range [][3]float64{{1, 2, 3}, {-4, 0, 2}, {2, -5, 1}, {0, 3, -6}, {4, 4, 0}} {
		marks = append(marks, Landmark{FromMM: p, ToMM: known.Forth(p)})
	}
	a, err := Align(marks)
	if err != nil {
		t.Fatal(err)
	}
	if !(a.RMSMM <= 1e-12) || !(math.Abs(a.AngleDeg-0.7*180/math.Pi) <= 1e-9) {
		t.Errorf("residual %g mm, angle %g°", a.RMSMM, a.AngleDeg)
	}
	for _, p := range [][3]float64{{7, 1, -2}, {0, 0, 0}} {
		if d := distanceMM(a.Move.Forth(p), known.Forth(p)); !(d <= 1e-12) || !(distanceMM(a.Move.Back(known.Forth(p)), p) <= 1e-12) {
			t.Errorf("%v lands %g mm from its place", p, d)
		}
	}
	if _, err := Align([]Landmark{{FromMM: [3]float64{0, 0, 0}}, {FromMM: [3]float64{1, 0, 0}, ToMM: [3]float64{1, 0, 0}}, {FromMM: [3]float64{2, 0, 0}, ToMM: [3]float64{2, 0, 0}}}); err == nil {
		t.Error("landmarks on one line were accepted")
	}
}

func TestFaultyDefinitionsAreRefused(t *testing.T) {
	for _, text := range []string{
		`{"name":"a","parts":[{"combine":"add","sphere":{}}]}`,
		`{"name":"","parts":[{"combine":"add","ellipsoid":{"centreMM":[0,0,0],"semiMM":[1,1,1]}}]}`,
		`{"name":"a","parts":[]}`,
		`{"name":"a","parts":[{"combine":"add"}]}`,
		`{"name":"a","parts":[{"combine":"glue","ellipsoid":{"centreMM":[0,0,0],"semiMM":[1,1,1]}}]}`,
		`{"name":"a","parts":[{"combine":"add","ellipsoid":{"centreMM":[0,0,0],"semiMM":[1,0,1]}}]}`,
	} {
		var d Definition
		err := json.Unmarshal([]byte(text), &d)
		if err == nil {
			err = d.Check()
		}
		if err == nil {
			t.Errorf("%s was accepted", text)
		}
	}
}
