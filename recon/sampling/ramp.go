package sampling

import "math"

// Ramp returns the density weight along one spoke at k = m·dk, m = 0..half: the factor that turns a sum over samples
// into the integral over k-space of a spoke through the origin,
//
//	2D: |k|,   3D: k²,
//
// so that f(r) = Σ_spokes Ω Σ_m Ramp_|m| S(m·dk) exp(i2π m·dk n·r)·dk with Σ Ω = π (2D) or 2π (3D).
//
// In 3D this is k² itself, which is exact for a projection shorter than 1/dk. In 2D the corner of |k| at the origin
// makes plain sampling wrong by an offset; the weights are therefore the transform of the Ramachandran-Lakshminarayanan
// kernel cut to one period 1/dk, and are exact for points and projections within half of that period of each other.
//
// Units: cycles/mm and its square.
// Source: Ramachandran & Lakshminarayanan, Proc. Natl. Acad. Sci. 68 (1971) 2236, kernel values; Kak & Slaney,
// Principles of Computerized Tomographic Imaging (1988), chapter 3, for the offset.
func Ramp(dim, half int, dk float64) []float64 {
	out := make([]float64, half+1)
	for m := range out {
		if dim == 3 {
			k := float64(m) * dk
			out[m] = k * k
		} else {
			out[m] = dk * rampOfCutKernel(m, half)
		}
	}
	return out
}

// rampOfCutKernel returns |k|/dk at k = m·dk for the band limit half·dk, from the kernel h(0) = 1/4, h(odd n) =
// -1/(π²n²) at sample distance 1 over one period of 2·half samples. The frequency step is 1/(2·half).
func rampOfCutKernel(m, half int) float64 {
	if half == 0 {
		return 0.25
	}
	period := 2 * half
	sum := RampKernel(0)
	for n := 1; n < half; n += 2 {
		sum += 2 * RampKernel(n) * math.Cos(2*math.Pi*float64(m*n%period)/float64(period))
	}
	if half%2 == 1 {
		sum += RampKernel(half) * math.Cos(math.Pi*float64(m))
	}
	return sum * float64(period)
}

// RampKernel returns the band-limited ramp filter at n sample distances, for sample distance 1:
// 1/4 at 0, -1/(π²n²) at odd n, 0 at even n.
func RampKernel(n int) float64 {
	switch {
	case n == 0:
		return 0.25
	case n%2 == 0:
		return 0
	}
	return -1 / (math.Pi * math.Pi * float64(n) * float64(n))
}

// SheppLoganKernel returns the filter of Shepp & Logan 1974 at n sample distances, for sample distance 1:
// -2/(π²(4n²-1)).
func SheppLoganKernel(n int) float64 {
	return -2 / (math.Pi * math.Pi * (4*float64(n)*float64(n) - 1))
}
