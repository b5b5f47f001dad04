package singlepoint

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"torrloom/recon/volume"
)

// scattered returns complex numbers and their planes, [point][2][line].
func scattered(r *rand.Rand, points, lines int) ([]complex128, []float64) {
	values, planes := make([]complex128, points*lines), make([]float64, points*2*lines)
	for i := range points {
		for l := range lines {
			v := complex(r.NormFloat64(), r.NormFloat64())
			values[i*lines+l] = v
			planes[i*2*lines+l], planes[(i*2+1)*lines+l] = real(v), imag(v)
		}
	}
	return values, planes
}

func TestBothTransformsEqualTheSlowSum(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 5))
	const lines = 19 // more than one group of lines, and not a whole number of them
	for _, most := range []int{1, 2, 6, 7, 18, 40, 63} {
		for _, voxels := range []int{2, 7, 16, 33, 64} {
			for _, turns := range []float64{0.0123, -0.0311, 1 / 19., 0.7, 3.14159} {
				x := latticeAxis{most: most, step: 1}
				values, planes := scattered(r, x.points(), lines)
				want := make([]complex128, voxels*lines)
				upper := make([]float64, voxels*lines)
				for p := range voxels {
					for i := range x.points() {
						q := float64(2*i - most)
						wave := cmplx.Rect(1, math.Pi*turns*q*float64(p-voxels/2))
						for l := range lines {
							want[p*lines+l] += values[i*lines+l] * wave
							if q >= 0 {
								upper[p*lines+l] += real(values[i*lines+l] * wave)
							}
						}
					}
				}
				for name, axis := range map[string]axis{"direct": newDirect(x, voxels, turns), "chirp-z": newChirpPair(x, voxels, turns)} {
					full, half := make([]float64, voxels*2*lines), make([]float64, voxels*lines)
					axis.full(full, planes, lines)
					first := (most + x.parity()) / 2
					axis.half(half, planes[first*2*lines:], 2*lines, lines, lines, voxels)
					worst := 0.0
					for i := range upper {
						p, l := i/lines, i%lines
						got := complex(full[p*2*lines+l], full[(p*2+1)*lines+l])
						worst = math.Max(worst, math.Max(cmplx.Abs(got-want[i]), math.Abs(half[i]-upper[i])))
					}
					// The agreed 1e-10; sums of up to 64 numbers of size 1, phases of up to 2·10⁴ rad in the slow sum.
					if !(worst <= 1e-10) {
						t.Errorf("%s, %d points, %d voxels, %g turns: off by %.2g", name, x.points(), voxels, turns, worst)
					}
				}
			}
		}
	}
}

// slow returns Re Σ samples exp(i2π k·r) at every voxel inside the field of view, shot by shot.
func slow(geo *geometry, g volume.Grid, samples []complex128, timeUS float64) []float64 {
	out := make([]float64, g.Voxels())
	perMT := 28.0249513861e-3 * timeUS
	for iz := range g.N[2] {
		for iy := range g.N[1] {
			for ix := range g.N[0] {
				if !g.InsideFieldOfView(ix, iy, iz) {
					continue
				}
				for s, v := range samples {
					along := geo.g[s][0]*g.MM(0, ix) + geo.g[s][1]*g.MM(1, iy)
					if geo.dim == 3 {
						along += geo.g[s][2] * g.MM(2, iz)
					}
					sin, cos := math.Sincos(2 * math.Pi * perMT * along)
					out[g.Index(ix, iy, iz)] += real(v)*cos - imag(v)*sin
				}
			}
		}
	}
	return out
}
