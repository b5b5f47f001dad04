package session

import (
	"math"
	"slices"
	"testing"

	"torrloom/recon/phantom"
)

// insertErrors returns, for the inner half-radius of a demo insert, the median pO2 and every voxel's error over its
// standard error.
func insertErrors(r *Result, in phantom.DemoInsert) (median float64, scaled []float64) {
	var values []float64
	for iz := range r.Grid.N[2] {
		for iy := range r.Grid.N[1] {
			for ix := range r.Grid.N[0] {
				x, y, z := r.Grid.MM(0, ix)-in.CentreMM[0], r.Grid.MM(1, iy)-in.CentreMM[1], r.Grid.MM(2, iz)-in.CentreMM[2]
				if math.Sqrt(x*x+y*y+z*z) > in.RadiusMM/2 {
					continue
				}
				i := r.Grid.Index(ix, iy, iz)
				p := float64(r.Derived.PO2[i])
				values = append(values, p)
				scaled = append(scaled, (p-in.PO2Torr)/float64(r.Derived.PO2SE[i]))
			}
		}
	}
	slices.Sort(values)
	return quantile(values, 0.5), scaled
}

func runDemo(t testing.TB, noise bool) *Result {
	t.Helper()
	a, err := phantom.DemoAcquisition(noise)
	if err != nil {
		t.Fatal(err)
	}
	r, err := Run(a, "demo", nil, 2)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func TestNoiselessDemoGivesTheTruthWithinOneTorr(t *testing.T) {
	r := runDemo(t, false)
	for _, in := range phantom.DemoInserts {
		median, values := insertErrors(r, in)
		t.Logf("%s: %d voxels, median %.2f torr, truth %g", in.Name, len(values), median, in.PO2Torr)
		if !(math.Abs(median-in.PO2Torr) <= 1) || len(values) < 30 { // the agreed 1 torr
			t.Errorf("%s: median %.2f torr over %d voxels, truth %g", in.Name, median, len(values), in.PO2Torr)
		}
	}
}

func TestNoisyDemoGivesTheTruthWithinTwoTorrAndTrueErrors(t *testing.T) {
	r := runDemo(t, true)
	within, n := 0, 0
	for _, in := range phantom.DemoInserts {
		median, scaled := insertErrors(r, in)
		own := 0
		for _, z := range scaled {
			if math.Abs(z) <= 1 {
				own++
			}
		}
		t.Logf("%s: median %.2f torr, truth %g, %d of %d voxels within one SE", in.Name, median, in.PO2Torr, own, len(scaled))
		if !(math.Abs(median-in.PO2Torr) <= 2) { // the agreed 2 torr
			t.Errorf("%s: median %.2f torr, truth %g", in.Name, median, in.PO2Torr)
		}
		within, n = within+own, n+len(scaled)
	}
	if share := 100 * float64(within) / float64(n); !(share >= 62 && share <= 74) { // the agreed 68 ± 6 %
		t.Errorf("%.1f %% of %d voxels lie within one standard error", share, n)
	}
}
