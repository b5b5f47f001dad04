package singlepoint

import (
	"math"

	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/sampling"
)

// Settings of the single-point reconstruction. The zero value is not valid; use Defaults.
type Settings struct {
	Axis             string  // a row of Axes: what the frames run along
	Window           string  // a row of sampling.Windows, over |k|/k_cut
	Cutoff           float64 // k_cut as a fraction of k_max, 0 < cutoff <= 1
	Resolution       string  // a row of Resolutions: whose k_max
	Offset           string  // a row of Offsets
	Phase            string  // a row of Phases
	TimeShiftSamples float64 // added to the time zero of the file
	NoiseSD          float64 // of one channel of one raw sample; 0: measured from the data
}

// Axes are what the frames can run along.
var Axes = []condition.Choice{
	{Name: "sample-time", Label: "sample time", Help: "one image per sample time at the reference delay, for a fit of R2* over the free decay"},
	{Name: "delay", Label: "delay", Help: "one image per delay, the mean over the sample times weighted for the best signal to noise"},
}

// Resolutions are the ways to choose k_max.
var Resolutions = []condition.Choice{
	{Name: "common", Label: "common", Help: "every sample time ends at the k_max of the earliest one, so that all images are equally sharp"},
	{Name: "own", Label: "own", Help: "every sample time uses all of its k-space; later images are sharper, which a fit over the sample time sees at edges"},
}

// Offsets are the ways to find the receiver's constant offset.
var Offsets = []condition.Choice{
	{Name: "none", Label: "leave", Help: "subtract nothing"},
	{Name: "baseline-shots", Label: "off-resonance shots", Help: "subtract the mean trace of the off-resonance shots (shot_role 2), delay by delay"},
}

// Phases are the ways to choose the phase of each sample time.
var Phases = []condition.Choice{
	{Name: "reference-delay", Label: "reference delay", Help: "at each sample time, make the signal nearest to k = 0 at the reference delay real and positive"},
	{Name: "none", Label: "leave", Help: "take the real channel as recorded"},
}

// Defaults returns images along the sample time with common resolution, no window, phased by the reference delay.
func Defaults() Settings {
	return Settings{Axis: "sample-time", Window: "none", Cutoff: 1, Resolution: "common", Offset: "none", Phase: "reference-delay"}
}

// Check returns a bad-setting fault for a value that is not known or out of range.
func (s Settings) Check() error {
	for _, c := range []struct {
		path, value string
		rows        []condition.Choice
	}{
		{"singlePoint.axis", s.Axis, Axes}, {"singlePoint.resolution", s.Resolution, Resolutions},
		{"conditioning.offset", s.Offset, Offsets}, {"conditioning.phase", s.Phase, Phases},
	} {
		if err := known(c.path, c.value, c.rows); err != nil {
			return err
		}
	}
	if _, err := sampling.WindowNamed(s.Window); err != nil {
		return err
	}
	if !(s.Cutoff > 0 && s.Cutoff <= 1) {
		return fault.New(fault.BadSetting, "recipe reconstruction.cutoff", "%g of k_max; use more than 0, up to 1", s.Cutoff)
	}
	if math.IsNaN(s.TimeShiftSamples) || math.IsInf(s.TimeShiftSamples, 0) {
		return fault.New(fault.BadSetting, "recipe conditioning.timeShiftSamples", "%g; a finite number of samples is needed", s.TimeShiftSamples)
	}
	if !(s.NoiseSD >= 0) || math.IsInf(s.NoiseSD, 0) {
		return fault.New(fault.BadSetting, "noise", "%g; a positive standard deviation is needed, or 0 to have it measured", s.NoiseSD)
	}
	return nil
}

func known(path, value string, rows []condition.Choice) error {
	list := ""
	for _, r := range rows {
		if r.Name == value {
			return nil
		}
		list += " " + r.Name
	}
	return fault.New(fault.BadSetting, "recipe "+path, "%q is not known; use one of%s", value, list)
}
