package singlepoint

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/phantom"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

func cube(t testing.TB, dim, matrix int, fieldOfViewMM float64) volume.Grid {
	t.Helper()
	g, err := volume.Cube(dim, matrix, fieldOfViewMM)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// made returns all frames of an acquisition, one slice each, and the plan.
func made(t testing.TB, a *acquisition.Acquisition, s Settings, g volume.Grid, samples []int) ([][]float32, *Plan) {
	t.Helper()
	p, _, err := Prepare(a, s, g, samples)
	if err != nil {
		t.Fatal(err)
	}
	all := make([]int, len(p.FrameUS))
	for f := range all {
		all[f] = f
	}
	r, err := Images(a, s, p, g, all, nil)
	if err != nil {
		t.Fatal(err)
	}
	out := make([][]float32, len(all))
	for f := range out {
		out[f] = r.Values[f*g.Voxels() : (f+1)*g.Voxels()]
	}
	return out, p
}

func ball(dim int, centre [3]float64, radius, density, r2 float64) phantom.Body {
	s := phantom.Shape{Dim: dim, CentreMM: centre, SemiMM: [3]float64{radius, radius, radius}}
	return phantom.Body{Shape: s, Density: density, R1PerUS: 0.3, R2PerUS: r2}
}

// meanWithin returns the mean over the voxels within radius of the centre.
func meanWithin(g volume.Grid, image []float32, centre [3]float64, radius float64) (mean float64, n int) {
	for i, v := range image {
		ix, iy, iz := i%g.N[0], i/g.N[0]%g.N[1], i/(g.N[0]*g.N[1])
		d := [3]float64{g.MM(0, ix) - centre[0], g.MM(1, iy) - centre[1], g.MM(2, iz) - centre[2]}
		if length(d) <= radius && v == v {
			mean += float64(v)
			n++
		}
	}
	return mean / float64(n), n
}

// sets are gradient lists of every kind that is told apart, reaching 25 mT/m or near it.
func sets(dim int) map[string][][3]float64 {
	n := 12
	if dim == 2 {
		n = 16
	}
	cube := phantom.CubeGradients(dim, n+1, 25)
	out := map[string][][3]float64{
		"odd cube": cube, "even cube": phantom.CubeGradients(dim, n, 24), "ball": phantom.BallGradients(dim, n+1, 25),
		"half of a cube": cube[len(cube)/2-1:], "measured twice": append(append([][3]float64{}, cube...), cube...),
	}
	for name, list := range map[string][][3]float64{"one-sided": phantom.CubeGradients(dim, n, 24), "turned": cube} {
		for _, g := range list {
			if name == "one-sided" {
				step := 48 / float64(n-1)
				for axis := range dim {
					g[axis] -= step / 2
				}
			} else {
				g[0], g[1] = 0.8*g[0]-0.6*g[1], 0.6*g[0]+0.8*g[1]
			}
			out[name] = append(out[name], g)
		}
	}
	return out
}

func TestEveryKindOfGradientSetEqualsTheSlowSum(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 8))
	for _, dim := range []int{2, 3} {
		for name, list := range sets(dim) {
			for _, matrix := range []int{9, 10} {
				g := cube(t, dim, matrix, 13.7)
				a := measured(t, phantom.Sum(dim), phantom.SinglePointProtocol{GradientMTPerM: list, DwellNS: 10, Samples: 1})
				geo, err := newGeometry(a)
				if err != nil {
					t.Fatal(err)
				}
				samples := make([]complex128, len(geo.g))
				for i := range samples {
					samples[i] = complex(r.NormFloat64(), r.NormFloat64())
				}
				// A voxel is a sum of that many numbers of size 1: float32 keeps 1e-7 of the largest, gridding 1e-4 of the
				// root mean square, with peaks of some times that.
				size := math.Sqrt(float64(len(samples)))
				allowed := 1e-6 * size
				if geo.lattice == nil {
					allowed = 1e-3 * size
				}
				if (geo.lattice == nil) != (name == "turned") {
					t.Errorf("%dD %s: lattice %v", dim, name, geo.lattice != nil)
				}
				sum, err := newSummer(geo, g)
				if err != nil {
					t.Fatal(err)
				}
				// Twice, and at two times, one before k = 0: buffers and tables must not remember.
				for _, timeUS := range []float64{1.3, -0.9, 1.3} {
					image := blank(g, 1)
					if err := sum.add(image, samples, timeUS); err != nil {
						t.Fatal(err)
					}
					want, worst := slow(geo, g, samples, timeUS), 0.0
					for i, v := range image {
						inside := g.InsideFieldOfView(i%matrix, i/matrix%matrix, i/(matrix*matrix))
						if inside != (v == v) {
							t.Fatalf("%dD %s: voxel %d inside %v holds %g", dim, name, i, inside, v)
						}
						if inside {
							worst = math.Max(worst, math.Abs(float64(v)-want[i]))
						}
					}
					if !(worst <= allowed) {
						t.Errorf("%dD %s, matrix %d, %g µs: off by %.2g of %.3g", dim, name, matrix, timeUS, worst, size)
					}
				}
			}
		}
	}
}

func TestCellVolumesOfALatticeFillIt(t *testing.T) {
	for _, dim := range []int{2, 3} {
		want := 0.0
		for _, name := range []string{"odd cube", "half of a cube", "measured twice", "turned"} {
			a := measured(t, phantom.Sum(dim), phantom.SinglePointProtocol{GradientMTPerM: sets(dim)[name], DwellNS: 10, Samples: 1})
			geo, err := newGeometry(a)
			if err != nil {
				t.Fatal(err)
			}
			sum := 0.0
			for i, v := range geo.share {
				if length(geo.g[i]) <= 24 {
					sum += v
				}
			}
			if want == 0 {
				want = sum
			}
			// Exact for lattices. The iteration is good to a per cent inside; its rim of corners lies beyond 24 mT/m.
			allowed := 1e-9
			if geo.lattice == nil {
				allowed = 0.02
			}
			if name == "half of a cube" {
				// The half holds the plane through the origin from one shot before it; that shot has its mirror.
				allowed = 1e-9
			}
			if !near(sum, want, allowed) {
				t.Errorf("%dD %s: cells fill %.6g (mT/m)^%d, want %.6g", dim, name, sum, dim, want)
			}
		}
	}
}

func TestUniformBodyReconstructsToItsDensityAtEverySampleTime(t *testing.T) {
	for _, dim := range []int{2, 3} {
		centre := [3]float64{0.6, -0.5, 0}
		if dim == 3 {
			centre[2] = 0.4
		}
		// Fields of view 17 to 12.5 mm around a body 11 mm wide. A tapering window keeps the edge from ringing into the
		// inner half at this resolution.
		for name, list := range sets(dim) {
			a := measured(t, phantom.Sum(dim, ball(dim, centre, 5.5, 1, 0)), phantom.SinglePointProtocol{GradientMTPerM: list, DwellNS: 20, Samples: 12,
				TimeZeroSample: float64(-55 + 10*dim), PhaseRad: 2, FrequencyOffsetMHz: 0.4})
			uniform(t, fmt.Sprintf("%dD %s", dim, name), a, "hann", centre, 5.5)
		}
		// Without a window, enough gradients that the ringing has died out there.
		n := 61 - 18*(dim-2)
		most := float64(n-1) / 2 / (28.0249513861e-3 * 0.6 * 16) // 16 mm at 0.6 µs
		a := measured(t, phantom.Sum(dim, ball(dim, centre, 5.5, 1, 0)), phantom.SinglePointProtocol{GradientMTPerM: phantom.CubeGradients(dim, n, most),
			DwellNS: 20, Samples: 12, TimeZeroSample: -30})
		uniform(t, fmt.Sprintf("%dD %d gradients", dim, n), a, "none", centre, 5.5)
	}
}

// uniform checks the mean over the inner half radius of a body of density 1.
func uniform(t *testing.T, name string, a *acquisition.Acquisition, window string, centre [3]float64, radius float64) {
	t.Helper()
	for _, resolution := range []string{"own", "common"} {
		s := Defaults()
		s.Resolution, s.Window = resolution, window
		g := cube(t, a.Dim, 48, 12.5)
		frames, p := made(t, a, s, g, []int{0, 5, 11})
		for f, image := range frames {
			mean, n := meanWithin(g, image, centre, radius/2)
			if !(math.Abs(mean-1) <= 0.01) || n < 80 { // the agreed 1 %
				t.Errorf("%s %s at %.2f µs: mean %.4f over %d voxels", name, resolution, p.FrameUS[f], mean, n)
			}
		}
	}
}

// centroid returns the centre of mass of the voxels within reach of the expected place, in mm.
func centroid(g volume.Grid, image []float32, around [3]float64, reach float64) (c [3]float64) {
	total := 0.0
	for i, v := range image {
		at := [3]float64{g.MM(0, i%g.N[0]), g.MM(1, i/g.N[0]%g.N[1]), g.MM(2, i/(g.N[0]*g.N[1]))}
		if length([3]float64{at[0] - around[0], at[1] - around[1], at[2] - around[2]}) > reach || v != v {
			continue
		}
		total += float64(v)
		for axis := range c {
			c[axis] += float64(v) * at[axis]
		}
	}
	for axis := range c {
		c[axis] /= total
	}
	return c
}

// A small body off the centre, a smaller one beside it that no mirror leaves in place, more and fewer k-points than the
// direct transform takes, even and odd numbers of them and of voxels: the body appears where it is.
func TestBodiesAppearWhereTheyAreWithBothTransforms(t *testing.T) {
	for _, dim := range []int{2, 3} {
		ns := []int{24, 25, 36, 37}
		if dim == 3 {
			ns = []int{24, 25, 34}
		}
		centre, other := [3]float64{2.13, -1.37, 0.71}, [3]float64{-2.4, 3.1, -3.2}
		if dim == 2 {
			centre[2], other[2] = 0, 0
		}
		object := phantom.Sum(dim, ball(dim, centre, 1, 1, 0), ball(dim, other, 0.8, 0.6, 0))
		for _, n := range ns {
			// Steps for a field of view of 18 mm at 1 µs.
			most := float64(n-1) / 2 / (28.0249513861e-3 * 18)
			a := measured(t, object, phantom.SinglePointProtocol{GradientMTPerM: phantom.CubeGradients(dim, n, most), DwellNS: 100, Samples: 4,
				TimeZeroSample: -8, PhaseRad: -1, FrequencyOffsetMHz: 1.3})
			for _, matrix := range []int{28, 29} {
				s := Defaults()
				s.Window, s.Resolution = "gaussian", "own" // a point spread without lobes that reach into the other body
				g := cube(t, dim, matrix, 14)
				frames, p := made(t, a, s, g, []int{0, 1, 2})
				for f, image := range frames {
					for _, want := range [][3]float64{centre, other} {
						got := centroid(g, image, want, 2.2)
						for axis := range dim {
							if off := (got[axis] - want[axis]) / g.VoxelMM[axis]; !(math.Abs(off) <= 0.05) { // the agreed 0.05 voxel
								t.Errorf("%dD n %d matrix %d at %.1f µs: axis %d is off by %.3f voxels", dim, n, matrix, p.FrameUS[f], axis, off)
							}
						}
					}
				}
			}
		}
	}
}

// An object wider than the field of view folds: with a point beyond one edge the image shows the point one field of view
// further in. Describe must say so beforehand.
func TestObjectWiderThanTheFieldOfViewFoldsAsPredicted(t *testing.T) {
	const n = 25
	centre := [3]float64{7.5, 0, 0}
	a := measured(t, phantom.Sum(2, ball(2, centre, 0.8, 1, 0), ball(2, [3]float64{0, 2, 0}, 0.5, 1, 0)), phantom.SinglePointProtocol{
		GradientMTPerM: phantom.CubeGradients(2, n, 30), DwellNS: 100, Samples: 8, TimeZeroSample: -6})
	c := described(t, a)
	const extent = 2 * (7.5 + 0.8)
	covering, seen := c.Covering(extent), map[bool]int{}
	for j, st := range c.Times {
		s := Defaults()
		s.Window = "gaussian"
		g := cube(t, 2, 64, math.Min(st.FieldOfViewMM, 18))
		p, warnings, err := Prepare(a, s, g, []int{j})
		if err != nil || len(warnings) != 0 {
			t.Fatal(err, warnings)
		}
		r, err := Images(a, s, p, g, []int{0}, nil)
		if err != nil {
			t.Fatal(err)
		}
		folds := true
		for _, k := range covering {
			folds = folds && k != j
		}
		expected := centre
		if folds {
			expected[0] -= st.FieldOfViewMM
		}
		if math.Abs(expected[0]) > g.RadiusMM()-1 {
			continue // cut by the edge
		}
		seen[folds]++
		got := centroid(g, r.Values, expected, 1.1)
		at, _ := meanWithin(g, r.Values, expected, 0.5)
		if !(math.Abs(got[0]-expected[0]) <= 0.1) || !(at > 0.2) {
			t.Errorf("field of view %.2f mm, folded %v: body at %.2f with %.2f, want %.2f", st.FieldOfViewMM, folds, got[0], at, expected[0])
		}
	}
	if seen[false] < 2 || seen[true] < 2 {
		t.Errorf("seen whole %d times and folded %d times; the test needs both", seen[false], seen[true])
	}
}

func TestGridsWiderThanTheFieldOfViewAreWarnedOf(t *testing.T) {
	a := measured(t, phantom.Sum(2, ball(2, [3]float64{}, 2, 1, 0)), phantom.SinglePointProtocol{
		GradientMTPerM: phantom.CubeGradients(2, 15, 30), DwellNS: 100, Samples: 10, TimeZeroSample: -8})
	least := described(t, a).SmallestFieldOfViewMM([]int{0, 4})
	for factor, want := range map[float64]int{0.999: 0, 1.01: 1} {
		_, warnings, err := Prepare(a, Defaults(), cube(t, 2, 16, least*factor), []int{0, 4})
		if err != nil || len(warnings) != want {
			t.Errorf("grid of %g of the smallest field of view: %q, %v", factor, warnings, err)
		}
	}
}

// A drifting frequency turns the phase of later sample times; images must not care.
func TestPhaseDriftLeavesNoTrace(t *testing.T) {
	object := phantom.Sum(2, ball(2, [3]float64{1, 0.5, 0}, 3, 1, 0.4))
	pr := phantom.SinglePointProtocol{GradientMTPerM: phantom.CubeGradients(2, 18, 25), DwellNS: 80, Samples: 8, TimeZeroSample: -9}
	g := cube(t, 2, 32, 12)
	for _, list := range [][][3]float64{phantom.CubeGradients(2, 18, 25), phantom.CubeGradients(2, 17, 25)} {
		pr.GradientMTPerM = list
		pr.PhaseRad, pr.FrequencyOffsetMHz = 0, 0
		still, _ := made(t, measured(t, object, pr), Defaults(), g, []int{0, 3, 7})
		pr.PhaseRad, pr.FrequencyOffsetMHz = 2.2, 1.7
		turning, _ := made(t, measured(t, object, pr), Defaults(), g, []int{0, 3, 7})
		for f := range still {
			for i, v := range still[f] {
				if v == v && !(math.Abs(float64(v-turning[f][i])) <= 2e-6) { // float32 signals
					t.Fatalf("%d shots, frame %d voxel %d: %g without drift, %g with", len(list), f, i, v, turning[f][i])
				}
			}
		}
	}
}

// Inversion recovery by single-point encoding: the sign of early delays is kept, and the mean over the sample times has
// the amplitude that the weights say.
func TestImagesAlongTheDelayKeepTheirSign(t *testing.T) {
	const r1, r2 = 0.3, 0.5
	delays := []float64{0.2, 1, 4, 30}
	a := measured(t, phantom.Sum(3, ball(3, [3]float64{0.5, -0.5, 0.3}, 4.5, 1, r2)), phantom.SinglePointProtocol{
		Sequence: acquisition.InversionRecovery, DelayUS: delays, Inversion: 1.9, PhaseRad: 2.5, FrequencyOffsetMHz: 0.6,
		GradientMTPerM: phantom.BallGradients(3, 13, 25), DwellNS: 80, Samples: 9, TimeZeroSample: -8})
	s := Defaults()
	s.Axis, s.Window = "delay", "hann"
	g := cube(t, 3, 24, 12)
	frames, p := made(t, a, s, g, []int{0, 2, 4, 6})
	if len(frames) != len(delays) || p.FrameUS[3] != 30 {
		t.Fatalf("%d frames at %v", len(frames), p.FrameUS)
	}
	decay, sum := 0.0, 0.0
	for i, w := range p.Weight {
		decay += w * math.Exp(-r2*p.TimeUS[i])
		sum += w
	}
	if !near(sum, 1, 1e-12) {
		t.Errorf("weights sum to %g", sum)
	}
	for d, image := range frames {
		want := decay * (1 - 1.9*math.Exp(-r1*delays[d]))
		mean, _ := meanWithin(g, image, [3]float64{0.5, -0.5, 0.3}, 2.25)
		if !(math.Abs(mean-want) <= 0.01*decay) { // the 1 % of a uniform body
			t.Errorf("delay %g: %.4f, want %.4f", delays[d], mean, want)
		}
	}
}

func TestFramesDoNotDependOnHowTheyAreSplit(t *testing.T) {
	a := measured(t, phantom.Sum(2, ball(2, [3]float64{1, 0, 0}, 3, 1, 0.3)), phantom.SinglePointProtocol{Sequence: acquisition.EchoDecay,
		DelayUS: []float64{1, 2, 3}, GradientMTPerM: phantom.CubeGradients(2, 15, 25), DwellNS: 80, Samples: 6, TimeZeroSample: -8, NoiseSD: 0.1})
	g := cube(t, 2, 20, 12)
	for _, axis := range Axes {
		s := Defaults()
		s.Axis = axis.Name
		all, p := made(t, a, s, g, []int{1, 3, 5})
		for f := range all {
			one, err := Images(a, s, p, g, []int{f}, nil)
			if err != nil {
				t.Fatal(err)
			}
			for i, v := range all[f] {
				if v == v && v != one.Values[i] {
					t.Fatalf("%s frame %d voxel %d: %g with all, %g alone", axis.Name, f, i, v, one.Values[i])
				}
			}
		}
	}
}

func TestBaselineShotsTakeTheOffsetOff(t *testing.T) {
	object := phantom.Sum(2, ball(2, [3]float64{2, 0, 0}, 1.5, 1, 0))
	list := phantom.CubeGradients(2, 15, 25)
	pr := phantom.SinglePointProtocol{GradientMTPerM: list, DwellNS: 80, Samples: 3, TimeZeroSample: -9}
	g := cube(t, 2, 32, 12)
	clean, _ := made(t, measured(t, object, pr), Defaults(), g, []int{0, 2})
	pr.Offset = 3 - 1i
	a := measured(t, object, pr)
	empty := phantom.SinglePointProtocol{GradientMTPerM: list[:2], DwellNS: 80, Samples: 3, TimeZeroSample: -9, Offset: 3 - 1i}
	b := measured(t, phantom.Sum(2), empty)
	a.Shots += 2
	a.Signal = append(a.Signal, b.Signal...)
	a.GradientMTPerM = append(append([][3]float64{}, list...), list[:2]...)
	a.ShotRole = append(a.ShotRole, acquisition.RoleOffResonance, acquisition.RoleOffResonance)
	s := Defaults()
	s.Offset = "baseline-shots"
	got, _ := made(t, a, s, g, []int{0, 2})
	for f := range got {
		for i, v := range clean[f] {
			if v == v && !(math.Abs(float64(v-got[f][i])) <= 3e-6) { // float32 signals
				t.Fatalf("frame %d voxel %d: %g, want %g", f, i, got[f][i], v)
			}
		}
	}
}

func TestWindowsKeepTheTotalSignal(t *testing.T) {
	a := measured(t, phantom.Sum(2, ball(2, [3]float64{1, 1, 0}, 2.5, 1, 0)), phantom.SinglePointProtocol{
		GradientMTPerM: phantom.CubeGradients(2, 21, 25), DwellNS: 80, Samples: 2, TimeZeroSample: -10})
	g := cube(t, 2, 64, described(t, a).SmallestFieldOfViewMM([]int{1}))
	for _, w := range sampling.Windows {
		s := Defaults()
		s.Window, s.Cutoff = w.Name, 0.9
		frames, _ := made(t, a, s, g, []int{1})
		mean, n := meanWithin(g, frames[0], [3]float64{}, g.RadiusMM())
		total := mean * float64(n) * g.VoxelMM[0] * g.VoxelMM[1]
		// Windows are 1 at k = 0. Lobes in the corners outside the circle are missed.
		if !near(total, math.Pi*2.5*2.5, 0.03) {
			t.Errorf("%s: total %.4f, want %.4f", w.Name, total, math.Pi*2.5*2.5)
		}
	}
}

func TestRequestsWithoutAnImageAreRefused(t *testing.T) {
	a := measured(t, phantom.Sum(2, ball(2, [3]float64{}, 2, 1, 0)), phantom.SinglePointProtocol{
		GradientMTPerM: phantom.CubeGradients(2, 9, 25), DwellNS: 80, Samples: 8, TimeZeroSample: 2})
	g := cube(t, 2, 16, 12)
	for name, samples := range map[string][]int{"none": nil, "twice": {5, 5}, "beyond": {8}, "at the pulse": {2}, "before the pulse": {1}, "negative": {-1}} {
		if _, _, err := Prepare(a, Defaults(), g, samples); err == nil {
			t.Errorf("sample times %s were accepted", name)
		}
	}
	for name, change := range map[string]func(*Settings){
		"axis": func(s *Settings) { s.Axis = "" }, "window": func(s *Settings) { s.Window = "han" }, "cutoff": func(s *Settings) { s.Cutoff = math.NaN() },
		"resolution": func(s *Settings) { s.Resolution = "best" }, "offset": func(s *Settings) { s.Offset = "trace-ends" },
		"baseline": func(s *Settings) { s.Offset = "baseline-shots" }, "phase": func(s *Settings) { s.Phase = "x" },
		"noise": func(s *Settings) { s.NoiseSD = -1 }, "shift": func(s *Settings) { s.TimeShiftSamples = math.Inf(1) },
	} {
		s := Defaults()
		change(&s)
		if _, _, err := Prepare(a, s, g, []int{5}); err == nil {
			t.Errorf("a wrong %s was accepted", name)
		}
	}
	if _, _, err := Prepare(a, Defaults(), cube(t, 3, 16, 12), []int{5}); err == nil {
		t.Error("a 3D grid was accepted for 2D data")
	}
	p, _, err := Prepare(a, Defaults(), g, []int{5})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Images(a, Defaults(), p, g, []int{1}, nil); err == nil {
		t.Error("a frame that is not there was made")
	}
}

// spiralBall is a list without lattice and without opposites: points of a spiral over the half sphere at radii that fill
// the ball evenly.
func spiralBall(n int, most float64) [][3]float64 {
	var out [][3]float64
	for i, v := range phantom.GoldenHalfSphere(n) {
		r := most * math.Cbrt((math.Mod(float64(i)*0.7548776662466927, 1)*float64(n)+0.5)/float64(n))
		out = append(out, [3]float64{r * v[0], r * v[1], r * v[2]})
	}
	return out
}

// Scattered gradients are a rough quadrature whatever their weights: where neighbours lie apart, the object folds in part.
// With 2000 of them, means over the inner half radius come out within 3 %; one deviation more is allowed.
func TestUniformBallFromScatteredGradients(t *testing.T) {
	centre := [3]float64{0.6, -0.5, 0.4}
	a := measured(t, phantom.Sum(3, ball(3, centre, 4, 1, 0)), phantom.SinglePointProtocol{GradientMTPerM: spiralBall(2000, 25), DwellNS: 20, Samples: 12,
		TimeZeroSample: -25, PhaseRad: 2})
	c := described(t, a)
	if c.Cartesian || c.Times[11].FieldOfViewMM < 9 {
		t.Fatalf("%+v", c.Times[11])
	}
	s := Defaults()
	s.Window = "hann"
	g := cube(t, 3, 32, 12)
	frames, p := made(t, a, s, g, []int{0, 5, 11})
	for f, image := range frames {
		mean, n := meanWithin(g, image, centre, 2)
		if !(math.Abs(mean-1) <= 0.05) || n < 80 {
			t.Errorf("at %.2f µs: mean %.4f over %d voxels", p.FrameUS[f], mean, n)
		}
	}
}
