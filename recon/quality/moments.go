package quality

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
)

var momentChecks = []Check{
	{Name: "zeroth-moment", Label: "integral of the projections", Needs: []Need{spokes},
		Rule:   "the integral is the same for every shot within 2 %, or three times what noise does, slow drift aside",
		Source: "Helgason-Ludwig consistency, order 0: Ludwig, Comm. Pure Appl. Math. 19 (1966) 49",
		Advice: "look for an unsteady pulse or resonator; the image has streaks of about this size", Run: zerothMoment},
	{Name: "first-moment", Label: "centre of the projections", Needs: []Need{spokes},
		Rule:   "the centre of every projection is c·n for one point c, within a fifth of the nominal resolution or three times what noise does; a stop past a quarter and twenty times",
		Source: "Helgason-Ludwig consistency, order 1: Ludwig, Comm. Pure Appl. Math. 19 (1966) 49",
		Advice: "look for a frequency that wanders, wrong gradients or an object that moved", Run: firstMoment},
	{Name: "frequency-offset", Label: "frequency offset", Needs: []Need{spokes, traces},
		Rule:   "projections are shifted by less than a twentieth of the nominal resolution, more where the directions hide it, or six standard errors",
		Source: "a frequency off by f shifts a projection by f/((γ/2π)·G), whatever its direction",
		Advice: "take the frequency off", Run: frequencyOffset},
	{Name: "frequency-drift", Label: "frequency drift", Needs: []Need{spokes, traces},
		Rule:   "projections shift by less than a twentieth of the nominal resolution over the acquisition, more where the order of directions hides it, or six standard errors",
		Source: "zero-gradient shots where there are any, else the first moments",
		Advice: "take the drift off; record a zero-gradient shot now and then", Run: frequencyDrift},
}

func zerothMoment(s *Subject) []Finding {
	at := s.sound()
	scatter := spread(s.offSlowChange(pick(s.V.Strength, at)))
	noise := s.strengthSE()
	return []Finding{doubtIf(scatter > 0.02 && scatter > 3*noise, 100*scatter, "%",
		"the integral scatters by %.2g %% from shot to shot, noise alone by about %.2g %%", 100*scatter, 100*noise)}
}

// strengthSE is the median standard error of a shot's strength from noise: the same as that of its phase, in rad.
func (s *Subject) strengthSE() float64 { return s.phaseSE() }

// place is where the object and the frequency stand, from the first moments of the sound shots and from zero-gradient
// shots.
type place struct {
	centreMM            [3]float64
	misfit              []float64 // [sound shot] in mm
	middleKHz, driftKHz float64
	middleSE, driftSE   float64
	middleBlur          float64 // how much the object's shape, which the first moments know only nearly, is felt: 1 when not at all
	driftBlur           float64
	fromZeroGradient    int // zero-gradient shots used; 0 when the first moments gave the frequency
}

// findPlace fits centre = c·n - f/((γ/2π) G) with f = middle + drift·(u-1/2).
func (s *Subject) findPlace() place {
	sound := s.sound()
	rows := make([][]float64, len(sound))
	for k, i := range sound {
		row := make([]float64, 0, 5)
		for axis := range s.A.Dim {
			row = append(row, s.direction[i][axis])
		}
		if s.A.Domain == acquisition.Time {
			perKHz := -1 / (acquisition.GammaMHzPerMT * s.strength[i])
			row = append(row, perKHz, perKHz*(s.order[i]-0.5))
		} else {
			row = append(row, 1)
		}
		rows[k] = row
	}
	f := robustFit(rows, pick(s.centre, sound))
	p := place{misfit: f.residual, middleBlur: 1, driftBlur: 1}
	copy(p.centreMM[:], f.coefficient[:s.A.Dim])
	if s.A.Domain == acquisition.Time {
		p.middleKHz, p.driftKHz = f.coefficient[s.A.Dim], f.coefficient[s.A.Dim+1]
		p.middleSE, p.driftSE = f.se[s.A.Dim], f.se[s.A.Dim+1]
		p.middleBlur, p.driftBlur = blurOf(rows, f, s.A.Dim), blurOf(rows, f, s.A.Dim+1)
		s.useZeroGradient(&p)
	}
	return p
}

// blurOf returns the root of the variance inflation of a column: its standard error over what it would be if no other
// column looked like it.
func blurOf(rows [][]float64, f linearFit, column int) float64 {
	mean, square := 0.0, 0.0
	for _, row := range rows {
		mean += row[column] / float64(len(rows))
		square += row[column] * row[column]
	}
	if centred := square - mean*mean*float64(len(rows)); centred > 0.01*square {
		square = centred
	}
	return math.Max(1, f.se[column]*math.Sqrt(square)/math.Max(f.scale, math.SmallestNonzeroFloat64))
}

// useZeroGradient takes middle and drift of the frequency from zero-gradient shots, if there are two or more.
func (s *Subject) useZeroGradient(p *place) {
	u, f := s.zeroGradientFrequencies()
	if len(u) < 2 || quantile(u, 1)-quantile(u, 0) < 0.3 {
		return
	}
	middle, drift, se, residual := overOrder(u, f)
	p.middleKHz, p.driftKHz, p.fromZeroGradient = middle, drift, len(u)
	p.middleBlur, p.driftBlur = 1, 1
	p.driftSE, p.middleSE = se, spread(residual)/math.Sqrt(float64(len(u)))
}

// zeroGradientFrequencies returns order and frequency in kHz of the zero-gradient shots.
func (s *Subject) zeroGradientFrequencies() (u, kHz []float64) {
	order := condition.Order(s.A)
	for _, shot := range s.zeroGradientShots() {
		f, ok := s.frequencyOf(shot)
		if !ok {
			continue
		}
		u, kHz = append(u, order[shot]), append(kHz, f)
	}
	return u, kHz
}

func (s *Subject) zeroGradientShots() []int {
	var out []int
	for shot, role := range s.A.ShotRole {
		if role == acquisition.RoleZeroGradient && !contains(s.S.ExcludeShots, shot) {
			out = append(out, shot)
		}
	}
	return out
}

// frequencyOf returns the mean frequency of a shot's signal at all delays: the phase by which samples a lag apart differ,
// over the lag, where the lag doubles as long as the phase can be followed. Source of the lag's phase: Kay, IEEE Trans.
// Acoust. Speech Signal Process. 37 (1989) 1987.
func (s *Subject) frequencyOf(shot int) (kHz float64, ok bool) {
	corrector := condition.NewCorrector(s.A, s.S, s.C, s.V.Delays)
	traces := make([][]complex64, len(s.V.Delays))
	for d, delay := range s.V.Delays {
		traces[d] = make([]complex64, s.A.Samples)
		corrector.Load(traces[d], delay, shot)
	}
	perSample, size := 0.0, 0.0
	for lag := 1; lag <= s.A.Samples/2; lag *= 2 {
		sum := laggedProduct(traces, lag)
		if lag > 1 && sum.size < 0.3*size {
			break
		}
		perSample += math.Remainder(sum.phase-perSample*float64(lag), 2*math.Pi) / float64(lag)
		size = math.Max(size, sum.size)
	}
	noise := 0.0
	for _, d := range s.V.Delays {
		noise += 2 * s.C.NoiseSD[d] * s.C.NoiseSD[d]
	}
	return perSample / (2 * math.Pi * s.A.DwellNS) * 1e6, size > 0.05*noise*float64(s.A.Samples)
}

type polar struct{ size, phase float64 }

func laggedProduct(traces [][]complex64, lag int) polar {
	var re, im float64
	for _, t := range traces {
		for j := lag; j < len(t); j++ {
			a, b := t[j], t[j-lag]
			re += float64(real(a)*real(b) + imag(a)*imag(b))
			im += float64(imag(a)*real(b) - real(a)*imag(b))
		}
	}
	return polar{math.Hypot(re, im), math.Atan2(im, re)}
}

// hopelessTimes is how many times the noise the centres miss one point by, and a quarter of the resolution with it, before
// the projections are not those of one object along the stated gradients.
const hopelessTimes = 20

func firstMoment(s *Subject) []Finding {
	p, at := s.place(), s.sound()
	scatter, noise := spread(p.misfit), median(pick(s.centreSE, at))
	limit := math.Max(s.resolutionMM()/5, 3*noise)
	var bad []int
	for k, i := range at {
		if math.Abs(p.misfit[k]) > math.Max(s.resolutionMM()/2, manySpreads*scatter) {
			bad = append(bad, i)
		}
	}
	f := doubtIf(scatter > limit || len(bad) > 0, scatter, "mm", "the object's centre lies at (%.2f, %.2f, %.2f) mm; single projections miss it by %.2g mm, noise alone by about %.2g mm",
		p.centreMM[0], p.centreMM[1], p.centreMM[2], scatter, noise)
	if scatter > s.resolutionMM()/4 && scatter > hopelessTimes*noise {
		f.Level = Stop
	}
	if len(bad) == 0 {
		return []Finding{f}
	}
	f.Text += "; " + counted(bad, "shot") + " by far more"
	return []Finding{f.excluding(s.shots(bad))}
}

// place returns findPlace, found once.
func (s *Subject) place() place {
	if s.placed == nil {
		p := s.findPlace()
		s.placed = &p
	}
	return *s.placed
}

// mmPerKHz returns the shift of a projection per kHz.
func (s *Subject) mmPerKHz() float64 { return 1 / (acquisition.GammaMHzPerMT * median(s.strength)) }

func frequencyOffset(s *Subject) []Finding {
	p := s.place()
	limit := math.Max(1, p.middleBlur/2) * s.resolutionMM() / 20 / s.mmPerKHz()
	if !(manySpreads*p.middleSE < 20*limit && p.middleBlur < 20) {
		return []Finding{found(Fine, 0, "kHz", "the directions do not tell a frequency offset from the object's place")}
	}
	bad := math.Abs(p.middleKHz) > math.Max(limit, manySpreads*p.middleSE)
	return []Finding{doubtIf(bad, p.middleKHz, "kHz", "the frequency is off by %.3g kHz ± %.2g, a shift of %.2g mm", p.middleKHz, p.middleSE, p.middleKHz*s.mmPerKHz()).
		proposing(func(c *condition.Settings) { c.FrequencyKHz += p.middleKHz })}
}

func frequencyDrift(s *Subject) []Finding {
	p := s.place()
	limit := math.Max(1, p.driftBlur/2) * s.resolutionMM() / 20 / s.mmPerKHz()
	if !(manySpreads*p.driftSE < 20*limit && p.driftBlur < 20) {
		return []Finding{found(Fine, 0, "kHz", "without zero-gradient shots, this order of directions does not tell a drift from the object's place")}
	}
	source := "first moments"
	if p.fromZeroGradient > 0 {
		source = "zero-gradient shots"
	}
	bad := math.Abs(p.driftKHz) > math.Max(limit, manySpreads*p.driftSE)
	return []Finding{doubtIf(bad, p.driftKHz, "kHz", "the frequency drifts by %.3g kHz ± %.2g from first to last shot (%s), a shift of %.2g mm", p.driftKHz, p.driftSE, source, p.driftKHz*s.mmPerKHz()).
		proposing(func(c *condition.Settings) { c.FrequencyDriftKHz += p.driftKHz })}
}
