package sampling

import (
	"math"
	"math/rand/v2"
	"testing"
)

func sum(x []float64) float64 {
	total := 0.0
	for _, v := range x {
		total += v
	}
	return total
}

func goldenHalfSphere(n int) [][3]float64 {
	out := make([][3]float64, n)
	for i := range out {
		z := 1 - (float64(i)+0.5)/float64(n)
		sin, cos := math.Sincos(float64(i) * math.Pi * (3 - math.Sqrt(5)))
		r := math.Sqrt(1 - z*z)
		out[i] = [3]float64{r * cos, r * sin, z}
	}
	return out
}

// The six axes through the corners of an icosahedron share the half sphere evenly, by symmetry.
func TestIcosahedronAxesShareTheHalfSphereEvenly(t *testing.T) {
	phi := (1 + math.Sqrt(5)) / 2
	var axes [][3]float64
	for _, s := range []float64{1, -1} {
		axes = append(axes, unit([3]float64{0, 1, s * phi}), unit([3]float64{1, s * phi, 0}), unit([3]float64{s * phi, 0, 1}))
	}
	w, err := AxisWeights(3, axes)
	if err != nil {
		t.Fatal(err)
	}
	for i, v := range w {
		if !(math.Abs(v-math.Pi/3) <= 1e-7) { // points are nudged by 1e-9
			t.Errorf("axis %d stands for %.9f sr, want %.9f", i, v, math.Pi/3)
		}
	}
}

// Coordinate axes: many points of the hull lie on common circles and planes, which must not matter.
func TestThreeCoordinateAxesGetAThirdEach(t *testing.T) {
	w, err := AxisWeights(3, [][3]float64{{1, 0, 0}, {0, 1, 0}, {0, 0, 1}})
	if err != nil {
		t.Fatal(err)
	}
	for i, v := range w {
		if !(math.Abs(v-2*math.Pi/3) <= 1e-7) {
			t.Errorf("axis %d stands for %.9f sr, want 2π/3", i, v)
		}
	}
}

func TestWeightsFillTheDirections(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	for _, n := range []int{3, 7, 50, 208, 828} {
		axes := make([][3]float64, n)
		for i := range axes {
			axes[i] = unit([3]float64{r.NormFloat64(), r.NormFloat64(), r.NormFloat64()})
		}
		w, err := AxisWeights(3, axes)
		if err != nil {
			t.Fatal(err)
		}
		if !(math.Abs(sum(w)-2*math.Pi) <= 1e-8*float64(n)) { // rounding of n signed areas after nudging by 1e-9
			t.Errorf("%d random axes fill %.9f sr, want 2π", n, sum(w))
		}
	}
	w, _ := AxisWeights(2, [][3]float64{{1, 0, 0}, {0.6, 0.8, 0}, {-0.8, 0.6, 0}, {0, 1, 0}})
	if !(math.Abs(sum(w)-math.Pi) <= 1e-14) {
		t.Errorf("four axes in a plane fill %.15f, want π", sum(w))
	}
}

// Independent of the hull: the share of random directions that are nearest to an axis.
func TestRegionsEqualCountsOfNearestRandomDirections(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	axes := make([][3]float64, 20)
	for i := range axes {
		axes[i] = unit([3]float64{r.NormFloat64(), r.NormFloat64(), r.NormFloat64() / 3})
	}
	w, err := AxisWeights(3, axes)
	if err != nil {
		t.Fatal(err)
	}
	const draws = 200000
	count := make([]float64, len(axes))
	for range draws {
		d := unit([3]float64{r.NormFloat64(), r.NormFloat64(), r.NormFloat64()})
		best, at := -1.0, 0
		for i, n := range axes {
			if c := math.Abs(dot(n, d)); c > best {
				best, at = c, i
			}
		}
		count[at]++
	}
	for i := range axes {
		share := w[i] / (2 * math.Pi)
		sd := math.Sqrt(share * (1 - share) / draws)
		if !(math.Abs(count[i]/draws-share) <= 5*sd) { // five standard deviations of a count
			t.Errorf("axis %d: region holds %.5f of directions, counted %.5f", i, share, count[i]/draws)
		}
	}
}

func TestAntipodesAndRepeatsCountAsOneAxis(t *testing.T) {
	axes := goldenHalfSphere(60)
	alone, err := AxisWeights(3, axes)
	if err != nil {
		t.Fatal(err)
	}
	n := axes[17]
	both, err := AxisWeights(3, append(axes, [3]float64{-n[0], -n[1], -n[2]}))
	if err != nil {
		t.Fatal(err)
	}
	for i := range axes {
		want := alone[i]
		if i == 17 {
			want /= 2
		}
		if !(math.Abs(both[i]-want) <= 1e-7) {
			t.Errorf("axis %d: %.9f with the antipode of axis 17 added, want %.9f", i, both[i], want)
		}
	}
}

// A grid even in polar angle and azimuth crowds the pole: its weights follow the band areas 2π(cos θ1 - cos θ2)/nφ.
func TestProductGridWeightsFollowBandAreas(t *testing.T) {
	const nTheta, nPhi = 12, 48
	var axes [][3]float64
	for i := range nTheta {
		sinT, cosT := math.Sincos((float64(i) + 0.5) * math.Pi / 2 / nTheta)
		for j := range nPhi {
			sinP, cosP := math.Sincos(float64(j) * 2 * math.Pi / nPhi)
			axes = append(axes, [3]float64{sinT * cosP, sinT * sinP, cosT})
		}
	}
	w, err := AxisWeights(3, axes)
	if err != nil {
		t.Fatal(err)
	}
	for i := range nTheta {
		top, bottom := float64(i)*math.Pi/2/nTheta, float64(i+1)*math.Pi/2/nTheta
		want := 2 * math.Pi * (math.Cos(top) - math.Cos(bottom)) / nPhi
		// Region borders between rings are great circles, not circles of latitude: a difference of order (Δφ)².
		if got := sum(w[i*nPhi:(i+1)*nPhi]) / nPhi; !(math.Abs(got-want) <= 0.01*want) {
			t.Errorf("ring %d: mean weight %.6f, band area %.6f", i, got, want)
		}
	}
}

func TestFlat3DSetIsRefused(t *testing.T) {
	var axes [][3]float64
	for i := range 20 {
		sin, cos := math.Sincos(float64(i) * math.Pi / 20)
		axes = append(axes, [3]float64{cos, 0, sin})
	}
	if _, err := AxisWeights(3, axes); err == nil {
		t.Error("spokes in one plane were accepted as a 3D set")
	}
	if _, err := AxisWeights(3, axes[:2]); err == nil {
		t.Error("two axes were accepted as a 3D set")
	}
}

func TestEveryWindowIsOneAtZeroAndNeverRises(t *testing.T) {
	for _, w := range Windows {
		last := w.Weight(0)
		if !(math.Abs(last-1) <= 1e-15) {
			t.Errorf("%s is %g at zero", w.Name, last)
		}
		for u := 0.01; u <= 1; u += 0.01 {
			v := w.Weight(u)
			if !(v <= last && v >= -1e-15) {
				t.Errorf("%s rises or turns negative at %g", w.Name, u)
			}
			last = v
		}
		if w.Label == "" || w.Help == "" {
			t.Errorf("%s lacks a label or a help text", w.Name)
		}
		if s := w.Sample(10, 0.1, 0.55); s[5] == 0 && w.Weight(0.5/0.55) != 0 || s[6] != 0 {
			t.Errorf("%s does not end at the cutoff: %v", w.Name, s)
		}
	}
	if _, err := WindowNamed("han"); err == nil {
		t.Error("an unknown window was accepted")
	}
}

// Values from Ramachandran & Lakshminarayanan 1971 and Shepp & Logan 1974 at unit sample distance.
func TestKernelValues(t *testing.T) {
	ramp := map[int]float64{0: 0.25, 1: -0.10132118364233777, 2: 0, 3: -0.011257909293593086, 15: -0.00045031637174372343}
	for n, want := range ramp {
		if got := RampKernel(n); !(math.Abs(got-want) <= 1e-17) {
			t.Errorf("ramp kernel at %d: %v, want %v", n, got, want)
		}
	}
	sheppLogan := map[int]float64{0: 0.20264236728467554, 1: -0.067547455761558514, 4: -0.0032165455124551673, 16: -0.00019808638053242966}
	for n, want := range sheppLogan {
		if got := SheppLoganKernel(n); !(math.Abs(got-want) <= 1e-16) {
			t.Errorf("Shepp-Logan kernel at %d: %v, want %v", n, got, want)
		}
	}
	// The partial sum over |n| <= N is (2/π²)/(2N+1) exactly.
	partial := SheppLoganKernel(0)
	for n := 1; n <= 50; n++ {
		partial += 2 * SheppLoganKernel(n)
	}
	if want := 2 / (math.Pi * math.Pi) / 101; !(math.Abs(partial-want) <= 1e-15) {
		t.Errorf("partial sum %v, want %v", partial, want)
	}
}

// The Shepp-Logan kernel is the ramp kernel seen through the sinc window: at the sample frequencies of a long period both
// give |f|·sinc(f) = sin(πf)/π.
func TestSincWindowOnTheRampIsTheSheppLoganKernel(t *testing.T) {
	const half = 256
	ramp := Ramp(2, half, 1.0/(2*half))
	for _, m := range []int{16, 64, 128, 255} {
		f := float64(m) / (2 * half)
		u := float64(m) / half
		want := SheppLoganKernel(0)
		for n := 1; n < 20000; n++ {
			want += 2 * SheppLoganKernel(n) * math.Cos(2*math.Pi*f*float64(n))
		}
		window, _ := WindowNamed("sinc")
		// Cutting the ramp kernel to one period leaves a difference of order 1/half².
		if got := ramp[m] * window.Weight(u); !(math.Abs(got-want) <= 2.0/(half*half)) {
			t.Errorf("f = %.3f: windowed ramp %.7f, kernel transform %.7f", f, got, want)
		}
	}
}

func TestRamp3DIsKSquared(t *testing.T) {
	for m, w := range Ramp(3, 10, 0.25) {
		if want := 0.0625 * float64(m*m); w != want {
			t.Errorf("sample %d: %v, want %v", m, w, want)
		}
	}
}

func BenchmarkAxisWeights3000(b *testing.B) {
	axes := goldenHalfSphere(3000)
	for b.Loop() {
		if _, err := AxisWeights(3, axes); err != nil {
			b.Fatal(err)
		}
	}
}
