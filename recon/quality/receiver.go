package quality

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"

	"torrloom/recon/condition"
)

var receiverChecks = []Check{
	{Name: "clipping", Label: "clipping", Needs: []Need{traces},
		Rule: "no channel stays at its largest value for three samples and more often than just below it", Source: "own rule",
		Advice: "measure again with less receiver gain; clipped echoes cannot be repaired", Run: clipping},
	{Name: "offset", Label: "receiver offset", Needs: []Need{spokes, traces},
		Rule: "a constant that stays at the ends of the traces at all delays is below 0.1 % of the largest echo, or is subtracted", Source: "an offset is a spot at the gradient centre",
		Advice: "subtract the offset", Run: offset},
	{Name: "quadrature", Label: "quadrature balance", Needs: []Need{spokes, traces},
		Rule:   "mirror image below 0.5 % of the projection; gains within 3 % and angle within 2° of noise in both channels",
		Source: "an unequal pair of channels adds a conjugate signal: p(x) + b·p(-x)",
		Advice: "correct gain and angle of the second channel", Run: quadrature},
	{Name: "baseline", Label: "baseline", Needs: []Need{spokes, traces},
		Rule:   "off-resonance shots, or the start of the traces against its mirror, hold less than 0.5 % of the largest echo",
		Source: "an echo is symmetric; the ringing of the resonator is not",
		Advice: "subtract off-resonance shots; without them, start the traces later", Run: baseline},
}

func clipping(s *Subject) []Finding {
	share, clipped := 0.0, false
	for channel := range 2 {
		runs, at, near := s.flatTops(channel)
		if runs >= 3 && at > near {
			clipped = true
		}
		share = math.Max(share, float64(runs)/float64(s.A.Delays*s.A.Shots))
	}
	if !clipped {
		return []Finding{found(Fine, 0, "%", "no channel is cut off at its largest value")}
	}
	return []Finding{found(Stop, 100*share, "%", "%.2g %% of the traces are cut off at the largest value", 100*share)}
}

// sizeIn returns the size of a value in one channel.
func sizeIn(v complex64, channel int) float32 {
	if channel == 1 {
		return float32(math.Abs(float64(imag(v))))
	}
	return float32(math.Abs(float64(real(v))))
}

// nearTop is what counts as just below the largest value.
const nearTop = 0.98

// flatTops returns how many traces stay at the largest size of a channel for three samples, how many samples are there,
// and how many lie just below.
func (s *Subject) flatTops(channel int) (runs, at, near int) {
	tops := make([]float32, s.A.Delays*s.A.Shots)
	var most float32
	for k := range tops {
		for _, v := range s.A.Signal[k*s.A.Samples : (k+1)*s.A.Samples] {
			if x := sizeIn(v, channel); x > tops[k] {
				tops[k] = x
			}
		}
		most = max(most, tops[k])
	}
	for k, top := range tops {
		if top == 0 || top < nearTop*most {
			continue
		}
		run, flat, below := flatTop(s.A.Signal[k*s.A.Samples:(k+1)*s.A.Samples], channel, most)
		at, near = at+flat, near+below
		if run >= 3 {
			runs++
		}
	}
	return runs, at, near
}

// flatTop returns the longest run of samples of a trace at the size top, how many are there, and how many just below.
func flatTop(trace []complex64, channel int, top float32) (longest, at, near int) {
	run := 0
	for _, v := range trace {
		switch x := sizeIn(v, channel); {
		case x == top:
			run++
			at++
			longest = max(longest, run)
			continue
		case x > nearTop*top:
			near++
		}
		run = 0
	}
	return longest, at, near
}

// largestEcho returns the size of the largest echo of the delays, in the unit of the signal.
func (s *Subject) largestEcho() float64 {
	most := math.SmallestNonzeroFloat64
	for _, h := range s.C.EchoHeight {
		most = math.Max(most, math.Abs(h))
	}
	return most
}

func offset(s *Subject) []Finding {
	if len(s.V.Delays) < 3 {
		return []Finding{found(Fine, 0, "%", "fewer than three delays; an offset cannot be told from the object's own signal")}
	}
	value, stands := condition.EndOffset(s.A, s.S, s.C)
	share := 100 * cmplx.Abs(value) / s.largestEcho()
	switch {
	case s.S.Offset == "baseline-shots":
		return []Finding{found(Fine, 0, "%", "off-resonance shots are subtracted, and an offset with them")}
	case s.S.Offset == "trace-ends" && stands:
		return []Finding{found(Fine, share, "%", "an offset of %.2g %% of the largest echo is subtracted", share)}
	case !stands:
		return []Finding{found(Fine, share, "%", "an offset of %.2g %% of the largest echo does not stand out", share)}
	}
	return []Finding{doubtIf(share > 0.1, share, "%", "an offset of %.2g %% of the largest echo is left in", share).
		proposing(func(c *condition.Settings) { c.Offset = "trace-ends" })}
}

// mirror is what the projections say of the conjugate signal b in s + b·s*: a shot of phase φ shows it in its other channel
// as Im(b·exp(-i2φ))·p(-x). Phase and time zero are fitted beside it.
type mirror struct {
	information *mat.SymDense // of (Re b, Im b), inverse of their covariance
	right       *mat.VecDense // information times the best (Re b, Im b)
	seen        float64       // b along the direction that the shots see best
	seenSE      float64
}

func (s *Subject) findMirror() mirror {
	if !s.V.Symmetric { // the other channel of half an echo holds more than a mirror image
		return mirror{mat.NewSymDense(2, nil), mat.NewVecDense(2, nil), 0, math.Inf(1)}
	}
	normal, right, sd := s.mirrorEquations()
	// The first two unknowns are eliminated, so that what is left is the information on the last two.
	for p := range 2 {
		pivot := normal.At(p, p) + math.SmallestNonzeroFloat64
		for a := p + 1; a < 4; a++ {
			f := normal.At(p, a) / pivot
			right.SetVec(a, right.AtVec(a)-f*right.AtVec(p))
			for c := a; c < 4; c++ {
				normal.SetSym(a, c, normal.At(a, c)-f*normal.At(p, c))
			}
		}
	}
	m := mirror{mat.NewSymDense(2, nil), mat.NewVecDense(2, nil), 0, math.Inf(1)}
	for a := range 2 {
		m.right.SetVec(a, right.AtVec(a+2)/(sd*sd))
		for c := a; c < 2; c++ {
			m.information.SetSym(a, c, normal.At(a+2, c+2)/(sd*sd))
		}
	}
	var eigen mat.EigenSym
	if eigen.Factorize(m.information, true) {
		var vectors mat.Dense
		eigen.VectorsTo(&vectors)
		most := math.Max(eigen.Values(nil)[1], math.SmallestNonzeroFloat64)
		m.seen = (vectors.At(0, 1)*m.right.AtVec(0) + vectors.At(1, 1)*m.right.AtVec(1)) / most
		m.seenSE = 1 / math.Sqrt(most)
	}
	return m
}

// mirrorEquations returns the normal equations of phase, time zero, Re b and Im b, and the SD of what they leave.
func (s *Subject) mirrorEquations() (*mat.SymDense, *mat.VecDense, float64) {
	normal, right := mat.NewSymDense(4, nil), mat.NewVecDense(4, nil)
	rss, count := 0.0, 0.0
	sound := s.sound()
	// The phase is taken from its drift: what it scatters beside that is noise, which must not pass for knowledge.
	middle, drift, _, _ := overOrder(pick(s.order, sound), pick(s.unwrapped(), sound))
	for _, i := range sound {
		sin, cos := math.Sincos(2 * (middle + drift*(s.order[i]-0.5)))
		n := len(s.profile[i])
		for x, p := range s.profile[i] {
			mirrored, y := s.profile[i][n-1-x], s.off[i][x]
			row := [4]float64{p, p * float64(x-s.V.Reach[i]) * s.V.StepMM[i], -sin * mirrored, cos * mirrored}
			for a := range row {
				right.SetVec(a, right.AtVec(a)+row[a]*y)
				for c := a; c < 4; c++ {
					normal.SetSym(a, c, normal.At(a, c)+row[a]*row[c])
				}
			}
			rss, count = rss+y*y, count+1
		}
	}
	return normal, right, math.Sqrt(rss/math.Max(1, count)) + math.SmallestNonzeroFloat64
}

// balance is the second channel against the first.
type balance struct {
	gain, skew     float64 // relative excess; rad
	gainSE, skewSE float64
}

// noiseBalance reads gain and skew from the noise of the residue.
func (s *Subject) noiseBalance() balance {
	n := float64(len(s.residue.i))
	if n < 2000 {
		return balance{gainSE: 1, skewSE: 1}
	}
	si, sq := s.residue.sdI, s.residue.sdQ
	// Cut at four SD, so that spikes do not count.
	var cross, pi, pq float64
	for k, x := range s.residue.i {
		a, b := x/si, s.residue.q[k]/sq
		if math.Abs(a) < 4 && math.Abs(b) < 4 {
			cross, pi, pq = cross+a*b, pi+a*a, pq+b*b
		}
	}
	ratio := sq / si * math.Sqrt(pq/pi)
	// Standard errors of Gaussian channels, a fifth added for what the filter correlates.
	return balance{ratio - 1, math.Asin(cross / math.Sqrt(pi*pq)), 1.2 / math.Sqrt(n), 1.2 / math.Sqrt(n)}
}

// combined joins the noise's balance with the mirror image b = (-gain + i·skew)/2, which knows one combination far better
// than the noise and the other not at all, unless the phase varies.
func (m mirror) combined(noise balance) balance {
	wg, wk := 1/(noise.gainSE*noise.gainSE), 1/(noise.skewSE*noise.skewSE)
	normal := mat.NewSymDense(2, []float64{wg + m.information.At(0, 0)/4, -m.information.At(0, 1) / 4, 0, wk + m.information.At(1, 1)/4})
	right := mat.NewVecDense(2, []float64{wg*noise.gain - m.right.AtVec(0)/2, wk*noise.skew + m.right.AtVec(1)/2})
	var chol mat.Cholesky
	if !chol.Factorize(normal) {
		return noise
	}
	var x mat.VecDense
	var inverse mat.SymDense
	_ = chol.SolveVecTo(&x, right)
	_ = chol.InverseTo(&inverse)
	return balance{x.AtVec(0), x.AtVec(1), math.Sqrt(inverse.At(0, 0)), math.Sqrt(inverse.At(1, 1))}
}

func quadrature(s *Subject) []Finding {
	m := s.findMirror()
	both := m.combined(s.noiseBalance())
	image := 100 * math.Hypot(both.gain, both.skew) / 2
	bad := math.Abs(m.seen) > math.Max(0.005, manySpreads*m.seenSE) ||
		math.Abs(both.gain) > math.Max(0.03, manySpreads*both.gainSE) || math.Abs(both.skew) > math.Max(0.035, manySpreads*both.skewSE)
	skewDeg := both.skew * 180 / math.Pi
	return []Finding{doubtIf(bad, image, "%", "second channel: gain %+.2g %% ± %.2g, angle %+.2g° ± %.2g; mirror image %.2g %%", 100*both.gain, 100*both.gainSE, skewDeg, both.skewSE*180/math.Pi, image).
		proposing(func(c *condition.Settings) {
			// The two corrections follow one another; small ones add up.
			c.QuadratureGain = (1+c.QuadratureGain)*(1+both.gain) - 1
			c.QuadratureSkewDeg += skewDeg
		})}
}

func baseline(s *Subject) []Finding {
	if shots := s.A.BaselineShots(); len(shots) > 0 {
		return []Finding{s.baselineOfShots(shots)}
	}
	return []Finding{s.baselineOfStart()}
}

func (s *Subject) baselineOfShots(shots []int) Finding {
	worst := 0.0
	for _, d := range s.V.Delays {
		power := 0.0
		for _, v := range condition.MeanTrace(s.A, d, shots) {
			power += cmplx.Abs(complex128(v)) * cmplx.Abs(complex128(v))
		}
		noise := 2 * s.C.NoiseSD[d] * s.C.NoiseSD[d] / float64(len(shots))
		worst = math.Max(worst, math.Sqrt(math.Max(0, power/float64(s.A.Samples)-noise*(1+manySpreads/math.Sqrt(float64(s.A.Samples))))))
	}
	share := 100 * worst / s.largestEcho()
	if s.S.Offset == "baseline-shots" {
		return found(Fine, share, "%", "a baseline of %.2g %% of the largest echo is subtracted", share)
	}
	return doubtIf(share > 0.5, share, "%", "off-resonance shots hold a baseline of %.2g %% of the largest echo", share).
		proposing(func(c *condition.Settings) { c.Offset = "baseline-shots" })
}

// baselineOfStart compares the first tenth of the mean trace with its mirror after the echo.
func (s *Subject) baselineOfStart() Finding {
	zero := s.A.TimeZeroSample + s.S.TimeShiftSamples
	tenth := s.A.Samples / 10
	if !s.V.Symmetric || 2*zero > float64(s.A.Samples-1)+2 || float64(tenth) > zero/2 {
		return found(Fine, 0, "%", "one half of the echo; the start of the traces has no mirror")
	}
	mean := s.meanTrace()
	excess, noise := 0.0, 0.0
	for j := range tenth {
		late := int(math.Round(2*zero)) - j
		if late >= s.A.Samples {
			continue
		}
		a, b := cmplx.Abs(mean[j]), cmplx.Abs(mean[late])
		excess += a*a - b*b
	}
	for _, d := range s.V.Delays {
		noise += 2 * s.C.NoiseSD[d] * s.C.NoiseSD[d]
	}
	count := float64(len(s.V.Delays))
	perSample := noise / (count * count * float64(len(s.V.Shots)))
	limit := perSample * manySpreads * math.Sqrt(2/float64(tenth))
	share := 100 * math.Sqrt(math.Max(0, excess/float64(tenth)-limit)) / s.largestEcho()
	return doubtIf(share > 0.5, share, "%", "the start of the traces holds %.2g %% of the largest echo more than its mirror", share)
}

// meanTrace returns the mean corrected trace of all kept shots and delays.
func (s *Subject) meanTrace() []complex128 {
	corrector := condition.NewCorrector(s.A, s.S, s.C, s.V.Delays)
	trace, mean := make([]complex64, s.A.Samples), make([]complex128, s.A.Samples)
	by := complex(1/float64(len(s.V.Shots)*len(s.V.Delays)), 0)
	for _, d := range s.V.Delays {
		for _, shot := range s.V.Shots {
			corrector.Load(trace, d, shot)
			for j, v := range trace {
				mean[j] += complex128(v) * by
			}
		}
	}
	return mean
}
