package condition

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/fft"
)

// Constants are what conditioning needs to know about the whole acquisition. They travel as JSON to whoever conditions
// a part of it.
type Constants struct {
	OffsetReal, OffsetImag float64   // subtracted from every sample
	PhaseRad               float64   // signal is turned by -PhaseRad
	NoiseSD                []float64 // [delay] SD of one channel of one raw sample
	ExtentMM               float64   // diameter, around the gradient centre, of the smallest ball that holds the object
	EchoHeight             []float64 // [delay] mean over the kept shots of the phased signal at k = 0

	// Own phase and shift of time zero of every shot of the acquisition, where asked for; else absent.
	ShotPhaseRad     []float64 `json:",omitempty"`
	ShotShiftSamples []float64 `json:",omitempty"`
}

// Measure returns the constants of an acquisition and warnings about them.
//
// Errors: those of Settings.Check; unsupported for an encoding other than spokes, or for traces that start after k = 0.
func Measure(a *acquisition.Acquisition, s Settings) (*Constants, []string, error) {
	if err := checkUsable(a, s); err != nil {
		return nil, nil, err
	}
	warnings := halfEchoWarning(a, s)
	c := &Constants{}
	spectra := newSpectra(a, s)
	c.ExtentMM = spectra.extent(s.ReferenceDelay(a))
	for d := range a.Delays {
		c.NoiseSD = append(c.NoiseSD, spectra.noise(d, c.ExtentMM))
	}
	if s.Offset == "trace-ends" && a.Domain == acquisition.Time {
		offset, stands := offsetFromEnds(a, s, c.NoiseSD)
		if stands {
			c.OffsetReal, c.OffsetImag = real(offset), imag(offset)
		}
	}
	if s.Offset == "baseline-shots" && len(a.BaselineShots()) == 0 {
		return nil, nil, fault.New(fault.BadSetting, "recipe conditioning.offset", "off-resonance shots asked for, but the file has none (shot_role 2); use trace-ends or none")
	}
	if s.ShotPhase == "own" || s.ShotTime == "own" {
		ownShots(a, s, c)
	}
	heights := echoHeights(a, s, c)
	if s.Phase == "reference-delay" && a.Domain == acquisition.Time {
		c.PhaseRad = cmplx.Phase(heights[s.ReferenceDelay(a)])
	}
	for _, h := range heights {
		c.EchoHeight = append(c.EchoHeight, real(h*cmplx.Rect(1, -c.PhaseRad)))
	}
	if c.ExtentMM > 0.95*a.AliasFreeMM() {
		warnings = append(warnings, fmt.Sprintf("the object reaches across the whole alias-free field of view (%.3g mm); it may be folded over", a.AliasFreeMM()))
	}
	return c, warnings, nil
}

// halfEchoWarning says from where on the image rests on one half of the echo. Two samples of difference are no loss.
func halfEchoWarning(a *acquisition.Acquisition, s Settings) []string {
	before := a.TimeZeroSample + s.TimeShiftSamples
	after := float64(a.Samples-1) - before
	if a.Domain == acquisition.Projection || math.Abs(after-before) <= 2 {
		return nil
	}
	share := 100 * math.Min(before, after) / math.Max(before, after)
	return []string{fmt.Sprintf("one half of the echo is recorded only to %.0f %% of the other; beyond, it is taken as the other's mirror (Hermitian symmetry)", share)}
}

func checkUsable(a *acquisition.Acquisition, s Settings) error {
	if err := s.Check(); err != nil {
		return err
	}
	if a.Encoding != acquisition.Spoke {
		return fault.New(fault.Unsupported, "encoding", "%s data need single-point reconstruction, which this version does not have; spokes are read", a.Encoding)
	}
	if len(s.KeptShots(a)) == 0 || len(s.KeptDelays(a)) == 0 {
		return fault.New(fault.BadSetting, "recipe conditioning", "every image shot or every delay is excluded; keep at least one of each")
	}
	zero := a.TimeZeroSample + s.TimeShiftSamples
	if first := firstUsable(s.DeadSamples, zero); a.Domain == acquisition.Time && first > a.Samples/2 {
		return fault.New(fault.BadSetting, "recipe conditioning.deadSamples", "%d dead samples leave less than half of the %d recorded ones; use fewer", s.DeadSamples, a.Samples)
	}
	if a.Domain == acquisition.Time && (zero < 0 || zero > float64(a.Samples-1)) {
		return fault.New(fault.Unsupported, "time_zero_sample", "k = 0 lies at sample %g, outside the %d recorded ones; spokes must contain it", zero, a.Samples)
	}
	return nil
}

// echoHeights returns the mean over the kept shots of the corrected signal at k = 0, per delay.
func echoHeights(a *acquisition.Acquisition, s Settings, c *Constants) []complex128 {
	shots, all := s.KeptShots(a), make([]int, a.Delays)
	for d := range all {
		all[d] = d
	}
	corrector, trace := NewCorrector(a, s, c, all), make([]complex64, a.Samples)
	out := make([]complex128, a.Delays)
	for d := range out {
		for _, shot := range shots {
			corrector.Load(trace, d, shot)
			out[d] += heightOf(a, s, c, corrector.ZeroSample(shot), trace)
		}
		out[d] /= complex(float64(len(shots)), 0)
	}
	return out
}

// heightOf returns the corrected signal at k = 0, looking across the dead time where there is one.
func heightOf(a *acquisition.Acquisition, s Settings, c *Constants, zero float64, trace []complex64) complex128 {
	if s.DeadSamples > 0 && a.Domain == acquisition.Time {
		// Half an echo looks wider than the object is; the band is never wider than what bridges the hole.
		hole := float64(firstUsable(s.DeadSamples, zero)) - zero
		beta := math.Min(math.Min(1, 1.15*c.ExtentMM/a.AliasFreeMM()), bridged/hole)
		if rs, err := newResampler(a.Samples, firstUsable(s.DeadSamples, zero), beta, []place{zero}); err == nil {
			if v, ok := rs.Apply(0, trace); ok {
				return v
			}
		}
	}
	return atTimeZero(a, zero, trace)
}

// atTimeZero returns the signal at k = 0: between its two neighbours in a trace, the integral of a projection. It serves
// phase and display, not the image, so that the straight line between neighbours is good enough.
func atTimeZero(a *acquisition.Acquisition, zero float64, trace []complex64) complex128 {
	if a.Domain == acquisition.Projection {
		var sum complex128
		for _, v := range trace {
			sum += complex128(v)
		}
		return sum * complex(a.PositionStepMM, 0)
	}
	j := max(0, min(int(zero), len(trace)-1))
	next := min(j+1, len(trace)-1)
	f := complex(zero-float64(j), 0)
	return complex128(trace[j])*(1-f) + complex128(trace[next])*f
}

// standsOut is how many standard errors an offset must reach to be subtracted. Below it, subtracting would add more
// error to the voxel at the gradient centre than it takes away.
const standsOut = 5

// offsetFromEnds returns the part of the trace ends that does not follow the echo over the delays, and whether it stands
// out of the noise. Far from the echo an object leaves a faint signal of its own, in proportion to its echo; a straight
// line over the delays through (echo height, mean of the ends) has the receiver's offset as its intercept. Fewer than
// three delays cannot tell the two apart.
func offsetFromEnds(a *acquisition.Acquisition, s Settings, noiseSD []float64) (complex128, bool) {
	delays := s.KeptDelays(a)
	if len(delays) < 3 {
		return 0, false
	}
	ends, shots, zero := endSamples(a, s), s.KeptShots(a), a.TimeZeroSample+s.TimeShiftSamples
	zero = math.Max(zero, float64(firstUsable(s.DeadSamples, zero)))
	heights, means := make([]complex128, len(delays)), make([]complex128, len(delays))
	for i, d := range delays {
		for _, shot := range shots {
			trace := a.Trace(d, shot)
			heights[i] += atTimeZero(a, zero, trace) / complex(float64(len(shots)), 0)
			for _, j := range ends {
				means[i] += complex128(trace[j])
			}
		}
		means[i] /= complex(float64(len(ends)*len(shots)), 0)
	}
	offset, leverage, misfit := intercept(heights, means)
	se := slices.Max(noiseSD) / math.Sqrt(float64(len(ends)*len(shots)))
	return offset, cmplx.Abs(offset) > standsOut*leverage*math.Max(se, misfit)
}

// EndOffset returns the receiver's offset that the ends of the traces show, and whether it stands out of the noise; see
// the row trace-ends of Offsets. It does not matter whether the settings subtract it.
func EndOffset(a *acquisition.Acquisition, s Settings, c *Constants) (offset complex128, stands bool) {
	if a.Domain != acquisition.Time {
		return 0, false
	}
	return offsetFromEnds(a, s, c.NoiseSD)
}

// endSamples lists the outermost tenth of the samples at the ends of the trace that lie far from k = 0.
func endSamples(a *acquisition.Acquisition, s Settings) []int {
	zero := a.TimeZeroSample + s.TimeShiftSamples
	far := 0.9 * math.Max(zero, float64(a.Samples-1)-zero)
	var out []int
	for j := range a.Samples {
		if math.Abs(float64(j)-zero) >= far {
			out = append(out, j)
		}
	}
	return out
}

// intercept fits y = c + g·x by least squares over complex points and returns c, the factor from the SD of one y to the
// SD of c, and the SD of y about the line. It needs three points that differ in x.
func intercept(x, y []complex128) (c complex128, leverage, misfit float64) {
	n := complex(float64(len(x)), 0)
	var mx, my, sxy complex128
	var sxx float64
	for i := range x {
		mx += x[i] / n
		my += y[i] / n
	}
	for i := range x {
		sxy += cmplx.Conj(x[i]-mx) * (y[i] - my)
		sxx += real((x[i] - mx) * cmplx.Conj(x[i]-mx))
	}
	slope := sxy / complex(sxx, 0)
	rss := 0.0
	for i := range x {
		r := y[i] - my - slope*(x[i]-mx)
		rss += real(r * cmplx.Conj(r))
	}
	return my - slope*mx, math.Sqrt(1/real(n) + real(mx*cmplx.Conj(mx))/sxx), math.Sqrt(rss / float64(len(x)-2))
}

// spectra are the position spectra of a sample of traces, from which extent and noise are read.
type spectra struct {
	a      *acquisition.Acquisition
	shots  []int
	plan   *fft.Plan[complex128]
	taper  []float64
	energy float64 // Σ taper²
}

// mostShots bounds the shots looked at: 96 shots of a few dozen positions each give the noise to better than 2 %.
const mostShots = 96

func newSpectra(a *acquisition.Acquisition, s Settings) *spectra {
	sp := &spectra{a: a}
	all := s.KeptShots(a)
	step := (len(all) + mostShots - 1) / mostShots
	for i := 0; i < len(all); i += step {
		sp.shots = append(sp.shots, all[i])
	}
	sp.plan, _ = fft.NewPlan[complex128](fft.FastLength(a.Samples)) // FastLength is always a valid length
	first := firstUsable(s.DeadSamples, a.TimeZeroSample+s.TimeShiftSamples)
	for j := range a.Samples {
		w := 0.5 - 0.5*math.Cos(2*math.Pi*(float64(j-first)+0.5)/float64(a.Samples-first))
		if j < first {
			w = 0
		}
		sp.taper = append(sp.taper, w)
		sp.energy += w * w
	}
	return sp
}

// each calls f with the distance from the gradient centre in mm and the power, in units of the raw sample variance of
// both channels, of every position of every looked-at shot.
func (sp *spectra) each(d int, f func(mm, power float64)) {
	if sp.a.Domain == acquisition.Projection {
		sp.eachProjected(d, f)
		return
	}
	n := sp.plan.Len()
	row, scratch := make([]complex128, n), make([]complex128, n)
	for _, s := range sp.shots {
		clear(row)
		for j, v := range sp.a.Trace(d, s) {
			row[j] = complex128(v) * complex(sp.taper[j], 0)
		}
		sp.plan.Forward(row, scratch, 1)
		step := 1 / (acquisition.KPerNS(sp.a.Strength(s), sp.a.DwellNS) * float64(n))
		for i, v := range row {
			f(float64(min(i, n-i))*step, (real(v)*real(v)+imag(v)*imag(v))/sp.energy)
		}
	}
}

// eachProjected does the same for real projections; a single channel carries the noise, hence the factor 2.
func (sp *spectra) eachProjected(d int, f func(mm, power float64)) {
	for _, s := range sp.shots {
		for j, v := range sp.a.Trace(d, s) {
			mm := math.Abs(float64(j)-sp.a.TimeZeroSample) * sp.a.PositionStepMM
			f(mm, 2*float64(real(v))*float64(real(v)))
		}
	}
}

// extent returns twice the largest distance from the gradient centre at which the mean power of the projections stands
// above the noise floor and above 10⁻⁴ of its peak.
func (sp *spectra) extent(d int) float64 {
	const bins = 512
	reach := sp.a.AliasFreeMM() / 2
	sum, count := make([]float64, bins), make([]float64, bins)
	sp.each(d, func(mm, power float64) {
		if b := int(mm / reach * bins); b < bins {
			sum[b] += power
			count[b]++
		}
	})
	var means []float64
	peak := 0.0
	for b := range bins {
		if count[b] > 0 {
			sum[b] /= count[b]
			means = append(means, sum[b])
			peak = math.Max(peak, sum[b])
		}
	}
	slices.Sort(means)
	floor := means[len(means)/5] // low, so that an object filling most of the field of view is not taken for noise
	for b := bins - 1; b >= 0; b-- {
		// A mean of m exponential powers spreads by 1/sqrt(m) of itself.
		if count[b] > 0 && sum[b] > 1e-4*peak+floor*(1+6/math.Sqrt(count[b])) {
			return 2 * reach * (float64(b) + 1) / bins
		}
	}
	return 2 * reach
}

// noise returns the SD of one channel of one raw sample at delay d: from the median power of the projections just
// outside the object, where only noise is left. The power of complex noise is exponential with median 2σ² ln 2.
// It never falls below the rounding of the stored signal.
func (sp *spectra) noise(d int, extentMM float64) float64 {
	var outside []float64
	largest := 0.0
	near, far := 0.6*extentMM, 1.5*extentMM
	sp.each(d, func(mm, power float64) {
		largest = math.Max(largest, power)
		if mm >= near && mm <= far {
			outside = append(outside, power)
		}
	})
	if len(outside) < 32 {
		outside = outside[:0]
		sp.each(d, func(mm, power float64) { outside = append(outside, power) })
	}
	slices.Sort(outside)
	sd := math.Sqrt(outside[len(outside)/2] / (2 * math.Ln2))
	if sp.a.Domain == acquisition.Projection {
		// Squared real noise is chi-square with one degree of freedom, median 0.454937.
		sd = math.Sqrt(outside[len(outside)/2] / 2 / 0.454937)
	}
	return math.Max(sd, 6e-8*math.Sqrt(largest))
}
