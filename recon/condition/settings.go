package condition

import (
	"math"

	"torrloom/recon/fault"
)

// Settings of the conditioning. The zero value is not valid; use Defaults.
type Settings struct {
	Offset           string  // a row of Offsets
	Phase            string  // a row of Phases
	TimeShiftSamples float64 // added to the time zero of the file
}

// Choice is a named way to do one step.
type Choice struct{ Name, Label, Help string }

// Offsets are the ways to find the receiver's constant offset.
var Offsets = []Choice{
	{"trace-ends", "trace ends", "subtract what the ends of the traces hold at all delays alike, if it stands out of the noise"},
	{"baseline-shots", "off-resonance shots", "subtract the mean trace of the off-resonance shots (shot_role 2), delay by delay"},
	{"none", "leave", "subtract nothing"},
}

// Phases are the ways to choose the receiver phase.
var Phases = []Choice{
	{"reference-delay", "reference delay", "one phase for all, making the echo of the reference delay real and positive"},
	{"none", "leave", "take the real channel as recorded"},
}

// Defaults returns trace-ends, reference-delay and no time shift.
func Defaults() Settings { return Settings{Offset: "trace-ends", Phase: "reference-delay"} }

// Check returns a bad-setting fault for a value that is not known or not finite.
func (s Settings) Check() error {
	if !named(Offsets, s.Offset) {
		return fault.New(fault.BadSetting, "recipe conditioning.offset", "%q is not known; use trace-ends, baseline-shots or none", s.Offset)
	}
	if !named(Phases, s.Phase) {
		return fault.New(fault.BadSetting, "recipe conditioning.phase", "%q is not known; use reference-delay or none", s.Phase)
	}
	if math.IsNaN(s.TimeShiftSamples) || math.IsInf(s.TimeShiftSamples, 0) {
		return fault.New(fault.BadSetting, "recipe conditioning.timeShiftSamples", "%g; a finite number of samples is needed", s.TimeShiftSamples)
	}
	return nil
}

func named(rows []Choice, name string) bool {
	for _, r := range rows {
		if r.Name == name {
			return true
		}
	}
	return false
}
