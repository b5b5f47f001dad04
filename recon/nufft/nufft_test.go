package nufft

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"torrloom/recon/fault"
)

// sizes are one- to three-dimensional images, even, odd and uneven.
var sizes = [][3]int{{40, 1, 1}, {1, 1, 32}, {33, 1, 1}, {24, 20, 1}, {15, 21, 1}, {12, 1, 10}, {12, 9, 10}, {8, 8, 8}, {2, 3, 5}}

func scattered(r *rand.Rand, n [3]int, count int) [][3]float64 {
	out := make([][3]float64, count)
	for j := range out {
		for i := range n {
			out[j][i] = (r.Float64() - 0.5) * float64(n[i])
		}
	}
	return out
}

func white[F Float](r *rand.Rand, count int) []F {
	out := make([]F, count)
	for i := range out {
		out[i] = F(r.NormFloat64())
	}
	return out
}

// place of voxel i of an image, in fields of view.
func voxelPlace(n [3]int, i int) [3]float64 {
	ix, iy, iz := i%n[0], i/n[0]%n[1], i/n[0]/n[1]
	return [3]float64{float64(ix-n[0]/2) / float64(n[0]), float64(iy-n[1]/2) / float64(n[1]), float64(iz-n[2]/2) / float64(n[2])}
}

// slowAdjoint is the definition, term by term.
func slowAdjoint[F Float](n [3]int, points [][3]float64, values []F, lanes int) []float64 {
	out := make([]float64, n[0]*n[1]*n[2]*2*lanes)
	for i := range n[0] * n[1] * n[2] {
		x := voxelPlace(n, i)
		for j, k := range points {
			sin, cos := math.Sincos(2 * math.Pi * (k[0]*x[0] + k[1]*x[1] + k[2]*x[2]))
			for l := range lanes {
				re, im := float64(values[(j*lanes+l)*2]), float64(values[(j*lanes+l)*2+1])
				out[(i*lanes+l)*2] += re*cos - im*sin
				out[(i*lanes+l)*2+1] += re*sin + im*cos
			}
		}
	}
	return out
}

func slowForward[F Float](n [3]int, points [][3]float64, image []F, lanes int) []float64 {
	out := make([]float64, len(points)*2*lanes)
	for i := range n[0] * n[1] * n[2] {
		x := voxelPlace(n, i)
		for j, k := range points {
			sin, cos := math.Sincos(-2 * math.Pi * (k[0]*x[0] + k[1]*x[1] + k[2]*x[2]))
			for l := range lanes {
				re, im := float64(image[(i*lanes+l)*2]), float64(image[(i*lanes+l)*2+1])
				out[(j*lanes+l)*2] += re*cos - im*sin
				out[(j*lanes+l)*2+1] += re*sin + im*cos
			}
		}
	}
	return out
}

// relative returns |got - want|/|want| in the root mean square.
func relative[F Float](got []F, want []float64) float64 {
	sum, norm := 0.0, 0.0
	for i, w := range want {
		d := float64(got[i]) - w
		sum, norm = sum+d*d, norm+w*w
	}
	return math.Sqrt(sum / norm)
}

func dimensions(n [3]int) int {
	dim := 0
	for _, v := range n {
		if v > 1 {
			dim++
		}
	}
	return dim
}

// Oversampling 2: the rule 10^-(w-1) of Barnett, Magland & af Klinteberg, SIAM J. Sci. Comput. 41 (2019) C479, with ten
// times of room. Below: their estimate exp(-πw√(1-1/σ)) of what any kernel can do, in the same form.
func rule(width int, oversampling float64) float64 {
	if oversampling == 2 {
		return 10 * math.Pow(10, -float64(width-1))
	}
	return 10 * math.Exp(-math.Pi*float64(width-1)*math.Sqrt(1-1/oversampling))
}

func TestSumsEqualTheSlowSumsToTheAccuracyOfTheWidth(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 12))
	for _, n := range sizes {
		const lanes = 2
		points := scattered(r, n, 150)
		values, image := white[float64](r, len(points)*2*lanes), white[float64](r, n[0]*n[1]*n[2]*2*lanes)
		wantImage, wantValues := slowAdjoint(n, points, values, lanes), slowForward(n, points, image, lanes)
		for _, s := range everySetting() {
			p, err := NewPlan[float64](n, s)
			if err != nil {
				t.Fatal(err)
			}
			gotImage, err := p.Adjoint(points, values, lanes)
			if err != nil {
				t.Fatal(err)
			}
			gotValues, err := p.Forward(points, image, lanes)
			if err != nil {
				t.Fatal(err)
			}
			worst := math.Max(relative(gotImage, wantImage), relative(gotValues, wantValues))
			if most := rule(s.Width, s.Oversampling); !(worst <= most) {
				t.Errorf("%v %+v: relative error %.3g, the rule allows %.3g", n, s, worst, most)
			}
		}
	}
}

func everySetting() []Settings {
	var out []Settings
	for _, oversampling := range []float64{1.25, 1.5, 2} {
		for width := MinWidth; width <= MaxWidth; width++ {
			out = append(out, Settings{width, oversampling})
		}
	}
	return out
}

// The predicted error is not merely a bound: where the transform length is the one asked for, it is what comes out.
func TestErrorIsTheOnePredicted(t *testing.T) {
	r := rand.New(rand.NewPCG(13, 14))
	for _, n := range [][3]int{{64, 1, 1}, {32, 32, 1}, {16, 16, 16}} {
		points := scattered(r, n, 200)
		values := white[float64](r, len(points)*2)
		slow := slowAdjoint(n, points, values, 1)
		for _, s := range everySetting() {
			p, err := NewPlan[float64](n, s)
			if err != nil {
				t.Fatal(err)
			}
			image, err := p.Adjoint(points, values, 1)
			if err != nil {
				t.Fatal(err)
			}
			got, want := relative(image, slow), Error(dimensions(n), s.Width, s.Oversampling)
			// 200 random points scatter by about a tenth; the polynomials add 2 %, coarse images sample the rim more.
			if !(got <= 1.6*want && got >= 0.6*want) {
				t.Errorf("%v %+v: relative error %.3g, predicted %.3g", n, s, got, want)
			}
		}
	}
}

func TestSinglePrecisionAddsOnlyItsRounding(t *testing.T) {
	r := rand.New(rand.NewPCG(15, 16))
	n := [3]int{16, 12, 14}
	for width := MinWidth; width <= MaxWidth; width++ {
		double, _ := NewPlan[float64](n, Settings{width, 2})
		single, err := NewPlan[float32](n, Settings{width, 2})
		if err != nil {
			t.Fatal(err)
		}
		points := scattered(r, n, 200)
		values := white[float32](r, len(points)*2*3)
		wide := make([]float64, len(values))
		for i, v := range values {
			wide[i] = float64(v)
		}
		want, _ := double.Adjoint(points, wide, 3)
		got, err := single.Adjoint(points, values, 3)
		if err != nil {
			t.Fatal(err)
		}
		// 6e-8 per operation; the divisor at the rim is up to 300 times smaller than in the middle at width 8.
		if e := relative(got, want); !(e <= 1e-5) {
			t.Errorf("width %d: single and double precision differ by %.3g", width, e)
		}
	}
}

func TestForwardAndAdjointAreAdjoint(t *testing.T) {
	r := rand.New(rand.NewPCG(17, 18))
	for _, n := range sizes {
		for _, s := range []Settings{{3, 1.25}, {4, 1.5}, {7, 2}} {
			p, err := NewPlan[float64](n, s)
			if err != nil {
				t.Fatal(err)
			}
			points := scattered(r, n, 60)
			x, y := white[float64](r, p.Voxels()*2), white[float64](r, len(points)*2)
			ax, _ := p.Forward(points, x, 1)
			ay, _ := p.Adjoint(points, y, 1)
			left, right := inner(ax, y), inner(x, ay)
			// Rounding, against the product of the norms.
			if d := math.Hypot(left[0]-right[0], left[1]-right[1]); !(d <= 1e-10*math.Hypot(left[0], left[1])+1e-12*norm(x)*norm(ay)) {
				t.Errorf("%v %+v: <Ax,y> = %v, <x,A*y> = %v", n, s, left, right)
			}
		}
	}
}

// inner returns Σ a conj(b) over pairs.
func inner(a, b []float64) [2]float64 {
	var out [2]float64
	for i := 0; i < len(a); i += 2 {
		out[0] += a[i]*b[i] + a[i+1]*b[i+1]
		out[1] += a[i+1]*b[i] - a[i]*b[i+1]
	}
	return out
}

func norm(a []float64) float64 { return math.Sqrt(inner(a, a)[0]) }

// On the edge of k-space, beyond it and far beyond, k and k + n are the same point.
func TestPointsOnAndBeyondTheEdgeEqualTheSlowSum(t *testing.T) {
	for _, n := range [][3]int{{16, 1, 1}, {15, 12, 1}, {8, 10, 6}} {
		p, err := NewPlan[float64](n, Settings{7, 2})
		if err != nil {
			t.Fatal(err)
		}
		for _, share := range []float64{0.5, -0.5, 0.5 + 1e-12, -0.5 - 1e-12, 0.53, -0.77, 1, 7.123, -1e-300, -1e-17, 0} {
			points := [][3]float64{{share * float64(n[0]), share * float64(n[1]), -share * float64(n[2])}}
			values := []float64{0.6, -0.8}
			got, err := p.Adjoint(points, values, 1)
			if err != nil {
				t.Fatal(err)
			}
			if e := relative(got, slowAdjoint(n, points, values, 1)); !(e <= rule(7, 2)) {
				t.Errorf("%v, k = %g of the edge: relative error %.3g", n, 2*share, e)
			}
		}
	}
}

// Lanes do not mix, and their number does not matter.
func TestLanesAreIndependent(t *testing.T) {
	r := rand.New(rand.NewPCG(19, 20))
	n := [3]int{9, 10, 8}
	p, _ := NewPlan[float32](n, Settings{4, 1.5})
	points := scattered(r, n, 40)
	for _, lanes := range []int{2, 5, 31} {
		values := white[float32](r, len(points)*2*lanes)
		together, err := p.Adjoint(points, values, lanes)
		if err != nil {
			t.Fatal(err)
		}
		for l := range lanes {
			alone := make([]float32, 0, 2*len(points))
			for j := range points {
				alone = append(alone, values[(j*lanes+l)*2:(j*lanes+l)*2+2]...)
			}
			image, _ := p.Adjoint(points, alone, 1)
			for i := range p.Voxels() {
				for c := range 2 {
					if d := math.Abs(float64(image[2*i+c] - together[(i*lanes+l)*2+c])); !(d <= 2e-5) { // rounding
						t.Fatalf("lane %d of %d, voxel %d: alone %g, together %g", l, lanes, i, image[2*i+c], together[(i*lanes+l)*2+c])
					}
				}
			}
		}
	}
}

// Spreading in parts and reusing a grid give the same sum, and progress ends at 1 without going back.
func TestGridsAddUpAndCanBeUsedAgain(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 22))
	n := [3]int{10, 9, 8}
	p, _ := NewPlan[float64](n, Settings{5, 1.5})
	points := scattered(r, n, 50)
	values := white[float64](r, len(points)*2)
	want, _ := p.Adjoint(points, values, 1)
	g := p.NewGrid(1)
	got := make([]float64, p.Voxels()*2)
	for range 2 {
		g.Reset()
		_ = g.Spread(points[:20], values[:40])
		_ = g.Spread(points[20:], values[40:])
		last := 0.0
		g.Image(got, func(done float64) {
			if !(done > last) {
				t.Errorf("progress went from %g to %g", last, done)
			}
			last = done
		})
		if last != 1 {
			t.Errorf("progress ended at %g", last)
		}
		if e := relative(got, want); !(e <= 1e-14) { // the same operations in the same order
			t.Errorf("in parts the sum differs by %.3g", e)
		}
	}
}

func TestBadSettingsAndArraysAreRefused(t *testing.T) {
	n := [3]int{8, 8, 1}
	for _, s := range []Settings{{2, 1.5}, {9, 1.5}, {0, 0}, {4, 1.2}, {4, 2.01}, {4, math.NaN()}, {4, math.Inf(1)}} {
		_, err := NewPlan[float32](n, s)
		wantFault(t, fmt.Sprintf("%+v", s), err)
	}
	_, err := NewPlan[float32]([3]int{8, 0, 1}, Settings{4, 1.5})
	wantFault(t, "no voxels", err)
	_, err = Width(1e-9, 1.25)
	wantFault(t, "a tolerance out of reach", err)
	_, err = Width(math.NaN(), 1.5)
	wantFault(t, "no tolerance", err)
	_, err = Width(1e-3, 3)
	wantFault(t, "width at oversampling 3", err)
	p, _ := NewPlan[float32](n, Settings{4, 1.5})
	_, err = p.Adjoint([][3]float64{{1, 2, 0}}, make([]float32, 3), 1)
	wantFault(t, "too few values", err)
	_, err = p.Adjoint([][3]float64{{1, math.NaN(), 0}}, make([]float32, 2), 1)
	wantFault(t, "a point nowhere", err)
	_, err = p.Adjoint([][3]float64{{math.Inf(-1), 0, 0}}, make([]float32, 2), 1)
	wantFault(t, "a point at infinity", err)
	_, err = p.Forward([][3]float64{{1, 2, 0}}, make([]float32, 7), 1)
	wantFault(t, "a short image", err)
}

func wantFault(t *testing.T, what string, err error) {
	t.Helper()
	var f *fault.Fault
	if !errors.As(err, &f) || f.Kind != fault.BadSetting {
		t.Errorf("%s: got %v, want a bad-setting fault", what, err)
	}
}
