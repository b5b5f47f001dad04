package gridding

import (
	"errors"
	"math"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/backproject"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/nufft"
	"torrloom/recon/phantom"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// job is conditioned spokes with the axis weights and filter of solid-angle weighting, up to the full k_max.
type job struct {
	sp           *condition.Spokes
	g            volume.Grid
	axis, filter []float64
}

func prepare(t testing.TB, a *acquisition.Acquisition, c *condition.Constants, matrix int, fieldOfViewMM float64, window string) job {
	t.Helper()
	must := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	if c == nil {
		var err error
		c, _, err = condition.Measure(a, condition.Defaults())
		must(err)
	}
	kCut := math.Min(a.SmallestKMax(), float64(matrix)/(2*fieldOfViewMM))
	delays := make([]int, a.Delays)
	for d := range delays {
		delays[d] = d
	}
	var j job
	var err error
	j.g, err = volume.Cube(a.Dim, matrix, fieldOfViewMM)
	must(err)
	j.sp, err = condition.Condition(a, condition.Defaults(), c, condition.Plan(a, c, fieldOfViewMM, kCut), delays)
	must(err)
	j.axis, err = sampling.AxisWeights(a.Dim, j.sp.Directions)
	must(err)
	w, err := sampling.WindowNamed(window)
	must(err)
	j.filter = w.Sample(j.sp.Half, j.sp.DeltaK, kCut)
	for m, r := range sampling.Ramp(a.Dim, j.sp.Half, j.sp.DeltaK) {
		j.filter[m] *= r
	}
	return j
}

// weights returns axis × filter × DeltaK, [shot][m].
func (j job) weights() []float64 {
	var out []float64
	for _, a := range j.axis {
		for _, f := range j.filter {
			out = append(out, a*f*j.sp.DeltaK)
		}
	}
	return out
}

func (j job) images(t testing.TB, s Settings) []float32 {
	t.Helper()
	out, err := Images(j.sp, j.g, j.weights(), s, nil)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func body(dim int, centre, semi [3]float64) *phantom.Phantom {
	return phantom.Sum(dim, phantom.Body{Shape: phantom.Shape{Dim: dim, CentreMM: centre, SemiMM: semi}, Density: 1})
}

// traces measures a phantom by echo decay.
func traces(t testing.TB, p *phantom.Phantom, directions [][3]float64, timeZero float64, delays ...float64) *acquisition.Acquisition {
	t.Helper()
	a, err := p.Acquire(phantom.Protocol{Sequence: acquisition.EchoDecay, DelayUS: delays, Directions: directions,
		GradientMTPerM: 20, DwellNS: 5, Samples: 360, TimeZeroSample: timeZero, PhaseRad: 1.1})
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// each calls f with every voxel's place and value.
func each(g volume.Grid, image []float32, f func(r [3]float64, v float64)) {
	for iz := range g.N[2] {
		for iy := range g.N[1] {
			for ix := range g.N[0] {
				f([3]float64{g.MM(0, ix), g.MM(1, iy), g.MM(2, iz)}, float64(image[g.Index(ix, iy, iz)]))
			}
		}
	}
}

func distance(a, b [3]float64) float64 {
	return math.Sqrt((a[0]-b[0])*(a[0]-b[0]) + (a[1]-b[1])*(a[1]-b[1]) + (a[2]-b[2])*(a[2]-b[2]))
}

func meanWithin(g volume.Grid, image []float32, centre [3]float64, radius float64) (mean float64, n int) {
	each(g, image, func(r [3]float64, v float64) {
		if distance(r, centre) <= radius {
			mean += v
			n++
		}
	})
	return mean / float64(n), n
}

func TestUniformDiscAndBallReconstructToOneWithEveryWindow(t *testing.T) {
	centre := [3]float64{1.3, -0.8, 0}
	for _, c := range []struct {
		dim  int
		a    *acquisition.Acquisition
		size int
	}{
		{2, traces(t, body(2, centre, [3]float64{9, 9}), phantom.EqualAngles(200), 179.4, 1), 64},
		{3, traces(t, body(3, centre, [3]float64{9, 9, 9}), phantom.GoldenHalfSphere(1500), 179.4, 1), 40},
	} {
		for _, w := range sampling.Windows {
			j := prepare(t, c.a, nil, c.size, 30, w.Name)
			mean, n := meanWithin(j.g, j.images(t, Defaults()), centre, 6)
			if !(math.Abs(mean-1) <= 0.01) || n < 50 { // the agreed 1 %
				t.Errorf("%dD %s: mean %.4f over %d voxels inside a body of density 1", c.dim, w.Name, mean, n)
			}
		}
	}
}

// A mirror, a swapped axis or a half-voxel shift moves a centroid by far more than allowed.
func TestCentroidsOfSmallBodiesStayInPlace(t *testing.T) {
	for _, dim := range []int{2, 3} {
		for _, matrix := range []int{36, 33} {
			for _, at := range [][3]float64{{5.1, 2.3, -3.7}, {-6.2, 4.4, 1.9}, {1.7, -7.3, 4.8}} {
				directions := phantom.GoldenHalfSphere(900)
				if dim == 2 {
					at[2], directions = 0, phantom.EqualAngles(120)
				}
				a := traces(t, body(dim, at, [3]float64{1.2, 1.2, 1.2}), directions, 171.37, 1)
				j := prepare(t, a, nil, matrix, 26, "hann")
				got := centroid(j.g, j.images(t, Defaults()))
				for i := range got {
					if !(math.Abs(got[i]-at[i]) <= 0.05*j.g.VoxelMM[0]) { // the agreed 0.05 voxel
						t.Errorf("%dD, matrix %d: centroid %.3f, body at %v", dim, matrix, got, at)
						break
					}
				}
			}
		}
	}
}

// centroid weighs the voxels above a third of the peak, so that faint streaks far away do not pull.
func centroid(g volume.Grid, image []float32) [3]float64 {
	peak, total, sum := 0.0, 0.0, [3]float64{}
	each(g, image, func(_ [3]float64, v float64) {
		if v > peak {
			peak = v
		}
	})
	each(g, image, func(r [3]float64, v float64) {
		if w := v - peak/3; w > 0 {
			total += w
			for i := range sum {
				sum[i] += w * r[i]
			}
		}
	})
	return [3]float64{sum[0] / total, sum[1] / total, sum[2] / total}
}

// slowSum is the definition, term by term, at the voxels inside the field of view; NaN elsewhere.
func (j job) slowSum(weights []float64, d int) []float64 {
	var out []float64
	for iz := range j.g.N[2] {
		for iy := range j.g.N[1] {
			for ix := range j.g.N[0] {
				if !j.g.InsideFieldOfView(ix, iy, iz) {
					out = append(out, math.NaN())
					continue
				}
				sum := 0.0
				for i, n := range j.sp.Directions {
					x := n[0]*j.g.MM(0, ix) + n[1]*j.g.MM(1, iy) + n[2]*j.g.MM(2, iz)
					for m := range j.sp.Half + 1 {
						sin, cos := math.Sincos(2 * math.Pi * float64(m) * j.sp.DeltaK * x)
						s, w := complex128(j.sp.Row(i, m)[d]), weights[i*(j.sp.Half+1)+m]
						if m > 0 {
							w *= 2
						}
						sum += w * (real(s)*cos - imag(s)*sin)
					}
				}
				out = append(out, sum)
			}
		}
	}
	return out
}

// compare returns the relative root mean square difference of images, and fails where they differ in what is NaN.
func compare(t *testing.T, got []float32, want []float64) float64 {
	t.Helper()
	sum, norm := 0.0, 0.0
	for i, w := range want {
		v := float64(got[i])
		if math.IsNaN(v) != math.IsNaN(w) {
			t.Fatalf("voxel %d is %g, want %g", i, v, w)
		}
		if !math.IsNaN(w) {
			sum, norm = sum+(v-w)*(v-w), norm+w*w
		}
	}
	return math.Sqrt(sum / norm)
}

// lopsided is a phantom whose image has no symmetry, at five delays.
func lopsided(t testing.TB, dim, spokes int) *acquisition.Acquisition {
	t.Helper()
	p := phantom.Sum(dim,
		phantom.Body{Shape: phantom.Shape{Dim: dim, SemiMM: [3]float64{9, 7, 8}}, Density: 1, R2PerUS: 0.3},
		phantom.Body{Shape: phantom.Shape{Dim: dim, CentreMM: [3]float64{4, -2, 0}, SemiMM: [3]float64{2, 3, 2}}, Density: 2, R2PerUS: 0.8})
	directions := phantom.EqualAngles(spokes)
	if dim == 3 {
		directions = phantom.GoldenHalfSphere(spokes)
	}
	return traces(t, p, directions, 180, 1, 2, 4, 0.5, 8)
}

func TestImagesEqualTheSlowSumToTheirTolerance(t *testing.T) {
	for _, c := range []struct{ dim, spokes, matrix int }{{2, 40, 32}, {2, 40, 27}, {3, 60, 14}} {
		j := prepare(t, lopsided(t, c.dim, c.spokes), nil, c.matrix, 26, "none")
		weights := j.weights()
		for i := range weights { // sample by sample different, as only gridding allows
			weights[i] *= 1 + 0.5*math.Sin(float64(i))
		}
		for _, s := range []Settings{{Tolerance: 1e-2, Oversampling: 1.25}, {Tolerance: 1e-3, Oversampling: 1.5}, {Tolerance: 1e-4, Oversampling: 2}, {Width: 4, Oversampling: 1.5}} {
			images, err := Images(j.sp, j.g, weights, s, nil)
			if err != nil {
				t.Fatal(err)
			}
			tolerance := s.Tolerance
			if tolerance == 0 {
				tolerance = nufft.Error(c.dim, s.Width, s.Oversampling)
			}
			for d := range j.sp.Delays {
				if e := compare(t, images[d*j.g.Voxels():(d+1)*j.g.Voxels()], j.slowSum(weights, d)); !(e <= tolerance) {
					t.Errorf("%+v %+v delay %d: relative error %.3g", c, s, d, e)
				}
			}
		}
	}
}

// The error claimed for the defaults, on an object that keeps away from the rim.
func TestDefaultsErrByAFewTenThousandths(t *testing.T) {
	j := prepare(t, lopsided(t, 3, 150), nil, 24, 26, "hann")
	e := compare(t, j.images(t, Defaults())[:j.g.Voxels()], j.slowSum(j.weights(), 0))
	if !(e <= 3e-4) { // measured 2.1e-4
		t.Errorf("relative error %.3g", e)
	}
}

// The same spokes, axis weights and filter through back-projection. Its linear interpolation errs by 2 % at the cutoff,
// where |k| and above all k² put much of the image if no window takes it away.
func TestImagesAgreeWithBackProjection(t *testing.T) {
	for _, c := range []struct {
		dim, spokes, matrix int
		window              string
		tolerance           float64 // a half more than measured: 0.45 %, 0.21 %, 0.89 %, 0.30 %
	}{{2, 90, 48, "none", 7e-3}, {2, 90, 48, "hann", 3e-3}, {3, 300, 24, "none", 1.3e-2}, {3, 300, 24, "hann", 4.5e-3}} {
		j := prepare(t, lopsided(t, c.dim, c.spokes), nil, c.matrix, 26, c.window)
		got, other := j.images(t, Defaults()), backproject.Images(j.sp, j.g, j.axis, j.filter, nil)
		want := make([]float64, len(other))
		for i, v := range other {
			want[i] = float64(v)
		}
		if e := compare(t, got, want); !(e <= c.tolerance) {
			t.Errorf("%dD %s: relative difference %.3g", c.dim, c.window, e)
		}
	}
}

// The image of many delays at once holds, for each delay, the image that delay gives alone or in any other group: bit for
// bit, since the same operations are done.
func TestDelaysKeepTheirOrderInEveryGroup(t *testing.T) {
	j := prepare(t, lopsided(t, 2, 60), nil, 30, 26, "hann")
	all := j.images(t, Defaults())
	weights := j.weights()
	want := []float64{1, 2, 4, 0.5, 8}
	reference, _ := meanWithin(j.g, all, [3]float64{-4, 0, 0}, 3)
	for d, delay := range want {
		mean, _ := meanWithin(j.g, all[d*j.g.Voxels():], [3]float64{-4, 0, 0}, 3)
		if ratio := math.Exp(-0.3 * (delay - 1)); !(math.Abs(mean/reference-ratio) <= 0.01*ratio) { // edge ringing of the second body
			t.Errorf("delay %d of %g µs: %.4f of the first, want %.4f", d, delay, mean/reference, ratio)
		}
	}
	plan, err := newPlan(j.g, Defaults())
	if err != nil {
		t.Fatal(err)
	}
	for _, lanes := range []int{1, 2, 3, 4} {
		grouped := make([]float32, len(all))
		sum := newSummer(j.sp, j.g, weights, plan, lanes)
		for from := 0; from < len(want); from += 2 * lanes {
			to := min(from+2*lanes, len(want))
			if err := sum.run(from, to, func(float64) {}); err != nil {
				t.Fatal(err)
			}
			sum.store(grouped, from, to)
		}
		for i, v := range grouped {
			if v != all[i] && v == v {
				t.Fatalf("groups of %d lanes: entry %d is %g, want %g", lanes, i, v, all[i])
			}
		}
	}
}

func TestLargeImagesAreDoneInEvenGroupsWithinTheMemory(t *testing.T) {
	for _, c := range []struct{ matrix, delays, lanes int }{{64, 10, 5}, {128, 10, 3}, {128, 1, 1}, {256, 9, 1}, {16, 0, 1}} {
		g, err := volume.Cube(3, c.matrix, 30)
		if err != nil {
			t.Fatal(err)
		}
		plan, err := newPlan(g, Defaults())
		if err != nil {
			t.Fatal(err)
		}
		if got := lanesAtOnce(plan, c.delays); got != c.lanes {
			t.Errorf("matrix %d, %d delays: %d lanes at once, want %d", c.matrix, c.delays, got, c.lanes)
		}
		bytes, err := Bytes(g, c.delays, Defaults())
		// One grid of n³·1.5³ complex numbers per lane, an image per lane, and the images handed back.
		v := int64(g.Voxels())
		least := v * (27*int64(c.lanes) + 8*int64(c.lanes) + 4*int64(c.delays))
		if err != nil || bytes < least || bytes > 2*least {
			t.Errorf("matrix %d, %d delays: %d bytes, want a little over %d (%v)", c.matrix, c.delays, bytes, least, err)
		}
	}
}

func TestProgressRisesToOneInSmallSteps(t *testing.T) {
	j := prepare(t, lopsided(t, 3, 60), nil, 14, 26, "none")
	last := 0.0
	_, err := Images(j.sp, j.g, j.weights(), Defaults(), func(done float64) {
		if !(done >= last && done <= last+0.1) {
			t.Errorf("progress went from %g to %g", last, done)
		}
		last = done
	})
	if err != nil || !(math.Abs(last-1) <= 1e-12) {
		t.Errorf("progress ended at %g (%v)", last, err)
	}
}

// The predicted noise of a voxel equals the spread over noise realisations, for full and half echoes.
func TestPredictedNoiseEqualsMonteCarlo(t *testing.T) {
	for _, c := range []struct {
		dim, samples, matrix, runs int
		zero                       float64
		window                     string
	}{
		{2, 300, 32, 12, 149.6, "none"}, {2, 300, 32, 12, 149.6, "hann"}, {2, 160, 32, 12, 9.6, "hamming"}, {3, 300, 32, 2, 149.6, "hann"},
	} {
		directions := phantom.EqualAngles(60)
		if c.dim == 3 {
			directions = phantom.GoldenHalfSphere(150)
		}
		square, count, predicted := 0.0, 0, 0.0
		for seed := range c.runs {
			a, err := phantom.Sum(c.dim).Acquire(phantom.Protocol{Sequence: acquisition.EchoDecay, DelayUS: []float64{1, 2, 3},
				Directions: directions, GradientMTPerM: 20, DwellNS: 5, Samples: c.samples, TimeZeroSample: c.zero, NoiseSD: 3, Seed: uint64(seed)})
			if err != nil {
				t.Fatal(err)
			}
			// The known noise and a fixed phase, since there is no object to measure them from.
			j := prepare(t, a, &condition.Constants{NoiseSD: []float64{3, 3, 3}, ExtentMM: 20}, c.matrix, 24, c.window)
			predicted = j.sp.NoiseSDOf(j.weights())[0]
			for _, v := range j.images(t, Defaults()) {
				if v == v {
					square, count = square+float64(v)*float64(v), count+1
				}
			}
		}
		got := math.Sqrt(square / float64(count))
		if !(math.Abs(got/predicted-1) <= 0.05) { // the agreed 5 %
			t.Errorf("%+v: predicted %.4g, spread %.4g over %d voxels", c, predicted, got, count)
		}
	}
}

func TestBadSettingsAreRefusedWithTheirKind(t *testing.T) {
	j := prepare(t, lopsided(t, 2, 10), nil, 16, 26, "none")
	for _, s := range []Settings{{}, {Width: 2, Oversampling: 1.5}, {Width: 9, Oversampling: 1.5}, {Width: 4, Oversampling: 3},
		{Tolerance: 1e-9, Oversampling: 1.5}, {Tolerance: math.NaN(), Oversampling: 1.5}, {Tolerance: -1, Oversampling: 2}} {
		_, err := Images(j.sp, j.g, j.weights(), s, nil)
		var f *fault.Fault
		if !errors.As(err, &f) || f.Kind != fault.BadSetting || s.Check() == nil {
			t.Errorf("%+v: %v, want a bad-setting fault", s, err)
		}
	}
	if _, err := Images(j.sp, j.g, j.weights()[1:], Defaults(), nil); fault.From(err).Kind != fault.Bug {
		t.Errorf("too few weights: %v, want a bug fault", err)
	}
	if err := Defaults().Check(); err != nil {
		t.Error(err)
	}
}

// 828 spokes over the half sphere, 64 samples from the centre out, ten delays, 64³ voxels.
func BenchmarkBenchCase(b *testing.B) {
	const spokes, half, delays = 828, 63, 10
	g, err := volume.Cube(3, 64, 30)
	if err != nil {
		b.Fatal(err)
	}
	sp := &condition.Spokes{Dim: 3, Directions: phantom.GoldenHalfSphere(spokes), Shot: make([]int, spokes), Half: half,
		DeltaK: 32. / 30 / half, Delays: make([]int, delays), Samples: make([]complex64, spokes*(half+1)*delays)}
	weights := make([]float64, spokes*(half+1))
	for i := range weights {
		weights[i] = 1
	}
	for i := range sp.Samples {
		sp.Samples[i] = complex(float32(math.Sin(float64(i))), float32(math.Cos(float64(i))))
	}
	for b.Loop() {
		if _, err := Images(sp, g, weights, Defaults(), nil); err != nil {
			b.Fatal(err)
		}
	}
}
