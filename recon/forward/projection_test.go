package forward

import (
	"math"
	"testing"

	"torrloom/recon/volume"
)

func cube(t *testing.T, dim, matrix int, fieldMM float64) volume.Grid {
	t.Helper()
	g, err := volume.Cube(dim, matrix, fieldMM)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// fill returns the values of f at the voxel centres.
func fill(g volume.Grid, f func(x, y, z float64) float64) []float32 {
	out := make([]float32, g.Voxels())
	for iz := range g.N[2] {
		for iy := range g.N[1] {
			for ix := range g.N[0] {
				z := g.MM(2, iz)
				if g.Dim() == 2 {
					z = 0
				}
				out[g.Index(ix, iy, iz)] = float32(f(g.MM(0, ix), g.MM(1, iy), z))
			}
		}
	}
	return out
}

func positions(from, to float64, n int) []float64 {
	var out []float64
	for i := range n {
		out = append(out, from+(to-from)*float64(i)/float64(n-1))
	}
	return out
}

// A Gaussian of width σ around c integrates over planes to (2π σ²)^((dim-1)/2)·exp(-(x-c·n)²/2σ²), whatever the direction.
func TestAGaussianProjectsToAGaussianInEveryDirection(t *testing.T) {
	const sigma = 3.0
	centre := [3]float64{1.5, -2, 0.7}
	for dim, directions := range map[int][][3]float64{
		2: {{1, 0, 0}, {0, -1, 0}, {0.6, 0.8, 0}},
		3: {{1, 0, 0}, {0, 0, 1}, {0.6, 0, -0.8}, {0.48, 0.6, 0.64}},
	} {
		g := cube(t, dim, 48, 36)
		image := fill(g, func(x, y, z float64) float64 {
			if dim == 2 {
				z = centre[2]
			}
			d := (x-centre[0])*(x-centre[0]) + (y-centre[1])*(y-centre[1]) + (z-centre[2])*(z-centre[2])
			return math.Exp(-d / (2 * sigma * sigma))
		})
		height := math.Pow(2*math.Pi*sigma*sigma, float64(dim-1)/2)
		for _, n := range directions {
			x := positions(-14, 14, 113)
			middle := centre[0]*n[0] + centre[1]*n[1]
			if dim == 3 {
				middle += centre[2] * n[2]
			}
			for i, p := range Projection(g, image, n, x) {
				want := height * math.Exp(-(x[i]-middle)*(x[i]-middle)/(2*sigma*sigma))
				// Between two rows of voxels (w = 0.75 mm) a straight line misses the peak by w²/8σ² = 0.78 %.
				if !(math.Abs(p-want) <= 0.008*height) {
					t.Fatalf("%dD along %v at %.2f mm: %.4f, want %.4f", dim, n, x[i], p, want)
				}
			}
		}
	}
}

// The sum over positions is the sum over the image, for an image without any smoothness.
func TestNothingOfTheImageIsLost(t *testing.T) {
	g := cube(t, 3, 20, 20)
	sum := 0.0
	image := fill(g, func(x, y, z float64) float64 { return math.Sin(17*x+5*y*y-3*z) + 0.3 })
	for _, v := range image {
		sum += float64(v)
	}
	// Positions a sixth of a voxel apart add up a triangle of whole multiples of them exactly.
	x := positions(-20, 20, 241)
	got := 0.0
	for _, p := range Projection(g, image, [3]float64{0.48, 0.6, 0.64}, x) {
		got += p * 40 / 240
	}
	if !(math.Abs(got-sum) <= 1e-9*float64(len(image))) { // rounding of as many sums
		t.Errorf("%.9g of %.9g is left", got, sum)
	}
}

// The opposite direction sees the mirror image.
func TestOppositeDirectionsSeeMirrorImages(t *testing.T) {
	g := cube(t, 2, 32, 24)
	image := fill(g, func(x, y, _ float64) float64 { return math.Max(0, 8-math.Hypot(x-1, y+2)) * (1 + 0.2*x) })
	x := positions(-12, 12, 97)
	there, back := Projection(g, image, [3]float64{0.6, 0.8, 0}, x), Projection(g, image, [3]float64{-0.6, -0.8, 0}, x)
	for i := range x {
		if !(math.Abs(there[i]-back[len(x)-1-i]) <= 1e-9) { // rounding
			t.Fatalf("at %.2f mm %.6f, mirrored %.6f", x[i], there[i], back[len(x)-1-i])
		}
	}
}

func TestVoxelsWithoutAValueCountAsNothing(t *testing.T) {
	g := cube(t, 2, 8, 8)
	image := fill(g, func(x, y, _ float64) float64 { return 1 })
	image[g.Index(3, 3, 0)] = float32(math.NaN())
	for i, p := range Projection(g, image, [3]float64{1, 0, 0}, positions(-3, 3, 7)) {
		if !(p >= 7-1e-9 && p <= 8+1e-9) {
			t.Errorf("position %d: %g", i, p)
		}
	}
}
