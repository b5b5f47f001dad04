package quality

import (
	"math"
	"slices"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/sampling"
)

// Subject is one acquisition under judgement, with everything that several checks need made once. Values per shot are in
// the order of V.Shots, the kept image shots.
type Subject struct {
	A     *acquisition.Acquisition
	S     condition.Settings
	C     *condition.Constants // nil for single-point data, as is all below
	V     *condition.Survey
	Known Known

	order     []float64    // [shot] place in the acquisition, 0..1
	direction [][3]float64 // [shot] unit vector of the gradient
	strength  []float64    // [shot] gradient in mT/m
	axis      []float64    // [shot] share of directions, nil where they cannot be shared out
	axisErr   error

	profile  [][]float64 // [shot][position] projection, all delays weighted by the delay curve, for a curve of size 1
	off      [][]float64 // the same of the other channel, which holds nothing of a sound shot but noise
	noise    []float64   // [shot] SD of one value of profile
	integral []float64   // [shot] of profile
	centre   []float64   // [shot] first moment of profile over its integral, in mm
	centreSE []float64   // [shot] from noise
	width2   []float64   // [shot] second central moment in mm²
	shiftSE  []float64   // [shot] standard error of ShiftSamples from noise
	loud     []float64   // [shot] noise over that of an ordinary shot
	odd      [][]float64 // [shot][delay] what the delay curve leaves of the integral, over Curve's strongest

	standing standing // which shots stand out, and why
	residue  residue  // noise with the object filtered out
	placed   *place   // nil until asked for
}

// NewSubject returns the subject of an acquisition under settings.
//
// Errors: those of condition.Measure.
func NewSubject(a *acquisition.Acquisition, s condition.Settings, known Known) (*Subject, error) {
	subject := &Subject{A: a, S: s, Known: known}
	if a.Encoding == acquisition.SinglePoint {
		return subject, nil
	}
	c, _, err := condition.Measure(a, s)
	if err != nil {
		return nil, err
	}
	subject.C, subject.V = c, condition.NewSurvey(a, s, c)
	subject.placeShots()
	for i := range subject.V.Shots {
		subject.addProfile(i)
	}
	subject.measureLoudness()
	subject.standing = subject.findStanding()
	if a.Domain == acquisition.Time {
		subject.residue = subject.makeResidue()
	}
	return subject, nil
}

func (s *Subject) placeShots() {
	order := condition.Order(s.A)
	for _, shot := range s.V.Shots {
		g, strength := s.A.GradientMTPerM[shot], s.A.Strength(shot)
		s.order = append(s.order, order[shot])
		s.strength = append(s.strength, strength)
		s.direction = append(s.direction, [3]float64{g[0] / strength, g[1] / strength, g[2] / strength})
	}
	s.axis, s.axisErr = sampling.AxisWeights(s.A.Dim, s.direction)
}

// addProfile makes the profile of one shot and its moments.
func (s *Subject) addProfile(i int) {
	v := s.V
	energy, noise := 0.0, 0.0
	for d, m := range v.Curve {
		energy += m * m
		sd := m * s.C.NoiseSD[v.Delays[d]]
		noise += sd * sd
	}
	energy = math.Max(energy, math.SmallestNonzeroFloat64)
	profile, off := make([]float64, 2*v.Reach[i]+1), make([]float64, 2*v.Reach[i]+1)
	odd, information := make([]float64, len(v.Delays)), 0.0
	strongest := math.Sqrt(energy)
	for d, m := range v.Curve {
		in, out := v.Real(i, d)
		sum := 0.0
		for x := range in {
			profile[x] += in[x] * m / energy
			off[x] += out[x] * m / energy
			sum += in[x] * v.StepMM[i]
		}
		odd[d] = (sum - v.Strength[i]*m) / strongest
		information += s.twistInformation(i, d, in)
	}
	s.profile, s.off = append(s.profile, profile), append(s.off, off)
	s.odd = append(s.odd, odd)
	s.noise = append(s.noise, v.NoiseGain[i]*math.Sqrt(noise)/energy)
	s.shiftSE = append(s.shiftSE, 1/math.Sqrt(math.Max(information, math.SmallestNonzeroFloat64)))
	s.addMoments(i)
}

// twistInformation returns what one projection tells of the shift of time zero, in 1/samples²: the Fisher information of
// a slope of phase, Σ (p/σ)²·(2π DeltaK)²·(x-x̄)².
func (s *Subject) twistInformation(i, d int, p []float64) float64 {
	var sum, first, second float64
	for x, value := range p {
		mm := float64(x-s.V.Reach[i]) * s.V.StepMM[i]
		sum += value * value
		first += value * value * mm
		second += value * value * mm * mm
	}
	if sum == 0 {
		return 0
	}
	perMM := 2 * math.Pi * s.V.DeltaK[i] / (s.V.NoiseGain[i] * s.C.NoiseSD[s.V.Delays[d]])
	return perMM * perMM * (second - first*first/sum)
}

func (s *Subject) addMoments(i int) {
	step := s.V.StepMM[i]
	var m0, m1, m2, reach2 float64
	for x, p := range s.profile[i] {
		mm := float64(x-s.V.Reach[i])*step + s.V.OriginMM
		m0 += p * step
		m1 += p * mm * step
		m2 += p * mm * mm * step
		reach2 += mm * mm
	}
	s.integral = append(s.integral, m0)
	s.centre = append(s.centre, m1/m0)
	s.centreSE = append(s.centreSE, s.noise[i]*step*math.Sqrt(reach2)/math.Abs(m0))
	s.width2 = append(s.width2, m2/m0-m1/m0*m1/m0)
}

// measureLoudness compares the noise beyond the object shot by shot, every delay against its own median.
func (s *Subject) measureLoudness() {
	s.loud = make([]float64, len(s.V.Shots))
	for d := range s.V.Delays {
		var powers []float64
		for i := range s.V.Shots {
			powers = append(powers, s.V.Power[i][d])
		}
		middle := math.Max(median(powers), math.SmallestNonzeroFloat64)
		for i, p := range powers {
			s.loud[i] += p / middle / float64(len(s.V.Delays))
		}
	}
	for i := range s.loud {
		s.loud[i] = math.Sqrt(s.loud[i])
	}
}

// shots returns the acquisition's indices of kept shots given by their place.
func (s *Subject) shots(at []int) []int {
	out := make([]int, len(at))
	for k, i := range at {
		out[k] = s.V.Shots[i]
	}
	return out
}

// sound lists the places of the shots that do not stand out.
func (s *Subject) sound() []int { return s.notIn(s.standing.all()) }

func (s *Subject) notIn(bad []int) []int {
	var out []int
	for i := range s.V.Shots {
		if !slices.Contains(bad, i) {
			out = append(out, i)
		}
	}
	return out
}

func pick(values []float64, at []int) []float64 {
	out := make([]float64, len(at))
	for k, i := range at {
		out[k] = values[i]
	}
	return out
}

// referenceIndex returns the place of the reference delay among the kept ones.
func (s *Subject) referenceIndex() int { return slices.Index(s.V.Delays, s.S.ReferenceDelay(s.A)) }

// resolutionMM returns the nominal resolution 1/(2 k_max).
func (s *Subject) resolutionMM() float64 { return 1 / (2 * s.A.SmallestKMax()) }

// rim returns the phase in rad that a shift of time zero by one sample leaves at the rim of the object.
func (s *Subject) rim() float64 { return 2 * math.Pi * median(s.V.DeltaK) * s.C.ExtentMM / 2 }

// describe adds the numbers per shot and per delay to a report.
func (s *Subject) describe(r *Report) {
	r.Shots, r.Series, r.DelayUS, r.Curve = []int{}, []Series{}, []float64{}, []float64{}
	if s.V == nil {
		return
	}
	r.Shots, r.Curve = s.V.Shots, s.V.Curve
	for _, d := range s.V.Delays {
		r.DelayUS = append(r.DelayUS, s.A.DelayUS[d])
	}
	r.Series = []Series{
		{"strength", "signal against the others", "", s.V.Strength},
		{"phase", "phase", "deg", scaled(s.V.PhaseRad, 180/math.Pi)},
		{"noise", "noise against the others", "", s.loud},
		{"time-zero", "shift of time zero", "ns", scaled(s.V.ShiftSamples, s.A.DwellNS)},
		{"centre", "centre of the projection", "mm", s.centre},
		{"off-neighbours", "difference from neighbours in direction", "", s.standing.misfit},
	}
	for _, one := range r.Series {
		for i, v := range one.Values {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				one.Values[i] = 0
			}
		}
	}
}

func scaled(values []float64, by float64) []float64 {
	out := make([]float64, len(values))
	for i, v := range values {
		out[i] = v * by
	}
	return out
}
