package quality

import (
	"fmt"
	"sort"

	"torrloom/recon/condition"
)

// Level says what a finding means for whoever wants to use the image.
type Level string

const (
	Stop  Level = "stop"  // do not believe an image from these data as they are
	Doubt Level = "doubt" // something is wrong that can be corrected, left out or kept in mind
	Fine  Level = "fine"  // nothing stands out
)

// Levels lists the levels, worst first.
var Levels = []Level{Stop, Doubt, Fine}

// Finding is what one check has to say.
type Finding struct {
	Level  Level   `json:"level"`
	Check  string  `json:"check"` // name of the row of Checks
	Text   string  `json:"text"`
	Value  float64 `json:"value"`  // in Unit
	Unit   string  `json:"unit"`   // "" for a plain number
	Rule   string  `json:"rule"`   // what would have been fine
	Source string  `json:"source"` // where the rule comes from
	Advice string  `json:"advice"` // what to do; "" when fine
	Shots  []int   `json:"shots"`  // zero-based
	Delays []int   `json:"delays"` // zero-based

	propose func(*condition.Settings) // nil when there is nothing to set
}

func found(level Level, value float64, unit, format string, args ...any) Finding {
	return Finding{Level: level, Value: value, Unit: unit, Text: fmt.Sprintf(format, args...)}
}

// doubtIf returns a finding of level doubt when bad, else of level fine.
func doubtIf(bad bool, value float64, unit, format string, args ...any) Finding {
	level := Fine
	if bad {
		level = Doubt
	}
	return found(level, value, unit, format, args...)
}

func (f Finding) onShots(shots []int) Finding { f.Shots = shots; return f }

// proposing adds what the finding would set, if it is not fine.
func (f Finding) proposing(set func(*condition.Settings)) Finding {
	if f.Level != Fine {
		f.propose = set
	}
	return f
}

// excluding names shots and proposes to leave them out.
func (f Finding) excluding(shots []int) Finding {
	return f.onShots(shots).proposing(func(s *condition.Settings) { s.ExcludeShots = union(s.ExcludeShots, shots) })
}

func union(a, b []int) []int {
	seen := map[int]bool{}
	var out []int
	for _, list := range [][]int{a, b} {
		for _, i := range list {
			if !seen[i] {
				seen[i] = true
				out = append(out, i)
			}
		}
	}
	sort.Ints(out)
	return out
}

// worstFirst sorts findings by level and leaves the order of the checks within one.
func worstFirst(findings []Finding) {
	rank := map[Level]int{}
	for i, l := range Levels {
		rank[l] = i
	}
	sort.SliceStable(findings, func(i, j int) bool { return rank[findings[i].Level] < rank[findings[j].Level] })
}

// Worst returns the worst level among findings; fine when there are none.
func Worst(findings []Finding) Level {
	for _, l := range Levels {
		for _, f := range findings {
			if f.Level == l {
				return l
			}
		}
	}
	return Fine
}

// Propose returns the settings with everything set that the findings ask for. Findings that are fine change nothing.
// It serves findings of Examine; one that has travelled as JSON has lost what it would set, see Report.Proposed.
func Propose(s condition.Settings, findings []Finding) condition.Settings {
	for _, f := range findings {
		if f.propose != nil {
			f.propose(&s)
		}
	}
	return s
}
