package compare

import (
	"fmt"
	"math"

	"torrloom/recon/fault"
)

// Replicates are one number of a variant: from all shots, and without each group of shots in turn. Groups of two
// variants that are compared must leave out the same shots.
type Replicates struct {
	Full   float64
	Groups []float64
}

// PairedNumber sets one number of two variants side by side. The interval is that of the difference: what the noise of the
// shared measurement does to both alike drops out of it.
type PairedNumber struct {
	Reference   Estimate `json:"reference"`
	Other       Estimate `json:"other"`
	Difference  Estimate `json:"difference"`
	Groups      int      `json:"groups"`
	UnpairedSE  float64  `json:"unpairedSE"` // what the difference's error would be between two measurements
	Stands      bool     `json:"stands"`     // zero lies outside the interval
	Correlation float64  `json:"correlation"`
}

// Estimate is a number with its standard error and 95 % interval.
type Estimate struct {
	Value    float64    `json:"value"`
	SE       float64    `json:"se"`
	Interval [2]float64 `json:"interval"`
}

// JackknifeEstimate returns the number with SE² = (G-1)/G Σ_g (θ_g - mean θ)² and the interval value ± t·SE, t being the
// 97.5 % point of Student's distribution of G-1 degrees of freedom.
//
// Errors: no-answer with fewer than two groups or when one of the numbers is NaN.
// Source: as for DifferenceJackknife.
func JackknifeEstimate(r Replicates) (Estimate, error) {
	g := float64(len(r.Groups))
	if g < 2 {
		return Estimate{}, fault.New(fault.NoAnswer, "interval", "%d groups of shots; a jackknife needs at least 2, and some 10 to be of use", len(r.Groups))
	}
	se := math.Sqrt((g - 1) / g * products(r.Groups, r.Groups))
	if sum := r.Full + se; sum-sum != 0 {
		return Estimate{}, fault.New(fault.NoAnswer, "interval", "the number is %g and %g without some groups; a region that keeps its voxels in every group is needed", r.Full, meanOf(r.Groups))
	}
	return Estimate{Value: r.Full, SE: se, Interval: around(r.Full, studentQuantile(g-1)*se)}, nil
}

// Paired compares a number of two variants.
//
// Errors: those of JackknifeEstimate; bug when the variants have different numbers of groups.
func Paired(reference, other Replicates) (PairedNumber, error) {
	p := PairedNumber{Groups: len(reference.Groups)}
	if len(other.Groups) != p.Groups {
		return p, fault.New(fault.Bug, "interval", "%d and %d groups; both variants must leave out the same groups", p.Groups, len(other.Groups))
	}
	difference := Replicates{Full: other.Full - reference.Full}
	for g, v := range reference.Groups {
		difference.Groups = append(difference.Groups, other.Groups[g]-v)
	}
	for _, c := range []struct {
		from Replicates
		to   *Estimate
	}{{reference, &p.Reference}, {other, &p.Other}, {difference, &p.Difference}} {
		estimate, err := JackknifeEstimate(c.from)
		if err != nil {
			return p, err
		}
		*c.to = estimate
	}
	p.UnpairedSE = math.Hypot(p.Reference.SE, p.Other.SE)
	if both := p.Reference.SE * p.Other.SE; both > 0 {
		own, d := p.UnpairedSE, p.Difference.SE
		p.Correlation = (own*own - d*d) / (2 * both)
	}
	p.Stands = p.Difference.Value != 0 && (p.Difference.Interval[0] > 0 || p.Difference.Interval[1] < 0)
	return p, nil
}

// Words says what the comparison shows: whether the settings or the noise could have made the difference.
func (p PairedNumber) Words(n Number) string {
	d := n.signed()
	if p.Difference.Value == 0 && p.Difference.SE == 0 {
		return fmt.Sprintf("the %s is the same, %s", n.Name, n.Text(p.Reference.Value))
	}
	text := fmt.Sprintf("the %s goes from %s to %s, by %s (%s to %s)", n.Name, n.Text(p.Reference.Value), n.Text(p.Other.Value),
		d.Text(p.Difference.Value), d.Bare(p.Difference.Interval[0]), d.Text(p.Difference.Interval[1]))
	if p.Stands {
		return text + ": the settings make this difference, not the noise"
	}
	return text + ": noise alone could make this difference"
}
