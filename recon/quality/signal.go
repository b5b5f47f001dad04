package quality

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/fft"
)

var signalChecks = []Check{
	{Name: "signal-to-noise", Label: "signal-to-noise ratio", Needs: []Need{spokes},
		Rule:   "an average voxel of the nominal resolution stands at least 10 times above the noise at the reference delay (2 at the very least)",
		Source: "own rule; at 10 and a tenfold range of delays the Cramér-Rao bound of the rate is about 15 %",
		Advice: "use a stronger window or larger voxels, and trust regions rather than voxels", Run: signalToNoise},
	{Name: "delay-noise", Label: "noise over the delays", Needs: []Need{spokes},
		Rule: "the noise of every delay is within 1.3 times that of the others", Source: "own rule",
		Advice: "look at the traces of these delays; leave them out if interference shows", Run: delayNoise},
	{Name: "noise-kind", Label: "white Gaussian noise", Needs: []Need{spokes, traces},
		Rule:   "beyond the object the noise power differs by less than 1.5 times over position; excess kurtosis of both channels within 0.3; no sample beyond 7 SD",
		Source: "thermal noise is white and Gaussian (Nyquist, Phys. Rev. 32 (1928) 110)",
		Advice: "errors given with the maps rest on white noise; look for interference, spikes or a narrow filter", Run: noiseKind},
}

// signalToNoise predicts the noise of a voxel of back-projection with a Hann window at full k_max, and the signal from
// the integral and the width of the projections, as if the object were uniform.
func signalToNoise(s *Subject) []Finding {
	reference := s.S.ReferenceDelay(s.A)
	at := s.referenceIndex()
	noise := s.voxelNoise(reference)
	signal := math.Abs(s.V.Curve[at]) / s.objectMeasure()
	ratio := signal / math.Max(noise, math.SmallestNonzeroFloat64)
	echo := math.Abs(s.C.EchoHeight[reference]) / s.C.NoiseSD[reference]
	level := Fine
	switch {
	case !(ratio >= 2):
		level = Stop
	case !(ratio >= 10):
		level = Doubt
	}
	return []Finding{found(level, ratio, "", "an average voxel stands %.3g times above the noise, the echo of one shot %.3g times above that of one sample", ratio, echo)}
}

// voxelNoise returns the noise SD of a voxel at a delay: axes weighted Ω/N each, |k| or k² times the Hann window along
// them, see condition.Spokes.NoiseSD.
func (s *Subject) voxelNoise(delay int) float64 {
	kMax, steps := s.A.SmallestKMax(), 200
	sum, turn := 0.0, math.Pi*float64(s.A.Dim-1)
	for m := range steps {
		u := (float64(m) + 0.5) / float64(steps)
		f := math.Pow(u*kMax, float64(s.A.Dim-1)) * (0.5 + 0.5*math.Cos(math.Pi*u))
		sum += 2 * f * f * kMax / float64(steps)
	}
	density := s.C.NoiseSD[delay] * s.C.NoiseSD[delay]
	if s.A.Domain == acquisition.Projection {
		density *= s.A.PositionStepMM
	} else {
		density *= median(s.V.DeltaK)
	}
	if !s.V.Symmetric {
		density *= 2
	}
	return math.Sqrt(turn * turn / float64(len(s.V.Shots)) * density * sum)
}

// objectMeasure returns the area or volume of the uniform disc or ball whose projections are as wide as these.
func (s *Subject) objectMeasure() float64 {
	width2 := math.Max(median(s.width2), s.resolutionMM()*s.resolutionMM()/4)
	if s.A.Dim == 2 {
		return math.Pi * 4 * width2
	}
	return 4 * math.Pi / 3 * math.Pow(5*width2, 1.5)
}

func delayNoise(s *Subject) []Finding {
	var sd []float64
	for d := range s.V.Delays {
		var powers []float64
		for i := range s.V.Shots {
			powers = append(powers, s.V.Power[i][d])
		}
		sd = append(sd, math.Sqrt(median(powers)/2))
	}
	middle := median(sd)
	var bad []int
	worst := 1.0
	for d, v := range sd {
		ratio := v / math.Max(middle, math.SmallestNonzeroFloat64)
		worst = math.Max(worst, ratio)
		if ratio > 1.3 && s.noisy() {
			bad = append(bad, s.V.Delays[d])
		}
	}
	f := doubtIf(len(bad) > 0, worst, "", "noise of %.3g per channel and sample; the loudest delay has %.2f times the usual", s.C.NoiseSD[s.S.ReferenceDelay(s.A)], worst)
	f.Delays = bad
	return []Finding{f.proposing(func(c *condition.Settings) {
		if len(bad) > 0 && worst > 3 && len(s.V.Delays)-len(bad) >= 4 {
			c.ExcludeDelays = union(c.ExcludeDelays, bad)
		}
	})}
}

// noisy tells whether there is noise to judge: more than the object's own faint signal far from it, which reaches some
// 10⁻⁴ of the echo.
func (s *Subject) noisy() bool {
	reference := s.S.ReferenceDelay(s.A)
	return s.C.NoiseSD[reference] > noisyAbove*math.Abs(s.C.EchoHeight[reference])
}

const noisyAbove = 3e-4

// residue is what is left of a part of the traces when all that lies within the object is filtered out: noise, nearly, in
// units of its SD at each delay.
type residue struct {
	i, q  []float64 // channels, of the same samples
	shots []int     // place of the shot that each came from

	sdI, sdQ float64 // spread of the channels
}

const (
	residueTraces = 512 // looked at; 50000 samples or more give the SD of a channel to 0.5 %
	residueKept   = 0.3 // least part of the alias-free field that must lie beyond the object
)

func (s *Subject) makeResidue() residue {
	var r residue
	outside := 1 - 2*condition.FarMM(s.A, s.C.ExtentMM)/s.A.AliasFreeMM()
	if !(outside >= residueKept) || !s.noisy() {
		return r
	}
	w := residueWork{corrector: condition.NewCorrector(s.A, s.S, s.C, s.V.Delays), trace: make([]complex64, s.A.Samples)}
	w.plan, _ = fft.NewPlan[complex128](fft.FastLength(s.A.Samples)) // FastLength is always a valid length
	w.row, w.scratch = make([]complex128, w.plan.Len()), make([]complex128, w.plan.Len())
	total := len(s.V.Shots) * len(s.V.Delays)
	step := max(1, total/residueTraces)
	if step > 1 {
		step |= 1 // odd, so that it does not fall in step with an even number of delays
	}
	for at := 0; at < total; at += step {
		i, d := at/len(s.V.Delays), at%len(s.V.Delays)
		if !contains(s.standing.loud, i) {
			s.addResidue(&r, w, i, s.V.Delays[d])
		}
	}
	// Where much more is left than noise, it is the object, which the trace is too short to filter out.
	r.sdI, r.sdQ = spread(r.i), spread(r.q)
	if len(r.i) > 0 && math.Hypot(r.sdI, r.sdQ) > 1.1*math.Sqrt(2*outside) {
		return residue{}
	}
	return r
}

// residueWork is what the traces of a residue share.
type residueWork struct {
	plan         *fft.Plan[complex128]
	corrector    *condition.Corrector
	trace        []complex64
	row, scratch []complex128
}

func (s *Subject) addResidue(r *residue, w residueWork, i, delay int) {
	n, samples := w.plan.Len(), s.A.Samples
	trace, row, scratch, corrector := w.trace, w.row, w.scratch, w.corrector
	clear(row)
	corrector.Load(trace, delay, s.V.Shots[i])
	for j, v := range trace {
		row[j] = complex128(v) * complex(edge(j, samples, s.V.Symmetric), 0)
	}
	w.plan.Inverse(row, scratch, 1)
	for x := range int(math.Ceil(condition.FarMM(s.A, s.C.ExtentMM)*s.V.DeltaK[i]*float64(n))) + 1 {
		row[x], row[(n-x)%n] = 0, 0
	}
	w.plan.Forward(row, scratch, 1)
	// Next to the echo, and where the trace is faded out, more than noise is left.
	echo := 4 / (s.C.ExtentMM * s.V.DeltaK[i])
	for j := range samples {
		weight := edge(j, samples, s.V.Symmetric)
		if weight > 0.7 && math.Abs(float64(j)-corrector.ZeroSample(s.V.Shots[i])) > echo {
			scale := 1 / (weight * float64(n) * s.C.NoiseSD[delay])
			r.i, r.q = append(r.i, real(row[j])*scale), append(r.q, imag(row[j])*scale)
			r.shots = append(r.shots, i)
		}
	}
}

// edge is 1 in the middle three quarters of a trace and falls to 0 at its ends as a cosine. Half an echo is faded in and
// out over the whole trace.
func edge(j, samples int, symmetric bool) float64 {
	if !symmetric {
		return 0.5 - 0.5*math.Cos(2*math.Pi*(float64(j)+0.5)/float64(samples))
	}
	u := 2 * math.Abs((float64(j)+0.5)/float64(samples)-0.5)
	if u <= 0.75 {
		return 1
	}
	return 0.5 + 0.5*math.Cos(4*math.Pi*(u-0.75))
}

func noiseKind(s *Subject) []Finding {
	if !s.noisy() {
		return []Finding{found(Fine, 0, "", "hardly any noise; its kind cannot be told")}
	}
	out := []Finding{s.whiteness()}
	if len(s.residue.i) >= 2000 {
		out = append(out, s.gaussianity(), s.spikes())
	}
	return out
}

func (s *Subject) whiteness() Finding {
	least, most := math.Inf(1), 0.0
	for b, power := range s.V.Bands {
		// The powers of a band are exponential; three in four are independent for the taper.
		if s.V.BandCount[b] > 2000 {
			least, most = math.Min(least, power), math.Max(most, power)
		}
	}
	if most == 0 {
		return found(Fine, 0, "", "the object fills the alias-free field; whether the noise is white cannot be told")
	}
	return doubtIf(most > 1.5*least, most/least, "", "noise power differs by %.2f times over position", most/least)
}

func (s *Subject) gaussianity() Finding {
	k := kurtosis(s.residue.i, s.residue.sdI)
	if other := kurtosis(s.residue.q, s.residue.sdQ); math.Abs(other) > math.Abs(k) {
		k = other
	}
	se := math.Sqrt(24 / float64(len(s.residue.i)))
	return doubtIf(math.Abs(k) > 0.3 && math.Abs(k) > manySpreads*se, k, "", "excess kurtosis of the noise %.2f", k)
}

// kurtosis returns the excess kurtosis of the values within 5 SD, 0 for Gaussian ones; what lies beyond is for spikes.
func kurtosis(values []float64, sd float64) float64 {
	var m2, m4, n float64
	for _, v := range values {
		if v *= 1 / sd; math.Abs(v) < 5 {
			m2, m4, n = m2+v*v, m4+v*v*v*v, n+1
		}
	}
	return m4*n/(m2*m2) - 3
}

func (s *Subject) spikes() Finding {
	worst, count := 0.0, 0
	at := map[int]bool{}
	for c, channel := range [][]float64{s.residue.i, s.residue.q} {
		sd := [2]float64{s.residue.sdI, s.residue.sdQ}[c]
		for k, v := range channel {
			z := math.Abs(v) / sd
			worst = math.Max(worst, z)
			if z > 7 && !contains(s.standing.loud, s.residue.shots[k]) {
				count++
				at[s.residue.shots[k]] = true
			}
		}
	}
	var shots []int
	for i := range s.V.Shots {
		if at[i] {
			shots = append(shots, s.V.Shots[i])
		}
	}
	return doubtIf(count > 0, worst, "SD", "%d of %d samples looked at lie beyond 7 SD, the farthest at %.1f", count, 2*len(s.residue.i), worst).onShots(shots)
}
