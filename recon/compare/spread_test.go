package compare

import (
	"fmt"
	"math"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/gridding"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// hardEdge is the width of the point spread that ends at k_max without a window, times k_max: twice the root of
// 2 J₁(x)/x = ½ in 2D and of 3(sin x - x cos x)/x³ = ½ in 3D over 2π, computed independently of this project.
var hardEdge = map[int]float64{2: 0.705084845, 3: 0.795219434}

var pointChains = map[int]chain{2: {48, 24, "none", 1}, 3: {28, 24, "none", 1}}

func within(t *testing.T, what string, got, want, share float64) {
	t.Helper()
	if !(math.Abs(got/want-1) <= share) {
		t.Errorf("%s: %.5g, want %.5g within %g %%", what, got, want, 100*share)
	}
}

func TestPointThroughTheWholeChainHasTheClosedFormWidth(t *testing.T) {
	for dim, spokes := range map[int]int{2: 120, 3: 700} {
		a, c := shots(t, dim, spokes, 0, 1), pointChains[dim]
		for _, at := range [][3]float64{{}, {3.3, -4.1, 2.2}, {0.2, 6.4, -3.7}} {
			if dim == 2 {
				at[2] = 0
			}
			s := condition.Defaults()
			point, err := Point{AtMM: at}.Measured(a, s)
			if err != nil {
				t.Fatal(err)
			}
			image := c.images(t, point, PointSettings(s), PointConstants(noObject))
			p, err := SpreadOf(image, c.grid(t, dim), at)
			if err != nil {
				t.Fatal(err)
			}
			for axis := range dim {
				within(t, fmt.Sprintf("%dD width at %v along %d", dim, at, axis), p.WidthMM[axis]*c.kCut(a), hardEdge[dim], 0.03) // as agreed
			}
			if distance(p.PeakMM, at) > 0.05 { // a tenth of a voxel
				t.Errorf("%dD point at %v has its peak at %v", dim, at, p.PeakMM)
			}
		}
	}
}

func TestPointSpokesThroughGriddingHaveTheClosedFormWidth(t *testing.T) {
	for dim, spokes := range map[int]int{2: 120, 3: 700} {
		a, c := shots(t, dim, spokes, 0, 1), pointChains[dim]
		sp, axis, filter := c.spokes(t, a, PointSettings(condition.Defaults()), noObject)
		at := [3]float64{-2.7, 5.2, 0}
		image, err := gridding.Images(PointSpokes(sp, at), c.grid(t, dim), perSample(sp, axis, filter), gridding.Defaults(), nil)
		if err != nil {
			t.Fatal(err)
		}
		p, err := SpreadOf(image, c.grid(t, dim), at)
		if err != nil {
			t.Fatal(err)
		}
		for x := range dim {
			within(t, fmt.Sprintf("%dD width along %d", dim, x), p.WidthMM[x]*c.kCut(a), hardEdge[dim], 0.03) // as agreed
		}
	}
}

// radial returns Σ over k of shape(k)·kernel(2πk r): what a point spread or covariance is for spokes in every direction.
func radial(dim int, shape func(k float64) float64, kMax float64) func(r float64) float64 {
	const steps = 1000
	return func(r float64) float64 {
		sum := 0.0
		for i := range steps {
			k := (float64(i) + 0.5) / steps * kMax
			x := 2 * math.Pi * k * r
			kernel := math.J0(x)
			if dim == 3 {
				kernel = sinc(x / math.Pi)
			}
			sum += shape(k) * kernel
		}
		return sum
	}
}

// fullWidth returns the full width at half maximum: a scan in steps of 0.05 mm, then halving.
func fullWidth(f func(float64) float64) float64 {
	half, from := f(0)/2, 0.0
	for f(from+0.05) > half {
		from += 0.05
	}
	for step := 0.025; step > 1e-5; step /= 2 {
		if f(from+step) > half {
			from += step
		}
	}
	return 2 * from
}

// Widths of every window against quadrature over the radius, for the point spread (weight k^(dim-1)) and for the noise
// (its square per unit of k).
func TestOperatorWidthsEqualQuadratureForEveryWindow(t *testing.T) {
	for dim, spokes := range map[int]int{2: 120, 3: 700} {
		a := shots(t, dim, spokes, 0, 1)
		for _, w := range sampling.Windows {
			c := pointChains[dim]
			c.window, c.cutoff = w.Name, 0.9
			cut := c.kCut(a)
			s, err := c.operator(t, a).Sharpness(c.grid(t, dim))
			if err != nil {
				t.Fatal(err)
			}
			power := float64(dim - 1)
			point := fullWidth(radial(dim, func(k float64) float64 { return math.Pow(k, power) * w.Weight(k/cut) }, cut))
			noise := fullWidth(radial(dim, func(k float64) float64 { return math.Pow(k, 2*power) * math.Pow(w.Weight(k/cut), 2) }, cut))
			if w.Name == "none" {
				within(t, "the quadrature itself", point*cut, hardEdge[dim], 1e-4) // 1000 midpoints
			}
			for axis := range dim {
				// Half a step beyond or before the cutoff: 1/(2·Half), Half being 46 in 2D and 30 in 3D.
				within(t, fmt.Sprintf("%dD %s point along %d", dim, w.Name, axis), s.Point.WidthMM[axis], point, 0.03)
				within(t, fmt.Sprintf("%dD %s noise along %d", dim, w.Name, axis), s.NoiseWidthMM[axis], noise, 0.03)
			}
		}
	}
}

// The first ring of the disc and the ball: the deepest values of 2 J₁(x)/x and 3(sin x - x cos x)/x³ are -0.1323 and -0.0862.
func TestRingsAreThoseOfDiscAndBall(t *testing.T) {
	for dim, want := range map[int]float64{2: 0.1323, 3: 0.0862} {
		a := shots(t, dim, map[int]int{2: 200, 3: 1200}[dim], 0, 1)
		s, err := pointChains[dim].operator(t, a).Sharpness(pointChains[dim].grid(t, dim))
		if err != nil || !near(s.Point.Ring, want, 0.01) { // samples of k-space in place of a ball
			t.Errorf("%dD ring %.4f, want %.4f (%v)", dim, s.Point.Ring, want, err)
		}
	}
}

// Readout decay multiplies k-space by exp(-R|t|), |t| = |k|/((γ/2π) G).
func TestReadoutDecayWidensThePoint(t *testing.T) {
	a, c := shots(t, 2, 120, 0, 1), pointChains[2]
	s := condition.Defaults()
	const decay = 3 // 1/µs
	point, err := Point{DecayPerUS: decay}.Measured(a, s)
	if err != nil {
		t.Fatal(err)
	}
	p, err := SpreadOf(c.images(t, point, PointSettings(s), PointConstants(noObject)), c.grid(t, 2), [3]float64{})
	if err != nil {
		t.Fatal(err)
	}
	perUS := acquisition.KPerNS(20, 1000)
	want := fullWidth(radial(2, func(k float64) float64 { return k * math.Exp(-decay*k/perUS) }, c.kCut(a)))
	within(t, "width", p.WidthMM[0], want, 0.03) // as for the point without decay
	if !(want*c.kCut(a) > 1.2*hardEdge[2]) {
		t.Errorf("the decay hardly matters here: %.3f", want*c.kCut(a))
	}
}

// A shift of time zero that corrects the file is right by assumption, so the point it shows is as sharp as without one.
func TestPointFollowsTheCorrectedTimeZero(t *testing.T) {
	a, c := shots(t, 2, 120, 0, 1), pointChains[2]
	s := condition.Defaults()
	s.TimeShiftSamples = -12.5
	point, err := Point{AtMM: [3]float64{4, 1, 0}}.Measured(a, s)
	if err != nil {
		t.Fatal(err)
	}
	p, err := SpreadOf(c.images(t, point, PointSettings(s), PointConstants(noObject)), c.grid(t, 2), [3]float64{4, 1, 0})
	if err != nil {
		t.Fatal(err)
	}
	within(t, "width", p.WidthMM[0]*c.kCut(a), hardEdge[2], 0.03) // as agreed
}

func TestProjectionsOfAPointGiveTheSameWidth(t *testing.T) {
	a := shots(t, 2, 120, 0, 1)
	a.Domain, a.PositionStepMM, a.Samples, a.TimeZeroSample = acquisition.Projection, 0.5, 64, 31
	a.Signal = a.Signal[:a.Delays*a.Shots*a.Samples]
	c := chain{64, 24, "none", 1} // voxels fine enough for k_max = 1/(2·0.5 mm)
	s := condition.Defaults()
	point, err := Point{AtMM: [3]float64{1.7, -2.9, 0}}.Measured(a, s)
	if err != nil {
		t.Fatal(err)
	}
	p, err := SpreadOf(c.images(t, point, PointSettings(s), PointConstants(noObject)), c.grid(t, 2), [3]float64{1.7, -2.9, 0})
	if err != nil {
		t.Fatal(err)
	}
	within(t, "width", p.WidthMM[0]*c.kCut(a), hardEdge[2], 0.03) // as agreed
}

func TestGaussianBlobHasItsKnownWidthBetweenVoxels(t *testing.T) {
	g := volume.Grid{N: [3]int{24, 20, 22}, VoxelMM: [3]float64{0.5, 0.6, 0.55}}
	at, sd := [3]float64{0.71, -0.43, 0.2}, [3]float64{0.9, 1.1, 1}
	image := make([]float32, g.Voxels())
	for i := range image {
		sum := 0.0
		for axis, j := range [3]int{i % 24, i / 24 % 20, i / 480} {
			u := (g.MM(axis, j) - at[axis]) / sd[axis]
			sum += u * u
		}
		image[i] = float32(math.Exp(-sum / 2))
	}
	p, err := SpreadOf(image, g, [3]float64{0.5, 0, 0})
	if err != nil {
		t.Fatal(err)
	}
	for axis, s := range sd {
		within(t, fmt.Sprint("axis ", axis), p.WidthMM[axis], 2.35482004503*s, 0.002) // the peak is found to a 64th of a voxel
	}
	within(t, "peak", p.Peak, 1, 0.001)
	if _, err := SpreadOf(image, g, [3]float64{5, 5, 5}); err == nil || fault.From(err).Kind != fault.NoAnswer {
		t.Errorf("a point where there is none gives %v", err)
	}
	if _, err := SpreadOf(filled(g.Voxels(), 1), g, [3]float64{}); err == nil || fault.From(err).Kind != fault.NoAnswer {
		t.Errorf("an image that does not fall gives %v", err)
	}
}
