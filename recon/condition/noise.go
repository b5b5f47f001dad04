package condition

import "math"

// NoiseSD returns the predicted SD of noise, per delay, in an image that is linear in the spokes,
//
//	Σ_shots axis Σ_m filter_|m| S(m·DeltaK) exp(i2π m·DeltaK n·r)·DeltaK
//
// for axis weights per shot and a filter per m. See NoiseSDOf.
func (sp *Spokes) NoiseSD(axis, filter []float64) []float64 {
	weights := make([]float64, 0, len(axis)*len(filter))
	for _, w := range axis {
		for _, f := range filter {
			weights = append(weights, w*f*sp.DeltaK)
		}
	}
	return sp.NoiseSDOf(weights)
}

// NoiseSDOf is NoiseSD for weights [shot][m], DeltaK included. The noise of the raw samples is taken as white and equal in
// both channels, and is followed through the resampling; the result is exact at the gradient centre and the same, up to
// the edges of the band, anywhere else.
func (sp *Spokes) NoiseSDOf(weights []float64) []float64 {
	raw, density := 0.0, 0.0
	for i := range sp.Shot {
		w := weights[i*(sp.Half+1) : (i+1)*(sp.Half+1)]
		if sp.from != nil && sp.from[i] != nil {
			raw += sp.rawVariance(i, w)
		} else {
			density += sp.densityVariance(i, w)
		}
	}
	out := make([]float64, len(sp.Delays))
	for d, n := range sp.NoiseDensity {
		v := n * density
		if raw > 0 {
			v += sp.rawSD[d] * sp.rawSD[d] * raw
		}
		out[d] = math.Sqrt(v)
	}
	return out
}

// rawVariance returns Σ_j v_j² with Σ_j v_j·Re(trace_j) the contribution of shot i to the voxel at the gradient centre.
func (sp *Spokes) rawVariance(i int, w []float64) float64 {
	r := sp.from[i]
	share := make([]float64, r.samples)
	for m, weight := range w {
		for _, side := range sidesOf(m) {
			at := sp.Half + side
			factor := weight
			if sp.gain[i] != nil {
				factor *= sp.gain[i][m]
			}
			if m >= sp.OneSided[i] {
				factor *= 2
			}
			for j, v := range r.weights[at] {
				share[r.first[at]+j] += factor * v
			}
		}
	}
	sum := 0.0
	for _, v := range share {
		sum += v * v
	}
	return sum
}

// sidesOf returns the samples of a full echo that sample m of a spoke came from.
func sidesOf(m int) []int {
	if m == 0 {
		return []int{0}
	}
	return []int{m, -m}
}

// densityVariance returns Σ over both halves of weight²/DeltaK: the integral of the squared filter.
func (sp *Spokes) densityVariance(i int, w []float64) float64 {
	sum := w[0] * w[0]
	for m := 1; m <= sp.Half; m++ {
		halves := 2.0
		if m >= sp.OneSided[i] {
			halves = 4
		}
		sum += halves * w[m] * w[m]
	}
	return sum / sp.DeltaK
}
