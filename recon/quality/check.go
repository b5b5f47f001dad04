package quality

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
)

// Check is one row of Checks.
type Check struct {
	Name   string // as in a finding
	Label  string
	Rule   string // what is fine
	Source string // of the rule
	Advice string // when it is not
	Needs  []Need // all of them; a check whose needs are not met is left out
	Run    func(*Subject) []Finding
}

// Need tells whether a check has a meaning for a subject.
type Need func(*Subject) bool

func spokes(s *Subject) bool      { return s.A.Encoding == acquisition.Spoke }
func singlePoint(s *Subject) bool { return s.A.Encoding == acquisition.SinglePoint }
func traces(s *Subject) bool      { return s.A.Domain == acquisition.Time }
func bothHalves(s *Subject) bool  { return s.V != nil && s.V.Symmetric }
func recovery(s *Subject) bool    { return s.A.Recovers() }

// Checks are all checks, in the order of a list whose levels are equal. To add one: a function and a row here, and the
// fault it must find in the tests.
var Checks = joined(signalChecks, receiverChecks, shotChecks, directionChecks, momentChecks, timingChecks, driftChecks,
	coverageChecks, resolutionChecks, delayChecks, singlePointChecks)

func joined(groups ...[]Check) []Check {
	var out []Check
	for _, g := range groups {
		out = append(out, g...)
	}
	return out
}

// Known is what later stages have found out; every part may be absent.
type Known struct {
	Rates             *Rates   `json:"rates,omitempty"`
	ReadoutDecayPerUS *float64 `json:"readoutDecayPerUS,omitempty"` // R2* along a trace
}

// Rates sums up a rate map in 1/µs: its median, and the rates that 5 % of the voxels lie below and above.
type Rates struct {
	LowPerUS    float64 `json:"lowPerUS"`
	MedianPerUS float64 `json:"medianPerUS"`
	HighPerUS   float64 `json:"highPerUS"`
}

// Report is everything that is known about an acquisition under some settings.
type Report struct {
	Findings []Finding          `json:"findings"` // worst first
	Proposed condition.Settings `json:"proposed"` // the settings with everything set that the findings ask for
	Shots    []int              `json:"shots"`    // the kept image shots, to which the values of Series belong
	Series   []Series           `json:"series"`   // one number per shot, for maps and for curves over the order
	DelayUS  []float64          `json:"delayUS"`  // of the kept delays
	Curve    []float64          `json:"curve"`    // [delay] signal of the whole object
}

// Series is one number per kept shot.
type Series struct {
	Name   string    `json:"name"`
	Label  string    `json:"label"`
	Unit   string    `json:"unit"`
	Values []float64 `json:"values"`
}

// Examine runs every check that has a meaning for the acquisition as the settings condition it. An acquisition that cannot be
// conditioned at all yields one finding of level stop.
func Examine(a *acquisition.Acquisition, s condition.Settings, known Known) *Report {
	subject, err := NewSubject(a, s, known)
	if err != nil {
		return refused(s, err)
	}
	r := &Report{Proposed: s, Findings: []Finding{}}
	for _, c := range Checks {
		r.Findings = append(r.Findings, c.findings(subject)...)
	}
	r.Proposed = Propose(s, r.Findings)
	worstFirst(r.Findings)
	subject.describe(r)
	return r
}

func refused(s condition.Settings, err error) *Report {
	f := fault.From(err)
	return &Report{Proposed: s, Shots: []int{}, Series: []Series{}, DelayUS: []float64{}, Curve: []float64{}, Findings: []Finding{{Level: Stop, Check: "conditioning", Text: f.Error(), Rule: "the data can be conditioned at all",
		Advice: "change what the text names", Shots: []int{}, Delays: []int{}}}}
}

func (c Check) findings(s *Subject) []Finding {
	for _, need := range c.Needs {
		if !need(s) {
			return nil
		}
	}
	out := c.Run(s)
	for i := range out {
		f := &out[i]
		f.Check, f.Rule, f.Source = c.Name, c.Rule, c.Source
		if f.Level != Fine {
			f.Advice = c.Advice
		}
		if math.IsNaN(f.Value) || math.IsInf(f.Value, 0) {
			f.Value = 0 // JSON has no such numbers; the text says what is not known
		}
		if f.Shots == nil {
			f.Shots = []int{}
		}
		if f.Delays == nil {
			f.Delays = []int{}
		}
	}
	return out
}
