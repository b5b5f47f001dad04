package singlepoint

import (
	"math"
	"math/cmplx"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// Result holds some frames.
type Result struct {
	Values  []float32 // [frame][voxel], NaN outside the circle or sphere of the field of view
	FrameUS []float64 // [frame] sample time, or delay
	NoiseSD []float64 // [frame] predicted SD of a voxel
}

// Images returns some frames of a plan: indices into Plan.FrameUS. Settings and grid are those given to Prepare.
// Progress, if not nil, is told the fraction done.
//
// Exact to rounding for a Cartesian set. An arbitrary list goes through Kaiser-Bessel gridding, which adds errors of 1e-4
// of the image to those of its density weights.
//
// Errors: bad-setting for frames that the plan does not have; those of Describe.
func Images(a *acquisition.Acquisition, s Settings, p *Plan, g volume.Grid, frames []int, progress func(float64)) (*Result, error) {
	if err := checkAsked(a, s, g); err != nil {
		return nil, err
	}
	geo, err := newGeometry(a)
	if err != nil {
		return nil, err
	}
	out := &Result{Values: blank(g, len(frames))}
	for _, f := range frames {
		if f < 0 || f >= len(p.FrameUS) {
			return nil, fault.New(fault.BadSetting, "frames", "frame %d asked for; the plan has 0 to %d", f, len(p.FrameUS)-1)
		}
		out.FrameUS = append(out.FrameUS, p.FrameUS[f])
		out.NoiseSD = append(out.NoiseSD, p.FrameNoiseSD[f])
	}
	jobs := jobsOf(a, s, p, frames)
	r := newReader(a, s)
	sum, err := newSummer(geo, g)
	if err != nil {
		return nil, err
	}
	samples := make([]complex128, len(geo.shots))
	for n, job := range jobs {
		job.load(samples, r, geo, s, p)
		if err := sum.add(out.Values[job.slot*g.Voxels():(job.slot+1)*g.Voxels()], samples, p.TimeUS[job.time]); err != nil {
			return nil, err
		}
		if progress != nil {
			progress(float64(n+1) / float64(len(jobs)))
		}
	}
	return out, nil
}

// blank returns images that are 0 in the field of view and NaN outside.
func blank(g volume.Grid, frames int) []float32 {
	out := make([]float32, frames*g.Voxels())
	if frames == 0 {
		return out
	}
	first, nan := out[:g.Voxels()], float32(math.NaN())
	for i := range first {
		if !g.InsideFieldOfView(i%g.N[0], i/g.N[0]%g.N[1], i/(g.N[0]*g.N[1])) {
			first[i] = nan
		}
	}
	for f := 1; f < frames; f++ {
		copy(out[f*g.Voxels():], first)
	}
	return out
}

// job is one k-space grid to be added to one frame.
type job struct {
	time, delay, slot int
	weight            float64
}

// jobsOf lists the jobs sample time by sample time, so that what depends on it is made once.
func jobsOf(a *acquisition.Acquisition, s Settings, p *Plan, frames []int) (jobs []job) {
	if s.Axis != "delay" {
		for slot, f := range frames {
			jobs = append(jobs, job{f, a.ReferenceDelay(), slot, 1})
		}
		return jobs
	}
	for i := range p.Samples {
		for slot, f := range frames {
			jobs = append(jobs, job{i, f, slot, p.Weight[i]})
		}
	}
	return jobs
}

// load fills samples, [image shot], with phased signal times cell volume, window and the job's weight.
func (j job) load(samples []complex128, r *reader, geo *geometry, s Settings, p *Plan) {
	turn := cmplx.Rect(j.weight, -p.PhaseRad[j.time])
	for i, w := range geo.weights(p, s, j.time) {
		samples[i] = r.at(j.delay, geo.shots[i], p.Samples[j.time]) * turn * complex(w, 0)
	}
}

// summer adds Re Σ samples exp(i2π k·r) at a sample time to an image.
type summer interface {
	add(image []float32, samples []complex128, timeUS float64) error
}

func newSummer(geo *geometry, g volume.Grid) (summer, error) {
	if geo.lattice != nil {
		return newLatticeSum(geo, g), nil
	}
	return newListSum(geo, g)
}
