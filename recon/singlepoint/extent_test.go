package singlepoint

import (
	"math"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/phantom"
)

// The extent is found to within a resolution element of the sample time that covers it, with and without noise and dead
// time.
func TestExtentHoldsTheObjectAndLittleMore(t *testing.T) {
	for _, dim := range []int{2, 3} {
		for name, list := range sets(dim) {
			// with a dead time and noise, and with the pulse among the samples
			for zero, noise := range map[float64]float64{-15: 1, 1: 0} {
				object := phantom.Sum(dim, ball(dim, [3]float64{1.5, -1, 0}, 3, 2, 0.3))
				a := measured(t, object, phantom.SinglePointProtocol{Sequence: acquisition.FreeDecay, GradientMTPerM: list, DwellNS: 40, Samples: 30,
					TimeZeroSample: zero, PhaseRad: 3, NoiseSD: noise, Seed: 4})
				got, err := Extent(a, Defaults())
				want := 2 * (math.Hypot(1.5, 1) + 3)
				// Up to two elements of the image in 1.3 times the extent, 0.2 of it with 13 gradients.
				if err != nil || !(got >= want-0.8 && got <= want*1.35) {
					t.Errorf("%dD %s, time zero %g, noise %g: %.2f mm, want %.2f, %v", dim, name, zero, noise, got, want, err)
				}
			}
		}
	}
}

func TestSuggestedTimesCoverTheObject(t *testing.T) {
	a := measured(t, phantom.Sum(2), phantom.SinglePointProtocol{GradientMTPerM: phantom.CubeGradients(2, 19, 25), DwellNS: 20, Samples: 90, TimeZeroSample: -10})
	c := described(t, a)
	first, last, err := c.Suggest(12)
	if err != nil {
		t.Fatal(err)
	}
	samples, err := c.Pick(first, last, 8)
	if err != nil || len(samples) != 8 {
		t.Fatal(samples, err)
	}
	least := c.SmallestFieldOfViewMM(samples)
	// One sample more, 1.7 % of the time, would leave less than 13.2 mm.
	if !(least >= 13.2 && least <= 13.2*1.02) || !(first >= last/2 && first <= last/2+0.02) {
		t.Errorf("%.3f to %.3f µs for 12 mm, smallest field of view %.3f mm", first, last, least)
	}
	if first, last, err = c.Suggest(1e3); err != nil || first != last || first != c.Times[0].TimeUS {
		t.Errorf("for an object that nothing covers: %g to %g µs, %v", first, last, err)
	}
}
