package compare

import (
	"math"
	"slices"

	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// SpokeOperator is a reconstruction that is a weighted sum over conditioned spokes, as back-projection and gridding are:
//
//	f(r) = Σ_s Σ_{m=-Half..Half} Weights_{s,|m|} S_s(m) exp(i2π m·DeltaK n_s·r)
//
// Its point spread and its noise follow from the weights, and are the same everywhere in the field of view. White noise
// in the recorded samples is assumed.
type SpokeOperator struct {
	spokes  *condition.Spokes
	weights []float64
}

// NewSpokeOperator returns the operator of weights [shot][m], m = 0..Half, window and DeltaK included: for axis weights
// and a filter along the spoke these are axis·filter·DeltaK.
//
// Errors: bug when there is not one weight per sample.
func NewSpokeOperator(sp *condition.Spokes, weights []float64) (*SpokeOperator, error) {
	if want := len(sp.Shot) * (sp.Half + 1); len(weights) != want {
		return nil, fault.New(fault.Bug, "point spread", "%d weights for %d samples", len(weights), want)
	}
	return &SpokeOperator{sp, weights}, nil
}

// cosineSum returns Σ_s (c_0 + 2 Σ_m c_m cos(2π m·DeltaK n_s·d)) with the coefficients c = of(s, m, weight).
func (o *SpokeOperator) cosineSum(mm [3]float64, of func(s, m int, weight float64) float64) float64 {
	sum := 0.0
	for s, n := range o.spokes.Directions {
		turn := 2 * math.Cos(2*math.Pi*o.spokes.DeltaK*(n[0]*mm[0]+n[1]*mm[1]+n[2]*mm[2]))
		before, now := turn/2, 1.0 // cos(-x), cos(0)
		for m := range o.spokes.Half + 1 {
			c := of(s, m, o.weights[s*(o.spokes.Half+1)+m])
			if m > 0 {
				c *= 2
			}
			sum += c * now
			before, now = now, turn*now-before
		}
	}
	return sum
}

// Point returns the image of a point of 1 at a distance from it.
func (o *SpokeOperator) Point(offsetMM [3]float64) float64 {
	return o.cosineSum(offsetMM, func(_, _ int, w float64) float64 { return w })
}

// Noise returns the covariance of the noise of two voxels at a distance, up to a factor that is the same for all
// operators on one measurement: the transform of the squared weights over DeltaK. A sample that rests on one half of the
// echo carries twice the variance.
func (o *SpokeOperator) Noise(offsetMM [3]float64) float64 {
	return o.cosineSum(offsetMM, func(s, m int, w float64) float64 {
		return o.echoes(s, m) * w * w / o.spokes.DeltaK
	})
}

func (o *SpokeOperator) echoes(s, m int) float64 {
	if m >= o.spokes.OneSided[s] {
		return 2
	}
	return 1
}

// Sharpness describes an operator.
type Sharpness struct {
	Point           PointSpread `json:"point"`
	NoiseWidthMM    [3]float64  `json:"noiseWidthMM"`    // full width at half maximum of the noise's correlation along x, y, z
	VoxelsPerSample float64     `json:"voxelsPerSample"` // how many voxels share one independent value of noise
}

// Sharpness returns the widths of the point spread and of the noise correlation, for voxels of a grid.
//
// Errors: no-answer when one of them does not fall to half within the band.
func (o *SpokeOperator) Sharpness(g volume.Grid) (Sharpness, error) {
	var s Sharpness
	s.Point.Peak = o.Point([3]float64{})
	for axis := range o.spokes.Dim {
		along := func(f func([3]float64) float64) func(float64) float64 {
			return func(d float64) float64 {
				var mm [3]float64
				mm[axis] = d
				return f(mm)
			}
		}
		// A main lobe spans some 1.6 of these; an eighth of that finds every half.
		nyquist := 1 / (2 * float64(o.spokes.Half) * o.spokes.DeltaK)
		width, ring, err := lobe(along(o.Point), nyquist/4, math.Min(8*nyquist, o.spokes.BandMM/2))
		if err != nil {
			return s, err
		}
		s.Point.WidthMM[axis], s.Point.Ring = width, math.Max(s.Point.Ring, ring)
		if s.NoiseWidthMM[axis], _, err = lobe(along(o.Noise), nyquist/4, math.Min(8*nyquist, o.spokes.BandMM/2)); err != nil {
			return s, err
		}
	}
	s.VoxelsPerSample = o.VoxelsPerSample(g)
	return s, nil
}

// VoxelsPerSample returns Σ ρ² of the noise correlation ρ over the voxels around one, at least 1: n voxels tell a variance
// as well as n/VoxelsPerSample independent ones would. Their mean they tell better than that, since the noise of
// reconstructions from spokes is weak at low frequencies; intervals of means are therefore rather too wide.
//
// The sum reaches as far as the correlation is of any size; beyond a few resolution lengths it is cut off.
func (o *SpokeOperator) VoxelsPerSample(g volume.Grid) float64 {
	nyquist := 1 / (2 * float64(o.spokes.Half) * o.spokes.DeltaK)
	var reach [3]int
	for axis := range g.Dim() {
		reach[axis] = min(g.N[axis]/2, int(math.Ceil(2.5*nyquist/g.VoxelMM[axis])))
	}
	own, sum := o.Noise([3]float64{}), 0.0
	for z := 0; z <= reach[2]; z++ {
		for y := -reach[1]; y <= reach[1]; y++ {
			for x := -reach[0]; x <= reach[0]; x++ {
				// Opposite neighbours are alike: one half of them is summed.
				if z == 0 && (y < 0 || y == 0 && x < 0) {
					continue
				}
				rho := o.Noise([3]float64{float64(x) * g.VoxelMM[0], float64(y) * g.VoxelMM[1], float64(z) * g.VoxelMM[2]}) / own
				if x == 0 && y == 0 && z == 0 {
					sum++
				} else {
					sum += 2 * rho * rho
				}
			}
		}
	}
	return sum
}

// Correlation returns the correlation of the noise of two operators on one measurement at the same place, for Difference:
//
//	Σ_s ∫ a b dk / √(Σ_s ∫ a² dk · Σ_s ∫ b² dk)
//
// with the weights per unit of k of the shots they share. Approximate: weights are taken as straight lines over k, which the
// different sample steps of the two make necessary.
func (o *SpokeOperator) Correlation(other *SpokeOperator) float64 {
	mixed := 0.0
	for s, shot := range o.spokes.Shot {
		if t := slices.Index(other.spokes.Shot, shot); t >= 0 {
			mixed += o.overlap(s, other, t)
		}
	}
	own, others := 0.0, 0.0
	for s := range o.spokes.Shot {
		own += o.overlap(s, o, s)
	}
	for t := range other.spokes.Shot {
		others += other.overlap(t, other, t)
	}
	if !(own*others > 0) {
		return 0
	}
	return math.Max(-1, math.Min(1, mixed/math.Sqrt(own*others)))
}

// overlap returns the integral of the product of two spokes' weights per unit of k, over one side of the spoke, by the
// midpoints of a fine common step.
func (o *SpokeOperator) overlap(s int, other *SpokeOperator, t int) float64 {
	dk := math.Min(o.spokes.DeltaK, other.spokes.DeltaK) / 2
	end := math.Min(o.end(), other.end())
	sum := 0.0
	for k := dk / 2; k < end; k += dk {
		a, echoes := o.weightAt(s, k)
		b, _ := other.weightAt(t, k)
		sum += echoes * a * b * dk
	}
	return sum
}

// end returns how far the last sample of a spoke reaches.
func (o *SpokeOperator) end() float64 { return (float64(o.spokes.Half) + 0.5) * o.spokes.DeltaK }

// weightAt returns the weight of a shot per unit of k, and the noise variance of a sample there.
func (o *SpokeOperator) weightAt(s int, k float64) (weight, variance float64) {
	at := math.Min(k/o.spokes.DeltaK, float64(o.spokes.Half))
	m := min(int(at), o.spokes.Half-1)
	row := o.weights[s*(o.spokes.Half+1):]
	f := at - float64(m)
	return ((1-f)*row[m] + f*row[m+1]) / o.spokes.DeltaK, o.echoes(s, int(math.Round(at)))
}
