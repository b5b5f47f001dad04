package phantom

import (
	"math"
	"math/cmplx"
	"math/rand/v2"

	"torrloom/recon/acquisition"
)

// The functions of this file spoil an acquisition in place, each in one way that happens to real ones. Shots are
// zero-based; a drift runs in a straight line from nothing at the first shot to its full size at the last.

// Clone returns a copy of an acquisition that can be spoilt without harm to the original.
func Clone(a *acquisition.Acquisition) *acquisition.Acquisition {
	out := *a
	out.Signal = append([]complex64(nil), a.Signal...)
	out.GradientMTPerM = append([][3]float64(nil), a.GradientMTPerM...)
	out.DelayUS = append([]float64(nil), a.DelayUS...)
	out.ShotRole = append([]int(nil), a.ShotRole...)
	out.Optional.ShotTimeS = append([]float64(nil), a.Optional.ShotTimeS...)
	return &out
}

// eachTrace calls f with every trace and its shot.
func eachTrace(a *acquisition.Acquisition, f func(shot int, trace []complex64)) {
	for d := range a.Delays {
		for s := range a.Shots {
			f(s, a.Trace(d, s))
		}
	}
}

func eachTraceOf(a *acquisition.Acquisition, shot int, f func(trace []complex64)) {
	for d := range a.Delays {
		f(a.Trace(d, shot))
	}
}

func multiply(trace []complex64, by complex128) {
	for j := range trace {
		trace[j] = complex64(complex128(trace[j]) * by)
	}
}

func noiseSource(seed uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, 0x6661756c)) }

func addNoise(trace []complex64, sd float64, r *rand.Rand) {
	for j := range trace {
		trace[j] += complex64(complex(r.NormFloat64()*sd, r.NormFloat64()*sd))
	}
}

// Weaken multiplies one shot by factor, noise and all.
func Weaken(a *acquisition.Acquisition, shot int, factor float64) {
	eachTraceOf(a, shot, func(trace []complex64) { multiply(trace, complex(factor, 0)) })
}

// Silence replaces one shot by noise of the given SD per channel.
func Silence(a *acquisition.Acquisition, shot int, sd float64, seed uint64) {
	r := noiseSource(seed)
	eachTraceOf(a, shot, func(trace []complex64) {
		clear(trace)
		addNoise(trace, sd, r)
	})
}

// AddNoise adds noise of the given SD per channel to one shot.
func AddNoise(a *acquisition.Acquisition, shot int, sd float64, seed uint64) {
	r := noiseSource(seed)
	eachTraceOf(a, shot, func(trace []complex64) { addNoise(trace, sd, r) })
}

// Turn turns the phase of one shot.
func Turn(a *acquisition.Acquisition, shot int, rad float64) {
	eachTraceOf(a, shot, func(trace []complex64) { multiply(trace, cmplx.Rect(1, rad)) })
}

// along returns the place of a shot in the acquisition, 0 for the first to 1 for the last.
func along(a *acquisition.Acquisition, shot int) float64 {
	return float64(shot) / math.Max(1, float64(a.Shots-1))
}

// DriftPhase lets the phase run from 0 to rad.
func DriftPhase(a *acquisition.Acquisition, rad float64) {
	eachTrace(a, func(s int, trace []complex64) { multiply(trace, cmplx.Rect(1, rad*along(a, s))) })
}

// DriftAmplitude lets the signal run from itself to (1+by) times itself.
func DriftAmplitude(a *acquisition.Acquisition, by float64) {
	eachTrace(a, func(s int, trace []complex64) { multiply(trace, complex(1+by*along(a, s), 0)) })
}

// DriftFrequency lets the frequency off the receiver's run from fromKHz to toKHz, the phase at k = 0 staying put.
func DriftFrequency(a *acquisition.Acquisition, fromKHz, toKHz float64) {
	eachTrace(a, func(s int, trace []complex64) {
		perSample := 2 * math.Pi * (fromKHz + (toKHz-fromKHz)*along(a, s)) * 1e-6 * a.DwellNS
		for j := range trace {
			trace[j] *= complex64(cmplx.Rect(1, perSample*(float64(j)-a.TimeZeroSample)))
		}
	})
}

// MistakeTimeZero lets the file name a time zero that is earlier than the true one by ns.
func MistakeTimeZero(a *acquisition.Acquisition, ns float64) { a.TimeZeroSample -= ns / a.DwellNS }

// JitterTimeZero delays every shot by a time of its own, Gaussian with the given SD, by turning its Fourier transform.
// Traces whose ends hold signal wrap around by as much as they are delayed.
func JitterTimeZero(a *acquisition.Acquisition, sdNS float64, seed uint64) {
	r := noiseSource(seed)
	for s := range a.Shots {
		late := r.NormFloat64() * sdNS / a.DwellNS
		eachTraceOf(a, s, func(trace []complex64) { delayTrace(trace, late) })
	}
}

// delayTrace moves a trace later by a fraction of samples, by a direct sum over its transform.
func delayTrace(trace []complex64, samples float64) {
	n := len(trace)
	spectrum := make([]complex128, n)
	for k := range n {
		for j, v := range trace {
			spectrum[k] += complex128(v) * cmplx.Rect(1/float64(n), -2*math.Pi*float64(k*j%n)/float64(n))
		}
		signed := float64(k)
		if 2*k > n {
			signed -= float64(n)
		}
		spectrum[k] *= cmplx.Rect(1, -2*math.Pi*signed*samples/float64(n))
	}
	for j := range trace {
		var sum complex128
		for k, v := range spectrum {
			sum += v * cmplx.Rect(1, 2*math.Pi*float64(k*j%n)/float64(n))
		}
		trace[j] = complex64(sum)
	}
}

// AddOffset adds a constant to every sample.
func AddOffset(a *acquisition.Acquisition, offset complex128) {
	for i := range a.Signal {
		a.Signal[i] += complex64(offset)
	}
}

// Unbalance lets the second channel record (1+gain)·(Q cos skew + I sin skew).
func Unbalance(a *acquisition.Acquisition, gain, skewRad float64) {
	sin, cos := math.Sincos(skewRad)
	for i, v := range a.Signal {
		a.Signal[i] = complex(real(v), float32((1+gain)*(float64(imag(v))*cos+float64(real(v))*sin)))
	}
}

// Clip cuts both channels at a fraction of the largest value that either reaches.
func Clip(a *acquisition.Acquisition, fraction float64) {
	largest := 0.0
	for _, v := range a.Signal {
		largest = math.Max(largest, math.Max(math.Abs(float64(real(v))), math.Abs(float64(imag(v)))))
	}
	limit := float32(fraction * largest)
	for i, v := range a.Signal {
		a.Signal[i] = complex(max(-limit, min(limit, real(v))), max(-limit, min(limit, imag(v))))
	}
}

// SwapGradients exchanges the gradients that the file gives two shots.
func SwapGradients(a *acquisition.Acquisition, s, t int) {
	a.GradientMTPerM[s], a.GradientMTPerM[t] = a.GradientMTPerM[t], a.GradientMTPerM[s]
}

// ShuffleGradients deals the gradients of the image shots out at random.
func ShuffleGradients(a *acquisition.Acquisition, seed uint64) {
	shots := a.ImageShots()
	noiseSource(seed).Shuffle(len(shots), func(i, j int) { SwapGradients(a, shots[i], shots[j]) })
}

// RepeatGradient gives shot to the gradient of shot from.
func RepeatGradient(a *acquisition.Acquisition, from, to int) {
	a.GradientMTPerM[to] = a.GradientMTPerM[from]
}

// Ring adds the ringing of a resonator at the start of every trace: amplitude·exp((-1/decay + i/2)·j) at sample j.
func Ring(a *acquisition.Acquisition, amplitude, decaySamples float64) {
	eachTrace(a, func(_ int, trace []complex64) {
		for j := range trace {
			trace[j] += complex64(cmplx.Rect(amplitude*math.Exp(-float64(j)/decaySamples), float64(j)/2))
		}
	})
}

// ColourNoise adds noise that a narrow filter has passed: every sample holds 0.8 of the one before.
func ColourNoise(a *acquisition.Acquisition, sd float64, seed uint64) {
	r := noiseSource(seed)
	eachTrace(a, func(_ int, trace []complex64) {
		var held complex128
		for j := range trace {
			held = 0.8*held + complex(r.NormFloat64(), r.NormFloat64())*complex(0.6*sd, 0)
			trace[j] += complex64(held)
		}
	})
}

// Spikes adds single samples of the given size, on average one in every so many samples.
func Spikes(a *acquisition.Acquisition, size float64, every int, seed uint64) {
	r := noiseSource(seed)
	for range len(a.Signal) / every {
		a.Signal[r.IntN(len(a.Signal))] += complex64(cmplx.Rect(size, 2*math.Pi*r.Float64()))
	}
}
