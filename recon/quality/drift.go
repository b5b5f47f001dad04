package quality

import (
	"math"

	"torrloom/recon/condition"
)

var driftChecks = []Check{
	{Name: "phase-drift", Label: "phase drift", Needs: []Need{spokes, traces},
		Rule: "the phase moves by less than 5° over the acquisition, or six standard errors", Source: "5° costs 0.4 % of the signal",
		Advice: "take the drift off", Run: phaseDrift},
	{Name: "amplitude-drift", Label: "amplitude drift", Needs: []Need{spokes},
		Rule:   "the signal changes by less than 2 % over the acquisition, or six standard errors",
		Source: "zeroth moment against acquisition order; with shot_time_s, also as a rate of wash-out",
		Advice: "take the drift off; over delays measured one after another it bends the curves as well", Run: amplitudeDrift},
}

func phaseDrift(s *Subject) []Finding {
	at := s.sound()
	_, drift, se, _ := overOrder(pick(s.order, at), pick(s.unwrapped(), at))
	deg := drift * 180 / math.Pi
	bad := math.Abs(deg) > 5 && math.Abs(drift) > manySpreads*se
	return []Finding{doubtIf(bad, deg, "deg", "the phase drifts by %.2g° ± %.2g from first to last shot", deg, se*180/math.Pi).
		proposing(func(c *condition.Settings) { c.PhaseDriftDeg += deg })}
}

func amplitudeDrift(s *Subject) []Finding {
	at := s.sound()
	middle, drift, se, _ := overOrder(pick(s.order, at), pick(s.V.Strength, at))
	relative := drift / middle
	bad := math.Abs(relative) > 0.02 && math.Abs(drift) > manySpreads*se
	f := doubtIf(bad, 100*relative, "%", "the signal changes by %.2g %% ± %.2g from first to last shot", 100*relative, 100*se/middle)
	if t := s.A.Optional.ShotTimeS; len(t) == s.A.Shots && bad {
		f.Text += s.washOut(at)
	}
	return []Finding{f.proposing(func(c *condition.Settings) { c.AmplitudeDrift = (1+c.AmplitudeDrift)*(1+relative) - 1 })}
}

// washOut says the change as a rate of an exponential, from ln strength against the time of the shots.
func (s *Subject) washOut(at []int) string {
	var rows [][]float64
	var y []float64
	for _, i := range at {
		rows = append(rows, []float64{1, s.A.Optional.ShotTimeS[s.V.Shots[i]] / 60})
		y = append(y, math.Log(math.Max(s.V.Strength[i], silentBelow)))
	}
	f := robustFit(rows, y)
	return found(Doubt, 0, "", "; as a wash-out, %.2g %% per minute", 100*f.coefficient[1]).Text
}
