package nufft

import (
	"math"

	"torrloom/recon/fault"
)

// kernel is C(t) = I₀(β √(1-(2t/W)²))/I₀(β) for |t| ≤ W/2 cells, 0 beyond. As an even power series in t it is smooth up
// to the ends, so that a polynomial per cell represents it closely.
type kernel struct {
	width      int
	beta       float64
	height     float64     // I₀(β)
	polynomial [][]float64 // [degree, highest first][cell of the kernel], in z = -1..1 across the cell
}

// Beta returns the shape of the kernel for a width in cells and an oversampling,
//
//	β = π √( (W/α)² (α-½)² - 0.8 )
//
// Source: Beatty, Nishimura & Pauly, IEEE Trans. Med. Imaging 24 (2005) 799, eq. 5.
func Beta(width int, oversampling float64) float64 {
	w := float64(width) / oversampling * (oversampling - 0.5)
	return math.Pi * math.Sqrt(w*w-0.8)
}

// polynomialShare is the error of the polynomials as a share of that of the method: too small to be seen in it.
const polynomialShare = 0.02

func newKernel(width int, oversampling float64) *kernel {
	k := &kernel{width: width, beta: Beta(width, oversampling)}
	k.height = besselI0(k.beta)
	wanted := polynomialShare * k.aliasing(oversampling)
	for degree := width; degree < 24; degree++ { // 24 is past what float64 can resolve
		k.fit(degree)
		if k.misfit() <= wanted {
			break
		}
	}
	return k
}

// exact returns C(t).
func (k *kernel) exact(t float64) float64 {
	u := 2 * t / float64(k.width)
	if u*u > 1 {
		return 0
	}
	return besselI0(k.beta*math.Sqrt(1-u*u)) / k.height
}

// transform returns ∫ C(t) exp(-i2πtx) dt = W sinh(s)/(s I₀(β)), s = √(β²-(πWx)²), with x in cycles per cell. Where s is
// imaginary, sinh(s)/s is sin|s|/|s|.
// Source: Jackson et al. 1991, table I.
func (k *kernel) transform(x float64) float64 {
	w := math.Pi * float64(k.width) * x
	square := k.beta*k.beta - w*w
	s := math.Sqrt(math.Abs(square))
	switch {
	case s < 1e-4: // both branches are 1 + square/6 there, to 1e-17
		return float64(k.width) * (1 + square/6) / k.height
	case square > 0:
		return float64(k.width) * math.Sinh(s) / s / k.height
	}
	return float64(k.width) * math.Sin(s) / s / k.height
}

// besselI0 returns the modified Bessel function I₀(x) = Σ ((x/2)^m/m!)². All terms are positive, so nothing cancels.
func besselI0(x float64) float64 {
	sum, term := 1.0, 1.0
	for m := 1.0; term > 1e-17*sum; m++ {
		term *= x / 2 / m * (x / 2 / m)
		sum += term
	}
	return sum
}

// fit interpolates the kernel in every cell at Chebyshev nodes.
func (k *kernel) fit(degree int) {
	k.polynomial = make([][]float64, degree+1)
	for d := range k.polynomial {
		k.polynomial[d] = make([]float64, k.width)
	}
	for cell := range k.width {
		for d, c := range chebyshevPowers(degree, func(z float64) float64 { return k.exact(k.place(cell, z)) }) {
			k.polynomial[degree-d][cell] = c
		}
	}
}

// place returns t at z = -1..1 of a cell of the kernel.
func (k *kernel) place(cell int, z float64) float64 {
	return float64(cell) - float64(k.width)/2 + (z+1)/2
}

// chebyshevPowers returns the coefficients of z⁰, z¹, ... of the polynomial that equals f at the Chebyshev nodes.
func chebyshevPowers(degree int, f func(float64) float64) []float64 {
	n := degree + 1
	powers := make([]float64, n)
	previous, current := make([]float64, n), make([]float64, n) // powers of T_{j-1} and T_j
	current[0] = 1
	for j := range n {
		c := 0.0
		for i := range n {
			angle := math.Pi * (float64(i) + 0.5) / float64(n)
			c += f(math.Cos(angle)) * math.Cos(float64(j)*angle) * 2 / float64(n)
		}
		if j == 0 {
			c /= 2
		}
		next := make([]float64, n)
		for i, t := range current {
			powers[i] += c * t
			if i+1 < n {
				next[i+1] += t * float64(min(j+1, 2)) // T₁ = z T₀, then T_{j+1} = 2z T_j - T_{j-1}
			}
			next[i] -= previous[i]
		}
		previous, current = current, next
	}
	return powers
}

// misfit returns the largest difference of polynomials and kernel.
func (k *kernel) misfit() float64 {
	const points = 40
	worst := 0.0
	var w [MaxWidth]float64
	for i := range points + 1 {
		z := 2*float64(i)/points - 1
		k.evaluate(z, &w)
		for cell := range k.width {
			worst = math.Max(worst, math.Abs(w[cell]-k.exact(k.place(cell, z))))
		}
	}
	return worst
}

// evaluate puts the kernel at z of every cell into w.
func (k *kernel) evaluate(z float64, w *[MaxWidth]float64) {
	out := w[:k.width]
	copy(out, k.polynomial[0])
	for _, row := range k.polynomial[1:] {
		row = row[:len(out)]
		for i, v := range out {
			out[i] = v*z + row[i]
		}
	}
}

// weigh returns the first cell that a point at u touches, and puts the kernel at it and the following into w.
func (k *kernel) weigh(u float64, w *[MaxWidth]float64) int {
	edge := u - float64(k.width)/2
	first := math.Ceil(edge)
	k.evaluate(2*(first-edge)-1, w)
	return int(first)
}

// aliasTerms is how many periods to either side are counted as alias; beyond, the transform has fallen as 1/x and adds
// less than 1 % to the sum.
const aliasTerms = 40

// aliasAt returns the relative error, root mean square over the places of a point between cells, that the finite kernel
// makes at x cycles per cell: √(Σ_{p≠0} Ĉ(x+p)²)/|Ĉ(x)|.
func (k *kernel) aliasAt(x float64) float64 {
	sum := 0.0
	for p := 1; p <= aliasTerms; p++ {
		left, right := k.transform(x-float64(p)), k.transform(x+float64(p))
		sum += left*left + right*right
	}
	return math.Sqrt(sum) / math.Abs(k.transform(x))
}

// aliasing returns the root mean square of aliasAt over the image.
func (k *kernel) aliasing(oversampling float64) float64 {
	const places = 24
	sum := 0.0
	for i := range places {
		a := k.aliasAt((float64(i) + 0.5) / places / (2 * oversampling))
		sum += a * a
	}
	return math.Sqrt(sum / places)
}

// Error returns the expected relative error, in the root mean square over a dim-dimensional image, of sums over
// scattered points: √dim times the root mean square of the aliases of the kernel. An image whose object keeps away from
// the rim of the field of view does better, since aliases are strongest there.
//
// Exact for white values at points spread evenly between cells.
func Error(dim, width int, oversampling float64) float64 {
	k := &kernel{width: width, beta: Beta(width, oversampling)}
	k.height = besselI0(k.beta)
	return math.Sqrt(float64(dim)) * k.aliasing(oversampling)
}

// Width returns the smallest width whose Error in three dimensions is within the tolerance.
//
// Errors: bad-setting when oversampling is out of range, or no width up to MaxWidth is enough.
func Width(tolerance, oversampling float64) (int, error) {
	if err := checkOversampling(oversampling); err != nil {
		return 0, err
	}
	best := 0.0
	for w := MinWidth; w <= MaxWidth; w++ {
		if best = Error(3, w, oversampling); best <= tolerance {
			return w, nil
		}
	}
	return 0, fault.New(fault.BadSetting, "gridding tolerance", "%g; the widest kernel reaches %.2g at oversampling %g; allow more or raise the oversampling",
		tolerance, best, oversampling)
}
