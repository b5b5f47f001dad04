package phantom

import (
	"math"
	"math/cmplx"
	"math/rand/v2"

	"torrloom/recon/acquisition"
)

// Protocol is how a phantom is measured. Zero fields mean: absent.
type Protocol struct {
	Sequence   acquisition.Sequence
	DelayUS    []float64
	EchoTimeUS float64 // total echo time of a recovery; attenuates each body by exp(-R2·echo time)
	Inversion  float64 // B/A of an inversion recovery, 2 when perfect

	Directions     [][3]float64 // unit vectors, one per shot
	GradientMTPerM float64
	DwellNS        float64
	Samples        int
	TimeZeroSample float64

	ReadoutDecayPerUS float64 // signal falls as exp(-rate·|t|) along each trace
	PhaseRad          float64
	Offset            complex128
	NoiseSD           float64 // per channel and sample
	Seed              uint64
}

// Acquire returns the traces that the phantom gives under the protocol.
//
// Signal of one body: density × weight of the sequence × transform of its shape, with the weights
//
//	inversion recovery   (1 - Inversion·exp(-R1 T))·exp(-R2·EchoTime)
//	saturation recovery  (1 - exp(-R1 T))·exp(-R2·EchoTime)
//	decay                exp(-R2 t)
//
// Errors: those of acquisition.Check.
func (p *Phantom) Acquire(pr Protocol) (*acquisition.Acquisition, error) {
	a := p.empty(pr)
	weights := p.sequenceWeights(pr)
	for s, n := range pr.Directions {
		for j := range pr.Samples {
			t := (float64(j) - pr.TimeZeroSample) * pr.DwellNS
			k := acquisition.KPerNS(pr.GradientMTPerM, t)
			common := cmplx.Rect(math.Exp(-pr.ReadoutDecayPerUS*math.Abs(t)*1e-3), pr.PhaseRad)
			p.addSample(a, weights, s, j, [3]float64{k * n[0], k * n[1], k * n[2]}, common)
		}
	}
	addReceiver(a.Signal, pr)
	return a, a.Check()
}

func (p *Phantom) empty(pr Protocol) *acquisition.Acquisition {
	a := &acquisition.Acquisition{
		Name: "phantom", MadeUp: true, Dim: p.Dim,
		Delays: len(pr.DelayUS), Shots: len(pr.Directions), Samples: pr.Samples,
		DelayUS: pr.DelayUS, DwellNS: pr.DwellNS, TimeZeroSample: pr.TimeZeroSample,
		Sequence: pr.Sequence, Encoding: acquisition.Spoke, Domain: acquisition.Time,
	}
	a.Signal = make([]complex64, a.Delays*a.Shots*a.Samples)
	for _, n := range pr.Directions {
		g := pr.GradientMTPerM
		a.GradientMTPerM = append(a.GradientMTPerM, [3]float64{g * n[0], g * n[1], g * n[2]})
	}
	if pr.EchoTimeUS > 0 {
		a.Optional.EchoTimeUS = &pr.EchoTimeUS
	}
	return a
}

// sequenceWeights returns [part][delay] density × weight.
func (p *Phantom) sequenceWeights(pr Protocol) [][]float64 {
	out := make([][]float64, len(p.parts))
	for b, part := range p.parts {
		for _, t := range pr.DelayUS {
			out[b] = append(out[b], part.Density*pr.weight(part, t))
		}
	}
	return out
}

func (pr Protocol) weight(b Body, delayUS float64) float64 {
	echo := math.Exp(-b.R2PerUS * pr.EchoTimeUS)
	switch pr.Sequence {
	case acquisition.InversionRecovery:
		return (1 - pr.Inversion*math.Exp(-b.R1PerUS*delayUS)) * echo
	case acquisition.SaturationRecovery:
		return (1 - math.Exp(-b.R1PerUS*delayUS)) * echo
	}
	return math.Exp(-b.R2PerUS * delayUS)
}

func (p *Phantom) addSample(a *acquisition.Acquisition, weights [][]float64, s, j int, k [3]float64, common complex128) {
	for b, part := range p.parts {
		f := part.Shape.Transform(k) * common
		for d, w := range weights[b] {
			a.Signal[(d*a.Shots+s)*a.Samples+j] += complex64(f * complex(w, 0))
		}
	}
}

// addReceiver adds the constant offset and white Gaussian noise, independent in both channels.
func addReceiver(signal []complex64, pr Protocol) {
	if pr.NoiseSD == 0 && pr.Offset == 0 {
		return
	}
	r := rand.New(rand.NewPCG(pr.Seed, 0x70727271))
	for i := range signal {
		noise := complex(r.NormFloat64()*pr.NoiseSD, r.NormFloat64()*pr.NoiseSD)
		signal[i] += complex64(noise + pr.Offset)
	}
}

// GoldenHalfSphere returns n directions spread over the half sphere z > 0 along a spiral: z falls evenly from 1-1/(2n)
// to 1/(2n), the azimuth turns by the golden angle each time.
func GoldenHalfSphere(n int) [][3]float64 {
	out := make([][3]float64, n)
	for i := range out {
		z := 1 - (float64(i)+0.5)/float64(n)
		r := math.Sqrt(1 - z*z)
		sin, cos := math.Sincos(float64(i) * math.Pi * (3 - math.Sqrt(5)))
		out[i] = [3]float64{r * cos, r * sin, z}
	}
	return out
}

// EqualAngles returns n directions in the x-y plane at angles π·i/n.
func EqualAngles(n int) [][3]float64 {
	out := make([][3]float64, n)
	for i := range out {
		sin, cos := math.Sincos(math.Pi * float64(i) / float64(n))
		out[i] = [3]float64{cos, sin, 0}
	}
	return out
}
