package singlepoint

import (
	"testing"

	"torrloom/recon/phantom"
)

// 19³ gradients, 64³ voxels, 20 sample times.
func BenchmarkTwentySampleTimes(b *testing.B) {
	bench(b, phantom.CubeGradients(3, 19, 30), 64, 20)
}

// The same with 37³ gradients, past the limit of the direct transform; one sample time.
func BenchmarkChirp(b *testing.B) { bench(b, phantom.CubeGradients(3, 37, 30), 64, 1) }

// 19³ gradients turned off the axes, which go through gridding; one sample time.
func BenchmarkList(b *testing.B) {
	list := phantom.CubeGradients(3, 19, 30)
	for s, g := range list {
		list[s] = [3]float64{0.8*g[0] - 0.6*g[1], 0.6*g[0] + 0.8*g[1], g[2]}
	}
	bench(b, list, 64, 1)
}

func bench(b *testing.B, list [][3]float64, matrix, frames int) {
	a := measured(b, phantom.Sum(3, ball(3, [3]float64{}, 4, 1, 0.5)), phantom.SinglePointProtocol{GradientMTPerM: list, DwellNS: 10, Samples: frames, TimeZeroSample: -60})
	g := cube(b, 3, matrix, 10)
	samples := make([]int, frames)
	for i := range samples {
		samples[i] = i
	}
	for b.Loop() {
		p, _, err := Prepare(a, Defaults(), g, samples)
		if err != nil {
			b.Fatal(err)
		}
		if _, err := Images(a, Defaults(), p, g, samples, nil); err != nil {
			b.Fatal(err)
		}
	}
}
