package singlepoint

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/phantom"
)

// measured returns the single-point acquisition of a phantom, failing the test on a fault.
func measured(t testing.TB, p *phantom.Phantom, pr phantom.SinglePointProtocol) *acquisition.Acquisition {
	t.Helper()
	if pr.Sequence == "" {
		pr.Sequence = acquisition.FreeDecay
	}
	if pr.DelayUS == nil {
		pr.DelayUS = []float64{0}
	}
	a, err := p.AcquireSinglePoint(pr)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func described(t testing.TB, a *acquisition.Acquisition) *Coverage {
	t.Helper()
	c, err := Describe(a, 0)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func TestFieldsOfViewAgainstTheWorkedTable(t *testing.T) {
	file, err := os.Open("testdata/spi_fov.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	reader := csv.NewReader(file)
	reader.Comment = '#'
	rows, err := reader.ReadAll()
	if err != nil || len(rows) < 6 {
		t.Fatalf("%d rows, %v", len(rows), err)
	}
	for _, row := range rows[1:] {
		var v [5]float64
		for i := range v {
			if v[i], err = strconv.ParseFloat(row[i], 64); err != nil {
				t.Fatal(err)
			}
		}
		n := int(v[1])
		for _, dim := range []int{2, 3} {
			for _, set := range [][][3]float64{phantom.CubeGradients(dim, n, v[0]), phantom.BallGradients(dim, n, v[0])} {
				a := measured(t, phantom.Sum(dim), phantom.SinglePointProtocol{GradientMTPerM: set, DwellNS: 100, Samples: 9, TimeZeroSample: -v[2]*10 + 4})
				c := described(t, a)
				st := c.Times[4]
				// printed to 8 significant digits
				if !c.Cartesian || !near(st.FieldOfViewMM, v[3], 1e-7) || !near(st.ResolutionMM, v[4], 1e-7) || !near(st.TimeUS, v[2], 1e-12) {
					t.Errorf("%dD %v with %d gradients: %+v", dim, row, len(set), st)
				}
				if c.Values[0] != n || c.Values[dim-1] != n || !near(c.StepMTPerM[0], 2*v[0]/float64(n-1), 1e-12) {
					t.Errorf("%dD %v: %d values of step %g", dim, row, c.Values, c.StepMTPerM)
				}
				if !near(st.KMaxPerMM, 28.0249513861e-3*v[0]*v[2], 1e-12) {
					t.Errorf("%dD %v: k_max %g", dim, row, st.KMaxPerMM)
				}
			}
		}
	}
}

func near(got, want, relative float64) bool { return math.Abs(got-want) <= relative*math.Abs(want) }

func TestFieldOfViewShrinksAsOneOverTimeAndCoversUntilItIsTooSmall(t *testing.T) {
	a := measured(t, phantom.Sum(2), phantom.SinglePointProtocol{GradientMTPerM: phantom.CubeGradients(2, 11, 20), DwellNS: 50, Samples: 60, TimeZeroSample: 5})
	c := described(t, a)
	if c.Times[5].Usable || c.Times[0].Usable || !c.Times[6].Usable {
		t.Errorf("before, at and after the pulse: %+v %+v %+v", c.Times[0], c.Times[5], c.Times[6])
	}
	for j := 7; j < 60; j++ {
		if !near(c.Times[j].FieldOfViewMM*float64(j-5), c.Times[6].FieldOfViewMM, 1e-12) {
			t.Errorf("sample %d: field of view %g", j, c.Times[j].FieldOfViewMM)
		}
	}
	covering := c.Covering(12)
	last := covering[len(covering)-1]
	// 1/(28.025e-3·4·t) >= 12 mm up to t = 0.7434 µs, that is 14.9 samples after the pulse.
	if covering[0] != 6 || last != 5+14 || c.Times[last].FieldOfViewMM < 12 || c.Times[last+1].FieldOfViewMM >= 12 {
		t.Errorf("12 mm are covered by samples %v", covering)
	}
	if got := c.SmallestFieldOfViewMM(covering); got != c.Times[last].FieldOfViewMM {
		t.Errorf("smallest field of view %g", got)
	}
	picked, err := c.Pick(0.5, 0.7, 3)
	if err != nil || len(picked) != 3 || picked[0] != 15 || picked[1] != 17 || picked[2] != 19 {
		t.Errorf("three of 0.5 to 0.7 µs: %v, %v", picked, err)
	}
	if _, err := c.Pick(9, 10, 3); err == nil {
		t.Error("times that were not recorded were picked")
	}
}

func TestLatticesAreToldFromLists(t *testing.T) {
	cube := phantom.CubeGradients(3, 7, 12)
	jitter := func(size float64) [][3]float64 {
		out := append([][3]float64{}, cube...)
		for s := range out {
			out[s][s%3] += size * 4 * math.Sin(float64(s)) // in steps of 4 mT/m
		}
		return out
	}
	turned := make([][3]float64, len(cube))
	for s, g := range cube {
		turned[s] = [3]float64{0.8*g[0] - 0.6*g[1], 0.6*g[0] + 0.8*g[1], g[2]}
	}
	var shifted, asymmetric, decimals [][3]float64
	for _, g := range cube {
		shifted = append(shifted, [3]float64{g[0] + 0.3, g[1], g[2]})
	}
	for _, g := range phantom.CubeGradients(3, 8, 14) { // -14..14 in steps of 4, moved to -16..12
		asymmetric = append(asymmetric, [3]float64{g[0] - 2, g[1] - 2, g[2] - 2})
	}
	for i, n := range phantom.GoldenHalfSphere(300) {
		r := 20 * math.Cbrt((float64(i*7%300)+0.5)/300)
		decimals = append(decimals, [3]float64{math.Round(1e3*r*n[0]) / 1e3, math.Round(1e3*r*n[1]) / 1e3, math.Round(1e3*r*n[2]) / 1e3})
	}
	for _, c := range []struct {
		name string
		g    [][3]float64
		want bool
	}{
		{"cube", cube, true}, {"cube measured twice", append(append([][3]float64{}, cube...), cube...), true},
		{"jitter of a thousandth", jitter(0.001), true}, {"jitter of a hundredth", jitter(0.01), false},
		{"half of the cube", cube[:7*7*4], true}, {"asymmetric", asymmetric, true}, {"a third of the cube, scattered", cube[:120], true},
		{"turned", turned, false}, {"beside the origin by a fraction", shifted, false}, {"list with three decimals", decimals, false},
	} {
		if got := latticeOf(c.g, 3) != nil; got != c.want {
			t.Errorf("%s: lattice %v, want %v", c.name, got, c.want)
		}
	}
}

func TestGradientsThatSpanNoImageAreRefused(t *testing.T) {
	flat := phantom.CubeGradients(2, 7, 10) // a plane in 3D
	flat[0][2] = 0
	a := measured(t, phantom.Sum(3), phantom.SinglePointProtocol{GradientMTPerM: flat, DwellNS: 50, Samples: 4})
	if _, err := Describe(a, 0); err == nil {
		t.Error("gradients in a plane gave a 3D image")
	}
	spokes, err := phantom.DemoAcquisition(false)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Describe(spokes, 0); err == nil {
		t.Error("spokes were taken for single-point data")
	}
}
