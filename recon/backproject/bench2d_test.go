package backproject

import (
	"math"
	"testing"
)

// BenchmarkPlane is the 2D job that is timed beside an outside program: 256 pixels, 180 angles, one image.
func BenchmarkPlane(b *testing.B) {
	a := projections(256, 180, func(_ [3]float64, x float64) float64 { return math.Sqrt(math.Max(0, 0.64-x*x)) })
	if err := a.Check(); err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		reconstruct(b, a, 256, 2, "none")
	}
}
