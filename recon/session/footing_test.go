package session

import (
	"fmt"
	"math"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/phantom"
	"torrloom/recon/recipe"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// footing is one way of measuring: spokes or single points, in 2D or 3D.
type footing struct {
	name    string
	acquire func(t testing.TB, p *phantom.Phantom, noiseSD float64, seed uint64) *acquisition.Acquisition
	dim     int
	matrix  int
	inner   float64 // radius in mm inside which the blurred rim of the body is not felt
	methods []string
}

func footings() []footing {
	spokes := []string{"back-projection", "gridding", "least-squares"}
	return []footing{
		{"2D spokes", spokesOf(phantom.EqualAngles(120)), 2, 48, 5, spokes},
		{"3D spokes", spokesOf(phantom.GoldenHalfSphere(900)), 3, 32, 5, spokes},
		{"2D single point", pointsOf(2, 41), 2, 48, 5, []string{singlePointMethod}},
		{"3D single point", pointsOf(3, 41), 3, 24, 5, []string{singlePointMethod}},
	}
}

func spokesOf(directions [][3]float64) func(testing.TB, *phantom.Phantom, float64, uint64) *acquisition.Acquisition {
	return func(t testing.TB, p *phantom.Phantom, noiseSD float64, seed uint64) *acquisition.Acquisition {
		a, err := p.Acquire(phantom.Protocol{Sequence: acquisition.SaturationRecovery, DelayUS: []float64{2, 1, 3}, Directions: directions,
			GradientMTPerM: 18, DwellNS: 8, Samples: 220, TimeZeroSample: 109.3, PhaseRad: 0.9, NoiseSD: noiseSD, Seed: seed})
		if err != nil {
			t.Fatal(err)
		}
		return a
	}
}

func pointsOf(dim, steps int) func(testing.TB, *phantom.Phantom, float64, uint64) *acquisition.Acquisition {
	return func(t testing.TB, p *phantom.Phantom, noiseSD float64, seed uint64) *acquisition.Acquisition {
		a, err := p.AcquireSinglePoint(phantom.SinglePointProtocol{Sequence: acquisition.SaturationRecovery, DelayUS: []float64{2, 1, 3},
			GradientMTPerM: phantom.CubeGradients(dim, steps, 40), DwellNS: 50, Samples: 24, TimeZeroSample: -6, PhaseRad: 0.9, NoiseSD: noiseSD, Seed: seed})
		if err != nil {
			t.Fatal(err)
		}
		return a
	}
}

// imagesOf makes the images of an acquisition by a method and window, on a field of view of 26 mm.
func imagesOf(t testing.TB, a *acquisition.Acquisition, method, window string, matrix int) (volume.Grid, *Result) {
	t.Helper()
	text := fmt.Sprintf(`{"reconstruction":{"method":%q,"window":%q,"matrix":%d,"fieldOfViewMM":26,"iterations":25},"singlePoint":{"axis":"delay","count":3},"rates":{"minPerUS":0,"maxPerUS":0}}`, method, window, matrix)
	r := &runner{a: a, workers: 2, out: &Result{Seconds: map[string]float64{}}}
	if err := r.measure("data", []byte(text)); err != nil {
		t.Fatal(method, window, err)
	}
	if err := r.reconstruct(); err != nil {
		t.Fatal(method, window, err)
	}
	return r.out.Grid, r.out
}

func disc(dim int, radius float64, centre ...float64) *phantom.Phantom {
	s := phantom.Shape{Dim: dim, SemiMM: [3]float64{radius, radius, radius}}
	copy(s.CentreMM[:dim], centre)
	return phantom.Sum(dim, phantom.Body{Shape: s, Density: 1, R1PerUS: 0.8})
}

// Every method, window and dimension on the same bodies: a uniform body of density 1 reads 1 - exp(-R1 T) within 1 %, at the
// right delay and in the right place. Cutting k-space off at a sphere leaves the middle of a ball up to some percent away
// from that however sharp the image is (M. A. Pinsky, Notices AMS 42 (1995) 330), so that the ideal image of the same
// window and cutoff, in closed form, is the measure; least squares puts its own frequencies where data count less.
func TestEveryMethodAndWindowReadsAUniformBodyAlike(t *testing.T) {
	for _, f := range footings() {
		a := f.acquire(t, disc(f.dim, 8, 1.5, -1, 0.7), 0, 0)
		for _, method := range f.methods {
			for _, w := range sampling.Windows {
				g, r := imagesOf(t, a, method, w.Name, f.matrix)
				for frame, delay := range []float64{2, 1, 3} {
					want := 1 - math.Exp(-0.8*delay)
					if method != "least-squares" {
						want *= idealMean(f.dim, 8, f.inner, w, cutOf(a, r))
					}
					mean := meanWithin(g, r.Images[frame], [3]float64{1.5, -1, 0.7 * float64(f.dim-2)}, f.inner)
					if !(math.Abs(mean/want-1) <= 0.01) { // the agreed 1 %
						t.Errorf("%s, %s, %s, delay %g: %.4f, want %.4f", f.name, method, w.Name, delay, mean, want)
					}
				}
			}
		}
	}
}

// cutOf returns where the window of a result ends, in cycles/mm.
func cutOf(a *acquisition.Acquisition, r *Result) float64 {
	if p := r.Constants.SinglePoint; p != nil {
		return p.KCutPerMM[0]
	}
	cut, _ := kCut(a, r.Plan.Recipe)
	return cut
}

// idealMean returns the mean over an inner ball or disc of the image of a concentric one, of radius and density 1, through
// a window: ∫ window·F_outer·F_inner dk over the volume of the inner, F the transforms of the shapes.
func idealMean(dim int, radius, inner float64, w sampling.Window, cut float64) float64 {
	outer := phantom.Shape{Dim: dim, SemiMM: [3]float64{radius, radius, radius}}
	small := phantom.Shape{Dim: dim, SemiMM: [3]float64{inner, inner, inner}}
	const steps = 4000
	sum := 0.0
	for i := range steps {
		k := cut * (float64(i) + 0.5) / steps
		shell := 2 * math.Pi * k
		if dim == 3 {
			shell *= 2 * k
		}
		sum += shell * w.Weight(k/cut) * real(outer.Transform([3]float64{k})) * real(small.Transform([3]float64{k})) * cut / steps
	}
	return sum / small.Measure()
}

func meanWithin(g volume.Grid, image []float32, centre [3]float64, radius float64) float64 {
	sum, n := 0.0, 0.0
	for i, v := range image {
		r := [3]float64{g.MM(0, i%g.N[0]), g.MM(1, i/g.N[0]%g.N[1]), g.MM(2, i/(g.N[0]*g.N[1]))}
		if math.Sqrt(square(r[0]-centre[0])+square(r[1]-centre[1])+square(r[2]-centre[2])) <= radius {
			sum, n = sum+float64(v), n+1
		}
	}
	return sum / n
}

func square(x float64) float64 { return x * x }

// A small body off the centre, at three places that no mirror or exchange of axes maps onto themselves.
func TestEveryMethodKeepsASmallBodyInPlace(t *testing.T) {
	for _, f := range footings() {
		for _, at := range [][3]float64{{5.1, 2.3, -3.7}, {-6.2, 4.4, 1.9}, {1.7, -7.3, 4.8}} {
			if f.dim == 2 {
				at[2] = 0
			}
			a := f.acquire(t, disc(f.dim, 1.6, at[0], at[1], at[2]), 0, 0)
			for _, method := range f.methods {
				g, r := imagesOf(t, a, method, "hann", f.matrix)
				got := centroid(g, r.Images[1])
				for axis := range got {
					if !(math.Abs(got[axis]-at[axis]) <= 0.05*g.VoxelMM[0]) { // the agreed 0.05 voxel
						t.Errorf("%s, %s: centroid %.3f, body at %v", f.name, method, got, at)
						break
					}
				}
			}
		}
	}
}

// centroid weighs the voxels by what they have above a third of the peak, so that faint streaks far away do not pull.
func centroid(g volume.Grid, image []float32) [3]float64 {
	peak := 0.0
	for _, v := range image {
		if float64(v) > peak {
			peak = float64(v)
		}
	}
	var sum [3]float64
	total := 0.0
	for i, v := range image {
		if w := float64(v) - peak/3; w > 0 {
			total += w
			for axis, at := range [3]int{i % g.N[0], i / g.N[0] % g.N[1], i / (g.N[0] * g.N[1])} {
				sum[axis] += w * g.MM(axis, at)
			}
		}
	}
	return [3]float64{sum[0] / total, sum[1] / total, sum[2] / total}
}

// The noise that each method predicts for its voxels is the spread over realisations, with the object in place.
func TestEveryMethodPredictsItsNoise(t *testing.T) {
	const runs = 24
	for _, f := range footings() {
		if f.dim == 3 {
			continue // the same code; 2D has many realisations in little time
		}
		body := disc(f.dim, 8, 1.5, -1)
		for _, method := range f.methods {
			for _, window := range []string{"none", "hann"} {
				var sums, squares []float64
				predicted := 0.0
				for seed := range runs {
					_, r := imagesOf(t, f.acquire(t, body, 2, uint64(seed+1)), method, window, 32)
					if sums == nil {
						sums, squares = make([]float64, len(r.Images[0])), make([]float64, len(r.Images[0]))
					}
					for i, v := range r.Images[0] {
						sums[i] += float64(v)
						squares[i] += float64(v) * float64(v)
					}
					predicted += r.NoiseSD[0] / runs
				}
				variance, n := 0.0, 0.0
				for i := range sums {
					if v := (squares[i] - sums[i]*sums[i]/runs) / (runs - 1); v == v {
						variance, n = variance+v, n+1
					}
				}
				if got := math.Sqrt(variance / n); !(math.Abs(got/predicted-1) <= 0.05) { // the agreed 5 %
					t.Errorf("%s, %s, %s: predicted %.4g, spread %.4g", f.name, method, window, predicted, got)
				}
			}
		}
	}
}

// A decay along the readout blurs a body with the Lorentzian of its rate; undone with the right rate, typed in or measured
// on shots without gradient, the image is the one without decay.
func TestReadoutDecayIsUndone(t *testing.T) {
	p := disc(2, 6, 2, -1)
	pr := phantom.Protocol{Sequence: acquisition.SaturationRecovery, DelayUS: []float64{1, 2, 3}, Directions: phantom.EqualAngles(90),
		GradientMTPerM: 18, DwellNS: 8, Samples: 220, TimeZeroSample: 109.3}
	sharp := acquired(t, p, pr)
	pr.ReadoutDecayPerUS = 1.2
	blurred := acquired(t, p, pr)
	withShots := acquired(t, p, pr)
	addZeroGradientShot(withShots, 1.2)
	g, want := imagesOf(t, sharp, "gridding", "hann", 48)
	_, before := imagesOf(t, blurred, "gridding", "hann", 48)
	distance := func(r *Result) float64 {
		sum, norm := 0.0, 0.0
		for i, v := range want.Images[0] {
			if v == v {
				sum, norm = sum+square(float64(r.Images[0][i]-v)), norm+square(float64(v))
			}
		}
		return math.Sqrt(sum / norm)
	}
	if d := distance(before); !(d > 0.05) {
		t.Errorf("a readout decay of 1.2 /µs changes the image by %.3f only, of %d voxels", d, g.Voxels())
	}
	for name, text := range map[string]string{
		"typed":         `{"conditioning":{"readoutDecay":"typed","readoutDecayPerUS":1.2},"reconstruction":{"method":"gridding","matrix":48,"fieldOfViewMM":26}}`,
		"zero-gradient": `{"conditioning":{"readoutDecay":"zero-gradient"},"reconstruction":{"method":"gridding","matrix":48,"fieldOfViewMM":26}}`,
	} {
		a := blurred
		if name == "zero-gradient" {
			a = withShots
		}
		r, err := Run(a, "data", []byte(text), 1)
		if err != nil {
			t.Fatal(name, err)
		}
		if d := distance(r); !(d <= 0.002) { // the resampler is linear in the trace, the cap of 3 is not reached
			t.Errorf("%s: the image differs by %.4f from the one without decay", name, d)
		}
	}
}

func acquired(t testing.TB, p *phantom.Phantom, pr phantom.Protocol) *acquisition.Acquisition {
	t.Helper()
	a, err := p.Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// addZeroGradientShot turns the last shot into one without gradient: nothing but the decay.
func addZeroGradientShot(a *acquisition.Acquisition, ratePerUS float64) {
	s := a.Shots - 1
	a.GradientMTPerM[s], a.ShotRole[s] = [3]float64{}, acquisition.RoleZeroGradient
	for d := range a.Delays {
		for j := range a.Trace(d, s) {
			t := math.Abs(float64(j)-a.TimeZeroSample) * a.DwellNS * 1e-3
			a.Trace(d, s)[j] = complex(float32(100*math.Exp(-ratePerUS*t)), 0)
		}
	}
}

func TestSubsetsOfShotsAreWeighedAnew(t *testing.T) {
	a := spokesOf(phantom.EqualAngles(120))(t, disc(2, 8, 1.5, -1), 0, 0)
	for text, shots := range map[string]int{
		`{"every":3}`: 40, `{"firstShot":30}`: 90, `{"lastShot":59}`: 60, `{"excludeShots":[0,5,119]}`: 117, `{"firstShot":10,"lastShot":109,"every":2}`: 50,
	} {
		r, err := Run(a, "data", []byte(`{"conditioning":`+text+`,"reconstruction":{"matrix":48,"fieldOfViewMM":26}}`), 1)
		if err != nil {
			t.Fatal(text, err)
		}
		if kept := len(r.Plan.Recipe.Conditioning.KeptShots(a)); kept != shots {
			t.Errorf("%s keeps %d shots, want %d", text, kept, shots)
		}
		// Half of the directions missing leaves streaks, but the mean follows from the weights alone.
		if mean := meanWithin(r.Grid, r.Images[1], [3]float64{1.5, -1, 0}, 5); !(math.Abs(mean/(1-math.Exp(-0.8))-1) <= 0.03) {
			t.Errorf("%s: mean %.4f, want %.4f", text, mean, 1-math.Exp(-0.8))
		}
	}
}

func TestMethodsRefuseTheOtherEncoding(t *testing.T) {
	spokes, points := footings()[0].acquire(t, disc(2, 8), 0, 0), footings()[2].acquire(t, disc(2, 8), 0, 0)
	for _, m := range recipe.Methods {
		a := points
		if m.Value == singlePointMethod {
			a = spokes
		}
		if _, err := Run(a, "data", []byte(`{"reconstruction":{"method":"`+m.Value+`"}}`), 1); err == nil {
			t.Errorf("%s took %s data", m.Value, a.Encoding)
		}
	}
}

// The image of a delay is the same whether another delay is left out or not, for spokes and single points alike.
func TestLeavingOutADelayKeepsTheImagesOfTheOthers(t *testing.T) {
	for _, f := range footings() {
		if f.dim == 3 {
			continue // the choice of frames does not know the dimension
		}
		a := f.acquire(t, disc(2, 8, 1.5, -1), 0, 0)
		method := f.methods[0]
		run := func(excluded string) *Result {
			r, err := Run(a, "data", []byte(`{"conditioning":{"excludeDelays":`+excluded+`},"reconstruction":{"method":"`+method+`","matrix":32,"fieldOfViewMM":26},"singlePoint":{"axis":"delay","count":3}}`), 2)
			if err != nil {
				t.Fatal(f.name, excluded, err)
			}
			return r
		}
		all, some := run("[]"), run("[0]") // delays 2, 1, 3 without the first
		if len(some.Images) != 2 || some.Plan.Frames.TimeUS[0] != 1 || some.Plan.Frames.TimeUS[1] != 3 {
			t.Fatalf("%s: frames at %v µs", f.name, some.Plan.Frames.TimeUS)
		}
		for i := range some.Images {
			want, got := meanWithin(all.Grid, all.Images[i+1], [3]float64{1.5, -1, 0}, f.inner), meanWithin(some.Grid, some.Images[i], [3]float64{1.5, -1, 0}, f.inner)
			if !(math.Abs(got-want) <= 1e-4*want) { // float32 sums in another order
				t.Errorf("%s, delay %g µs: %.5f with a delay left out, %.5f with all", f.name, some.Plan.Frames.TimeUS[i], got, want)
			}
		}
	}
}
