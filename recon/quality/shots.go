package quality

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
)

// standing lists, by place among the kept shots, which shots stand out. A shot is in one list only, that of its gravest
// fault; misfit is per shot.
type standing struct {
	silent, loud, uneven, turned, patchy, foreign []int

	misfit   []float64 // [shot] distance from the neighbours in direction, over the size of its projection
	among    float64   // median misfit
	atRandom float64   // median misfit of pairs taken at random
}

func (g standing) all() []int {
	return union(union(union(g.silent, g.loud), union(g.uneven, g.turned)), union(g.patchy, g.foreign))
}

// Rules for single shots. A limit of six spreads lets one Gaussian shot in 5·10⁸ through; the floors keep differences
// quiet that no map would show.
const (
	manySpreads   = 6.0
	silentBelow   = 0.15 // of an ordinary shot's signal
	loudAbove     = 1.5  // of an ordinary shot's noise
	unevenFloor   = 0.04 // of the signal
	turnedFloor   = 5 * math.Pi / 180
	patchySpreads = 7.0 // there are as many traces as shots times delays
	patchyFloor   = 0.04
)

func (s *Subject) findStanding() standing {
	var g standing
	taken := map[int]bool{}
	take := func(candidates []int) (own []int) {
		for _, i := range candidates {
			if !taken[i] {
				taken[i] = true
				own = append(own, i)
			}
		}
		return own
	}
	strength := s.offSlowChange(s.V.Strength)
	for i, v := range s.V.Strength {
		if v < silentBelow {
			g.silent = append(g.silent, i)
		}
	}
	g.silent = take(g.silent)
	g.loud = take(above(s.loud, 1+math.Max(loudAbove-1, manySpreads*spread(s.loud))))
	g.patchy = take(s.patchyShots()) // before its bad delay makes it look weak
	g.uneven = take(outliers(strength, manySpreads, unevenFloor))
	if s.A.Domain == acquisition.Time {
		g.turned = take(outliers(s.offSlowChange(s.unwrapped()), manySpreads, turnedFloor))
	}
	s.compareNeighbours(&g, taken)
	return g
}

func above(values []float64, limit float64) []int {
	var out []int
	for i, v := range values {
		if !(v <= limit) {
			out = append(out, i)
		}
	}
	return out
}

// offSlowChange takes the running median off where there are enough shots, else the median.
func (s *Subject) offSlowChange(values []float64) []float64 {
	if len(values) >= 2*nearbyShots {
		return offRunningMedian(values)
	}
	out, middle := make([]float64, len(values)), median(values)
	for i, v := range values {
		out[i] = v - middle
	}
	return out
}

// unwrapped returns the phases in rad without jumps of a turn between a shot and the median of those just before.
func (s *Subject) unwrapped() []float64 {
	out := make([]float64, len(s.V.PhaseRad))
	middle := condition.MedianPhase(s.V.PhaseRad[:min(len(out), nearbyShots)])
	for i, p := range s.V.PhaseRad {
		out[i] = middle + math.Remainder(p-middle, 2*math.Pi)
		middle = median(out[max(0, i-nearbyShots/2) : i+1])
	}
	return out
}

// patchyShots lists the shots of which single delays do not follow the delay curve.
func (s *Subject) patchyShots() []int {
	if len(s.V.Delays) < 2 {
		return nil
	}
	var out []int
	for d := range s.V.Delays {
		out = union(out, s.patchyAt(d))
	}
	return out
}

// patchyAt lists the shots that do not follow the delay curve at one delay.
func (s *Subject) patchyAt(d int) []int {
	column := make([]float64, len(s.odd))
	for i := range s.odd {
		column[i] = s.odd[i][d]
	}
	return outliers(s.offSlowChange(column), patchySpreads, patchyFloor)
}

var shotChecks = []Check{
	{Name: "silent-shots", Label: "shots without signal", Needs: []Need{spokes},
		Rule: "every shot has at least 15 % of the signal of an ordinary one", Source: "own rule",
		Advice: "leave these shots out; look for a gap in the receiver gate or a missed trigger", Run: silentShots},
	{Name: "noisy-shots", Label: "noisy shots", Needs: []Need{spokes},
		Rule: "noise beyond the object below 1.5 times, and within six spreads of, that of an ordinary shot", Source: "own rule; spread from the median, Huber & Ronchetti, Robust Statistics (2009)",
		Advice: "leave these shots out; look for interference at their time", Run: noisyShots},
	{Name: "uneven-shots", Label: "weak or strong shots", Needs: []Need{spokes},
		Rule: "signal at k = 0 within six spreads, or 4 %, of that of shots nearby in time", Source: "zeroth moment: Ludwig, Comm. Pure Appl. Math. 19 (1966) 49",
		Advice: "leave these shots out; their projections would carry the wrong weight", Run: unevenShots},
	{Name: "shot-phase", Label: "shots of wrong phase", Needs: []Need{spokes, traces},
		Rule: "phase at k = 0 within six spreads, or 5°, of that of shots nearby in time", Source: "own rule; 5° costs 0.4 % of the signal",
		Advice: "leave these shots out, or turn every shot by its own phase", Run: shotPhase},
	{Name: "single-traces", Label: "single bad traces", Needs: []Need{spokes},
		Rule: "every shot follows the common delay curve within seven spreads, or 4 % of it", Source: "own rule",
		Advice: "leave these shots out; a shot that fails at one delay bends the curve of every voxel", Run: singleTraces},
}

func silentShots(s *Subject) []Finding {
	at := s.standing.silent
	least := quantile(s.V.Strength, 0)
	if len(at) == 0 {
		return []Finding{found(Fine, least, "", "the weakest shot has %.0f %% of the signal of an ordinary one", 100*least)}
	}
	return []Finding{found(s.gravity(at), least, "", "%s hold%s no signal to speak of (%.1f %% of an ordinary one)",
		counted(at, "shot"), s3(at), 100*least).excluding(s.shots(at))}
}

func noisyShots(s *Subject) []Finding {
	at := s.standing.loud
	most := quantile(s.loud, 1)
	if len(at) == 0 {
		return []Finding{found(Fine, most, "", "the loudest shot has %.2f times the noise of an ordinary one", most)}
	}
	return []Finding{found(s.gravity(at), most, "", "%s %s noise of up to %.1f times that of an ordinary one",
		counted(at, "shot"), have(at), most).excluding(s.shots(at))}
}

func unevenShots(s *Subject) []Finding {
	at := s.standing.uneven
	scatter := spread(s.offSlowChange(s.V.Strength))
	if len(at) == 0 {
		return []Finding{found(Fine, 100*scatter, "%", "the signal at k = 0 scatters by %.2g %% from shot to shot", 100*scatter)}
	}
	worst := 1.0
	for _, i := range at {
		if math.Abs(s.V.Strength[i]-1) > math.Abs(worst-1) {
			worst = s.V.Strength[i]
		}
	}
	return []Finding{found(s.gravity(at), 100*worst, "%", "%s %s down to or up to %.0f %% of the signal of those around", counted(at, "shot"), have(at), 100*worst).excluding(s.shots(at))}
}

func shotPhase(s *Subject) []Finding {
	at := s.standing.turned
	off := s.offSlowChange(s.unwrapped())
	scatter := spread(off) * 180 / math.Pi
	if len(at) > 0 {
		worst := 0.0
		for _, i := range at {
			worst = math.Max(worst, math.Abs(off[i])*180/math.Pi)
		}
		return []Finding{found(s.gravity(at), worst, "deg", "%s %s turned by up to %.0f° against those around", counted(at, "shot"), are(at), worst).excluding(s.shots(at))}
	}
	bad := scatter > 2 && scatter > 3*s.phaseSE()*180/math.Pi
	return []Finding{doubtIf(bad, scatter, "deg", "the phase scatters by %.2g° from shot to shot", scatter).
		proposing(func(c *condition.Settings) { c.ShotPhase = "own" })}
}

// phaseSE returns the median standard error of a shot's phase from noise, in rad.
func (s *Subject) phaseSE() float64 {
	var se []float64
	for i, n := range s.noise {
		se = append(se, n*s.V.StepMM[i]*math.Sqrt(float64(len(s.profile[i])))/math.Max(s.V.Strength[i], silentBelow))
	}
	return median(se)
}

func singleTraces(s *Subject) []Finding {
	if len(s.V.Delays) < 2 {
		return nil
	}
	worst, delays := 0.0, []int{}
	for i := range s.odd {
		for _, v := range s.odd[i] {
			worst = math.Max(worst, math.Abs(v))
		}
	}
	at := s.standing.patchy
	if len(at) == 0 {
		return []Finding{found(Fine, 100*worst, "%", "no trace leaves the common delay curve by more than %.2g %%", 100*worst)}
	}
	for d := range s.V.Delays {
		for _, i := range s.patchyAt(d) {
			if contains(at, i) {
				delays = union(delays, []int{s.V.Delays[d]})
			}
		}
	}
	f := found(s.gravity(at), 100*worst, "%", "%s leave%s the common delay curve at single delays, by up to %.0f %%", counted(at, "shot"), s3(at), 100*worst).excluding(s.shots(at))
	f.Delays = delays
	return []Finding{f}
}

// gravity is stop when so many shots are concerned that leaving them out leaves too little.
func (s *Subject) gravity(at []int) Level {
	if 4*len(at) > len(s.V.Shots) {
		return Stop
	}
	return Doubt
}
