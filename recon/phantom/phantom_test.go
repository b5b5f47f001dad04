package phantom

import (
	"math"
	"math/cmplx"
	"testing"

	"torrloom/recon/acquisition"
)

func ellipse(a, b, x, y, deg float64) Shape {
	return Shape{Dim: 2, SemiMM: [3]float64{a, b}, CentreMM: [3]float64{x, y}, AngleDeg: deg}
}

func ellipsoid(a, b, c, x, y, z, deg float64) Shape {
	return Shape{Dim: 3, SemiMM: [3]float64{a, b, c}, CentreMM: [3]float64{x, y, z}, AngleDeg: deg}
}

func summed(dim int, density []float64, shapes []Shape) *Phantom {
	var bodies []Body
	for i, s := range shapes {
		bodies = append(bodies, Body{Shape: s, Density: density[i]})
	}
	return Sum(dim, bodies...)
}

// Geometry of Shepp & Logan, IEEE Trans. Nucl. Sci. 21 (1974) 21-43, as carried by public transcriptions (centre of the
// ninth ellipse at y = -0.606).
var headShapes = []Shape{
	ellipse(0.69, 0.92, 0, 0, 0), ellipse(0.6624, 0.874, 0, -0.0184, 0), ellipse(0.11, 0.31, 0.22, 0, -18),
	ellipse(0.16, 0.41, -0.22, 0, 18), ellipse(0.21, 0.25, 0, 0.35, 0), ellipse(0.046, 0.046, 0, 0.1, 0),
	ellipse(0.046, 0.046, 0, -0.1, 0), ellipse(0.046, 0.023, -0.08, -0.605, 0), ellipse(0.023, 0.023, 0, -0.606, 0),
	ellipse(0.023, 0.046, 0.06, -0.605, 0),
}

var (
	sheppLogan1974 = summed(2, []float64{2, -0.98, -0.02, -0.02, 0.01, 0.01, 0.01, 0.01, 0.01, 0.01}, headShapes)
	// Densities of higher contrast, attributed to Toft (thesis, Technical University of Denmark, 1996).
	toft = summed(2, []float64{1, -0.8, -0.2, -0.2, 0.1, 0.1, 0.1, 0.1, 0.1, 0.1}, headShapes)
	// Geometry and densities of Yu, Ye & Wang, Proc. SPIE 5535 (2004) 550-557, as carried by public transcriptions.
	yuYeWang = summed(3, []float64{1, -0.8, -0.2, -0.2, 0.2, 0.2, 0.1, 0.1, 0.2, -0.2}, []Shape{
		ellipsoid(0.69, 0.92, 0.9, 0, 0, 0, 0), ellipsoid(0.6624, 0.874, 0.88, 0, 0, 0, 0),
		ellipsoid(0.41, 0.16, 0.21, -0.22, 0, -0.25, 108), ellipsoid(0.31, 0.11, 0.22, 0.22, 0, -0.25, 72),
		ellipsoid(0.21, 0.25, 0.5, 0, 0.35, -0.25, 0), ellipsoid(0.046, 0.046, 0.046, 0, 0.1, -0.25, 0),
		ellipsoid(0.046, 0.023, 0.02, -0.08, -0.65, -0.25, 0), ellipsoid(0.046, 0.023, 0.02, 0.06, -0.65, -0.25, 90),
		ellipsoid(0.056, 0.04, 0.1, 0.06, -0.105, 0.625, 90), ellipsoid(0.056, 0.056, 0.1, 0, 0.1, 0.625, 0),
	})
	tilted2D = summed(2, []float64{1}, []Shape{ellipse(0.6, 0.25, 0.1, -0.2, 30)})
	tilted3D = summed(3, []float64{1}, []Shape{ellipsoid(0.5, 0.3, 0.2, 0.1, -0.05, 0.15, 25)})
)

// Values computed with 20 to 50 digits by two routes each (closed form and numerical integration), outside this program.
func TestProjectionSpotValues(t *testing.T) {
	angle := func(deg float64) [3]float64 {
		sin, cos := math.Sincos(deg * math.Pi / 180)
		return [3]float64{cos, sin, 0}
	}
	along := func(x, y, z float64) [3]float64 {
		l := math.Sqrt(x*x + y*y + z*z)
		return [3]float64{x / l, y / l, z / l}
	}
	for _, c := range []struct {
		name string
		p    *Phantom
		n    [3]float64
		x    float64
		want float64
	}{
		{"tilted ellipse", tilted2D, angle(0), 0.3, 0.520548645993847},
		{"tilted ellipse", tilted2D, angle(45), 0.1, 0.491905881461423},
		{"tilted ellipse", tilted2D, angle(120), 0.05, 0},
		{"tilted ellipse", tilted2D, angle(17), -0.3, 0.418245762613288},
		{"Shepp-Logan 1974", sheppLogan1974, angle(0), 0, 1.97426},
		{"Shepp-Logan 1974", sheppLogan1974, angle(45), 0.1, 1.6506507189264},
		{"Shepp-Logan 1974", sheppLogan1974, angle(72), -0.6, 1.13221053671679},
		{"Toft", toft, angle(90), 0.35, 0.326767274009176},
		{"Toft", toft, angle(45), 0.1, 0.362115414705124},
		{"tilted ellipsoid", tilted3D, along(1, 1, 1), 0.1, 0.229939639322038},
		{"tilted ellipsoid", tilted3D, along(0, 3, 4), -0.02, 0.296755395344457},
		{"Yu-Ye-Wang", yuYeWang, along(1, 1, 1), 0.1, 0.578303378097909},
		{"Yu-Ye-Wang", yuYeWang, along(2, -1, 2), -0.2, 0.567899693346595},
		{"Yu-Ye-Wang", yuYeWang, along(0, 1, 0), 0.35, 0.499904921313808},
	} {
		// A few roundings of sums of size 2.
		if got := c.p.Projection(c.n, c.x); !(math.Abs(got-c.want) <= 5e-14) {
			t.Errorf("%s along %v at %g: %.15f, want %.15f", c.name, c.n, c.x, got, c.want)
		}
	}
}

func TestTransformSpotValues(t *testing.T) {
	for _, c := range []struct {
		name string
		p    *Phantom
		k    [3]float64
		want complex128
	}{
		{"tilted ellipse", tilted2D, [3]float64{1, 0, 0}, 0.0446656596868312 - 0.0324515013038975i},
		{"tilted ellipse", tilted2D, [3]float64{5, -4, 0}, 0.00233449613022664 + 0.00718484030759788i},
		{"Shepp-Logan 1974", sheppLogan1974, [3]float64{}, 2.2017566918903},
		{"Shepp-Logan 1974", sheppLogan1974, [3]float64{2, -3, 0}, 0.0138440223533829 - 0.0113604018574958i},
		{"Toft", toft, [3]float64{}, 0.495264604847915},
		{"Toft", toft, [3]float64{8, 5, 0}, 0.0102990326674606 + 0.00239724815025144i},
		{"tilted ellipsoid", tilted3D, [3]float64{1, -1, 2}, -0.0140103225483 - 0.004552229746519i},
		{"tilted ellipsoid", tilted3D, [3]float64{2, 3, -1}, 0.001416580062296 + 0.001029205659583i},
		{"Yu-Ye-Wang", yuYeWang, [3]float64{}, 0.690095264398523},
		{"Yu-Ye-Wang", yuYeWang, [3]float64{4, 5, -3}, -0.00453867158292575 + 0.000103835726149186i},
	} {
		if got := c.p.Transform(c.k); !(cmplx.Abs(got-c.want) <= 2e-13) { // printed to 13 digits
			t.Errorf("%s at %v: %.15f, want %.15f", c.name, c.k, got, c.want)
		}
	}
}

func TestSeriesMeetsClosedFormWhereTheyJoin(t *testing.T) {
	for _, dim := range []int{2, 3} {
		s := Shape{Dim: dim}
		below, above := s.form(0.1*(1-1e-12)), s.form(0.1)
		// The closed form loses 3 eps/q² there, about 7e-14.
		if !(math.Abs(below-above) <= 3e-13) {
			t.Errorf("%dD: %v below the join, %v above", dim, below, above)
		}
	}
}

// Central slice: the transform along a line through the origin is the transform of the projection.
func TestTransformIsTheTransformOfTheProjection(t *testing.T) {
	n := [3]float64{2. / 3, -1. / 3, 2. / 3}
	const k, steps = 1.7, 40000
	var sum complex128
	for i := range steps {
		x := -2 + 4*(float64(i)+0.5)/steps
		sum += complex(tilted3D.Projection(n, x)*4/steps, 0) * cmplx.Rect(1, -2*math.Pi*k*x)
	}
	want := tilted3D.Transform([3]float64{k * n[0], k * n[1], k * n[2]})
	if !(cmplx.Abs(sum-want) <= 1e-8) { // midpoint sum of a function with a kink, step 1e-4
		t.Errorf("sum over the projection %v, transform %v", sum, want)
	}
}

func TestNestedBodyReplacesItsSurroundings(t *testing.T) {
	outer := Body{Name: "outer", Shape: ellipse(2, 2, 0, 0, 0), Density: 3, R1PerUS: 1}
	inner := Body{Name: "inner", Shape: ellipse(1, 0.5, 0.3, 0, 40), Density: 5, R1PerUS: 0.2}
	core := Body{Name: "core", Shape: ellipse(0.2, 0.2, 0.3, 0, 0), Density: 1, R1PerUS: 0.1}
	p, err := Nested(2, outer, inner, core)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		at   [3]float64
		want float64
	}{{[3]float64{1.7, 0, 0}, 3}, {[3]float64{0.6, 0.2, 0}, 5}, {[3]float64{0.3, 0.1, 0}, 1}, {[3]float64{3, 0, 0}, 0}} {
		if got := p.Density(c.at); !(math.Abs(got-c.want) <= 1e-15) {
			t.Errorf("density at %v is %g, want %g", c.at, got, c.want)
		}
	}
	want := 3*outer.Shape.Measure() + 2*inner.Shape.Measure() - 4*core.Shape.Measure()
	if got := real(p.Transform([3]float64{})); !(math.Abs(got-want) <= 1e-12) {
		t.Errorf("total %g, want %g", got, want)
	}
	if _, err := Nested(2, outer, Body{Shape: ellipse(1, 1, 1.5, 0, 0)}); err == nil {
		t.Error("a body across the rim of another was accepted")
	}
}

// At the echo centre every spoke of every delay holds the whole signal, which is known in closed form.
func TestEchoCentreHoldsTheWholeSignal(t *testing.T) {
	pr := Protocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{0.5, 3, 40}, EchoTimeUS: 1, Inversion: 1.8,
		Directions: GoldenHalfSphere(5), GradientMTPerM: 20, DwellNS: 5, Samples: 21, TimeZeroSample: 10, PhaseRad: 0.4}
	a, err := Demo().Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	for d, delay := range pr.DelayUS {
		want := 0.0
		for _, b := range Demo().parts {
			want += b.Density * b.Shape.Measure() * (1 - 1.8*math.Exp(-b.R1PerUS*delay)) * math.Exp(-b.R2PerUS)
		}
		for s := range a.Shots {
			got := complex128(a.Trace(d, s)[10]) * cmplx.Rect(1, -0.4)
			if !(cmplx.Abs(got-complex(want, 0)) <= 1e-6*real(complex128(a.Signal[0]))+1e-2) { // float32 of about 5000
				t.Errorf("delay %d shot %d: %v, want %g", d, s, got, want)
			}
		}
	}
}

func TestHalfSphereDirectionsHaveTheMomentsOfASphere(t *testing.T) {
	n := GoldenHalfSphere(1000)
	var second [3][3]float64
	fourth := 0.0
	for _, v := range n {
		for i := range 3 {
			for j := range 3 {
				second[i][j] += v[i] * v[j] / 1000
			}
		}
		fourth += v[2] * v[2] * v[2] * v[2] / 1000
	}
	for i := range 3 {
		for j := range 3 {
			want := 0.0
			if i == j {
				want = 1. / 3
			}
			if !(math.Abs(second[i][j]-want) <= 1e-3) { // measured 3.5e-4 for 1000 points of such a spiral
				t.Errorf("mean n%d n%d is %.5f, want %.5f", i, j, second[i][j], want)
			}
		}
	}
	if !(math.Abs(fourth-0.2) <= 1e-3) {
		t.Errorf("mean nz⁴ is %.5f, want 1/5", fourth)
	}
}

func TestNoiseHasTheAskedSpreadInBothChannels(t *testing.T) {
	pr := Protocol{Sequence: acquisition.EchoDecay, DelayUS: []float64{1}, Directions: EqualAngles(40),
		GradientMTPerM: 10, DwellNS: 5, Samples: 500, TimeZeroSample: 250, NoiseSD: 0.25, Offset: 3 - 2i}
	a, err := Sum(2).Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	var sum, square [2]float64
	for _, v := range a.Signal {
		for c, x := range [2]float64{float64(real(v)), float64(imag(v))} {
			sum[c] += x
			square[c] += x * x
		}
	}
	n := float64(len(a.Signal))
	for c, want := range [2]float64{3, -2} {
		mean := sum[c] / n
		sd := math.Sqrt(square[c]/n - mean*mean)
		if !(math.Abs(mean-want) <= 5*0.25/math.Sqrt(n)) || !(math.Abs(sd-0.25) <= 5*0.25/math.Sqrt(2*n)) { // five SD each
			t.Errorf("channel %d: mean %.4f SD %.4f, want %g and 0.25", c, mean, sd, want)
		}
	}
}
