package nufft

import (
	"math"
	"math/rand/v2"
	"testing"
)

// slowNormal is the definition, difference by difference, of one real image.
func slowNormal(n [3]int, points [][3]float64, weights, image []float64) []float64 {
	out := make([]float64, len(image))
	for i := range out {
		for i2, v := range image {
			a, b := voxelPlace(n, i), voxelPlace(n, i2)
			for j, k := range points {
				out[i] += v * weights[j] * math.Cos(2*math.Pi*(k[0]*(a[0]-b[0])+k[1]*(a[1]-b[1])+k[2]*(a[2]-b[2])))
			}
		}
	}
	return out
}

func positive(r *rand.Rand, count int) []float64 {
	out := make([]float64, count)
	for i := range out {
		out[i] = 0.1 + r.Float64()
	}
	return out
}

func TestNormalOperatorEqualsTheSlowSum(t *testing.T) {
	r := rand.New(rand.NewPCG(31, 32))
	for _, n := range [][3]int{{16, 1, 1}, {1, 1, 9}, {8, 7, 1}, {5, 1, 6}, {4, 5, 6}, {6, 6, 3}} {
		points := scattered(r, n, 30)
		points[3] = [3]float64{}
		weights := positive(r, len(points))
		normal, err := NewNormal[float64](n, points, weights, Settings{8, 2}, nil)
		if err != nil {
			t.Fatal(err)
		}
		voxels := n[0] * n[1] * n[2]
		const lanes = 3
		image := white[float64](r, voxels*2*lanes)
		got := append([]float64(nil), image...)
		work := normal.NewWork(lanes)
		last := 0.0
		work.Apply(got, func(done float64) { last = done })
		if last != 1 {
			t.Errorf("%v: progress ended at %g", n, last)
		}
		for c := range 2 * lanes { // every real image of every lane by itself
			column, out := make([]float64, voxels), make([]float64, voxels)
			for i := range voxels {
				column[i], out[i] = image[i*2*lanes+c], got[i*2*lanes+c]
			}
			// The error of the sum at width 8, for the small images here sampled at its rim.
			if e := relative(out, slowNormal(n, points, weights, column)); !(e <= rule(8, 2)) {
				t.Errorf("%v image %d: relative error %.3g", n, c, e)
			}
		}
	}
}

// A*WA by way of forward and adjoint sums over the points and their mirrors.
func TestNormalOperatorEqualsAdjointAfterForward(t *testing.T) {
	r := rand.New(rand.NewPCG(33, 34))
	n := [3]int{10, 12, 9}
	points := scattered(r, n, 120)
	weights := positive(r, len(points))
	for _, s := range []Settings{{4, 1.5}, {6, 1.5}, {6, 2}} {
		p, _ := NewPlan[float64](n, s)
		normal, err := NewNormal[float64](n, points, weights, s, nil)
		if err != nil {
			t.Fatal(err)
		}
		image := white[float64](r, 2*p.Voxels())
		for i := 1; i < len(image); i += 2 {
			image[i] = 0
		}
		values, _ := p.Forward(points, image, 1)
		g := p.NewGrid(1)
		real2 := make([]float64, 4*len(points))
		for j, w := range weights {
			real2[4*j], real2[4*j+1] = w/2*values[2*j], w/2*values[2*j+1]
		}
		if err := g.SpreadReal(points, real2); err != nil {
			t.Fatal(err)
		}
		want := make([]float64, len(image))
		g.Image(want, nil)
		got := append([]float64(nil), image...)
		normal.NewWork(1).Apply(got, nil)
		// Three sums, each with its own error.
		if e, most := relative(got, want), 3*Error(3, s.Width, s.Oversampling); !(e <= most) {
			t.Errorf("%+v: relative difference %.3g, want at most %.3g", s, e, most)
		}
	}
}

// Whatever the error of the sum that makes it, the operator is exactly symmetric, as conjugate gradients need.
func TestNormalOperatorIsSymmetric(t *testing.T) {
	r := rand.New(rand.NewPCG(35, 36))
	n := [3]int{9, 8, 7}
	points := scattered(r, n, 40)
	normal, err := NewNormal[float64](n, points, positive(r, 40), Settings{3, 1.25}, nil)
	if err != nil {
		t.Fatal(err)
	}
	x, y := white[float64](r, 2*9*8*7), white[float64](r, 2*9*8*7)
	nx, ny := append([]float64(nil), x...), append([]float64(nil), y...)
	work := normal.NewWork(1)
	work.Apply(nx, nil)
	work.Apply(ny, nil)
	left, right := inner(nx, y), inner(x, ny)
	if d := math.Hypot(left[0]-right[0], left[1]-right[1]); !(d <= 1e-12*norm(nx)*norm(y)) { // rounding
		t.Errorf("<Nx,y> = %v, <x,Ny> = %v", left, right)
	}
}

// Two real images in one lane, points entered once, equal two sums over points and mirrors.
func TestRealImagesShareALane(t *testing.T) {
	r := rand.New(rand.NewPCG(37, 38))
	n := [3]int{7, 8, 6}
	p, _ := NewPlan[float64](n, Settings{8, 2})
	points := scattered(r, n, 50)
	const lanes = 2
	values := white[float64](r, len(points)*4*lanes)
	g := p.NewGrid(lanes)
	if err := g.SpreadReal(points, values); err != nil {
		t.Fatal(err)
	}
	got := make([]float64, p.Voxels()*2*lanes)
	g.Image(got, nil)
	for c := range 2 * lanes {
		var want, out []float64
		for i := range p.Voxels() {
			x, sum := voxelPlace(n, i), 0.0
			for j, k := range points {
				sin, cos := math.Sincos(2 * math.Pi * (k[0]*x[0] + k[1]*x[1] + k[2]*x[2]))
				sum += 2 * (values[(j*2*lanes+c)*2]*cos - values[(j*2*lanes+c)*2+1]*sin)
			}
			want, out = append(want, sum), append(out, got[i*2*lanes+c])
		}
		if e := relative(out, want); !(e <= rule(8, 2)) {
			t.Errorf("image %d: relative error %.3g", c, e)
		}
	}
	wantFault(t, "half of the values", g.SpreadReal(points, values[:len(values)/2]))
	_, err := NewNormal[float64](n, points, []float64{1}, Settings{4, 1.5}, nil)
	wantFault(t, "one weight for many points", err)
	_, err = NewNormal[float64](n, points, make([]float64, 50), Settings{4, 9}, nil)
	wantFault(t, "a normal operator at oversampling 9", err)
}
