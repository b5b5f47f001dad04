package leastsquares

import (
	"math"
	"math/rand/v2"
	"slices"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
)

// Noise returns spokes of nothing but noise, conditioned as those of the acquisition are: so many realisations, in place
// of its delays, of white noise with SD 1 in both channels of every raw sample. Images sends them through its iterations
// to learn what is left of the noise.
//
// The realisations are always the same, for any acquisition of the same shape.
//
// Errors: those of condition.Condition.
func Noise(a *acquisition.Acquisition, s condition.Settings, c *condition.Constants, g condition.Geometry,
	realisations int) (*condition.Spokes, error) {
	of := *a
	of.Delays, of.DelayUS = realisations, make([]float64, realisations)
	of.Signal = make([]complex64, realisations*a.Shots*a.Samples)
	r := rand.New(rand.NewPCG(0x7072, 0x6f6265))
	for i := range of.Signal {
		of.Signal[i] = complex(float32(r.NormFloat64()), float32(r.NormFloat64()))
	}
	constants := *c
	constants.OffsetReal, constants.OffsetImag = 0, 0
	constants.NoiseSD = slices.Repeat([]float64{1}, realisations)
	s.ExcludeDelays = nil
	delays := make([]int, realisations)
	for d := range delays {
		delays[d] = d
	}
	return condition.Condition(&of, s, &constants, g, delays)
}

// noiseIn returns, per delay, the root mean square over the field of view of its noise realisations, whose raw SD is 1,
// times the raw SD of the delay itself.
func (p *problem) noiseIn(image []float32, from, to int) []float64 {
	width, out := p.columns(to-from), make([]float64, to-from)
	for i, inside := range p.inside {
		if inside < 0 {
			continue
		}
		for d := range out {
			for _, v := range image[i*width+p.perDelay*d+1 : i*width+p.perDelay*(d+1)] {
				out[d] += float64(v) * float64(v)
			}
		}
	}
	for d := range out {
		mean := out[d] / float64((p.perDelay-1)*p.answered)
		out[d] = math.Sqrt(mean * p.sp.NoiseDensity[from+d] / p.noise.NoiseDensity[0])
	}
	return out
}
