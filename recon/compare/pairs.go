package compare

import "torrloom/recon/fault"

// Pairing counts what became of the voxels that were looked at.
type Pairing struct {
	Pairs         int `json:"pairs"`         // answered in both maps
	OnlyReference int `json:"onlyReference"` // left out: answered in the reference alone
	OnlyOther     int `json:"onlyOther"`     // left out: answered in the other alone
}

// pairUp returns the values of the voxels that have an answer in both maps. A nil region means everywhere.
//
// Errors: bug when the lengths differ.
func pairUp(reference, other []float32, region []bool) (x, y []float64, p Pairing, err error) {
	if len(other) != len(reference) || region != nil && len(region) != len(reference) {
		return nil, nil, p, fault.New(fault.Bug, "compare", "maps of %d and %d voxels, region of %d; they must lie on one grid", len(reference), len(other), len(region))
	}
	for i, a := range reference {
		if region != nil && !region[i] {
			continue
		}
		b := other[i]
		switch {
		case a == a && b == b:
			x, y = append(x, float64(a)), append(y, float64(b))
		case a == a:
			p.OnlyReference++
		case b == b:
			p.OnlyOther++
		}
	}
	p.Pairs = len(x)
	return x, y, p, nil
}

// meanOf returns the mean of some values.
func meanOf(v []float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	return sum / float64(len(v))
}

// products returns Σ(x-mean x)(y-mean y).
func products(x, y []float64) float64 {
	mx, my, sum := meanOf(x), meanOf(y), 0.0
	for i := range x {
		sum += (x[i] - mx) * (y[i] - my)
	}
	return sum
}
