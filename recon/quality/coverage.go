package quality

import (
	"math"
)

var coverageChecks = []Check{
	{Name: "direction-gap", Label: "gaps between directions", Needs: []Need{spokes},
		Rule: "no spoke stands for more than four times its share of directions", Source: "area of directions nearest to each axis; equal for even spokes",
		Advice: "edges at right angles to the gap are blurred; measure the missing directions", Run: directionGap},
	{Name: "direction-evenness", Label: "evenness of directions", Needs: []Need{spokes},
		Rule: "the shares of the spokes scatter by less than their mean", Source: "unequal shares cost signal-to-noise: variance grows by 1 + scatter²",
		Advice: "spread directions evenly; the weights correct for it at the price of noise", Run: directionEvenness},
	{Name: "spoke-count", Label: "number of spokes", Needs: []Need{spokes},
		Rule:   "at least 5 % (3D) or 50 % (2D) of the spokes that sampling the object at the nominal resolution asks for",
		Source: "π/2·N (2D; Kak & Slaney, Principles of Computerized Tomographic Imaging (1988), ch. 5) or π/2·N² (3D, the same argument on the sphere), N = object/resolution",
		Advice: "expect streaks outside a smaller field, or lower the cutoff so that fewer spokes are enough", Run: spokeCount},
}

func directionGap(s *Subject) []Finding {
	if s.axisErr != nil {
		return []Finding{found(Stop, 0, "", "the directions cannot be shared out: %v", s.axisErr)}
	}
	worst, at := 0.0, 0
	for i, w := range s.axis {
		if w > worst {
			worst, at = w, i
		}
	}
	ratio := worst / s.meanShare()
	// A cap of that solid angle, or half the angle itself in 2D.
	gap := worst
	if s.A.Dim == 3 {
		gap = 2 * math.Acos(math.Max(-1, 1-worst/(2*math.Pi)))
	}
	level := Fine
	switch {
	case ratio > 25:
		level = Stop
	case ratio > 4:
		level = Doubt
	}
	f := found(level, ratio, "", "the loneliest spoke stands for %.2g times its share, about %.2g° across", ratio, gap*180/math.Pi)
	if level != Fine {
		f.Shots = []int{s.V.Shots[at]}
	}
	return []Finding{f}
}

func (s *Subject) meanShare() float64 {
	return math.Pi * float64(s.A.Dim-1) / float64(len(s.axis))
}

func directionEvenness(s *Subject) []Finding {
	if s.axisErr != nil {
		return nil
	}
	mean, square := s.meanShare(), 0.0
	for _, w := range s.axis {
		square += (w/mean - 1) * (w/mean - 1)
	}
	scatter := math.Sqrt(square / float64(len(s.axis)))
	return []Finding{doubtIf(scatter > 1, 100*scatter, "%", "the shares of the spokes scatter by %.2g %% of their mean", 100*scatter)}
}

func spokeCount(s *Subject) []Finding {
	across := s.C.ExtentMM / s.resolutionMM()
	wanted, least := math.Pi/2*across, 0.5
	if s.A.Dim == 3 {
		wanted, least = math.Pi/2*across*across, 0.05
	}
	share := float64(len(s.V.Shots)) / wanted
	level := Fine
	switch {
	case share < least/5:
		level = Stop
	case share < least:
		level = Doubt
	}
	return []Finding{found(level, share, "", "%d spokes, %.0f asked for by an object of %.3g mm at %.2g mm: %.0f %%", len(s.V.Shots), wanted, s.C.ExtentMM, s.resolutionMM(), 100*share)}
}
