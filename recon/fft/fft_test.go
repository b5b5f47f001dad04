package fft

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"
)

var lengths = []int{1, 2, 3, 4, 5, 6, 8, 9, 10, 12, 15, 16, 20, 25, 27, 30, 48, 60, 64, 90, 100, 125, 128, 144, 180, 240, 320, 375, 512, 720}

func randomLines(n, lines int) []complex128 {
	r := rand.New(rand.NewPCG(1, uint64(n)))
	x := make([]complex128, n*lines)
	for i := range x {
		x[i] = complex(r.NormFloat64(), r.NormFloat64())
	}
	return x
}

func TestForwardEqualsGonumOnEveryLine(t *testing.T) {
	const lines = 3
	for _, n := range lengths {
		plan, err := NewPlan[complex128](n)
		if err != nil {
			t.Fatal(err)
		}
		x := randomLines(n, lines)
		got := append([]complex128(nil), x...)
		plan.Forward(got, make([]complex128, len(x)), lines)
		for l := range lines {
			column := make([]complex128, n)
			for j := range n {
				column[j] = x[j*lines+l]
			}
			want := fourier.NewCmplxFFT(n).Coefficients(nil, column)
			for k := range n {
				// Rounding grows as eps·log n on values of size sqrt(n).
				if d := cmplx.Abs(got[k*lines+l] - want[k]); !(d <= 1e-13*math.Sqrt(float64(n))*10) {
					t.Fatalf("n=%d line %d k=%d: %v, gonum has %v", n, l, k, got[k*lines+l], want[k])
				}
			}
		}
	}
}

func TestInverseUndoesForward(t *testing.T) {
	for _, n := range lengths {
		plan, _ := NewPlan[complex64](n)
		x := make([]complex64, n*2)
		for i, v := range randomLines(n, 2) {
			x[i] = complex64(v)
		}
		y, scratch := append([]complex64(nil), x...), make([]complex64, len(x))
		plan.Forward(y, scratch, 2)
		plan.Inverse(y, scratch, 2)
		for i := range x {
			// float32 rounding: 6e-8 per operation over about log2(n) stages.
			if d := cmplx.Abs(complex128(y[i]/complex(float32(n), 0) - x[i])); !(d <= 5e-6) {
				t.Fatalf("n=%d: entry %d is off by %g", n, i, d)
			}
		}
	}
}

func TestOtherLengthsAreRefused(t *testing.T) {
	for _, n := range []int{0, -4, 7, 22, 13 * 8} {
		if _, err := NewPlan[complex128](n); err == nil {
			t.Errorf("length %d was accepted", n)
		}
	}
}

func TestFastLengthIsSmoothEvenAndNotShort(t *testing.T) {
	for n, want := range map[int]int{1: 2, 7: 8, 11: 12, 17: 18, 121: 128, 721: 750} {
		if got := FastLength(n); got != want {
			t.Errorf("FastLength(%d) = %d, want %d", n, got, want)
		}
	}
}

func BenchmarkForward128Lines16(b *testing.B) {
	plan, _ := NewPlan[complex64](128)
	x, scratch := make([]complex64, 128*16), make([]complex64, 128*16)
	for b.Loop() {
		plan.Forward(x, scratch, 16)
	}
}
