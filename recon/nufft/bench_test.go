package nufft

import (
	"math"
	"math/rand/v2"
	"testing"
)

// benchPoints are 828 spokes of 63 samples on either side of the origin, for 64³ voxels.
func benchPoints() [][3]float64 {
	var points [][3]float64
	for s := range 828 {
		z := 1 - (float64(s)+0.5)/828
		rho := math.Sqrt(1 - z*z)
		sin, cos := math.Sincos(float64(s) * math.Pi * (3 - math.Sqrt(5)))
		for m := -63; m <= 63; m++ {
			k := 32 * float64(m) / 63
			points = append(points, [3]float64{k * rho * cos, k * rho * sin, k * z})
		}
	}
	return points
}

// Ten real delays in five lanes.
func benchGrid(b *testing.B) (*Grid[float32], [][3]float64, []float32) {
	p, err := NewPlan[float32]([3]int{64, 64, 64}, Settings{4, 1.5})
	if err != nil {
		b.Fatal(err)
	}
	points := benchPoints()
	return p.NewGrid(5), points, white[float32](rand.New(rand.NewPCG(1, 1)), len(points)*10)
}

func BenchmarkSpread(b *testing.B) {
	g, points, values := benchGrid(b)
	for b.Loop() {
		_ = g.Spread(points, values)
	}
}

func BenchmarkImage(b *testing.B) {
	g, points, values := benchGrid(b)
	image := make([]float32, g.plan.Voxels()*10)
	for b.Loop() {
		b.StopTimer()
		g.Reset()
		_ = g.Spread(points, values)
		b.StartTimer()
		g.Image(image, nil)
	}
}

func BenchmarkInterpolate(b *testing.B) {
	g, points, values := benchGrid(b)
	for b.Loop() {
		_ = g.Interpolate(points, values)
	}
}
