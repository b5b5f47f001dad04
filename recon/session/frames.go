package session

import (
	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/recipe"
	"torrloom/recon/relax"
	"torrloom/recon/singlepoint"
)

// Frames are the images of a run, in order, and what is fitted over them: one per delay for spokes; for single-point data
// one per delay or one per sample time.
type Frames struct {
	Kind      string    `json:"kind"`      // "delay" or "sample time"
	TimeUS    []float64 `json:"timeUS"`    // [frame]
	Reference int       `json:"reference"` // frame of the mask, where the signal is strongest
	RateName  string    `json:"rateName"`  // "R1", "R2" or "R2*"

	delays  []int // [frame] delays of the acquisition, when the frames run along them
	samples []int // single-point: sample times that the images are made from
}

// FramesOf returns the frames that a recipe makes of an acquisition.
//
// Errors: bad-setting when a method does not suit the encoding, or no sample time lies in the range asked for.
func FramesOf(a *acquisition.Acquisition, r recipe.Recipe) (Frames, error) {
	single := r.Reconstruction.Method == singlePointMethod
	if len(r.Conditioning.KeptDelays(a)) == 0 {
		return Frames{}, fault.New(fault.BadSetting, "recipe conditioning.excludeDelays", "every one of %d delays is left out; keep at least one", a.Delays)
	}
	if single != (a.Encoding == acquisition.SinglePoint) {
		return Frames{}, fault.New(fault.BadSetting, "recipe reconstruction.method", "%s does not suit %s data; use %s", r.Reconstruction.Method, a.Encoding, suitable(a))
	}
	f := Frames{Kind: "delay", RateName: a.RateName(), delays: r.Conditioning.KeptDelays(a)}
	for i, d := range f.delays {
		f.TimeUS = append(f.TimeUS, a.DelayUS[d])
		if d == r.Conditioning.ReferenceDelay(a) {
			f.Reference = i
		}
	}
	if !single {
		return f, nil
	}
	coverage, err := singlepoint.Describe(a, r.Conditioning.TimeShiftSamples)
	if err != nil {
		return Frames{}, err
	}
	sp := r.SinglePoint
	if f.samples, err = coverage.Pick(sp.FirstUS, sp.LastUS, sp.Count); err != nil {
		return Frames{}, err
	}
	if sp.Axis == "sample-time" {
		f.Kind, f.TimeUS, f.Reference, f.RateName = "sample time", nil, 0, "R2*"
		for _, j := range f.samples {
			f.TimeUS = append(f.TimeUS, coverage.Times[j].TimeUS)
		}
	}
	return f, nil
}

// delaysOf returns the delays of frames that run along them.
func (f Frames) delaysOf(frames []int) []int {
	out := make([]int, len(frames))
	for i, frame := range frames {
		out[i] = f.delays[frame]
	}
	return out
}

// suitable names the methods for an acquisition's encoding.
func suitable(a *acquisition.Acquisition) string {
	if a.Encoding == acquisition.SinglePoint {
		return singlePointMethod
	}
	words := ""
	for _, m := range recipe.Methods {
		if m.Value != singlePointMethod {
			words += ", " + m.Value
		}
	}
	return words[2:]
}

// fitter returns the fit of one voxel over the frames.
//
// Errors: those of relax.NewFitter; unsupported when no rate model fits the frames.
func (f Frames) fitter(a *acquisition.Acquisition, r recipe.Recipe, noiseSD []float64) (*relax.Fitter, error) {
	sequence := a.Sequence
	if f.Kind == "sample time" {
		sequence = acquisition.FreeDecay
	}
	for _, m := range relax.Models {
		if m.Sequence == sequence {
			return relax.NewFitter(m, f.TimeUS, noiseSD, relax.Settings{RateMinPerUS: r.Rates.MinPerUS, RateMaxPerUS: r.Rates.MaxPerUS})
		}
	}
	return nil, fault.New(fault.Unsupported, "sequence", "there is no rate model for %s", sequence)
}
