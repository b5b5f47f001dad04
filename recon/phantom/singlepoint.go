package phantom

import (
	"math"
	"math/cmplx"

	"torrloom/recon/acquisition"
)

// SinglePointProtocol is how a phantom is measured by single-point encoding: one trace per gradient vector, each sample
// time a k-space grid of its own. Zero fields mean: absent.
type SinglePointProtocol struct {
	Sequence   acquisition.Sequence
	DelayUS    []float64 // one delay of 0 for a plain free decay
	EchoTimeUS float64   // total echo time of a recovery
	Inversion  float64   // B/A of an inversion recovery, 2 when perfect

	GradientMTPerM [][3]float64 // [shot], such as CubeGradients returns
	DwellNS        float64
	Samples        int
	TimeZeroSample float64 // negative when a dead time swallows the first samples

	BroadeningPerUS    float64 // R2* = R2PerUS of the body + this
	FrequencyOffsetMHz float64 // the phase turns by 2π·offset·t
	PhaseRad           float64
	Offset             complex128
	NoiseSD            float64 // per channel and sample
	Seed               uint64
}

// AcquireSinglePoint returns the traces that the phantom gives under the protocol. At the sample time
// t = (j - TimeZeroSample)·DwellNS, one body under the gradient G gives
//
//	density × weight of the sequence × exp(-R2*·|t|) × transform of its shape at k = (γ/2π) G t
//
// with the weights of Acquire. There is no signal before the pulse of a free decay. Exact up to the rounding to float32.
//
// Errors: those of acquisition.Check.
func (p *Phantom) AcquireSinglePoint(pr SinglePointProtocol) (*acquisition.Acquisition, error) {
	receiver := pr.receiver()
	a := p.emptySinglePoint(pr)
	weights := p.sequenceWeights(receiver)
	for j := range pr.Samples {
		t := (float64(j) - pr.TimeZeroSample) * pr.DwellNS
		if t < 0 && pr.Sequence == acquisition.FreeDecay {
			continue
		}
		factors := p.readoutFactors(pr, t*1e-3)
		for s, g := range pr.GradientMTPerM {
			k := acquisition.KPerNS(1, t)
			p.addSinglePoint(a, weights, factors, s, j, [3]float64{k * g[0], k * g[1], k * g[2]})
		}
	}
	addReceiver(a.Signal, receiver)
	return a, a.Check()
}

// receiver returns the part of the protocol that Acquire has in common.
func (pr SinglePointProtocol) receiver() Protocol {
	return Protocol{Sequence: pr.Sequence, DelayUS: pr.DelayUS, EchoTimeUS: pr.EchoTimeUS, Inversion: pr.Inversion,
		Offset: pr.Offset, NoiseSD: pr.NoiseSD, Seed: pr.Seed}
}

func (p *Phantom) emptySinglePoint(pr SinglePointProtocol) *acquisition.Acquisition {
	a := &acquisition.Acquisition{
		Name: "phantom", MadeUp: true, Dim: p.Dim,
		Delays: len(pr.DelayUS), Shots: len(pr.GradientMTPerM), Samples: pr.Samples,
		DelayUS: pr.DelayUS, DwellNS: pr.DwellNS, TimeZeroSample: pr.TimeZeroSample, GradientMTPerM: pr.GradientMTPerM,
		Sequence: pr.Sequence, Encoding: acquisition.SinglePoint, Domain: acquisition.Time,
	}
	a.Signal = make([]complex64, a.Delays*a.Shots*a.Samples)
	if pr.EchoTimeUS > 0 {
		a.Optional.EchoTimeUS = &pr.EchoTimeUS
	}
	return a
}

// readoutFactors returns, per part, what decay, frequency offset and phase make of its signal at the time t.
func (p *Phantom) readoutFactors(pr SinglePointProtocol, timeUS float64) []complex128 {
	out := make([]complex128, len(p.parts))
	for b, part := range p.parts {
		decay := math.Exp(-(part.R2PerUS + pr.BroadeningPerUS) * math.Abs(timeUS))
		out[b] = cmplx.Rect(decay, pr.PhaseRad+2*math.Pi*pr.FrequencyOffsetMHz*timeUS)
	}
	return out
}

func (p *Phantom) addSinglePoint(a *acquisition.Acquisition, weights [][]float64, factors []complex128, s, j int, k [3]float64) {
	for b, part := range p.parts {
		f := part.Shape.Transform(k) * factors[b]
		for d, w := range weights[b] {
			a.Signal[(d*a.Shots+s)*a.Samples+j] += complex64(f * complex(w, 0))
		}
	}
}

// CubeGradients returns the n^dim gradients of a square or cube in mT/m: n equally spaced values from -most to +most
// along each axis, the step being 2·most/(n-1). x varies fastest.
func CubeGradients(dim, n int, mostMTPerM float64) [][3]float64 {
	slices := 1
	if dim == 3 {
		slices = n
	}
	value := func(i int) float64 { return mostMTPerM * float64(2*i-(n-1)) / float64(n-1) }
	var out [][3]float64
	for iz := range slices {
		for iy := range n {
			for ix := range n {
				g := [3]float64{value(ix), value(iy)}
				if dim == 3 {
					g[2] = value(iz)
				}
				out = append(out, g)
			}
		}
	}
	return out
}

// BallGradients returns those of CubeGradients that lie in the circle or ball of radius most.
func BallGradients(dim, n int, mostMTPerM float64) [][3]float64 {
	var out [][3]float64
	for _, g := range CubeGradients(dim, n, mostMTPerM) {
		// The slack keeps the points on the axes in spite of rounding.
		if g[0]*g[0]+g[1]*g[1]+g[2]*g[2] <= mostMTPerM*mostMTPerM*(1+1e-9) {
			out = append(out, g)
		}
	}
	return out
}
