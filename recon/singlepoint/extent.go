package singlepoint

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

const (
	extentMatrix = 32
	// extentLevel of the strongest voxel still counts as object. Hann's window leaves lobes of 3 % beside an edge.
	extentLevel = 0.1
	// extentRoom between the object and the field of view it is measured in, for the blur of the image.
	extentRoom = 1.3
)

// Extent returns the diameter in mm, around the gradient centre, of the smallest ball that holds the object: all that
// reaches a tenth of the strongest signal and stands out of the noise, blur included, at the reference delay.
//
// The first image is that of the earliest sample time, which covers most and resolves least; each next one is the latest
// that still covers what was found. An object that not even the earliest one covers is given as that field of view.
//
// Errors: those of Describe and Prepare; no-answer when no sample time can be used.
func Extent(a *acquisition.Acquisition, s Settings) (float64, error) {
	c, err := Describe(a, s.TimeShiftSamples)
	if err != nil {
		return 0, err
	}
	all := c.Covering(0)
	if len(all) == 0 {
		return 0, fault.New(fault.NoAnswer, "time_zero_sample", "none of %d samples comes after k = 0 at sample %g; check the time zero", a.Samples, a.TimeZeroSample)
	}
	s.Axis, s.Window, s.Cutoff, s.Resolution = "sample-time", "hann", 1, "own"
	at := all[0]
	for {
		extent, err := extentAt(a, s, at, c.Times[at].FieldOfViewMM)
		next := c.latest(extentRoom * extent)
		if next <= at {
			next = c.latest(extent) // right after the pulse, each sample halves the field of view
		}
		if err != nil || next <= at {
			return extent, err
		}
		at = next
	}
}

// latest returns the last sample that covers extentMM, -1 if there is none.
func (c *Coverage) latest(extentMM float64) int {
	covering := c.Covering(extentMM)
	if len(covering) == 0 {
		return -1
	}
	return covering[len(covering)-1]
}

// extentAt measures at one sample time, in its own field of view.
func extentAt(a *acquisition.Acquisition, s Settings, sample int, fieldOfViewMM float64) (float64, error) {
	g, err := volume.Cube(a.Dim, extentMatrix, fieldOfViewMM)
	if err != nil {
		return 0, err
	}
	p, _, err := Prepare(a, s, g, []int{sample})
	if err != nil {
		return 0, err
	}
	r, err := Images(a, s, p, g, []int{0}, nil)
	if err != nil {
		return 0, err
	}
	peak, farthest := 0.0, 0.0
	for _, v := range r.Values {
		peak = math.Max(peak, math.Abs(zeroNaN(v)))
	}
	// Of some ten thousand voxels of noise none passes five standard deviations.
	level := math.Max(extentLevel*peak, 5*r.NoiseSD[0])
	for i, v := range r.Values {
		if math.Abs(zeroNaN(v)) >= level {
			at := [3]float64{g.MM(0, i%g.N[0]), g.MM(1, i/g.N[0]%g.N[1]), g.MM(2, i/(g.N[0]*g.N[1]))}
			farthest = math.Max(farthest, length(at))
		}
	}
	return math.Min(2*farthest+g.VoxelMM[0], fieldOfViewMM), nil
}

func zeroNaN(v float32) float64 {
	if v != v {
		return 0
	}
	return float64(v)
}

// Suggest returns the sample times that suit an object of extentMM: up to the latest whose field of view leaves a tenth of
// room around it, from half of that on, which gives a fit of R2* its span and costs half of the resolution. When none
// covers the object, it is the earliest one alone.
//
// Errors: no-answer when no sample time can be used.
func (c *Coverage) Suggest(extentMM float64) (firstUS, lastUS float64, err error) {
	all := c.Covering(0)
	if len(all) == 0 {
		return 0, 0, fault.New(fault.NoAnswer, "time_zero_sample", "no sample comes after k = 0; check the time zero")
	}
	covering := c.Covering(1.1 * extentMM)
	if len(covering) == 0 {
		t := c.Times[all[0]].TimeUS
		return t, t, nil
	}
	lastUS = c.Times[covering[len(covering)-1]].TimeUS
	for _, j := range covering {
		if firstUS = c.Times[j].TimeUS; firstUS >= lastUS/2 {
			break
		}
	}
	return firstUS, lastUS, nil
}
