package acquisition

import (
	"fmt"

	"torrloom/recon/fault"
)

// Truncation says that a file ended within an array, whose complete entries along one axis were kept.
type Truncation struct {
	Axis   int `json:"axis"`   // of the array's shape
	Stated int `json:"stated"` // entries that the file states along it, 0 when it does not; the shape holds those that are complete
}

// axisCut is a truncation of the signal by what its axis counts.
type axisCut struct {
	word         string
	have, stated int
}

// cutOf returns what is left of an array that was cut; nil when it is whole. Only an axis that counts one thing can be
// cut without a rest.
func cutOf(a Array, axes []axis) *axisCut {
	if a.Truncated == nil {
		return nil
	}
	for _, x := range axes {
		if x.from == a.Truncated.Axis {
			return &axisCut{x.word, a.Shape[a.Truncated.Axis], a.Truncated.Stated}
		}
	}
	return nil
}

// shorten cuts the lists that belong to an axis of the signal to what is left of it, and returns the warning that stays.
func shorten(members map[string]Array, cut axisCut) []string {
	lists := map[string][]string{"delay": {"delay_us"}, "shot": {"gradient_mT_per_m", "shot_role", "shot_time_s"}}[cut.word]
	for _, name := range lists {
		a, there := members[name]
		if !there || a.Len() == 0 {
			continue
		}
		at := 0
		for at < len(a.Shape)-1 && a.Shape[at] == 1 && a.Len() > 1 && name != "gradient_mT_per_m" {
			at++ // a MATLAB list is [1, n]
		}
		if len(a.Shape) == 0 || a.Shape[at] <= cut.have || cut.stated != 0 && a.Shape[at] != cut.stated {
			continue
		}
		members[name] = firstRows(a, at, cut.have)
	}
	of := fmt.Sprint(cut.stated)
	if cut.stated == 0 {
		of = "a number that is not known"
	}
	return []string{fmt.Sprintf("the file was cut short: %d complete %ss of %s are used; maps and figures lack the rest", cut.have, cut.word, of)}
}

// firstRows returns the first n entries along an axis before which there are only axes of length 1.
func firstRows(a Array, at, n int) Array {
	raw := lastAxisFastest(a)
	out := a
	out.layout.FirstAxisFastest = false
	out.Shape = append([]int{}, a.Shape...)
	out.raw = raw[:len(raw)/a.Shape[at]*n]
	out.Shape[at] = n
	return out
}

// CutArray returns the array of the entries that are complete when a file ends within its values: raw holds fewer bytes
// than shape takes. Entries are counted along the axis that runs slowest and is longer than 1.
//
// Errors: bad-file when not even one entry is complete.
func CutArray(name string, shape []int, layout Layout, raw []byte) (Array, error) {
	at := slowest(shape, layout.FirstAxisFastest)
	if at < 0 {
		return Array{}, fault.New(fault.BadFile, name, "ends within a single value")
	}
	each := layout.Size
	for i, n := range shape {
		if i != at {
			each *= n
		}
	}
	have := 0
	if each > 0 {
		have = len(raw) / each
	}
	if have < 1 {
		return Array{}, fault.New(fault.BadFile, name, "ends before the first of %d entries is complete", shape[at])
	}
	kept := append([]int{}, shape...)
	kept[at] = min(have, shape[at])
	a, err := NewArray(name, kept, layout, raw[:kept[at]*each])
	if err == nil && kept[at] < shape[at] {
		a.Truncated = &Truncation{Axis: at, Stated: shape[at]}
	}
	return a, err
}

// slowest returns the axis whose entries lie furthest apart; -1 when no axis is longer than 1.
func slowest(shape []int, firstFastest bool) int {
	out := -1
	for i, n := range shape {
		if n > 1 && (out < 0 || firstFastest) {
			out = i
		}
	}
	return out
}

// cutSignal does for a file that uses the dictionary's own names what a mapping does.
func cutSignal(members map[string]Array) []string {
	signal, there := members["signal"]
	if !there || signal.Truncated == nil {
		return nil
	}
	words := []string{"delay", "shot", "sample", "part"}
	if len(signal.Shape) == 2 || len(signal.Shape) == 3 && !signal.isComplex() && signal.Shape[2] == 2 {
		words = words[1:]
	}
	if signal.Truncated.Axis >= len(words) {
		return nil
	}
	return shorten(members, axisCut{words[signal.Truncated.Axis], signal.Shape[signal.Truncated.Axis],
		signal.Truncated.Stated})
}
