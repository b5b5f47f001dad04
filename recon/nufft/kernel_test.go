package nufft

import (
	"math"
	"testing"
)

// aliasing lists figures computed with 20-digit arithmetic from the exact transform of the kernel (120 alias terms),
// independently of this program: β of Beatty's formula, the largest √(Σ_{p≠0} Ĉ(x+p)²)/|Ĉ(x)| over the field of view, and
// its value in the middle.
var aliasing = []struct {
	oversampling        float64
	width               int
	beta, worst, centre float64
}{
	{1.25, 3, 4.907325, 4.114e-02, 1.312e-02},
	{1.25, 4, 6.996659, 1.044e-02, 1.646e-03},
	{1.25, 5, 8.996152, 3.042e-03, 1.428e-04},
	{1.25, 6, 10.955108, 8.663e-04, 2.267e-05},
	{1.25, 7, 12.892018, 2.423e-04, 5.210e-06},
	{1.25, 8, 14.815532, 6.638e-05, 8.463e-07},
	{1.5, 3, 5.619852, 1.495e-02, 7.823e-03},
	{1.5, 4, 7.892285, 2.912e-03, 4.960e-04},
	{1.5, 5, 10.087943, 5.406e-04, 7.026e-05},
	{1.5, 6, 12.248183, 1.014e-04, 1.275e-05},
	{1.5, 7, 14.388967, 1.863e-05, 1.264e-06},
	{1.5, 8, 16.517861, 3.432e-06, 6.817e-08},
	{2.0, 3, 6.486077, 5.611e-03, 2.742e-03},
	{2.0, 4, 8.996152, 7.143e-04, 2.745e-04},
	{2.0, 5, 11.440963, 8.941e-05, 3.454e-05},
	{2.0, 6, 13.855100, 1.117e-05, 1.286e-06},
	{2.0, 7, 16.252239, 1.370e-06, 2.305e-07},
	{2.0, 8, 18.638940, 1.665e-07, 2.467e-08},
}

func TestKernelHasTheKnownShapeAndAliases(t *testing.T) {
	for _, row := range aliasing {
		k := newKernel(row.width, row.oversampling)
		if !(math.Abs(k.beta-row.beta) <= 1e-6) { // the digits given
			t.Errorf("width %d, oversampling %g: β %.6f, want %.6f", row.width, row.oversampling, k.beta, row.beta)
		}
		worst := 0.0
		for i := range 201 {
			worst = math.Max(worst, k.aliasAt(float64(i)/200/(2*row.oversampling)))
		}
		// 0.05 % from the digits given, the rest from fewer alias terms and the grid of places.
		if !(math.Abs(worst/row.worst-1) <= 0.005) {
			t.Errorf("width %d, oversampling %g: worst alias %.4g, want %.4g", row.width, row.oversampling, worst, row.worst)
		}
		// In the middle the transform crosses zero near every alias, and fewer terms tell more.
		if centre := k.aliasAt(0); !(math.Abs(centre/row.centre-1) <= 0.03) {
			t.Errorf("width %d, oversampling %g: alias in the middle %.4g, want %.4g", row.width, row.oversampling, centre, row.centre)
		}
	}
}

// The aliases known from the transform are those that single points really make, at the voxel that suffers most.
func TestSinglePointsMakeTheKnownAliases(t *testing.T) {
	const n, points = 128, 400
	for _, row := range aliasing {
		p, err := NewPlan[float64]([3]int{n, 1, 1}, Settings{row.width, row.oversampling})
		if err != nil {
			t.Fatal(err)
		}
		var square [n]float64
		for j := range points {
			k := -20 + 40*math.Mod(float64(j)*0.6180339887498949, 1) // evenly between cells, in scattered order
			image, err := p.Adjoint([][3]float64{{k}}, []float64{1, 0}, 1)
			if err != nil {
				t.Fatal(err)
			}
			for i := range square {
				sin, cos := math.Sincos(2 * math.Pi * k * float64(i-n/2) / n)
				re, im := image[2*i]-cos, image[2*i+1]-sin
				square[i] += (re*re + im*im) / points
			}
		}
		worst := 0.0
		for _, v := range square {
			worst = math.Max(worst, math.Sqrt(v))
		}
		// 400 places between cells, and the worst place may lie between two voxels.
		if !(math.Abs(worst/row.worst-1) <= 0.03) {
			t.Errorf("width %d, oversampling %g: worst alias %.4g, want %.4g", row.width, row.oversampling, worst, row.worst)
		}
	}
}

// I₀ from Abramowitz & Stegun, Handbook of Mathematical Functions (1964), table 9.8 (I₀(5) = exp(5)·0.1835408126) and
// its integral (1/π) ∫ exp(x cos θ) dθ by the trapezoidal rule, which converges exponentially.
func TestBesselFunctionEqualsItsIntegral(t *testing.T) {
	if got := besselI0(5) * math.Exp(-5); !(math.Abs(got-0.1835408126) <= 1e-10) {
		t.Errorf("exp(-5) I₀(5) = %.10f, the table has 0.1835408126", got)
	}
	for _, x := range []float64{0, 0.5, 3, 11.5, 18.6} {
		sum := 0.0
		for i := range 64 {
			sum += math.Exp(x * math.Cos(2*math.Pi*float64(i)/64))
		}
		if got, want := besselI0(x), sum/64; !(math.Abs(got/want-1) <= 1e-13) { // rounding of 64 terms
			t.Errorf("I₀(%g) = %.15g, its integral is %.15g", x, got, want)
		}
	}
}

func TestTransformEqualsTheIntegralOfTheKernel(t *testing.T) {
	const steps = 20000
	for width := MinWidth; width <= MaxWidth; width++ {
		k := newKernel(width, 1.5)
		for _, x := range []float64{0, 0.2, 1. / 3, k.beta / (math.Pi * float64(width)), 1.3} {
			sum, h := 0.0, float64(width)/steps
			for i := range steps { // middle rule
				u := -float64(width)/2 + (float64(i)+0.5)*h
				sum += k.exact(u) * math.Cos(2*math.Pi*u*x) * h
			}
			if got := k.transform(x); !(math.Abs(got-sum) <= 1e-6) { // the middle rule errs by h²/24 times the curvature
				t.Errorf("width %d at %g: transform %.9f, integral %.9f", width, x, got, sum)
			}
		}
	}
}

func TestPolynomialsFollowTheKernel(t *testing.T) {
	for _, row := range aliasing {
		k := newKernel(row.width, row.oversampling)
		var w [MaxWidth]float64
		for i := range 1000 {
			u := 7 + float64(i)/1000
			first := k.weigh(u, &w)
			for cell := range row.width {
				want := k.exact(float64(first+cell) - u)
				if !(math.Abs(w[cell]-want) <= 2*polynomialShare*k.aliasing(row.oversampling)) { // promised, between fitted places
					t.Fatalf("width %d at %g, cell %d: %.12g, kernel %.12g", row.width, u, cell, w[cell], want)
				}
			}
		}
	}
}

func TestWidthGrowsAsTheToleranceShrinks(t *testing.T) {
	for _, c := range []struct {
		tolerance, oversampling float64
		width                   int
	}{
		// Widths that keep √3 times the root mean square alias within the tolerance, checked by the sums of the next file.
		{3e-2, 1.5, 3}, {4e-3, 1.5, 4}, {1e-3, 1.5, 5}, {1e-2, 2, 3}, {1e-3, 2, 4}, {1e-6, 2, 8},
	} {
		got, err := Width(c.tolerance, c.oversampling)
		if err != nil || got > c.width {
			t.Errorf("tolerance %g at oversampling %g: width %d (%v), want at most %d", c.tolerance, c.oversampling, got, err, c.width)
		}
		if err == nil && got > MinWidth && !(Error(3, got-1, c.oversampling) > c.tolerance) {
			t.Errorf("tolerance %g at oversampling %g: width %d is more than needed", c.tolerance, c.oversampling, got)
		}
	}
}
