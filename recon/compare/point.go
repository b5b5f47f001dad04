package compare

import (
	"math"
	"math/cmplx"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
)

// Point is one point of signal 1.
type Point struct {
	AtMM       [3]float64
	DecayPerUS float64 // signal falls as exp(-decay·|t|) along a trace; 0 shows the encoding alone, R2* the whole
}

// Measured returns what an acquisition like a would have recorded of the point: the same shots, samples, gradients and
// roles, one delay, no noise, and k = 0 where the settings put it. It goes through the same chain as the data, with
// PointSettings and PointConstants.
//
//	s(k) = exp(-i2π k·r) exp(-decay·|t|);  as a projection, (1/step) sinc((x - n·r)/step)
func (p Point) Measured(a *acquisition.Acquisition, s condition.Settings) (*acquisition.Acquisition, error) {
	out := likeFrame(a, []float64{a.DelayUS[a.ReferenceDelay()]})
	zero := a.TimeZeroSample + s.TimeShiftSamples
	for shot := range a.Shots {
		if a.ShotRole[shot] == acquisition.RoleOffResonance {
			continue
		}
		trace := out.Trace(0, shot)
		if a.Domain == acquisition.Projection {
			p.project(out, shot, zero, trace)
			continue
		}
		g := out.GradientMTPerM[shot]
		along := g[0]*p.AtMM[0] + g[1]*p.AtMM[1] + g[2]*p.AtMM[2]
		for j := range trace {
			t := (float64(j) - zero) * out.DwellNS
			trace[j] = complex64(cmplx.Rect(math.Exp(-p.DecayPerUS*math.Abs(t)*1e-3), -2*math.Pi*acquisition.KPerNS(along, t)))
		}
	}
	return out, out.Check()
}

func (p Point) project(a *acquisition.Acquisition, shot int, zero float64, trace []complex64) {
	g, strength := a.GradientMTPerM[shot], a.Strength(shot)
	if strength == 0 {
		return
	}
	x := (g[0]*p.AtMM[0] + g[1]*p.AtMM[1] + g[2]*p.AtMM[2]) / strength
	for j := range trace {
		at := (float64(j)-zero)*a.PositionStepMM - x
		trace[j] = complex(float32(sinc(at/a.PositionStepMM)/a.PositionStepMM), 0)
	}
}

// likeFrame returns an acquisition of the same shots and samples as a without signal, at other delays.
func likeFrame(a *acquisition.Acquisition, delayUS []float64) *acquisition.Acquisition {
	out := *a
	out.MadeUp, out.Delays, out.DelayUS = true, len(delayUS), delayUS
	out.Signal = make([]complex64, out.Delays*out.Shots*out.Samples)
	return &out
}

// PointSettings returns the settings that put made-up signal through the same linear chain: the time zero, dead samples
// and excluded shots stay; what only corrects faults of the recorded signal is left out, since made-up signal has none.
func PointSettings(s condition.Settings) condition.Settings {
	return condition.Settings{Offset: "none", Phase: "none", ShotPhase: "none", ShotTime: "none",
		TimeShiftSamples: s.TimeShiftSamples, DeadSamples: s.DeadSamples, ExcludeShots: s.ExcludeShots}
}

// PointConstants returns the constants to go with PointSettings, for one delay: the extent of the object is kept, since the
// chain chooses its band by it.
func PointConstants(c *condition.Constants) *condition.Constants {
	return &condition.Constants{NoiseSD: []float64{1}, ExtentMM: c.ExtentMM, EchoHeight: []float64{1}}
}

// PointSpokes returns conditioned spokes of the point, exact, of the same geometry as sp and with one delay. They skip the
// conditioning, and so show the reconstruction alone.
func PointSpokes(sp *condition.Spokes, atMM [3]float64) *condition.Spokes {
	out := *sp
	out.Delays = []int{0}
	out.Samples = make([]complex64, len(sp.Shot)*(sp.Half+1))
	out.NoiseDensity = []float64{1}
	for s, n := range sp.Directions {
		x := n[0]*atMM[0] + n[1]*atMM[1] + n[2]*atMM[2]
		for m := range sp.Half + 1 {
			out.Row(s, m)[0] = complex64(cmplx.Rect(1, -2*math.Pi*float64(m)*sp.DeltaK*x))
		}
	}
	return &out
}
