// Package fft holds discrete Fourier transforms of lengths 2^a·3^b·5^c that work on many lines at once.
//
// Data are [n][lines] with the lines innermost, so that each pass of a loop handles one butterfly for every line: this
// is what makes the transform fast where instructions are slow. Transforms are unnormalised in both directions.
//
// Method: self-sorting mixed radix, Stockham's form (Cochran et al., IEEE Trans. Audio Electroacoust. 15, 1967, 45-55).
package fft

import (
	"math"

	"torrloom/recon/fault"
)

// Complex is an element type of a transform.
type Complex interface{ complex64 | complex128 }

// Plan is a transform of one length. It is read-only after NewPlan; several goroutines may share it.
type Plan[C Complex] struct {
	n      int
	stages []stage[C]
}

type stage[C Complex] struct {
	radix   int
	m       int // sub-transforms left after this stage
	twiddle []C // [p][k-1]: exp(-i2π p k/(radix·m)), k = 1..radix-1
}

// FastLength returns the smallest length of the form 2^a·3^b·5^c that is at least n and even.
func FastLength(n int) int {
	for n = max(n, 2); ; n++ {
		if n%2 == 0 && smooth(n) {
			return n
		}
	}
}

func smooth(n int) bool {
	for _, r := range []int{2, 3, 5} {
		for n%r == 0 {
			n /= r
		}
	}
	return n == 1
}

// NewPlan returns the plan of length n.
//
// Errors: bad-setting when n is below 1 or has a prime factor above 5.
func NewPlan[C Complex](n int) (*Plan[C], error) {
	if n < 1 || !smooth(n) {
		return nil, fault.New(fault.BadSetting, "transform", "length %d; use a product of 2, 3 and 5", n)
	}
	p := &Plan[C]{n: n}
	for left := n; left > 1; {
		r := nextRadix(left)
		p.stages = append(p.stages, newStage[C](left, r))
		left /= r
	}
	return p, nil
}

func nextRadix(n int) int {
	for _, r := range []int{4, 5, 3, 2} {
		if n%r == 0 {
			return r
		}
	}
	return 1
}

func newStage[C Complex](n, r int) stage[C] {
	m := n / r
	s := stage[C]{radix: r, m: m, twiddle: make([]C, m*(r-1))}
	for p := range m {
		for k := 1; k < r; k++ {
			sin, cos := math.Sincos(-2 * math.Pi * float64(p*k%n) / float64(n))
			s.twiddle[p*(r-1)+k-1] = C(complex(cos, sin))
		}
	}
	return s
}

// Len returns the length of the transform.
func (p *Plan[C]) Len() int { return p.n }

// Forward replaces data, [n][lines], by X_k = Σ_j x_j exp(-i2πjk/n) for every line. Scratch must be as long as data.
func (p *Plan[C]) Forward(data, scratch []C, lines int) {
	src, dst := data[:p.n*lines], scratch[:p.n*lines]
	stride := lines
	for i := range p.stages {
		p.stages[i].run(src, dst, stride)
		stride *= p.stages[i].radix
		src, dst = dst, src
	}
	if len(p.stages)%2 == 1 {
		copy(data, src)
	}
}

// Inverse replaces data, [n][lines], by x_j = Σ_k X_k exp(+i2πjk/n): a forward transform with the rows 1..n-1 reversed.
func (p *Plan[C]) Inverse(data, scratch []C, lines int) {
	p.Forward(data, scratch, lines)
	for a, b := 1, p.n-1; a < b; a, b = a+1, b-1 {
		ra, rb := data[a*lines:(a+1)*lines], data[b*lines:(b+1)*lines]
		for l := range ra {
			ra[l], rb[l] = rb[l], ra[l]
		}
	}
}

func (s *stage[C]) run(src, dst []C, stride int) {
	switch s.radix {
	case 2:
		s.radix2(src, dst, stride)
	case 3:
		s.radix3(src, dst, stride)
	case 4:
		s.radix4(src, dst, stride)
	default:
		s.radix5(src, dst, stride)
	}
}

func (s *stage[C]) radix2(src, dst []C, q int) {
	for p := range s.m {
		w := s.twiddle[p]
		a, b := src[q*p:q*p+q], src[q*(p+s.m):q*(p+s.m)+q]
		y0, y1 := dst[q*2*p:q*2*p+q], dst[q*(2*p+1):q*(2*p+1)+q]
		b, y0, y1 = b[:len(a)], y0[:len(a)], y1[:len(a)]
		for i, u := range a {
			v := b[i]
			y0[i] = u + v
			y1[i] = (u - v) * w
		}
	}
}

func (s *stage[C]) radix3(src, dst []C, q int) {
	turn := C(complex(0, -math.Sqrt(3)/2))
	for p := range s.m {
		w := s.twiddle[2*p : 2*p+2]
		a, b, c := src[q*p:q*p+q], src[q*(p+s.m):q*(p+s.m)+q], src[q*(p+2*s.m):q*(p+2*s.m)+q]
		y := dst[q*3*p : q*3*p+3*q]
		y0, y1, y2 := y[:q], y[q:2*q], y[2*q:3*q]
		b, c, y0, y1, y2 = b[:len(a)], c[:len(a)], y0[:len(a)], y1[:len(a)], y2[:len(a)]
		for i, u := range a {
			sum, dif := b[i]+c[i], (b[i]-c[i])*turn
			mid := u - sum*0.5
			y0[i] = u + sum
			y1[i] = (mid + dif) * w[0]
			y2[i] = (mid - dif) * w[1]
		}
	}
}

func (s *stage[C]) radix4(src, dst []C, q int) {
	minusI := C(complex(0, -1))
	for p := range s.m {
		w1, w2, w3 := s.twiddle[3*p], s.twiddle[3*p+1], s.twiddle[3*p+2]
		a, b := src[q*p:q*p+q], src[q*(p+s.m):q*(p+s.m)+q]
		c, d := src[q*(p+2*s.m):q*(p+2*s.m)+q], src[q*(p+3*s.m):q*(p+3*s.m)+q]
		y := dst[q*4*p : q*4*p+4*q]
		y0, y1, y2, y3 := y[:q], y[q:2*q], y[2*q:3*q], y[3*q:4*q]
		b, c, d = b[:len(a)], c[:len(a)], d[:len(a)]
		y0, y1, y2, y3 = y0[:len(a)], y1[:len(a)], y2[:len(a)], y3[:len(a)]
		for i, u := range a {
			ac, ca := u+c[i], u-c[i]
			bd, db := b[i]+d[i], (b[i]-d[i])*minusI
			y0[i] = ac + bd
			y1[i] = (ca + db) * w1
			y2[i] = (ac - bd) * w2
			y3[i] = (ca - db) * w3
		}
	}
}

func (s *stage[C]) radix5(src, dst []C, q int) {
	const (
		c1 = 0.30901699437494742410229341718282 // cos 72°
		c2 = -0.80901699437494742410229341718282
		s1 = 0.95105651629515357211643933337938 // sin 72°
		s2 = 0.58778525229247312916870595463907
	)
	r1, r2 := C(complex(c1, 0)), C(complex(c2, 0))
	i1, i2 := C(complex(0, -s1)), C(complex(0, -s2))
	for p := range s.m {
		w := s.twiddle[4*p : 4*p+4]
		row := func(k int) []C { return src[q*(p+k*s.m) : q*(p+k*s.m)+q] }
		a, b, c, d, e := row(0), row(1), row(2), row(3), row(4)
		y := dst[q*5*p : q*5*p+5*q]
		for i, u := range a {
			be, eb := b[i]+e[i], b[i]-e[i]
			cd, dc := c[i]+d[i], c[i]-d[i]
			m1, m2 := u+be*r1+cd*r2, u+be*r2+cd*r1
			t1, t2 := eb*i1+dc*i2, eb*i2-dc*i1
			y[i] = u + be + cd
			y[i+q] = (m1 + t1) * w[0]
			y[i+2*q] = (m2 + t2) * w[1]
			y[i+3*q] = (m2 - t2) * w[2]
			y[i+4*q] = (m1 - t1) * w[3]
		}
	}
}
