package relax

import (
	"math"
	"slices"

	"torrloom/recon/fault"
)

// Fitter fits one model at one set of delays. It is safe for use by several goroutines at once.
type Fitter struct {
	model      Model
	delayUS    []float64
	rootWeight []float64 // 1/noiseSD
	offset     []float64 // unit vector along the whitened constant; nil for a model without an offset
	offsetUnit float64   // constant in image units per unit length along offset

	lnMin, lnMax float64 // rate range
	lnStep       float64 // distance of neighbouring nodes
	table        table
}

// NewFitter returns a fitter for images at the given delays. noiseSD is the standard deviation of the noise of each
// image; a caller that does not know it passes ones and scales the standard errors by ResidualScale. The order of the
// delays is free, and a delay may occur twice.
//
// Units: delays in µs, noise in the unit of the images.
// Errors: no-answer when there are fewer different delays than unknowns or they cannot tell rates apart; bad-setting
// when a noise figure is not positive, a delay is negative, or the rate range is empty or outside what the delays see.
func NewFitter(m Model, delayUS, noiseSD []float64, s Settings) (*Fitter, error) {
	if err := checkDelays(m, delayUS); err != nil {
		return nil, err
	}
	if err := checkNoise(delayUS, noiseSD); err != nil {
		return nil, err
	}
	f := &Fitter{model: m, delayUS: slices.Clone(delayUS), rootWeight: make([]float64, len(delayUS))}
	for d, sd := range noiseSD {
		f.rootWeight[d] = 1 / sd
	}
	if m.Curve.Offset() {
		f.offsetUnit = 1 / math.Sqrt(dot(f.rootWeight, f.rootWeight))
		f.offset = slices.Clone(f.rootWeight)
		scale(f.offset, f.offsetUnit)
	}
	if err := f.setRange(s); err != nil {
		return nil, err
	}
	if err := f.tabulate(); err != nil {
		return nil, err
	}
	return f, nil
}

func checkDelays(m Model, delayUS []float64) error {
	for d, t := range delayUS {
		if !(t >= 0) || math.IsInf(t, 0) {
			return fault.New(fault.BadSetting, "delay_us", "%g µs at delay %d; delays are finite and not negative", t, d)
		}
	}
	sorted := slices.Clone(delayUS)
	slices.Sort(sorted)
	if n := len(slices.Compact(sorted)); n < m.Parameters() {
		return fault.New(fault.NoAnswer, "delay_us", "%d different delays; %s has %d unknowns and needs at least as many", n, m.Label, m.Parameters())
	}
	return nil
}

func checkNoise(delayUS, noiseSD []float64) error {
	if len(noiseSD) != len(delayUS) {
		return fault.New(fault.Bug, "noise", "%d noise figures for %d delays; one per delay is needed", len(noiseSD), len(delayUS))
	}
	for d, sd := range noiseSD {
		if !(sd > 0) || math.IsInf(sd, 0) {
			return fault.New(fault.BadSetting, "noise", "%g at delay %d; a positive standard deviation is needed, or ones when it is not known", sd, d)
		}
	}
	return nil
}

// Range returns the slowest and the fastest rate that can be an answer, in 1/µs.
func (f *Fitter) Range() (minPerUS, maxPerUS float64) { return math.Exp(f.lnMin), math.Exp(f.lnMax) }

// ResidualScale returns √(χ²/(n-p)) for n delays and p unknowns. Standard errors times this are scaled by the
// residuals instead of by the noise given to NewFitter. It is NaN for n = p, where no residual is left to judge by.
func (f *Fitter) ResidualScale(chiSquare float64) float64 {
	free := len(f.delayUS) - f.model.Parameters()
	if free < 1 {
		return math.NaN()
	}
	return math.Sqrt(chiSquare / float64(free))
}

// Fit returns the fit of one voxel: the best seed of the table, refined as by FitFrom. y has one value per delay.
//
// Seeds lie about 0.6 apart in ln R, closer than two minima of a sum of squares over exponentials. Voxels with little
// but noise are the exception: about one in ten thousand has a second minimum whose χ² is lower by less than 0.1.
func (f *Fitter) Fit(y []float64) Answer {
	data, status := f.whiten(y)
	if status != Answered {
		return unanswered(status)
	}
	return f.climb(data, f.nodeX(f.bestNode(data.z)))
}

// FitFrom returns the fit reached uphill from a start rate (in 1/µs), which is the local best nearest to it in that
// direction. A start outside the range is moved to its nearer end.
func (f *Fitter) FitFrom(y []float64, startRate float64) Answer {
	data, status := f.whiten(y)
	if status != Answered {
		return unanswered(status)
	}
	x := math.Log(startRate)
	if !(x >= f.lnMin) {
		x = f.lnMin
	}
	return f.climb(data, math.Min(x, f.lnMax))
}

// whitened is a voxel divided by the noise. Its part along the constant is taken out of z, because a small recovery on
// a large constant would lose its digits to it.
type whitened struct {
	z        []float64
	onOffset float64
	energy   float64 // of the whole
}

// flat is the part of the signal, as a fraction of its energy, below which a change along the delays is rounding.
// Float64 sums of some hundred delays lose 1e-14 in length, 1e-28 in energy.
const flat = 1e-24

// whiten returns the data to fit, and NoSignal when there are none.
func (f *Fitter) whiten(y []float64) (whitened, Status) {
	z := make([]float64, len(f.delayUS))
	for d := range z {
		z[d] = y[d] * f.rootWeight[d]
	}
	energy := dot(z, z)
	if !hasSignal(energy) {
		return whitened{}, NoSignal
	}
	return whitened{z: z, onOffset: f.takeOffset(z), energy: energy}, Answered
}

func hasSignal(energy float64) bool { return energy > 0 && !math.IsInf(energy, 1) }

// nodeX returns ln R of node k. The last one may not exceed the range by rounding.
func (f *Fitter) nodeX(k int) float64 { return math.Min(f.lnMin+float64(k)*f.lnStep, f.lnMax) }

// bestNode returns the seed with the greatest f².
func (f *Fitter) bestNode(z []float64) int {
	fr, best, most := newFrame(len(z)), 0, -1.0
	for k := 0; k < f.table.nodes; k += 2 {
		f.frameAt(f.nodeX(k), fr)
		if along := dot(fr.u, z); along*along > most {
			best, most = k, along*along
		}
	}
	return best
}

// climb walks uphill from x until the best fit is bracketed, then closes in on it.
func (f *Fitter) climb(data whitened, x float64) Answer {
	fr := newFrame(len(data.z))
	lo, hi, status := f.bracket(data.z, x, fr)
	if status == Answered {
		x = f.closeIn(data.z, lo, hi, fr)
	}
	f.frameAt(x, fr)
	if along := dot(fr.u, data.z); !(along*along > flat*data.energy) {
		return unanswered(NoSignal)
	}
	if status != Answered {
		return unanswered(status)
	}
	return f.answerAt(data, x, fr)
}

// uphill returns half the derivative of f² with respect to ln R at the frame.
func uphill(z []float64, fr *frame) float64 { return dot(fr.u, z) * dot(fr.du, z) }

// bracket returns lo < hi with the sum of squares falling at lo and rising at hi, or the status of a best fit at an end
// of the range.
func (f *Fitter) bracket(z []float64, x float64, fr *frame) (lo, hi float64, status Status) {
	f.frameAt(x, fr)
	rising := uphill(z, fr) > 0
	for {
		next := math.Max(x-f.lnStep, f.lnMin)
		if rising {
			next = math.Min(x+f.lnStep, f.lnMax)
		}
		if next == x && rising {
			return 0, 0, AboveRange
		}
		if next == x {
			return 0, 0, BelowRange
		}
		f.frameAt(next, fr)
		if (uphill(z, fr) > 0) != rising {
			return math.Min(x, next), math.Max(x, next), Answered
		}
		x = next
	}
}

// closest is the distance in ln R, so relative in R, at which closeIn stops. Newton's method has then converged far
// below it; a smaller figure would chase rounding.
const closest = 1e-12

// closeIn returns the root of f' in a bracket by Newton's method, halving the bracket whenever a step would leave it.
func (f *Fitter) closeIn(z []float64, lo, hi float64, fr *frame) float64 {
	x := (lo + hi) / 2
	for range 100 { // halving alone needs 40
		f.frameAt(x, fr)
		slope := dot(fr.du, z)
		if slope*dot(fr.u, z) > 0 {
			lo = x
		} else {
			hi = x
		}
		next := x - slope/dot(fr.d2u, z)
		if !(next >= lo && next <= hi) {
			next = (lo + hi) / 2
		}
		moved := math.Abs(next - x)
		x = next
		if moved <= closest {
			break
		}
	}
	return x
}

// answerAt reads the answer off the frame at the best x.
func (f *Fitter) answerAt(data whitened, x float64, fr *frame) Answer {
	along := dot(fr.u, data.z)
	a := Answer{Rate: math.Exp(x), Inverted: math.NaN(), Status: Answered}
	a.Amplitude = data.onOffset*f.offsetUnit + along*fr.perF
	if !(along > 0 && a.Amplitude > 0) {
		return unanswered(WrongSign)
	}
	if f.offset != nil {
		a.Inverted = along / fr.norm
	}
	a.RateSE = a.Rate / (along * fr.sensitivity)
	a.AmplitudeSE = fr.amplitudeSE
	for d, z := range data.z {
		left := z - along*fr.u[d]
		a.ChiSquare += left * left
	}
	return a
}
