package singlepoint

import (
	"math"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// geometry is what all sample times share: the gradients of the image shots and the volume of gradient space that each
// stands for. At the sample time t everything in it scales with kPerMT(t).
type geometry struct {
	dim     int
	shots   []int        // indices in the acquisition
	g       [][3]float64 // [image shot] mT/m
	share   []float64    // [image shot] (mT/m)^dim
	lattice *lattice     // nil for an arbitrary list
	most    float64      // |G| that every direction reaches, mT/m
	cell    float64      // distance of neighbouring gradients, the widest of the axes, mT/m
	values  [3]int       // different gradients along each axis of a lattice
}

// newGeometry returns the geometry of an acquisition.
//
// Errors: unsupported for an encoding other than single-point; no-answer for gradients that span no area or volume.
func newGeometry(a *acquisition.Acquisition) (*geometry, error) {
	if a.Encoding != acquisition.SinglePoint || a.Domain != acquisition.Time {
		return nil, fault.New(fault.Unsupported, "encoding", "%s data in the %s domain; the single-point reconstruction reads single-point traces over time", a.Encoding, a.Domain)
	}
	geo := &geometry{dim: a.Dim, shots: a.ImageShots()}
	for _, s := range geo.shots {
		geo.g = append(geo.g, a.GradientMTPerM[s])
	}
	if geo.lattice = latticeOf(geo.g, a.Dim); geo.lattice != nil {
		geo.useLattice()
		return geo, nil
	}
	return geo, geo.useList()
}

func (geo *geometry) useLattice() {
	l := geo.lattice
	volume := 1.0
	geo.most = math.Inf(1)
	for axis, x := range l.axes[:geo.dim] {
		volume *= x.step
		geo.cell = math.Max(geo.cell, x.step)
		geo.most = math.Min(geo.most, x.step*float64(x.most)/2)
		geo.values[axis] = x.values
	}
	count := l.multiplicity()
	for _, q := range l.q {
		w := volume / float64(count[q])
		// The image is real, so that the mirror of a gradient that was not measured is known from the gradient itself.
		if count[[3]int{-q[0], -q[1], -q[2]}] == 0 {
			w *= 2
		}
		geo.share = append(geo.share, w)
	}
}

// useList finds what an arbitrary list covers: the largest ball in the hull of its gradients and their mirrors.
func (geo *geometry) useList() error {
	least, most := reach(geo.g, geo.dim)
	// The directions of reach see a plane from 1.5° above, as one fortieth as thick as it is wide.
	if !(least > 0.05*most) {
		return fault.New(fault.NoAnswer, "gradient_mT_per_m", "%d gradients lie on a line or in a plane; a %dD image needs gradients in all %d directions", len(geo.g), geo.dim, geo.dim)
	}
	geo.most = least
	p := placesOf(geo.g, geo.dim, most)
	geo.cell = least * math.Pow(unitBall(geo.dim)/float64(p.within(least)), 1/float64(geo.dim))
	geo.share = cellVolumes(p, least, geo.cell)
	return nil
}

// unitBall returns π or 4π/3.
func unitBall(dim int) float64 {
	if dim == 2 {
		return math.Pi
	}
	return 4 * math.Pi / 3
}

func length(g [3]float64) float64 { return math.Sqrt(g[0]*g[0] + g[1]*g[1] + g[2]*g[2]) }

// timeNS returns the time of a sample since k = 0.
func timeNS(a *acquisition.Acquisition, timeShiftSamples float64, j int) float64 {
	return (float64(j) - a.TimeZeroSample - timeShiftSamples) * a.DwellNS
}
