package condition

import (
	"math"
	"math/cmplx"
	"slices"

	"torrloom/recon/acquisition"
	"torrloom/recon/fft"
)

// Survey looks at every kept shot on its own: its projections at all kept delays, still complex, and what they say of the
// shot's time zero, phase and strength. It is what checks judge by and what corrections of single shots follow from.
//
// Shots are counted in the order of Shots, delays in the order of Delays.
type Survey struct {
	Shots  []int // indices in the acquisition
	Delays []int
	Dim    int

	// Symmetric tells that both halves of the echo are recorded far enough to judge its symmetry.
	Symmetric bool
	DeltaK    []float64        // [shot] distance of raw samples in cycles/mm; unused for projections
	StepMM    []float64        // [shot] distance of positions
	OriginMM  float64          // position in the middle of a row, not 0 only for recorded projections
	Reach     []int            // [shot] positions run from -Reach to Reach
	Values    [][][]complex128 // [shot][delay][position] projection, turned only by what the settings ask for

	heights [][]complex128 // [shot][delay] signal at k = 0, where one half of the echo is missing; else nil

	ShiftSamples []float64 // [shot] by how much k = 0 lies later than assumed; 0 where Symmetric is false
	CommonShift  float64   // median of them
	Curve        []float64 // [delay] median over the shots of the phased integral of the projection
	Strength     []float64 // [shot] size of the shot's delay curve over Curve; 1 for an ordinary shot
	PhaseRad     []float64 // [shot] its phase, in -π..π

	// Power is the mean power |value|² beyond the object in units of the variance of both channels of a raw sample,
	// [shot][delay]; Bands the same over all shots and delays, in sixteen bands of position from one end of the
	// alias-free field to the other, with the number of values in BandCount. Only bands beyond the object are filled.
	Power     [][]float64
	NoiseGain []float64 // [shot] noise SD of one channel of a value over that of a raw sample
	Bands     [16]float64
	BandCount [16]float64
}

// viewMargin is how far beyond the object's measured extent a projection is kept.
const viewMargin = 1.15

// NewSurvey returns the survey of an acquisition under settings and constants, corrections of the settings applied.
func NewSurvey(a *acquisition.Acquisition, s Settings, c *Constants) *Survey {
	v := &Survey{Shots: s.KeptShots(a), Delays: s.KeptDelays(a), Dim: a.Dim}
	if a.Domain == acquisition.Projection {
		v.viewProjections(a, s, c)
	} else {
		v.viewTraces(a, s, c)
	}
	v.measureShifts()
	v.measureStrength(s.ReferenceDelay(a))
	return v
}

func (v *Survey) allocate(shot int, step, reach float64, most int) {
	n := max(2, min(int(math.Ceil(reach/step)), most))
	v.StepMM, v.Reach = append(v.StepMM, step), append(v.Reach, n)
	rows := make([][]complex128, len(v.Delays))
	for d := range rows {
		rows[d] = make([]complex128, 2*n+1)
	}
	v.Values, v.Power = append(v.Values, rows), append(v.Power, make([]float64, len(v.Delays)))
}

func (v *Survey) viewProjections(a *acquisition.Acquisition, s Settings, c *Constants) {
	corrector, row := NewCorrector(a, s, c, v.Delays), make([]complex64, a.Samples)
	zero := a.TimeZeroSample + s.TimeShiftSamples
	centre := int(math.Round(zero))
	v.OriginMM = (float64(centre) - zero) * a.PositionStepMM
	for i, shot := range v.Shots {
		v.allocate(i, a.PositionStepMM, viewMargin*c.ExtentMM/2, max(centre, a.Samples-1-centre))
		v.DeltaK, v.NoiseGain = append(v.DeltaK, 0), append(v.NoiseGain, 1)
		for d := range v.Delays {
			corrector.Load(row, v.Delays[d], shot)
			outside := 0.0
			for j, value := range row {
				x := j - centre
				if at := x + v.Reach[i]; at >= 0 && at <= 2*v.Reach[i] {
					v.Values[i][d][at] = complex(float64(real(value)), 0)
				} else {
					v.Power[i][d] += 2 * float64(real(value)) * float64(real(value))
					outside++
				}
			}
			v.Power[i][d] /= math.Max(1, outside)
		}
	}
}

// traceView transforms the traces of one shot at all delays into projections.
type traceView struct {
	a         *acquisition.Acquisition
	corrector *Corrector
	plan      *fft.Plan[complex128]
	weight    []float64 // [sample]
	energy    float64   // Σ weight²
	quiet     []float64 // [sample] weights for the noise where one half of the echo is missing; else nil
	dead      int       // samples after k = 0 that are not used
	beta      float64   // band of the object over the alias-free field
	farMM     float64   // FarMM of the object
	zero      float64
	trace     []complex64
	data      []complex128 // [position][delay]
	scratch   []complex128
}

func (v *Survey) viewTraces(a *acquisition.Acquisition, s Settings, c *Constants) {
	w := &traceView{a: a, corrector: NewCorrector(a, s, c, v.Delays), farMM: FarMM(a, c.ExtentMM), zero: a.TimeZeroSample + s.TimeShiftSamples}
	w.plan, _ = fft.NewPlan[complex128](fft.FastLength(a.Samples)) // FastLength is always a valid length
	w.trace, w.data = make([]complex64, a.Samples), make([]complex128, w.plan.Len()*len(v.Delays))
	w.scratch = make([]complex128, len(w.data))
	v.Symmetric = echoIsSymmetric(a, s, c)
	w.weight = viewWeights(a.Samples, w.zero, v.Symmetric, s.DeadSamples)
	for _, x := range w.weight {
		w.energy += x * x
	}
	if !v.Symmetric {
		w.quiet, w.dead, w.beta = quietWeights(a.Samples), s.DeadSamples, math.Min(1, 1.15*c.ExtentMM/a.AliasFreeMM())
	}
	for i, shot := range v.Shots {
		dk := acquisition.KPerNS(a.Strength(shot), a.DwellNS)
		v.DeltaK, v.NoiseGain = append(v.DeltaK, dk), append(v.NoiseGain, dk*math.Sqrt(w.energy))
		v.allocate(i, 1/(dk*float64(w.plan.Len())), viewMargin*c.ExtentMM/2, w.plan.Len()/2-1)
		w.transform(v, shot, w.weight)
		for d := range v.Delays {
			w.store(v, i, d, dk)
		}
		if w.quiet != nil {
			w.transform(v, shot, w.quiet)
			v.heights = append(v.heights, w.heightsOf(v, shot))
		}
		for d := range v.Delays {
			w.storeBeyond(v, i, d)
		}
	}
	for b := range v.Bands {
		v.Bands[b] /= math.Max(1, v.BandCount[b])
	}
}

// echoIsSymmetric asks for both halves of the echo out to 1.5/extent, where the echo of any object without large holes
// has passed its main lobe.
func echoIsSymmetric(a *acquisition.Acquisition, s Settings, c *Constants) bool {
	zero := a.TimeZeroSample + s.TimeShiftSamples
	shorter := math.Min(zero, float64(a.Samples-1)-zero)
	weakest := math.Inf(1)
	for _, shot := range s.KeptShots(a) {
		weakest = math.Min(weakest, a.Strength(shot))
	}
	return s.DeadSamples == 0 && acquisition.KPerNS(weakest, a.DwellNS)*shorter >= 1.5/c.ExtentMM
}

// viewWeights are the weights of the samples: flat in the middle half of the part that both halves share, falling to 0
// at its ends as a cosine. Of a half echo, the longer half counts twice, the sample next to k = 0 for its share.
func viewWeights(samples int, zero float64, symmetric bool, dead int) []float64 {
	half := math.Min(zero, float64(samples-1)-zero)
	sign := 1.0
	if !symmetric {
		half = math.Max(zero, float64(samples-1)-zero)
		if zero > float64(samples-1)-zero {
			sign = -1
		}
	}
	out := make([]float64, samples)
	for j := range out {
		t := (float64(j) - zero) * sign
		u := math.Abs(t) / (half + 1)
		w := 1.0
		if u > 0.5 {
			w = 0.5 + 0.5*math.Cos(2*math.Pi*(u-0.5))
		}
		if u >= 1 {
			w = 0
		}
		if !symmetric {
			w *= 2 * math.Max(0, math.Min(1, t+0.5))
			if j < firstUsable(dead, zero) && dead > 0 {
				w = 0
			}
		}
		out[j] = w
	}
	return out
}

// quietWeights fade a trace in and out slowly, so that half an echo does not start with a jump, which reaches far beyond
// the object.
func quietWeights(samples int) []float64 {
	out := make([]float64, samples)
	for j := range out {
		out[j] = 0.5 - 0.5*math.Cos(2*math.Pi*(float64(j)+0.5)/float64(samples))
	}
	return out
}

func (w *traceView) transform(v *Survey, shot int, weight []float64) {
	lanes := len(v.Delays)
	clear(w.data)
	for d, delay := range v.Delays {
		w.corrector.Load(w.trace, delay, shot)
		for j, value := range w.trace {
			w.data[j*lanes+d] = complex128(value) * complex(weight[j], 0)
		}
	}
	w.plan.Inverse(w.data, w.scratch, lanes)
	w.zero = w.corrector.ZeroSample(shot)
}

// heightsOf returns the signal at k = 0 of one shot per delay. The integral of a projection made from half an echo would
// not do: its other channel is not zero.
func (w *traceView) heightsOf(v *Survey, shot int) []complex128 {
	out := make([]complex128, len(v.Delays))
	zero := w.corrector.ZeroSample(shot)
	resampler, err := newResampler(w.a.Samples, firstUsable(w.dead, zero), w.beta, []place{zero})
	for d, delay := range v.Delays {
		w.corrector.Load(w.trace, delay, shot)
		out[d] = atTimeZero(w.a, zero, w.trace)
		if err == nil {
			if value, ok := resampler.Apply(0, w.trace); ok {
				out[d] = value
			}
		}
	}
	return out
}

// store takes positions near the object into the survey.
func (w *traceView) store(v *Survey, i, d int, dk float64) {
	n, lanes, reach := w.plan.Len(), len(v.Delays), v.Reach[i]
	for x := -reach; x <= reach; x++ {
		turn := cmplx.Rect(dk, -2*math.Pi*float64(x)/float64(n)*w.zero)
		v.Values[i][d][x+reach] = w.data[(x+n)%n*lanes+d] * turn
	}
}

// storeBeyond takes what lies beyond the object into the powers of the survey.
func (w *traceView) storeBeyond(v *Survey, i, d int) {
	n, lanes, energy := w.plan.Len(), len(v.Delays), w.energy
	if w.quiet != nil {
		energy = 3.0 / 8 * float64(len(w.quiet)) // mean of sin⁴
	}
	first := int(math.Ceil(w.farMM / v.StepMM[i]))
	outside := 0.0
	for x := first; x <= n-first; x++ {
		value := w.data[x*lanes+d]
		power := (real(value)*real(value) + imag(value)*imag(value)) / energy
		v.Power[i][d] += power
		outside++
		b := x * len(v.Bands) / n
		v.Bands[b] += power
		v.BandCount[b]++
	}
	v.Power[i][d] /= math.Max(1, outside)
}

// FarMM returns the distance from the gradient centre beyond which hardly more than noise is left of an object of
// extentMM: three radii, where the sampling leaves that much room, at least 1.4 radii. Closer by, the object shows through
// the ends of the traces.
func FarMM(a *acquisition.Acquisition, extentMM float64) float64 {
	return math.Max(0.7*extentMM, math.Min(1.5*extentMM, 0.3*a.AliasFreeMM()))
}

// measureShifts finds the time zero of every shot from the symmetry of its echo. A projection is real; when k = 0 lies
// δ samples later than assumed it is turned by 2π δ DeltaK x. Its square turns twice as fast and does not care for signs,
// so that the sum over delays and positions of square·exp(-i4π δ DeltaK x) is largest at the right δ.
func (v *Survey) measureShifts() {
	v.ShiftSamples = make([]float64, len(v.Shots))
	if !v.Symmetric {
		return
	}
	for i := range v.Shots {
		square := make([]complex128, 2*v.Reach[i]+1)
		for _, row := range v.Values[i] {
			for x, value := range row {
				square[x] += value * value
			}
		}
		v.ShiftSamples[i] = strongestTwist(square, 2*v.DeltaK[i]*v.StepMM[i])
	}
	v.CommonShift = median(v.ShiftSamples)
}

// strongestTwist returns the δ at which |Σ values_x exp(-i2π δ·perStep·x)| is largest, x counted from the middle.
func strongestTwist(values []complex128, perStep float64) float64 {
	n := len(values)
	// The peak is at least 1/(n·perStep) wide. Searching three widths to either side finds any echo that is roughly in
	// place.
	width := 1 / (float64(n) * perStep)
	best, at := -1.0, 0.0
	for k := -12; k <= 12; k++ {
		if p := cmplx.Abs(twisted(values, perStep, float64(k)*width/4)); p > best {
			best, at = p, float64(k)*width/4
		}
	}
	for step := width / 4; step > 1e-4*width; step /= 2 {
		for _, sign := range []float64{-1, 1} {
			for {
				p := cmplx.Abs(twisted(values, perStep, at+sign*step))
				if !(p > best) {
					break
				}
				best, at = p, at+sign*step
			}
		}
	}
	return at
}

// twisted returns Σ values_x exp(-i2π δ·perStep·x).
func twisted(values []complex128, perStep, delta float64) complex128 {
	turn := cmplx.Rect(1, -2*math.Pi*delta*perStep)
	at := cmplx.Rect(1, 2*math.Pi*delta*perStep*float64(len(values)/2))
	var sum complex128
	for _, v := range values {
		sum += v * at
		at *= turn
	}
	return sum
}

// integrals returns the integral of the projection of one shot per delay, the common shift taken out: the signal at k = 0.
func (v *Survey) integrals(i int) []complex128 {
	if v.heights != nil {
		return v.heights[i]
	}
	out := make([]complex128, len(v.Delays))
	for d, row := range v.Values[i] {
		out[d] = twisted(row, v.DeltaK[i]*v.StepMM[i], v.CommonShift) * complex(v.StepMM[i], 0)
	}
	return out
}

// measureStrength finds the delay curve common to the shots, and every shot's factor against it: its size and phase.
func (v *Survey) measureStrength(reference int) {
	at := slices.Index(v.Delays, reference)
	all := make([][]complex128, len(v.Shots))
	columns := make([][]float64, len(v.Delays))
	for i := range v.Shots {
		all[i] = v.integrals(i)
		turn := phaseByReference(all[i], at)
		for d, m := range all[i] {
			columns[d] = append(columns[d], real(m*turn))
		}
	}
	energy := 0.0
	for _, column := range columns {
		v.Curve = append(v.Curve, median(column))
		energy += v.Curve[len(v.Curve)-1] * v.Curve[len(v.Curve)-1]
	}
	for i := range v.Shots {
		var sum complex128
		for d, m := range all[i] {
			sum += m * complex(v.Curve[d]/math.Max(energy, math.SmallestNonzeroFloat64), 0)
		}
		v.Strength, v.PhaseRad = append(v.Strength, cmplx.Abs(sum)), append(v.PhaseRad, cmplx.Phase(sum))
	}
}

// phaseByReference returns the turn that makes a delay curve real, and positive at the reference delay.
func phaseByReference(curve []complex128, reference int) complex128 {
	var square complex128
	for _, m := range curve {
		square += m * m
	}
	turn := cmplx.Rect(1, -cmplx.Phase(square)/2)
	if real(curve[reference]*turn) < 0 {
		return -turn
	}
	return turn
}

// Real returns the projection of one shot at one delay, made real: common shift and the shot's own phase taken out, and
// beside it what is left in the other channel.
func (v *Survey) Real(i, d int) (in, off []float64) {
	perStep := v.DeltaK[i] * v.StepMM[i] * v.CommonShift
	for x, value := range v.Values[i][d] {
		turned := value * cmplx.Rect(1, -v.PhaseRad[i]-2*math.Pi*perStep*float64(x-v.Reach[i]))
		in, off = append(in, real(turned)), append(off, imag(turned))
	}
	return in, off
}

// ownShots writes the own phase and time zero of every shot into the constants, as far as asked for.
func ownShots(a *acquisition.Acquisition, s Settings, c *Constants) {
	v := NewSurvey(a, s, c)
	if s.ShotTime == "own" {
		c.ShotShiftSamples = make([]float64, a.Shots)
		for shot := range c.ShotShiftSamples {
			c.ShotShiftSamples[shot] = v.CommonShift
		}
		for i, shot := range v.Shots {
			c.ShotShiftSamples[shot] = v.ShiftSamples[i]
		}
	}
	if s.ShotPhase == "own" && a.Domain == acquisition.Time {
		c.ShotPhaseRad = make([]float64, a.Shots)
		middle := MedianPhase(v.PhaseRad)
		for i, shot := range v.Shots {
			c.ShotPhaseRad[shot] = math.Remainder(v.PhaseRad[i]-middle, 2*math.Pi)
		}
	}
}

// MedianPhase returns a phase in the middle of others that scatter by less than half a turn: the median of their
// distances from the direction of their mean.
func MedianPhase(phases []float64) float64 {
	var sum complex128
	for _, p := range phases {
		sum += cmplx.Rect(1, p)
	}
	mean := cmplx.Phase(sum)
	off := make([]float64, len(phases))
	for i, p := range phases {
		off[i] = math.Remainder(p-mean, 2*math.Pi)
	}
	return mean + median(off)
}

func median(values []float64) float64 {
	if len(values) == 0 {
		return 0
	}
	sorted := slices.Clone(values)
	slices.Sort(sorted)
	n := len(sorted)
	return (sorted[(n-1)/2] + sorted[n/2]) / 2
}
