package singlepoint

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// Coverage says what the gradients of an acquisition are and what each sample time covers and resolves.
type Coverage struct {
	Cartesian  bool         `json:"cartesian"`
	Values     [3]int       `json:"values"`     // different gradients along x, y, z of a Cartesian set; 0 otherwise
	StepMTPerM [3]float64   `json:"stepMTPerM"` // their distance; 0 otherwise
	Shots      int          `json:"shots"`      // image shots
	Times      []SampleTime `json:"times"`      // [sample]
}

// SampleTime is one sample time. At t = 0, and before the pulse of a free decay, there is no image: Usable is false,
// and KMaxPerMM and both lengths are 0, which JSON can say and infinity it cannot.
type SampleTime struct {
	Sample        int     `json:"sample"`
	TimeUS        float64 `json:"timeUS"` // since k = 0
	Usable        bool    `json:"usable"`
	KMaxPerMM     float64 `json:"kMaxPerMM"`     // |k| that every direction reaches
	FieldOfViewMM float64 `json:"fieldOfViewMM"` // along the axis with the widest step
	ResolutionMM  float64 `json:"resolutionMM"`  // field of view over the number of gradients; of a list: 1/(2 k_max)
}

// Describe returns the coverage of an acquisition. With n gradients of step ΔG along an axis
//
//	k_max = (γ/2π) ΔG t (n-1)/2,   field of view = 1/((γ/2π) ΔG t),   resolution = field of view/n
//
// Exact for a Cartesian set. For any other list, ΔG is taken as the edge of the mean cell of the largest ball in the hull,
// (volume/gradients)^(1/dim), so that the field of view is that of an even spread.
//
// Errors: unsupported for an encoding other than single-point; no-answer for gradients that span no area or volume.
func Describe(a *acquisition.Acquisition, timeShiftSamples float64) (*Coverage, error) {
	geo, err := newGeometry(a)
	if err != nil {
		return nil, err
	}
	c := &Coverage{Cartesian: geo.lattice != nil, Shots: len(geo.shots), Values: geo.values}
	for axis := range a.Dim {
		if c.Cartesian {
			c.StepMTPerM[axis] = geo.lattice.axes[axis].step
		}
	}
	for j := range a.Samples {
		c.Times = append(c.Times, geo.describe(a, timeShiftSamples, j))
	}
	return c, nil
}

func (geo *geometry) describe(a *acquisition.Acquisition, timeShiftSamples float64, j int) SampleTime {
	ns := timeNS(a, timeShiftSamples, j)
	perMT := math.Abs(acquisition.KPerNS(1, ns))
	st := SampleTime{Sample: j, TimeUS: ns * 1e-3, Usable: perMT > 0 && (ns > 0 || a.Sequence != acquisition.FreeDecay)}
	if !st.Usable {
		return st
	}
	st.KMaxPerMM = perMT * geo.most
	st.FieldOfViewMM = 1 / (perMT * geo.cell)
	st.ResolutionMM = 1 / (2 * st.KMaxPerMM)
	if geo.lattice != nil {
		st.ResolutionMM = 0
		for _, x := range geo.lattice.axes[:geo.dim] {
			st.ResolutionMM = math.Max(st.ResolutionMM, 1/(perMT*x.step*float64(x.values)))
		}
	}
	return st
}

// Covering returns the usable samples whose field of view is at least extentMM, in order. An object wider than the field
// of view folds: what lies beyond one edge appears at the other.
func (c *Coverage) Covering(extentMM float64) []int {
	var out []int
	for _, st := range c.Times {
		if st.Usable && st.FieldOfViewMM >= extentMM {
			out = append(out, st.Sample)
		}
	}
	return out
}

// Pick returns up to count usable samples, spread evenly over the sample times from firstUS to lastUS, both allowed.
//
// Errors: bad-setting when there is none, or count is below 1.
func (c *Coverage) Pick(firstUS, lastUS float64, count int) ([]int, error) {
	var all []int
	for _, st := range c.Times {
		// A millionth of a sample of slack, so that a time typed in meets the sample it was read from.
		if slack := 1e-6 * c.dwellUS(); st.Usable && st.TimeUS >= firstUS-slack && st.TimeUS <= lastUS+slack {
			all = append(all, st.Sample)
		}
	}
	if len(all) == 0 || count < 1 {
		return nil, fault.New(fault.BadSetting, "recipe singlePoint.firstUS", "%d of the sample times from %g to %g µs are asked for, %d can be used; the samples run from %.4g to %.4g µs",
			count, firstUS, lastUS, len(all), c.Times[0].TimeUS, c.Times[len(c.Times)-1].TimeUS)
	}
	count = min(count, len(all))
	out := make([]int, count)
	for i := range out {
		// The last is always among them, the first as soon as there are two.
		at := len(all) - 1
		if count > 1 {
			at = int(math.Round(float64(i*(len(all)-1)) / float64(count-1)))
		}
		out[i] = all[at]
	}
	return out, nil
}

func (c *Coverage) dwellUS() float64 {
	if len(c.Times) < 2 {
		return 0
	}
	return c.Times[1].TimeUS - c.Times[0].TimeUS
}

// SmallestFieldOfViewMM returns the field of view that all the samples cover.
func (c *Coverage) SmallestFieldOfViewMM(samples []int) float64 {
	least := math.Inf(1)
	for _, j := range samples {
		least = math.Min(least, c.Times[j].FieldOfViewMM)
	}
	return least
}
