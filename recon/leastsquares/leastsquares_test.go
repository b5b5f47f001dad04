package leastsquares

import (
	"errors"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/phantom"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// job is conditioned spokes up to the full k_max with solid-angle density weights.
type job struct {
	sp      *condition.Spokes
	noise   *condition.Spokes
	g       volume.Grid
	weights []float64
}

func prepare(t testing.TB, a *acquisition.Acquisition, c *condition.Constants, matrix int, fieldOfViewMM float64) job {
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
	delays := make([]int, a.Delays)
	for d := range delays {
		delays[d] = d
	}
	kCut := math.Min(a.SmallestKMax(), float64(matrix)/(2*fieldOfViewMM))
	var j job
	var err error
	j.g, err = volume.Cube(a.Dim, matrix, fieldOfViewMM)
	must(err)
	plan := condition.Plan(a, c, fieldOfViewMM, kCut)
	j.sp, err = condition.Condition(a, condition.Defaults(), c, plan, delays)
	must(err)
	j.noise, err = Noise(a, condition.Defaults(), c, plan, 1)
	must(err)
	j.weights, err = sampling.Densities[0].Weights(sampling.Trajectory{Dim: a.Dim, Directions: j.sp.Directions, DeltaK: j.sp.DeltaK, Half: j.sp.Half})
	must(err)
	return j
}

func (j job) run(t testing.TB, s Settings) *Result {
	t.Helper()
	out, err := Images(j.sp, j.noise, j.g, j.weights, s, nil)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func body(dim int, centre, semi [3]float64) *phantom.Phantom {
	return phantom.Sum(dim, phantom.Body{Shape: phantom.Shape{Dim: dim, CentreMM: centre, SemiMM: semi}, Density: 1})
}

func directions(dim, n int) [][3]float64 {
	if dim == 2 {
		return phantom.EqualAngles(n)
	}
	return phantom.GoldenHalfSphere(n)
}

// traces measures a phantom by echo decay.
func traces(t testing.TB, p *phantom.Phantom, spokes int, noiseSD float64, seed uint64, delays ...float64) *acquisition.Acquisition {
	t.Helper()
	a, err := p.Acquire(phantom.Protocol{Sequence: acquisition.EchoDecay, DelayUS: delays, Directions: directions(p.Dim, spokes),
		GradientMTPerM: 20, DwellNS: 5, Samples: 300, TimeZeroSample: 149.6, NoiseSD: noiseSD, Seed: seed})
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func with(penalty string) Settings {
	s := Defaults()
	s.Penalty = penalty
	return s
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

func meanWithin(g volume.Grid, image []float32, centre [3]float64, radius float64) (mean, sd float64) {
	n, square := 0.0, 0.0
	each(g, image, func(r [3]float64, v float64) {
		if math.Hypot(math.Hypot(r[0]-centre[0], r[1]-centre[1]), r[2]-centre[2]) <= radius {
			mean, square, n = mean+v, square+v*v, n+1
		}
	})
	mean /= n
	return mean, math.Sqrt(square/n - mean*mean)
}

// tiny is a problem small enough to be written out: 9 x 9 voxels, two delays, a field of view that holds the object.
func tiny(t testing.TB) job {
	t.Helper()
	p := phantom.Sum(2,
		phantom.Body{Shape: phantom.Shape{Dim: 2, CentreMM: [3]float64{1, -2, 0}, SemiMM: [3]float64{6, 4}}, Density: 1, R2PerUS: 0.3},
		phantom.Body{Shape: phantom.Shape{Dim: 2, CentreMM: [3]float64{-3, 3, 0}, SemiMM: [3]float64{3, 4}}, Density: 2, R2PerUS: 0.9})
	return prepare(t, traces(t, p, 11, 0.02, 5, 1, 2), nil, 9, 24)
}

// dense writes out the problem of delay d in double precision from its definition: the matrix E*wE, the right side E*w S,
// Σ w|S|² and the voxels it is about.
func (j job) dense(d int) (normal *mat.SymDense, right *mat.VecDense, energy float64, voxels []int) {
	var place [][3]float64
	for iy := range j.g.N[1] {
		for ix := range j.g.N[0] {
			if j.g.InsideFieldOfView(ix, iy, 0) {
				voxels = append(voxels, j.g.Index(ix, iy, 0))
				place = append(place, [3]float64{j.g.MM(0, ix), j.g.MM(1, iy), 0})
			}
		}
	}
	area := j.g.VoxelMM[0] * j.g.VoxelMM[1]
	normal, right = mat.NewSymDense(len(voxels), nil), mat.NewVecDense(len(voxels), nil)
	for i, n := range j.sp.Directions {
		for m := range j.sp.Half + 1 {
			w, k := j.weights[i*(j.sp.Half+1)+m], 2*math.Pi*float64(m)*j.sp.DeltaK
			if m > 0 {
				w *= 2
			}
			s := complex128(j.sp.Row(i, m)[d])
			energy += w * (real(s)*real(s) + imag(s)*imag(s))
			for a, ra := range place {
				xa := k * (n[0]*ra[0] + n[1]*ra[1])
				right.SetVec(a, right.AtVec(a)+w*(real(s)*math.Cos(xa)-imag(s)*math.Sin(xa)))
				for b := a; b < len(place); b++ {
					xb := k * (n[0]*place[b][0] + n[1]*place[b][1])
					normal.SetSym(a, b, normal.At(a, b)+w*area*math.Cos(xa-xb))
				}
			}
		}
	}
	return normal, right, energy, voxels
}

func TestIterationsConvergeToTheDirectSolution(t *testing.T) {
	j := tiny(t)
	s := Defaults()
	s.Weight, s.Iterations = 0.02, 60
	got := j.run(t, s)
	for d := range j.sp.Delays {
		normal, right, energy, voxels := j.dense(d)
		for i := range voxels {
			normal.SetSym(i, i, normal.At(i, i)+s.Weight)
		}
		var factors mat.Cholesky
		if !factors.Factorize(normal) {
			t.Fatal("the dense problem has no solution")
		}
		var want mat.VecDense
		if err := factors.SolveVecTo(&want, right); err != nil {
			t.Fatal(err)
		}
		sum, norm := 0.0, 0.0
		for i, v := range voxels {
			e := float64(got.Values[d*j.g.Voxels()+v]) - want.AtVec(i)
			sum, norm = sum+e*e, norm+want.AtVec(i)*want.AtVec(i)
		}
		// The two gridding sums err by 2e-4, magnified where the data are weak, at most by 1/λ.
		if e := math.Sqrt(sum / norm); !(e <= 1e-3) {
			t.Errorf("delay %d: relative difference to the direct solution %.3g", d, e)
		}
		// The minimum is Σ w|S|² - <f, right>, v per voxel.
		least := 1 - mat.Dot(&want, right)*j.g.VoxelMM[0]*j.g.VoxelMM[1]/energy
		if last := got.Curve[d][s.Iterations].Objective; !(math.Abs(last-least) <= 1e-4) { // the error of the sums
			t.Errorf("delay %d: objective %.6f, the least possible is %.6f", d, last, least)
		}
	}
}

// The curve is what it says: the data term and the penalty of the image that is handed back, worked out from their
// definitions.
func TestCurveEndsAtTheObjectiveOfTheImage(t *testing.T) {
	j := tiny(t)
	for _, penalty := range Penalties {
		s := with(penalty.Name)
		s.Weight, s.Edge = 0.05, 0.2
		got := j.run(t, s)
		for d := range j.sp.Delays {
			normal, right, energy, voxels := j.dense(d)
			f := mat.NewVecDense(len(voxels), nil)
			for i, v := range voxels {
				f.SetVec(i, float64(got.Values[d*j.g.Voxels()+v]))
			}
			area := j.g.VoxelMM[0] * j.g.VoxelMM[1]
			data := energy + area*(mat.Inner(f, normal, f)-2*mat.Dot(f, right))
			last := got.Curve[d][s.Iterations]
			if want := math.Sqrt(data / energy); !(math.Abs(last.Residual-want) <= 1e-3) { // error of the sums
				t.Errorf("%s delay %d: residual %.5f, from the definition %.5f", penalty.Name, d, last.Residual, want)
			}
			if penalty.Name != "tikhonov" {
				continue
			}
			if want := (data + s.Weight*area*mat.Dot(f, f)) / energy; !(math.Abs(last.Objective-want) <= 1e-4) {
				t.Errorf("%s delay %d: objective %.6f, from the definition %.6f", penalty.Name, d, last.Objective, want)
			}
		}
	}
}

// The quadratic form of a rule is half the gradient of its penalty, by finite differences; for the rule just renewed.
func TestRulesAreTheGradientsOfTheirPenalties(t *testing.T) {
	j := tiny(t)
	for _, penalty := range Penalties {
		s := with(penalty.Name)
		s.Weight, s.Edge = 0.7, 0.2
		p, err := newProblem(j.sp, j.noise, j.g, j.weights, nil)
		if err != nil {
			t.Fatal(err)
		}
		image, _, err := p.gridded(0, 2, nil)
		if err != nil {
			t.Fatal(err)
		}
		rule := penalty.rule(p, s, 2)
		rule.renew(image)
		gradient := make([]float32, len(image))
		rule.add(gradient, image)
		for i := 0; i < len(p.support); i += 7 {
			for d := range 2 {
				at := i*p.columns(2) + d*p.perDelay
				kept := image[at]
				const h = 1e-2 // the images are about 1, and float32
				image[at] = kept + h
				up := rule.value(image)[d]
				image[at] = kept - h
				down := rule.value(image)[d]
				image[at] = kept
				want := (up - down) / (2 * h) / (2 * p.voxel)
				if !(math.Abs(float64(gradient[at])-want) <= 0.01*s.Weight) { // curvature over the step
					t.Errorf("%s, voxel %d delay %d: %.5f, finite difference %.5f", penalty.Name, i, d, gradient[at], want)
				}
			}
		}
	}
}

func TestObjectiveNeverRises(t *testing.T) {
	for _, dim := range []int{2, 3} {
		p := phantom.Sum(dim,
			phantom.Body{Shape: phantom.Shape{Dim: dim, SemiMM: [3]float64{8, 6, 7}}, Density: 1, R2PerUS: 0.3},
			phantom.Body{Shape: phantom.Shape{Dim: dim, CentreMM: [3]float64{3, -2, 1}, SemiMM: [3]float64{2, 3, 2}}, Density: 2, R2PerUS: 0.8})
		j := prepare(t, traces(t, p, 60, 0.5, 6, 1, 3, 0.5), nil, 20, 24)
		for _, penalty := range Penalties {
			s := with(penalty.Name)
			s.Weight, s.Iterations = 0.01, 18
			for d, curve := range j.run(t, s).Curve {
				if len(curve) != s.Iterations+1 {
					t.Fatalf("%s delay %d: %d points for %d iterations", penalty.Name, d, len(curve), s.Iterations)
				}
				for i := 1; i < len(curve); i++ {
					// Rounding of float32 sums, once the minimum is reached.
					if !(curve[i].Objective <= curve[i-1].Objective+2e-6) {
						t.Errorf("%dD %s delay %d: objective rises from %.7f to %.7f at iteration %d", dim, penalty.Name, d, curve[i-1].Objective, curve[i].Objective, i)
					}
				}
				if first, last := curve[0].Objective, curve[s.Iterations].Objective; !(last < first) {
					t.Errorf("%dD %s delay %d: objective %.5f at first, %.5f at last", dim, penalty.Name, d, first, last)
				}
			}
		}
	}
}

func TestUniformDiscAndBallReconstructToOneWithEveryPenalty(t *testing.T) {
	centre := [3]float64{1.3, -0.8, 0}
	for _, c := range []struct{ dim, spokes, matrix int }{{2, 120, 48}, {3, 500, 26}} {
		j := prepare(t, traces(t, body(c.dim, centre, [3]float64{8, 8, 8}), c.spokes, 0, 1, 1), nil, c.matrix, 26)
		for _, penalty := range Penalties {
			mean, _ := meanWithin(j.g, j.run(t, with(penalty.Name)).Values, centre, 5.5)
			if !(math.Abs(mean-1) <= 0.01) { // the agreed 1 %
				t.Errorf("%dD %s: mean %.4f inside a body of density 1", c.dim, penalty.Name, mean)
			}
		}
	}
}

// The bias told in the help text.
func TestTikhonovReadsLowAsTold(t *testing.T) {
	j := prepare(t, traces(t, body(2, [3]float64{}, [3]float64{8, 8}), 120, 0, 1, 1), nil, 48, 26)
	s := Defaults()
	reference, _ := meanWithin(j.g, j.run(t, s).Values, [3]float64{}, 5.5)
	s.Weight = 0.1
	mean, _ := meanWithin(j.g, j.run(t, s).Values, [3]float64{}, 5.5)
	if want := (1 + Defaults().Weight) / 1.1; !(math.Abs(mean/reference-want) <= 0.01) { // ringing of the rim
		t.Errorf("λ = 0.1 gives %.4f of λ = 0.001, want %.4f", mean/reference, want)
	}
}

// A mirror, a swapped axis or a half-voxel shift moves a centroid by far more than allowed.
func TestCentroidsOfSmallBodiesStayInPlace(t *testing.T) {
	for _, c := range []struct{ dim, spokes, matrix int }{{2, 100, 36}, {2, 100, 33}, {3, 500, 24}} {
		at := [3]float64{5.1, -7.3, 0}
		if c.dim == 3 {
			at[2] = 3.7
		}
		j := prepare(t, traces(t, body(c.dim, at, [3]float64{1.6, 1.6, 1.6}), c.spokes, 0, 1, 1), nil, c.matrix, 26)
		for _, penalty := range Penalties {
			got := centroid(j.g, j.run(t, with(penalty.Name)).Values)
			for i := range got {
				if !(math.Abs(got[i]-at[i]) <= 0.05*j.g.VoxelMM[0]) { // the agreed 0.05 voxel
					t.Errorf("%+v %s: centroid %.3f, body at %v", c, penalty.Name, got, at)
					break
				}
			}
		}
	}
}

// centroid weighs the voxels above a fifth of the peak, so that faint streaks far away do not pull.
func centroid(g volume.Grid, image []float32) [3]float64 {
	peak, total, sum := 0.0, 0.0, [3]float64{}
	each(g, image, func(_ [3]float64, v float64) {
		if v > peak {
			peak = v
		}
	})
	each(g, image, func(r [3]float64, v float64) {
		if w := v - peak/5; w > 0 {
			total += w
			for i := range sum {
				sum[i] += w * r[i]
			}
		}
	})
	return [3]float64{sum[0] / total, sum[1] / total, sum[2] / total}
}

func TestDelaysKeepTheirOrder(t *testing.T) {
	p := phantom.Sum(2, phantom.Body{Shape: phantom.Shape{Dim: 2, SemiMM: [3]float64{8, 8}}, Density: 1, R2PerUS: 0.5})
	delays := []float64{1, 2, 4, 0.5, 8}
	j := prepare(t, traces(t, p, 80, 0, 1, delays...), nil, 32, 24)
	for _, penalty := range Penalties {
		got := j.run(t, with(penalty.Name))
		for d, delay := range delays {
			mean, _ := meanWithin(j.g, got.Values[d*j.g.Voxels():], [3]float64{}, 5)
			if want := math.Exp(-0.5 * delay); !(math.Abs(mean-want) <= 0.01*want) {
				t.Errorf("%s, delay %g µs: mean %.4f, want %.4f", penalty.Name, delay, mean, want)
			}
		}
	}
}

// Bit for bit, since the same operations are done: a map must not depend on how work is shared out.
func TestImageOfADelayDoesNotDependOnTheOthers(t *testing.T) {
	all := prepare(t, traces(t, body(2, [3]float64{1, 2, 0}, [3]float64{7, 5}), 40, 0.2, 8, 1, 2, 3), nil, 20, 24)
	for _, penalty := range Penalties {
		want := all.run(t, with(penalty.Name))
		for d := range all.sp.Delays {
			one := *all.sp
			one.Delays = all.sp.Delays[d : d+1]
			one.NoiseDensity = all.sp.NoiseDensity[d : d+1]
			one.Samples = nil
			for i := d; i < len(all.sp.Samples); i += len(all.sp.Delays) {
				one.Samples = append(one.Samples, all.sp.Samples[i])
			}
			alone := job{&one, all.noise, all.g, all.weights}.run(t, with(penalty.Name))
			for i, v := range alone.Values {
				if w := want.Values[d*all.g.Voxels()+i]; v != w && v == v {
					t.Fatalf("%s delay %d voxel %d: alone %g, with others %g", penalty.Name, d, i, v, w)
				}
			}
		}
	}
}

// A field of view smaller than the object shows its middle unchanged.
func TestSmallFieldOfViewDoesNotFoldTheObject(t *testing.T) {
	j := prepare(t, traces(t, body(2, [3]float64{1, 0, 0}, [3]float64{11, 9}), 150, 0, 1, 1), nil, 20, 12)
	mean, sd := meanWithin(j.g, j.run(t, Defaults()).Values, [3]float64{}, 5.5)
	if !(math.Abs(mean-1) <= 0.01) || !(sd <= 0.03) {
		t.Errorf("mean %.4f, SD %.4f inside a larger body of density 1", mean, sd)
	}
}

// The noise told equals the spread over noise realisations around the image without noise.
func TestPredictedNoiseEqualsMonteCarlo(t *testing.T) {
	for _, c := range []struct {
		dim, spokes, matrix, runs int
		settings                  Settings
	}{
		{2, 60, 32, 10, Settings{"tikhonov", 1e-3, 0.05, 10}},
		{2, 60, 32, 10, Settings{"tikhonov", 0.1, 0.05, 4}},
		{2, 60, 32, 10, Settings{"tikhonov", 1e-3, 0.05, 40}},
		{3, 150, 16, 3, Settings{"tikhonov", 1e-3, 0.05, 10}},
		{2, 60, 32, 10, Settings{"edges", 0.01, 0.05, 18}},
		{2, 60, 32, 10, Settings{"edges", 0.05, 0.2, 18}},
	} {
		const noiseSD = 0.8
		p := body(c.dim, [3]float64{}, [3]float64{8, 8, 8})
		constants := &condition.Constants{NoiseSD: []float64{noiseSD, noiseSD, noiseSD}, ExtentMM: 20}
		clean := prepare(t, traces(t, p, c.spokes, 0, 1, 1, 2, 3), constants, c.matrix, 24).run(t, c.settings)
		square, count, predicted := 0.0, 0.0, 0.0
		for seed := range c.runs {
			noisy := prepare(t, traces(t, p, c.spokes, noiseSD, uint64(seed), 1, 2, 3), constants, c.matrix, 24).run(t, c.settings)
			for _, sd := range noisy.NoiseSD {
				predicted += sd / float64(3*c.runs)
			}
			for i, v := range noisy.Values {
				if v == v {
					e := float64(v - clean.Values[i])
					square, count = square+e*e, count+1
				}
			}
		}
		got := math.Sqrt(square / count)
		tolerance := 0.05 // the agreed 5 %
		if c.settings.Penalty == "edges" {
			tolerance = 0.15 // told to be a guide; measured 8 % below the spread
		}
		if !(math.Abs(got/predicted-1) <= tolerance) {
			t.Errorf("%+v: predicted %.4g, spread %.4g over %g voxels", c, predicted, got, count)
		}
	}
}

// What the edge-preserving penalty is for: less noise in flat parts than Tikhonov's at the default, at an edge as sharp.
func TestEdgesStaySharpWhileFlatPartsAreSmoothed(t *testing.T) {
	j := prepare(t, traces(t, body(2, [3]float64{}, [3]float64{8, 8}), 60, 1.5, 3, 1), nil, 48, 24)
	s := with("edges")
	s.Weight, s.Iterations = 0.05, 24
	smooth, plain := j.run(t, s), j.run(t, Defaults())
	_, flat := meanWithin(j.g, smooth.Values, [3]float64{}, 6)
	_, rough := meanWithin(j.g, plain.Values, [3]float64{}, 6)
	if !(flat <= rough/2) {
		t.Errorf("SD inside %.4f, with Tikhonov %.4f; wanted half of it", flat, rough)
	}
	if a, b := rim(j.g, smooth.Values), rim(j.g, plain.Values); !(a <= 1.2*b) {
		t.Errorf("the rim is %.3f mm wide, with Tikhonov %.3f", a, b)
	}
}

// rim returns the width over which the mean profile of a disc of radius 8 falls from 0.75 to 0.25.
func rim(g volume.Grid, image []float32) float64 {
	const bins, step = 48, 0.25
	var sum, count [bins]float64
	each(g, image, func(r [3]float64, v float64) {
		if b := int(math.Hypot(r[0], r[1]) / step); b < bins && v == v {
			sum[b], count[b] = sum[b]+v, count[b]+1
		}
	})
	cross := func(level float64) float64 {
		last, at := 1.0, 6.0
		for b := range bins {
			r := (float64(b) + 0.5) * step
			if count[b] == 0 || r < 6 {
				continue
			}
			v := sum[b] / count[b]
			if v < level {
				return at + (r-at)*(last-level)/(last-v)
			}
			last, at = v, r
		}
		return math.NaN()
	}
	return cross(0.25) - cross(0.75)
}

func TestProgressRisesToOne(t *testing.T) {
	j := tiny(t)
	last := 0.0
	_, err := Images(j.sp, j.noise, j.g, j.weights, Defaults(), func(done float64) {
		if !(done >= last) {
			t.Errorf("progress went from %g to %g", last, done)
		}
		last = done
	})
	if err != nil || !(math.Abs(last-1) <= 1e-12) {
		t.Errorf("progress ended at %g (%v)", last, err)
	}
}

// The estimate covers what a problem counts for itself, and is no wild guess.
func TestMemoryIsEstimatedFromAbove(t *testing.T) {
	j := prepare(t, traces(t, body(3, [3]float64{}, [3]float64{8, 8, 8}), 40, 0, 1, 1, 2, 3), nil, 16, 24)
	p, err := newProblem(j.sp, j.noise, j.g, j.weights, nil)
	if err != nil {
		t.Fatal(err)
	}
	counted := 3*p.bytesPerDelay() + 4*3*int64(j.g.Voxels())
	if got := Bytes(j.g, j.sp.BandMM, 3, 1); got < counted || got > 3*counted {
		t.Errorf("estimated %d bytes, counted %d", got, counted)
	}
}

func TestCornersOutsideTheFieldOfViewHaveNoAnswer(t *testing.T) {
	j := tiny(t)
	got := j.run(t, Defaults())
	for iy := range j.g.N[1] {
		for ix := range j.g.N[0] {
			if nan := math.IsNaN(float64(got.Values[j.g.Index(ix, iy, 0)])); nan == j.g.InsideFieldOfView(ix, iy, 0) {
				t.Fatalf("voxel (%d, %d): NaN is %v", ix, iy, nan)
			}
		}
	}
}

func TestBadSettingsAndWeightsAreRefusedWithTheirKind(t *testing.T) {
	j := tiny(t)
	change := func(f func(*Settings)) Settings {
		s := Defaults()
		f(&s)
		return s
	}
	for _, s := range []Settings{{}, change(func(s *Settings) { s.Penalty = "tv" }), change(func(s *Settings) { s.Weight = -1 }),
		change(func(s *Settings) { s.Weight = math.NaN() }), change(func(s *Settings) { s.Weight = math.Inf(1) }),
		change(func(s *Settings) { s.Edge = 0 }), change(func(s *Settings) { s.Edge = math.NaN() }),
		change(func(s *Settings) { s.Iterations = 0 }), change(func(s *Settings) { s.Iterations = 201 })} {
		_, err := Images(j.sp, j.noise, j.g, j.weights, s, nil)
		wantKind(t, err, fault.BadSetting)
	}
	_, err := Images(j.sp, j.noise, j.g, j.weights[1:], Defaults(), nil)
	wantKind(t, err, fault.Bug)
	_, err = Images(j.sp, j.noise, j.g, make([]float64, len(j.weights)), Defaults(), nil)
	wantKind(t, err, fault.NoAnswer)
	negative := append([]float64(nil), j.weights...)
	negative[3] = -1
	_, err = Images(j.sp, j.noise, j.g, negative, Defaults(), nil)
	wantKind(t, err, fault.BadSetting)
}

func wantKind(t *testing.T, err error, kind fault.Kind) {
	t.Helper()
	var f *fault.Fault
	if !errors.As(err, &f) || f.Kind != kind {
		t.Errorf("got %v, want a %s fault", err, kind)
	}
}

// 828 spokes over the half sphere, 64 samples from the centre out, 64³ voxels, ten delays and one noise realisation each.
func BenchmarkBenchCase(b *testing.B) {
	const spokes, half, delays = 828, 63, 10
	g, err := volume.Cube(3, 64, 30)
	if err != nil {
		b.Fatal(err)
	}
	spokesOf := func(delays int) *condition.Spokes {
		sp := &condition.Spokes{Dim: 3, Directions: phantom.GoldenHalfSphere(spokes), Shot: make([]int, spokes), Half: half, BandMM: 30,
			DeltaK: 32. / 30 / half, Delays: make([]int, delays), NoiseDensity: make([]float64, delays), OneSided: make([]int, spokes)}
		sp.Samples = make([]complex64, spokes*(half+1)*delays)
		for i := range sp.Samples {
			sp.Samples[i] = complex(float32(math.Sin(float64(i))), float32(math.Cos(float64(i))))
		}
		return sp
	}
	sp, noise := spokesOf(delays), spokesOf(1)
	weights, err := sampling.Densities[0].Weights(sampling.Trajectory{Dim: 3, Directions: sp.Directions, DeltaK: sp.DeltaK, Half: half})
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if _, err := Images(sp, noise, g, weights, Defaults(), nil); err != nil {
			b.Fatal(err)
		}
	}
}
