package singlepoint

import (
	"math"
	"math/cmplx"
	"slices"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// reader gives the samples of an acquisition with the offset taken off.
type reader struct {
	a        *acquisition.Acquisition
	baseline [][]complex128 // [delay][sample], nil when none
	origin   []int          // shots nearest to k = 0
}

func newReader(a *acquisition.Acquisition, s Settings) *reader {
	r := &reader{a: a, origin: nearestToOrigin(a)}
	if s.Offset == "baseline-shots" {
		r.baseline = make([][]complex128, a.Delays)
		shots := a.BaselineShots()
		for d := range r.baseline {
			r.baseline[d] = make([]complex128, a.Samples)
			for _, shot := range shots {
				for j, v := range a.Trace(d, shot) {
					r.baseline[d][j] += complex128(v) / complex(float64(len(shots)), 0)
				}
			}
		}
	}
	return r
}

// nearestToOrigin returns the image and zero-gradient shots with the least gradient. Of an even number of steps these
// are the corners around the origin, whose mean has the phase of the origin by symmetry.
func nearestToOrigin(a *acquisition.Acquisition) []int {
	least := math.Inf(1)
	for s, role := range a.ShotRole {
		if role != acquisition.RoleOffResonance {
			least = math.Min(least, a.Strength(s))
		}
	}
	var out []int
	for s, role := range a.ShotRole {
		if role != acquisition.RoleOffResonance && a.Strength(s) <= least*(1+1e-3) {
			out = append(out, s)
		}
	}
	return out
}

// besideOrigin returns the length of the mean gradient of the shots nearest to k = 0, in mT/m.
func (r *reader) besideOrigin() float64 {
	var mean [3]float64
	for _, s := range r.origin {
		for axis, g := range r.a.GradientMTPerM[s] {
			mean[axis] += g / float64(len(r.origin))
		}
	}
	return length(mean)
}

func (r *reader) at(d, s, j int) complex128 {
	v := complex128(r.a.Signal[(d*r.a.Shots+s)*r.a.Samples+j])
	if r.baseline != nil {
		v -= r.baseline[d][j]
	}
	return v
}

func (r *reader) nearOrigin(d, j int) complex128 {
	var sum complex128
	for _, s := range r.origin {
		sum += r.at(d, s, j)
	}
	return sum / complex(float64(len(r.origin)), 0)
}

const (
	// fewestPairs give the noise to 15 %; with several sample times and delays it is far better known.
	fewestPairs = 32
	// mostNoiseTimes bounds the sample times looked at.
	mostNoiseTimes = 16
)

// measureNoise returns the SD of one channel of one raw sample, never below the rounding of the stored signal.
func (geo *geometry) measureNoise(r *reader, p *Plan) (float64, error) {
	pairs := geo.oppositePairs()
	var power []float64
	largest := 0.0
	step := (len(p.Samples) + mostNoiseTimes - 1) / mostNoiseTimes
	for i := 0; i < len(p.Samples); i += step {
		turn := cmplx.Rect(1, -p.PhaseRad[i])
		for d := range r.a.Delays {
			largest = math.Max(largest, cmplx.Abs(r.nearOrigin(d, p.Samples[i])))
			for _, pair := range pairs {
				diff := turn*r.at(d, pair[0], p.Samples[i]) - cmplx.Conj(turn*r.at(d, pair[1], p.Samples[i]))
				power = append(power, real(diff)*real(diff)+imag(diff)*imag(diff))
			}
		}
	}
	variances := 2.0
	if len(pairs) == 0 {
		power, variances = geo.differences(r), 70
	}
	if len(power) == 0 || largest == 0 {
		return 0, fault.New(fault.NoAnswer, "noise", "there are no opposite gradients and %d samples per trace to measure the noise from, or no signal; give the noise", r.a.Samples)
	}
	slices.Sort(power)
	// The power of complex noise of variance v per channel is exponential with median 2v ln 2.
	sd := math.Sqrt(power[len(power)/2] / (2 * variances * math.Ln2))
	return math.Max(sd, 6e-8*largest), nil
}

// oppositePairs returns the pairs of shots s, -s, those in the outer half only when there are enough.
func (geo *geometry) oppositePairs() [][2]int {
	at := map[[3]int]int{}
	key := func(g [3]float64, sign float64) (k [3]int) {
		for axis := range 3 {
			k[axis] = int(math.Round(sign * g[axis] / (2 * offLattice * geo.cell)))
		}
		return k
	}
	var all, outer [][2]int
	for i, g := range geo.g {
		if j, found := at[key(g, -1)]; found {
			all = append(all, [2]int{geo.shots[i], geo.shots[j]})
			if length(g) > geo.most/2 {
				outer = append(outer, all[len(all)-1])
			}
		}
		at[key(g, 1)] = i
	}
	if len(outer) >= fewestPairs {
		return outer
	}
	return all
}

// differences returns the power of the fourth differences along the traces, 70 variances each.
func (geo *geometry) differences(r *reader) (power []float64) {
	for d := range r.a.Delays {
		for _, s := range geo.shots {
			for j := 4; j < r.a.Samples; j++ {
				v := r.at(d, s, j-4) - 4*r.at(d, s, j-3) + 6*r.at(d, s, j-2) - 4*r.at(d, s, j-1) + r.at(d, s, j)
				power = append(power, real(v)*real(v)+imag(v)*imag(v))
			}
		}
	}
	return power
}
