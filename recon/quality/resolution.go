package quality

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
)

var resolutionChecks = []Check{
	{Name: "resolution", Label: "nominal resolution", Needs: []Need{spokes},
		Rule: "the object is at least eight times as wide as 1/(2 k_max)", Source: "own rule",
		Advice: "measure longer traces or use a stronger gradient", Run: resolution},
	{Name: "field-of-view", Label: "field of view", Needs: []Need{spokes},
		Rule: "the object takes up less than 95 % of the alias-free field", Source: "sampling theorem: 1/((γ/2π)·G·dwell)",
		Advice: "sample faster or use a weaker gradient; what is folded over, or cut off, cannot be undone", Run: fieldOfView},
	{Name: "readout-decay", Label: "decay along the trace", Needs: []Need{spokes, traces},
		Rule:   "the line width blurs by less than the nominal resolution",
		Source: "a decay R2* along the trace blurs by R2*/(π (γ/2π) G), full width at half height of a Lorentzian",
		Advice: "the resolution really reached is this width; a stronger gradient narrows it", Run: readoutDecay},
}

func resolution(s *Subject) []Finding {
	across := s.C.ExtentMM / s.resolutionMM()
	return []Finding{doubtIf(across < 8, s.resolutionMM(), "mm", "k_max %.3g cycles/mm gives a nominal resolution of %.3g mm, %.0f across the object of %.3g mm",
		s.A.SmallestKMax(), s.resolutionMM(), across, s.C.ExtentMM)}
}

func fieldOfView(s *Subject) []Finding {
	share := s.C.ExtentMM / s.A.AliasFreeMM()
	rim := s.signalAtRim()
	if rim > 0.03 {
		return []Finding{found(Doubt, 100*share, "%", "the object shows at the rim of the alias-free field of %.3g mm, with %.2g %% of its peak; it is folded over or cut off", s.A.AliasFreeMM(), 100*rim)}
	}
	return []Finding{doubtIf(share > 0.95, 100*share, "%", "the object is %.3g mm across, %.0f %% of the alias-free field of %.3g mm", s.C.ExtentMM, 100*share, s.A.AliasFreeMM())}
}

// rimShots is how many shots are looked at for signal at the rim.
const rimShots = 64

// signalAtRim returns the signal at the rim of the alias-free field over that in the middle, root of the mean square over
// shots. Noise is not taken for signal: only what follows the delay curve counts, by more than twice the noise power.
func (s *Subject) signalAtRim() float64 {
	if len(s.V.Delays) < 2 {
		return 0
	}
	corrector := condition.NewCorrector(s.A, s.S, s.C, s.V.Delays)
	trace := make([]complex64, s.A.Samples)
	var rim, middle, noise float64
	energy := 0.0
	for _, m := range s.V.Curve {
		energy += m * m
	}
	for at := 0; at < len(s.V.Shots); at += max(1, len(s.V.Shots)/rimShots) {
		var along, centre complex128
		square := 0.0
		for d, delay := range s.V.Delays {
			corrector.Load(trace, delay, s.V.Shots[at])
			edge, mid := s.rimOf(trace, corrector.ZeroSample(s.V.Shots[at]))
			along += edge * complex(s.V.Curve[d], 0)
			centre += mid * complex(s.V.Curve[d], 0)
			square += real(edge)*real(edge) + imag(edge)*imag(edge)
		}
		one := (real(along)*real(along) + imag(along)*imag(along)) / energy
		rim += one
		middle += (real(centre)*real(centre) + imag(centre)*imag(centre)) / energy
		noise += (square - one) / float64(len(s.V.Delays)-1)
	}
	if rim < 3*noise || middle == 0 {
		return 0
	}
	return math.Sqrt((rim - noise) / middle)
}

// rimOf returns a projection at the rim of the field, and in its middle.
func (s *Subject) rimOf(trace []complex64, zero float64) (rim, middle complex128) {
	n := len(trace)
	if s.A.Domain == acquisition.Projection {
		return complex128(trace[0]+trace[n-1]) / 2, complex128(trace[max(0, min(n-1, int(zero+0.5)))])
	}
	for j, v := range trace {
		w := complex(0.5-0.5*math.Cos(2*math.Pi*(float64(j)+0.5)/float64(n)), 0)
		middle += complex128(v) * w
		if j%2 == 1 {
			w = -w // half a cycle per sample
		}
		rim += complex128(v) * w
	}
	return rim, middle
}

func readoutDecay(s *Subject) []Finding {
	rate, from := s.decayRate()
	if from == "" {
		return []Finding{found(Fine, 0, "mm", "no zero-gradient shots; the decay along the trace is not known")}
	}
	blur := rate * 1e-3 / (math.Pi * acquisition.KPerNS(median(s.strength), 1))
	return []Finding{doubtIf(blur > s.resolutionMM(), blur, "mm", "a decay of %.3g /µs (%s) blurs by %.2g mm; the nominal resolution is %.2g mm", rate, from, blur, s.resolutionMM())}
}

// decayRate returns R2* in 1/µs and where it comes from, "" when it is not known.
func (s *Subject) decayRate() (rate float64, from string) {
	if r := s.Known.ReadoutDecayPerUS; r != nil {
		return *r, "as found by the fit"
	}
	shots := s.zeroGradientShots()
	if len(shots) == 0 {
		return 0, ""
	}
	return math.Max(0, s.slopeOfLog(shots)), counted(shots, "zero-gradient shot")
}

// slopeOfLog fits ln |signal| of the reference delay against the distance from k = 0, weighted by the squared signal,
// over the samples that stand five times above the noise.
func (s *Subject) slopeOfLog(shots []int) float64 {
	reference := s.S.ReferenceDelay(s.A)
	corrector := condition.NewCorrector(s.A, s.S, s.C, s.V.Delays)
	trace := make([]complex64, s.A.Samples)
	var sw, st, sy, stt, sty float64
	for _, shot := range shots {
		corrector.Load(trace, reference, shot)
		for j, v := range trace {
			size := math.Hypot(float64(real(v)), float64(imag(v)))
			if !(size > 5*s.C.NoiseSD[reference]) {
				continue
			}
			t, y, w := math.Abs(float64(j)-corrector.ZeroSample(shot))*s.A.DwellNS*1e-3, math.Log(size), size*size
			sw, st, sy, stt, sty = sw+w, st+w*t, sy+w*y, stt+w*t*t, sty+w*t*y
		}
	}
	spread := stt*sw - st*st
	if spread <= 0 {
		return 0
	}
	return -(sty*sw - st*sy) / spread
}
