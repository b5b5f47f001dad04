package condition

import (
	"math"
	"math/cmplx"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/fft"
)

// Spokes are conditioned image shots: samples of k-space along unit vectors, at k = m·DeltaK, m = 0..Half.
//
// A sample is the Hermitian part of the phased signal, (s(k) + s*(-k))/2: the k-space of the real part of the image,
// which is where all of a well-phased signal lies. Where only one half of the echo was recorded it is s(k) itself.
type Spokes struct {
	Dim        int
	Directions [][3]float64 // [shot]
	Shot       []int        // [shot] index in the acquisition
	DeltaK     float64      // cycles/mm
	Half       int
	BandMM     float64 // diameter within which an object is represented; 1/DeltaK is twice that

	Delays  []int       // indices in the acquisition
	Samples []complex64 // [shot][m][delay]

	// NoiseDensity is, per delay, the variance of one channel of noise in k-space per unit of 1/k: a projection
	// Σ f(k) s(k) exp(i2πkx) dk over both halves has the noise variance NoiseDensity·∫f² dk in its real part.
	NoiseDensity []float64
	// OneSided is, per shot, the first m for which only one half of the echo was recorded; Half+1 if none. There the
	// variance counts twice.
	OneSided []int

	rawSD []float64    // [delay] SD of one channel of one raw sample
	from  []*Resampler // [shot] how samples came out of a trace; nil for projections
	gain  [][]float64  // [shot][m] by which the readout decay was undone; nil where it was not
}

// Geometry says which band and which part of k-space are needed.
type Geometry struct {
	BandMM float64 // at least the field of view and the object
	KCut   float64 // cycles/mm; samples beyond are not made
}

// Plan returns the geometry for an image of fieldOfViewMM from an object of extentMM: 15 % more than the larger of the
// two, within what the sampling allows.
func Plan(a *acquisition.Acquisition, c *Constants, fieldOfViewMM, kCut float64) Geometry {
	band := 1.15 * math.Max(fieldOfViewMM, c.ExtentMM)
	return Geometry{BandMM: math.Min(band, math.Max(a.AliasFreeMM(), fieldOfViewMM)), KCut: kCut}
}

// forProjections widens the band until 1/DeltaK is a number of samples, no fewer than a projection has, that transforms
// fast.
func (g Geometry) forProjections(a *acquisition.Acquisition) Geometry {
	period := max(a.Samples, int(math.Ceil(2*g.BandMM/a.PositionStepMM*(1-1e-9))))
	g.BandMM = float64(fft.FastLength(period)) * a.PositionStepMM / 2
	return g
}

// Bytes returns the memory that the samples of delays delays will take.
func (g Geometry) Bytes(a *acquisition.Acquisition, delays int) int64 {
	return int64(len(a.ImageShots())) * int64(g.half()+1) * int64(delays) * 8
}

func (g Geometry) half() int { return max(1, int(math.Floor(g.KCut*2*g.BandMM*(1+1e-9)))) }

// Condition returns the spokes of the given delays.
//
// Errors: those of Measure; bad-setting when the geometry asks for nothing.
func Condition(a *acquisition.Acquisition, s Settings, c *Constants, g Geometry, delays []int) (*Spokes, error) {
	if err := checkUsable(a, s); err != nil {
		return nil, err
	}
	if !(g.BandMM > 0) || !(g.KCut > 0) {
		return nil, fault.New(fault.BadSetting, "recipe reconstruction", "band %g mm and cutoff %g cycles/mm; both must be positive", g.BandMM, g.KCut)
	}
	if a.Domain == acquisition.Projection {
		g = g.forProjections(a)
	}
	sp := newSpokes(a, s, g, delays)
	rate, err := readoutRate(a, s)
	if err != nil {
		return nil, err
	}
	for i, shot := range sp.Shot {
		sp.gain[i] = readoutGains(a, s, rate, sp.DeltaK, sp.Half, shot)
	}
	for _, d := range delays {
		sp.NoiseDensity = append(sp.NoiseDensity, noiseDensity(a, c, sp.Shot, d))
		sp.rawSD = append(sp.rawSD, c.NoiseSD[d])
	}
	reader := newReader(a, s, c, sp)
	if a.Domain == acquisition.Projection {
		if err := reader.readyForProjections(a.TimeZeroSample + s.TimeShiftSamples); err != nil {
			return nil, err
		}
	}
	for i := range sp.Shot {
		if err := reader.fill(i); err != nil {
			return nil, err
		}
	}
	return sp, nil
}

func newSpokes(a *acquisition.Acquisition, s Settings, g Geometry, delays []int) *Spokes {
	sp := &Spokes{Dim: a.Dim, DeltaK: 1 / (2 * g.BandMM), Half: g.half(), BandMM: g.BandMM, Delays: delays, Shot: s.KeptShots(a)}
	sp.Samples = make([]complex64, len(sp.Shot)*(sp.Half+1)*len(delays))
	sp.OneSided = make([]int, len(sp.Shot))
	sp.from = make([]*Resampler, len(sp.Shot))
	sp.gain = make([][]float64, len(sp.Shot))
	sp.Directions = Directions(a, sp.Shot)
	return sp
}

// Directions returns the unit vectors of the gradients of some shots.
func Directions(a *acquisition.Acquisition, shots []int) [][3]float64 {
	out := make([][3]float64, len(shots))
	for i, s := range shots {
		n, strength := a.GradientMTPerM[s], a.Strength(s)
		out[i] = [3]float64{n[0] / strength, n[1] / strength, n[2] / strength}
	}
	return out
}

// noiseDensity follows from one raw sample standing for dk (or, of a projection, for its step in position). Shots of
// different gradient strength differ in it; the mean strength is used.
func noiseDensity(a *acquisition.Acquisition, c *Constants, shots []int, d int) float64 {
	v := c.NoiseSD[d] * c.NoiseSD[d]
	if a.Domain == acquisition.Projection {
		return v * a.PositionStepMM
	}
	sum := 0.0
	for _, s := range shots {
		sum += a.Strength(s)
	}
	return v * acquisition.KPerNS(sum/float64(len(shots)), a.DwellNS)
}

// Row returns the samples of one shot and m, over the delays, without copying.
func (sp *Spokes) Row(shot, m int) []complex64 {
	at := (shot*(sp.Half+1) + m) * len(sp.Delays)
	return sp.Samples[at : at+len(sp.Delays) : at+len(sp.Delays)]
}

// reader fills spokes from traces or projections. Shots of equal gradient strength and time zero share one resampler.
type reader struct {
	a          *acquisition.Acquisition
	sp         *Spokes
	corrector  *Corrector
	turn       complex128
	dead       int
	beta       float64
	resamplers map[resamplerKey]*Resampler
	work       []complex64

	// Of projections only:
	plan          *fft.Plan[complex128]
	line, scratch []complex128 // [position][delay]
	shift         []complex128 // [m] puts the origin at time zero
}

type resamplerKey struct{ strength, zero int64 }

func newReader(a *acquisition.Acquisition, s Settings, c *Constants, sp *Spokes) *reader {
	r := &reader{a: a, sp: sp, corrector: NewCorrector(a, s, c, sp.Delays), dead: s.DeadSamples, resamplers: map[resamplerKey]*Resampler{},
		turn: cmplx.Rect(1, -c.PhaseRad), work: make([]complex64, a.Samples)}
	// Above four fifths of the alias-free field the band is narrowed to the object, to leave the interpolation room.
	band := math.Min(sp.BandMM, math.Max(1.1*c.ExtentMM, 0.8*a.AliasFreeMM()))
	r.beta = math.Min(1, band/a.AliasFreeMM())
	return r
}

func (r *reader) fill(i int) error {
	if r.plan != nil {
		r.fillFromProjection(i)
		return nil
	}
	resampler, err := r.resampler(r.sp.Shot[i])
	if err != nil {
		return err
	}
	r.sp.OneSided[i], r.sp.from[i] = r.sp.Half+1, resampler
	for d := range r.sp.Delays {
		r.corrector.Load(r.work, r.sp.Delays[d], r.sp.Shot[i])
		for m := range r.sp.Half + 1 {
			value, sides := r.hermitian(resampler, m)
			if gain := r.sp.gain[i]; gain != nil {
				value *= complex(gain[m], 0)
			}
			r.sp.Row(i, m)[d] = complex64(value * r.turn)
			if sides == 1 {
				r.sp.OneSided[i] = min(r.sp.OneSided[i], m)
			}
		}
	}
	return nil
}

// hermitian returns the Hermitian part of the loaded trace at m before phasing, such that turning it by the phase gives
// the phased one, and how many halves of the echo it came from.
func (r *reader) hermitian(rs *Resampler, m int) (complex128, int) {
	plus, havePlus := rs.Apply(r.sp.Half+m, r.work)
	minus, haveMinus := rs.Apply(r.sp.Half-m, r.work)
	mirrored := cmplx.Conj(minus*r.turn) * cmplx.Conj(r.turn)
	switch {
	case havePlus && haveMinus:
		return (plus + mirrored) / 2, 2
	case havePlus:
		return plus, 1
	case haveMinus:
		return mirrored, 1
	}
	return 0, 0
}

// zeroSteps is into how many steps a sample is divided where every shot has its own time zero, so that shots can share
// resamplers: a 64th of a sample at most is far below what an echo's place can be told to.
const zeroSteps = 32

// resampler returns the resampler of a shot; strengths that agree to 1 in 10⁷ share one.
func (r *reader) resampler(shot int) (*Resampler, error) {
	strength, zero := r.a.Strength(shot), r.corrector.ZeroSample(shot)
	if r.corrector.c.ShotShiftSamples != nil {
		zero = math.Round(zero*zeroSteps) / zeroSteps
	}
	key := resamplerKey{int64(math.Round(math.Log(strength) * 1e7)), int64(math.Round(zero * zeroSteps))}
	if rs := r.resamplers[key]; rs != nil {
		return rs, nil
	}
	step := r.sp.DeltaK / acquisition.KPerNS(strength, r.a.DwellNS)
	at := make([]place, 0, 2*r.sp.Half+1)
	for m := -r.sp.Half; m <= r.sp.Half; m++ {
		at = append(at, zero+float64(m)*step)
	}
	first := firstUsable(r.dead, zero)
	rs, err := newResampler(r.a.Samples, first, r.beta, at)
	if err == nil && rs.weights[r.sp.Half] == nil {
		return nil, fault.New(fault.BadSetting, "recipe conditioning.deadSamples", "the first usable sample comes %.3g samples after k = 0; a field of view of %.3g mm lets %.3g be bridged; use fewer dead samples or a smaller field",
			float64(first)-zero, r.sp.BandMM, deepestHole(r.beta))
	}
	if err == nil {
		r.resamplers[key] = rs
	}
	return rs, err
}

// fillFromProjection transforms the projections of one shot at all delays:
//
//	S(k_m) = step Σ_j p_j exp(-i2π k_m (j - zero)·step),   k_m = m/(n·step) for n the length of the transform
func (r *reader) fillFromProjection(i int) {
	r.sp.OneSided[i] = r.sp.Half + 1
	delays := len(r.sp.Delays)
	clear(r.line)
	for d := range r.sp.Delays {
		r.corrector.Load(r.work, r.sp.Delays[d], r.sp.Shot[i])
		for j, v := range r.work {
			r.line[j*delays+d] = complex(float64(real(v)), 0)
		}
	}
	r.plan.Forward(r.line, r.scratch, delays)
	for m := range r.sp.Half + 1 {
		for d, v := range r.line[m*delays : (m+1)*delays] {
			r.sp.Row(i, m)[d] = complex64(v * r.shift[m])
		}
	}
}

// readyForProjections makes what fillFromProjection needs.
func (r *reader) readyForProjections(zero float64) error {
	n := int(math.Round(1 / (r.sp.DeltaK * r.a.PositionStepMM)))
	plan, err := fft.NewPlan[complex128](n)
	if err != nil {
		return err
	}
	r.plan = plan
	r.line, r.scratch = make([]complex128, n*len(r.sp.Delays)), make([]complex128, n*len(r.sp.Delays))
	for m := range r.sp.Half + 1 {
		r.shift = append(r.shift, cmplx.Rect(r.a.PositionStepMM, 2*math.Pi*float64(m)*zero/float64(n)))
	}
	return nil
}
