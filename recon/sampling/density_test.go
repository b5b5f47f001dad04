package sampling

import (
	"math"
	"testing"
)

// trajectories are even and uneven sets of directions. The samples lie as close as for an object of half of 1/DeltaK.
func trajectories() map[string]Trajectory {
	angles := func(n int, f func(float64) float64) [][3]float64 {
		out := make([][3]float64, n)
		for i := range out {
			sin, cos := math.Sincos(math.Pi * f(float64(i)/float64(n)))
			out[i] = [3]float64{cos, sin, 0}
		}
		return out
	}
	gap := goldenHalfSphere(700)
	for i, n := range gap { // thinned to one in three over a third of the directions
		if math.Abs(n[0]) > 0.7 && i%3 > 0 {
			gap[i] = gap[(i+350)%700]
		}
	}
	return map[string]Trajectory{
		"even angles":   {Dim: 2, Directions: angles(120, func(u float64) float64 { return u }), DeltaK: 0.02, Half: 40},
		"uneven angles": {Dim: 2, Directions: angles(160, func(u float64) float64 { return u + 0.1*math.Sin(2*math.Pi*u) }), DeltaK: 0.02, Half: 40},
		"half sphere":   {Dim: 3, Directions: goldenHalfSphere(600), DeltaK: 0.025, Half: 24},
		"gap of spokes": {Dim: 3, Directions: gap, DeltaK: 0.025, Half: 24},
	}
}

// middle returns the weights' value of a body in its middle, and of the disc or ball at r from the middle along x.
func at(t Trajectory, w []float64, transform func(k float64) float64, r float64) float64 {
	total := 0.0
	for i, v := range w {
		m := i % (t.Half + 1)
		k := float64(m) * t.DeltaK
		if m > 0 {
			v *= 2
		}
		total += v * transform(k) * math.Cos(2*math.Pi*k*t.Directions[i/(t.Half+1)][0]*r)
	}
	return total
}

// body returns the transform of the disc or ball of radius a and density 1.
func body(dim int, a float64) func(k float64) float64 {
	return func(k float64) float64 {
		q := 2 * math.Pi * k * a
		switch {
		case dim == 2 && q == 0:
			return math.Pi * a * a
		case dim == 2:
			return a * math.J1(q) / k
		case q == 0:
			return 4 * math.Pi / 3 * a * a * a
		}
		return 4 * math.Pi * a * a * a * (math.Sin(q) - q*math.Cos(q)) / (q * q * q)
	}
}

// meanWithin returns the mean of the body's image over 25 places along x within 0.7 of its radius, weighted as its area or volume.
func meanWithin(t Trajectory, w []float64, a float64) float64 {
	hann, _ := WindowNamed("hann")
	windowed := append([]float64(nil), w...)
	ApplyWindow(windowed, hann.Sample(t.Half, t.DeltaK, float64(t.Half)*t.DeltaK))
	total, norm := 0.0, 0.0
	for i := range 25 {
		r := 0.7 * a * (float64(i) + 0.5) / 25
		share := math.Pow(r, float64(t.Dim-1))
		total += share * at(t, windowed, body(t.Dim, a), r)
		norm += share
	}
	return total / norm
}

// A tenth of the period 1/DeltaK is resolved well enough to have a middle; four tenths fill half of it nearly.
func TestUniformBodiesReadOneWithUnbiasedWeights(t *testing.T) {
	for name, tr := range trajectories() {
		for _, d := range Densities {
			if d.Name == "cell-volume" {
				continue // has the bias of the next test
			}
			w := weigh(t, d, tr)
			for _, share := range []float64{0.1, 0.2} {
				if mean := meanWithin(tr, w, share/tr.DeltaK); !(math.Abs(mean-1) <= 0.01) { // the agreed 1 %
					t.Errorf("%s, %s: a body of radius %g/DeltaK reads %.4f", name, d.Name, share, mean)
				}
			}
		}
	}
}

func weigh(t *testing.T, d Density, tr Trajectory) []float64 {
	t.Helper()
	w, err := d.Weights(tr)
	if err != nil {
		t.Fatal(err)
	}
	if len(w) != len(tr.Directions)*(tr.Half+1) {
		t.Fatalf("%s: %d weights for %d spokes of %d samples", d.Name, len(w), len(tr.Directions), tr.Half+1)
	}
	for i, v := range w {
		if !(v >= 0) || math.IsInf(v, 0) {
			t.Fatalf("%s: weight %d is %g", d.Name, i, v)
		}
	}
	return w
}

// total sums weights over samples and mirrors.
func total(tr Trajectory, w []float64) float64 {
	total := 0.0
	for i, v := range w {
		if i%(tr.Half+1) > 0 {
			v *= 2
		}
		total += v
	}
	return total
}

func TestCellsFillTheDiscAndTheBall(t *testing.T) {
	for name, tr := range trajectories() {
		w := weigh(t, Densities[1], tr)
		k := (float64(tr.Half) + 0.5) * tr.DeltaK
		want := math.Pi * k * k
		if tr.Dim == 3 {
			want = 4 * math.Pi / 3 * k * k * k
		}
		if got := total(tr, w); !(math.Abs(got/want-1) <= 1e-7) { // the regions on the sphere are good to 1e-8
			t.Errorf("%s: cells fill %.9g, want %.9g", name, got, want)
		}
	}
}

// The bias told in the help text, as the difference to the unbiased weights: the leading term of Euler and Maclaurin's
// formula for the corner of |k| in 2D, and dk³/12 times the unfiltered projections in 3D.
func TestCellsReadACompactBodyHighAsTold(t *testing.T) {
	for name, tr := range trajectories() {
		a := 0.15 / tr.DeltaK
		difference := func(r float64) float64 {
			f := body(tr.Dim, a)
			return at(tr, weigh(t, Densities[1], tr), f, r) - at(tr, weigh(t, Densities[0], tr), f, r)
		}
		want := math.Pi * math.Pi / 12 * 0.15 * 0.15 * float64(tr.Dim-1)
		// Next terms: a few per cent in 2D; in 3D the projections are sampled up to the last sample only.
		if got := difference(0); !(math.Abs(got/want-1) <= 0.06) {
			t.Errorf("%s: bias %.5f in the middle, told %.5f", name, got, want)
		}
		if tr.Dim == 2 {
			if got := difference(0.8 * a); !(math.Abs(got/want-1) <= 0.06) {
				t.Errorf("%s: bias %.5f near the rim, told %.5f", name, got, want)
			}
		}
	}
}

// The iteration's purpose: as seen through its kernel the density of directions becomes even, or at least twice as even
// as with solid angles. The price in noise Σ axis² is bounded.
func TestIterationEvensOutTheDensityOfDirections(t *testing.T) {
	for name, tr := range trajectories() {
		axes, member := distinctAxes(tr.Directions)
		psi := neighboursOf(axes, psiReach*spacing(tr.Dim, len(axes)))
		unevenness := func(d Density) (spread, noise float64) {
			w := make([]float64, len(axes))
			weights := weigh(t, d, tr)
			for s, a := range member {
				w[a] += weights[s*(tr.Half+1)+tr.Half]
			}
			low, high := math.Inf(1), 0.0
			for i := range axes {
				v := smoothed(w, psi[i])
				low, high = math.Min(low, v), math.Max(high, v)
				noise += w[i] * w[i]
			}
			return high/low - 1, noise
		}
		solid, solidNoise := unevenness(Densities[0])
		even, evenNoise := unevenness(Densities[2])
		// Measured 0.000, 0.001, 0.029 and 0.113 (solid angles 0.295); noise variance at most 8 % more.
		if !(even <= 0.03 || even <= solid/2) || !(evenNoise <= 1.1*solidNoise) {
			t.Errorf("%s: density uneven by %.3f (solid angles %.3f), noise %.3f times that of solid angles", name, even, solid, evenNoise/solidNoise)
		}
	}
}

func TestIterationSharesARepeatedAxis(t *testing.T) {
	tr := Trajectory{Dim: 3, Directions: goldenHalfSphere(80), DeltaK: 0.03, Half: 4}
	alone := weigh(t, Densities[2], tr)
	n := tr.Directions[17]
	tr.Directions = append(tr.Directions, [3]float64{-n[0], -n[1], -n[2]})
	both := weigh(t, Densities[2], tr)
	for m := range 5 {
		first, second, whole := both[17*5+m], both[80*5+m], alone[17*5+m]
		if !(math.Abs(first-second) <= 1e-12*whole) || !(math.Abs(first+second-whole) <= 1e-9*whole) { // rounding
			t.Errorf("sample %d: %g and %g of %g", m, first, second, whole)
		}
	}
}

func TestUnknownAndImpossibleDensitiesAreRefused(t *testing.T) {
	if _, err := DensityNamed("voronoi"); err == nil {
		t.Error("a density that is not in the table was found")
	}
	for _, d := range Densities {
		if got, err := DensityNamed(d.Name); err != nil || got.Label != d.Label {
			t.Errorf("%s: found %q, %v", d.Name, got.Label, err)
		}
		if _, err := d.Weights(Trajectory{Dim: 3, Directions: [][3]float64{{1, 0, 0}, {0, 1, 0}}, DeltaK: 0.02, Half: 8}); err == nil {
			t.Errorf("%s: two axes in 3D were weighed", d.Name)
		}
	}
}
