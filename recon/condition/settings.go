package condition

import (
	"math"
	"slices"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// Settings of the conditioning. Offset and Phase have no valid zero value; use Defaults. Everything else is left alone
// at its zero value.
//
// Drifts are straight lines over the acquisition order u of a shot, see Order.
type Settings struct {
	Offset           string  `json:"offset"`           // a row of Offsets
	Phase            string  `json:"phase"`            // a row of Phases
	TimeShiftSamples float64 `json:"timeShiftSamples"` // added to the time zero of the file

	// The second channel records (1+QuadratureGain)·(Q cos skew + I sin skew) where Q belongs.
	QuadratureGain    float64 `json:"quadratureGain"`
	QuadratureSkewDeg float64 `json:"quadratureSkewDeg"`

	ShotPhase string `json:"shotPhase"` // a row of ShotPhases; "" is none
	ShotTime  string `json:"shotTime"`  // a row of ShotTimes; "" is none

	PhaseDriftDeg     float64 `json:"phaseDriftDeg"`     // phase of the last shot less that of the first
	FrequencyKHz      float64 `json:"frequencyKHz"`      // signal's frequency off the receiver's, at u = 1/2
	FrequencyDriftKHz float64 `json:"frequencyDriftKHz"` // that of the last shot less that of the first
	AmplitudeDrift    float64 `json:"amplitudeDrift"`    // signal of the last shot less the first's, over that at u = 1/2

	// DeadSamples is how many samples after k = 0 are not used, because the receiver was not ready. The samples of
	// k-space they would have given are taken from the others by the resampler, which knows that the object is finite.
	DeadSamples int `json:"deadSamples"`

	// A subset of the image shots, to see what fewer would have done: of those from FirstShot to LastShot in the order of
	// the file (LastShot 0: to the end), every Every-th (0 or 1: all).
	FirstShot int `json:"firstShot"`
	LastShot  int `json:"lastShot"`
	Every     int `json:"every"`

	// The readout decay is undone by multiplying samples at |t| from k = 0 with exp(rate·|t|), up to a cap: where the signal
	// is gone there is only noise to multiply.
	ReadoutDecay      string  `json:"readoutDecay"` // a row of ReadoutDecays; "" is none
	ReadoutDecayPerUS float64 `json:"readoutDecayPerUS"`
	ReadoutGainCap    float64 `json:"readoutGainCap"` // largest factor; 0 is 1, no factor at all

	ExcludeShots  []int `json:"excludeShots,omitempty"`  // shots that do not enter the image, zero-based
	ExcludeDelays []int `json:"excludeDelays,omitempty"` // delays that are not used, zero-based
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

// ShotPhases are the ways to treat the phase of single shots.
var ShotPhases = []Choice{
	{"none", "one phase for all", "trust that every shot has the same phase"},
	{"own", "each shot's own", "turn every shot by its own phase at k = 0, measured over all delays together"},
}

// ShotTimes are the ways to treat the time zero of single shots.
var ShotTimes = []Choice{
	{"none", "one time zero for all", "trust that every echo stands at the same sample"},
	{"own", "each shot's own", "put k = 0 of every shot where its echo is symmetric, measured over all delays together"},
}

// ReadoutDecays are the ways to find the decay along the traces.
var ReadoutDecays = []Choice{
	{"none", "leave", "leave the decay along the traces; it blurs the image as a Lorentzian of its rate"},
	{"typed", "typed in", "undo a decay of the rate entered"},
	{"zero-gradient", "zero-gradient shots", "measure the rate on the zero-gradient shots (shot_role 1), where the trace is nothing but the decay"},
}

// Defaults returns trace-ends, reference-delay and nothing else.
func Defaults() Settings {
	return Settings{Offset: "trace-ends", Phase: "reference-delay", ShotPhase: "none", ShotTime: "none", Every: 1, ReadoutDecay: "none", ReadoutGainCap: 3}
}

// Check returns a bad-setting fault for a value that is not known or not in range.
func (s Settings) Check() error {
	for _, c := range []struct {
		rows        []Choice
		value, path string
	}{{Offsets, s.Offset, "offset"}, {Phases, s.Phase, "phase"}, {ShotPhases, orNone(s.ShotPhase), "shotPhase"}, {ShotTimes, orNone(s.ShotTime), "shotTime"},
		{ReadoutDecays, orNone(s.ReadoutDecay), "readoutDecay"}} {
		if !named(c.rows, c.value) {
			return fault.New(fault.BadSetting, "recipe conditioning."+c.path, "%q is not known; use %s", c.value, listed(c.rows))
		}
	}
	for _, c := range s.numbers() {
		if !(c.value >= c.least && c.value <= c.most) {
			return fault.New(fault.BadSetting, "recipe conditioning."+c.path, "%g; use %g to %g", c.value, c.least, c.most)
		}
	}
	return nil
}

type ranged struct {
	path        string
	value       float64
	least, most float64
}

// numbers lists the numeric settings with their ranges: wide enough for any receiver that still measures something.
func (s Settings) numbers() []ranged {
	return []ranged{
		{"timeShiftSamples", s.TimeShiftSamples, -1e6, 1e6},
		{"quadratureGain", s.QuadratureGain, -0.9, 9},
		{"quadratureSkewDeg", s.QuadratureSkewDeg, -80, 80},
		{"phaseDriftDeg", s.PhaseDriftDeg, -36000, 36000},
		{"frequencyKHz", s.FrequencyKHz, -1e5, 1e5},
		{"frequencyDriftKHz", s.FrequencyDriftKHz, -1e5, 1e5},
		{"amplitudeDrift", s.AmplitudeDrift, -1.8, 1.8},
		{"deadSamples", float64(s.DeadSamples), 0, 1e6},
		{"firstShot", float64(s.FirstShot), 0, 1e9},
		{"lastShot", float64(s.LastShot), 0, 1e9},
		{"every", float64(s.Every), 0, 1e9},
		{"readoutDecayPerUS", s.ReadoutDecayPerUS, 0, 1e3},
		{"readoutGainCap", s.ReadoutGainCap, 0, 1e3},
	}
}

func orNone(name string) string {
	if name == "" {
		return "none"
	}
	return name
}

func named(rows []Choice, name string) bool {
	return slices.ContainsFunc(rows, func(r Choice) bool { return r.Name == name })
}

// listed writes "a, b or c".
func listed(rows []Choice) string {
	text := ""
	for i, r := range rows {
		switch {
		case i == 0:
		case i == len(rows)-1:
			text += " or "
		default:
			text += ", "
		}
		text += r.Name
	}
	return text
}

// KeptShots returns the image shots of the subset that are not excluded, in acquisition order.
func (s Settings) KeptShots(a *acquisition.Acquisition) []int {
	var subset []int
	taken := 0
	for _, shot := range a.ImageShots() {
		if shot < s.FirstShot || s.LastShot > 0 && shot > s.LastShot {
			continue
		}
		if taken%max(1, s.Every) == 0 {
			subset = append(subset, shot)
		}
		taken++
	}
	return without(subset, s.ExcludeShots)
}

// KeptDelays returns the delays that are not excluded, in the order of the file.
func (s Settings) KeptDelays(a *acquisition.Acquisition) []int {
	all := make([]int, a.Delays)
	for d := range all {
		all[d] = d
	}
	return without(all, s.ExcludeDelays)
}

func without(all, excluded []int) []int {
	var out []int
	for _, i := range all {
		if !slices.Contains(excluded, i) {
			out = append(out, i)
		}
	}
	return out
}

// ReferenceDelay returns the index of the delay that carries the phase reference among those kept, see
// Acquisition.ReferenceDelay.
func (s Settings) ReferenceDelay(a *acquisition.Acquisition) int {
	kept := s.KeptDelays(a)
	only := *a
	only.DelayUS = nil
	for _, d := range kept {
		only.DelayUS = append(only.DelayUS, a.DelayUS[d])
	}
	return kept[only.ReferenceDelay()]
}

// Order returns the place u of every shot in the acquisition, 0 for the first to 1 for the last: by shot_time_s where
// the file has it, else by index.
func Order(a *acquisition.Acquisition) []float64 {
	u := make([]float64, a.Shots)
	if t := a.Optional.ShotTimeS; len(t) == a.Shots && slices.Max(t) > slices.Min(t) {
		first, span := slices.Min(t), slices.Max(t)-slices.Min(t)
		for s := range u {
			u[s] = (t[s] - first) / span
		}
		return u
	}
	for s := range u {
		u[s] = float64(s) / math.Max(1, float64(a.Shots-1))
	}
	return u
}
