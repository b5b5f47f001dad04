package condition

import (
	"math"
	"math/cmplx"

	"torrloom/recon/acquisition"
)

// Corrector gives the traces of an acquisition with everything corrected that belongs to single samples and single
// shots: offset and baseline, quadrature, phase, frequency and amplitude over the acquisition order, and the shot's own
// phase. The phase common to all shots and the time zero are left to whoever reads the trace.
//
// It is read-only after it was made; several goroutines may share it.
type Corrector struct {
	a        *acquisition.Acquisition
	s        Settings
	c        *Constants
	order    []float64
	offset   complex64
	baseline [][]complex64 // [delay][sample], nil where none was asked for
	fromI    float32       // Q = toQ·(recorded Q - fromI·I)
	toQ      float32
}

// NewCorrector returns the corrector for the given delays.
func NewCorrector(a *acquisition.Acquisition, s Settings, c *Constants, delays []int) *Corrector {
	r := &Corrector{a: a, s: s, c: c, order: Order(a), offset: complex64(complex(c.OffsetReal, c.OffsetImag))}
	sin, cos := math.Sincos(s.QuadratureSkewDeg * math.Pi / 180)
	r.fromI, r.toQ = float32((1+s.QuadratureGain)*sin), float32(1/((1+s.QuadratureGain)*cos))
	if s.Offset == "baseline-shots" {
		r.baseline = make([][]complex64, a.Delays)
		for _, d := range delays {
			r.baseline[d] = MeanTrace(a, d, a.BaselineShots())
		}
	}
	return r
}

// MeanTrace returns the mean of the traces of some shots at one delay.
func MeanTrace(a *acquisition.Acquisition, d int, shots []int) []complex64 {
	out := make([]complex64, a.Samples)
	for _, s := range shots {
		for j, v := range a.Trace(d, s) {
			out[j] += v / complex(float32(len(shots)), 0)
		}
	}
	return out
}

// ZeroSample returns the sample, with its fraction, where k = 0 of a shot.
func (r *Corrector) ZeroSample(shot int) float64 {
	zero := r.a.TimeZeroSample + r.s.TimeShiftSamples
	if r.c.ShotShiftSamples != nil {
		zero += r.c.ShotShiftSamples[shot]
	}
	return zero
}

// Load puts the corrected trace of one delay and shot into dst.
func (r *Corrector) Load(dst []complex64, d, shot int) {
	copy(dst, r.a.Trace(d, shot))
	if r.baseline != nil {
		for j, v := range r.baseline[d] {
			dst[j] -= v
		}
	}
	for j := range dst {
		dst[j] -= r.offset
	}
	if r.s.QuadratureGain != 0 || r.s.QuadratureSkewDeg != 0 {
		for j, v := range dst {
			dst[j] = complex(real(v), r.toQ*(imag(v)-r.fromI*real(v)))
		}
	}
	r.correctShot(dst, shot)
}

// correctShot undoes amplitude, phase and frequency of the shot.
func (r *Corrector) correctShot(dst []complex64, shot int) {
	along := r.order[shot] - 0.5
	turn := r.s.PhaseDriftDeg * math.Pi / 180 * along
	if r.c.ShotPhaseRad != nil {
		turn += r.c.ShotPhaseRad[shot]
	}
	gain := 1 + r.s.AmplitudeDrift*along
	perSample := 2 * math.Pi * (r.s.FrequencyKHz + r.s.FrequencyDriftKHz*along) * 1e-6 * r.a.DwellNS
	switch {
	case r.a.Domain == acquisition.Projection:
		scale(dst, complex64(complex(1/gain, 0)))
	case perSample != 0:
		factor := cmplx.Rect(1/gain, perSample*r.ZeroSample(shot)-turn)
		step := cmplx.Rect(1, -perSample)
		for j := range dst {
			dst[j] *= complex64(factor)
			factor *= step
		}
	default:
		scale(dst, complex64(cmplx.Rect(1/gain, -turn)))
	}
}

func scale(dst []complex64, by complex64) {
	if by == 1 {
		return
	}
	for j := range dst {
		dst[j] *= by
	}
}
