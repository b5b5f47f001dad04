package singlepoint

import (
	"math"
	"math/cmplx"

	"torrloom/recon/fft"
)

// chirpPair holds the transforms over all points and over those with q >= 0.
type chirpPair struct{ all, upper *chirp }

func newChirpPair(x latticeAxis, voxels int, turns float64) *chirpPair {
	return &chirpPair{
		all:   newChirp(x.points(), -float64(x.most)/2, voxels, turns),
		upper: newChirp(x.most/2+1, float64(x.parity())/2, voxels, turns),
	}
}

// chirp sums by convolution: with i·p = (i² + p² - (p-i)²)/2,
//
//	f(p) = b(p) Σ_i [s(i) b(i)] b*(p-i),   b(n) = exp(iπ·turns·n²)
//
// for evenly spaced i and p from any start, and the convolution by Fourier transforms of length at least points+voxels-1.
// Exact to rounding, for any real turns. Source: Bluestein, A linear filtering approach to the computation of discrete
// Fourier transform, IEEE Trans. Audio Electroacoust. 18 (1970) 451-455.
type chirp struct {
	points, voxels int
	before         []complex128 // [i] b(i)
	after          []complex128 // [p] b(p)/length
	kernel         []complex128 // transform of b*(p-i)
	plan           *fft.Plan[complex128]
	data, scratch  []complex128
}

// lanes is how many lines are transformed together: enough to fill the passes, few enough to stay in the cache.
const lanes = 16

func newChirp(points int, first float64, voxels int, turns float64) *chirp {
	c := &chirp{points: points, voxels: voxels}
	length := fft.FastLength(points + voxels - 1)
	c.plan, _ = fft.NewPlan[complex128](length) // FastLength is always a valid length
	c.data, c.scratch = make([]complex128, length*lanes), make([]complex128, length*lanes)
	for i := range points {
		c.before = append(c.before, chirpPhase(first+float64(i), turns))
	}
	centre := float64(voxels / 2)
	for p := range voxels {
		c.after = append(c.after, chirpPhase(float64(p)-centre, turns)*complex(1/float64(length), 0))
	}
	c.kernel = make([]complex128, length)
	for o := 1 - points; o < voxels; o++ {
		c.kernel[(o+length)%length] = cmplx.Conj(chirpPhase(float64(o)-centre-first, turns))
	}
	c.plan.Forward(c.kernel, c.scratch[:length], 1)
	return c
}

// chirpPhase returns exp(iπ·turns·n²). The product is reduced modulo 2 with the rounding that the multiplication lost,
// since at n of some hundred whole digits of the phase would be missing. n² is exact for multiples of ½.
func chirpPhase(n, turns float64) complex128 {
	square := n * n
	product := turns * square
	lost := math.FMA(turns, square, -product)
	return cmplx.Rect(1, math.Pi*(math.Remainder(product, 2)+lost))
}

func (c *chirpPair) full(dst, src []float64, lines int) {
	for from := 0; from < lines; from += lanes {
		n := min(lanes, lines-from)
		c.all.run(src[from:], 2*lines, lines, n)
		for p := range c.all.voxels {
			row, at := c.all.data[p*n:(p+1)*n], p*2*lines+from
			for l, v := range row {
				v *= c.all.after[p]
				dst[at+l], dst[at+lines+l] = real(v), imag(v)
			}
		}
	}
}

func (c *chirpPair) half(dst, src []float64, stride, imag, lines, reach int) {
	for from := 0; from < lines; from += lanes {
		n := min(lanes, lines-from)
		c.upper.run(src[from:], stride, imag, n)
		for p := range c.upper.voxels {
			row := c.upper.data[p*n : (p+1)*n]
			for l, v := range row {
				dst[p*lines+from+l] = real(v * c.upper.after[p])
			}
		}
	}
}

// run leaves the convolution of n lines in data, [voxel][line].
func (c *chirp) run(src []float64, stride, imag, n int) {
	length := c.plan.Len()
	data, scratch := c.data[:length*n], c.scratch[:length*n]
	clear(data[c.points*n:])
	for i, b := range c.before {
		for l := range n {
			data[i*n+l] = complex(src[i*stride+l], src[i*stride+imag+l]) * b
		}
	}
	c.plan.Forward(data, scratch, n)
	for i, k := range c.kernel {
		row := data[i*n : (i+1)*n]
		for l := range row {
			row[l] *= k
		}
	}
	c.plan.Inverse(data, scratch, n)
}
