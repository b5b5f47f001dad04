package singlepoint

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// Plan is what the images need to know about the whole acquisition. It travels as JSON to whoever makes a part of them.
type Plan struct {
	Samples   []int     // sample times used, in the order given
	TimeUS    []float64 // [sample time] since k = 0
	PhaseRad  []float64 // [sample time] the signal is turned by minus this
	KCutPerMM []float64 // [sample time] where the window ends
	Weight    []float64 // [sample time] its part in the mean over sample times; sums to 1
	NoiseSD   float64   // of one channel of one raw sample

	FrameUS      []float64 // [frame] sample time, or delay
	FrameNoiseSD []float64 // [frame] predicted SD of a voxel
}

// Prepare returns the plan of images on grid g from the given samples, and warnings.
//
// Phase: at each sample time the mean over the shots nearest to k = 0, at the reference delay, is made real and positive.
// Nothing else is turned, so that signs along the delays stay. Zero-gradient shots serve where no image shot is nearer.
//
// Noise: unless given, the SD is read from the pairs of opposite gradients. A phased real object has s(-k) = s*(k), so
// s(k) - s*(-k) is noise of four times the power; its median, over the outer half of k-space and all sample times and
// delays used, resists what little object a phase that varies in space leaves. Without such pairs the fourth difference
// along the traces is used, which a trace oversampled in time leaves empty of object; it takes the noise as white in time.
//
// Predicted noise of a voxel: SD² = NoiseSD² Σ_s w_s². Over the delay axis the weights of the sample times are those of
// the least noise for a signal that falls as the signal at k = 0 does, and their noise is taken as independent.
//
// Errors: those of Settings.Check and Describe; bad-setting for samples that are none, twice the same or without an image,
// or a grid of another dimension; no-answer when the noise cannot be measured or there is no signal.
func Prepare(a *acquisition.Acquisition, s Settings, g volume.Grid, samples []int) (*Plan, []string, error) {
	if err := checkAsked(a, s, g); err != nil {
		return nil, nil, err
	}
	geo, err := newGeometry(a)
	if err != nil {
		return nil, nil, err
	}
	times, err := geo.usable(a, s, samples)
	if err != nil {
		return nil, nil, err
	}
	p := &Plan{Samples: slices.Clone(samples), NoiseSD: s.NoiseSD}
	for _, st := range times {
		p.TimeUS = append(p.TimeUS, st.TimeUS)
	}
	r := newReader(a, s)
	heights := make([]complex128, len(samples))
	for i, j := range samples {
		heights[i] = r.nearOrigin(a.ReferenceDelay(), j)
		p.PhaseRad = append(p.PhaseRad, 0)
		if s.Phase == "reference-delay" {
			p.PhaseRad[i] = cmplx.Phase(heights[i])
		}
	}
	if p.NoiseSD == 0 {
		if p.NoiseSD, err = geo.measureNoise(r, p); err != nil {
			return nil, nil, err
		}
	}
	p.KCutPerMM = cutoffs(times, s, g)
	p.predict(a, s, geo, heights)
	warnings := prepareWarnings(p, times, s, g, heights)
	if beside := r.besideOrigin(); s.Phase != "none" && beside > 1e-3*geo.cell {
		warnings = append(warnings, fmt.Sprintf("the shots nearest to k = 0 lie around a gradient of %.3g mT/m, so that an object off the gradient centre turns the phase they give; add a shot without gradient", beside))
	}
	return p, warnings, nil
}

func checkAsked(a *acquisition.Acquisition, s Settings, g volume.Grid) error {
	if err := s.Check(); err != nil {
		return err
	}
	if g.Dim() != a.Dim {
		return fault.New(fault.BadSetting, "grid", "a %dD grid for %dD data; both must have the same dimensions", g.Dim(), a.Dim)
	}
	if s.Offset == "baseline-shots" && len(a.BaselineShots()) == 0 {
		return fault.New(fault.BadSetting, "recipe conditioning.offset", "off-resonance shots asked for, but the file has none (shot_role 2); use none")
	}
	return nil
}

// usable returns the sample times asked for.
func (geo *geometry) usable(a *acquisition.Acquisition, s Settings, samples []int) ([]SampleTime, error) {
	var out []SampleTime
	seen := map[int]bool{}
	for _, j := range samples {
		if j < 0 || j >= a.Samples || seen[j] {
			return nil, fault.New(fault.BadSetting, "sample times", "sample %d is asked for twice or is not one of the %d recorded", j, a.Samples)
		}
		seen[j] = true
		st := geo.describe(a, s.TimeShiftSamples, j)
		if !st.Usable {
			return nil, fault.New(fault.BadSetting, "sample times", "sample %d lies at %.4g µs, where k is zero or the pulse has not come yet; choose later ones", j, st.TimeUS)
		}
		out = append(out, st)
	}
	if len(out) == 0 {
		return nil, fault.New(fault.BadSetting, "sample times", "none chosen; an image needs at least one")
	}
	return out, nil
}

// cutoffs returns where the window of each sample time ends. No frequencies are used that the voxels cannot show.
func cutoffs(times []SampleTime, s Settings, g volume.Grid) []float64 {
	common := math.Inf(1)
	for _, st := range times {
		common = math.Min(common, st.KMaxPerMM)
	}
	out := make([]float64, len(times))
	for i, st := range times {
		out[i] = st.KMaxPerMM
		if s.Resolution == "common" {
			out[i] = common
		}
		out[i] = s.Cutoff * math.Min(out[i], 1/(2*g.VoxelMM[0]))
	}
	return out
}

// predict fills in the weights of the sample times and the frames.
func (p *Plan) predict(a *acquisition.Acquisition, s Settings, geo *geometry, heights []complex128) {
	variance, sum := make([]float64, len(p.Samples)), 0.0
	for i := range p.Samples {
		for _, w := range geo.weights(p, s, i) {
			variance[i] += w * w * p.NoiseSD * p.NoiseSD
		}
		p.Weight = append(p.Weight, cmplx.Abs(heights[i])/variance[i])
		sum += p.Weight[i]
	}
	mean := 0.0
	for i, v := range variance {
		p.Weight[i] /= sum
		mean += p.Weight[i] * p.Weight[i] * v
	}
	if s.Axis == "delay" {
		p.FrameUS = slices.Clone(a.DelayUS)
		p.FrameNoiseSD = slices.Repeat([]float64{math.Sqrt(mean)}, a.Delays)
		return
	}
	p.FrameUS = slices.Clone(p.TimeUS)
	for _, v := range variance {
		p.FrameNoiseSD = append(p.FrameNoiseSD, math.Sqrt(v))
	}
}

// weights returns, per image shot, cell volume times window at the sample time i: cycles^dim/mm^dim.
func (geo *geometry) weights(p *Plan, s Settings, i int) []float64 {
	window, _ := sampling.WindowNamed(s.Window) // Settings.Check has found it
	perMT := math.Abs(acquisition.KPerNS(1, p.TimeUS[i]*1e3))
	scale := math.Pow(perMT, float64(geo.dim))
	out := make([]float64, len(geo.g))
	for shot, g := range geo.g {
		// The slack keeps the shots at the cutoff itself in spite of rounding.
		if u := perMT * length(g) / p.KCutPerMM[i]; u <= 1+1e-9 {
			out[shot] = scale * geo.share[shot] * window.Weight(math.Min(u, 1))
		}
	}
	return out
}

// faint is how many standard errors the signal at k = 0 must reach to carry a phase: its error is then 0.1 rad.
const faint = 10

func prepareWarnings(p *Plan, times []SampleTime, s Settings, g volume.Grid, heights []complex128) []string {
	var out []string
	folded, weak, narrowest := 0, 0, math.Inf(1)
	for i, st := range times {
		if 2*g.RadiusMM() > st.FieldOfViewMM*(1+1e-9) {
			folded++
		}
		narrowest = math.Min(narrowest, st.FieldOfViewMM)
		if !(cmplx.Abs(heights[i]) >= faint*p.NoiseSD) {
			weak++
		}
	}
	if folded > 0 {
		out = append(out, fmt.Sprintf("the field of view of the images, %.4g mm, is larger than what %d of %d sample times cover, down to %.4g mm; there the rim repeats the object",
			2*g.RadiusMM(), folded, len(times), narrowest))
	}
	if weak > 0 && s.Phase != "none" {
		out = append(out, fmt.Sprintf("the signal at k = 0 is too weak at %d of %d sample times to give a phase; choose earlier ones", weak, len(times)))
	}
	return out
}
