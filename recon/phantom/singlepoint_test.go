package phantom

import (
	"math"
	"math/cmplx"
	"testing"

	"torrloom/recon/acquisition"
)

// A single sphere has its k-space, its decay and its phase in closed form, here written out a second time.
func TestSinglePointSignalIsTheClosedForm(t *testing.T) {
	const radius, r2, broad, offset, phase = 4.0, 0.3, 0.2, 0.7, 0.5
	ball := Sum(3, Body{Shape: ellipsoid(radius, radius, radius, 1, -2, 0.5, 0), Density: 1.7, R1PerUS: 0.4, R2PerUS: r2})
	pr := SinglePointProtocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{1, 9}, Inversion: 1.9,
		GradientMTPerM: CubeGradients(3, 4, 15), DwellNS: 25, Samples: 30, TimeZeroSample: -18.5,
		BroadeningPerUS: broad, FrequencyOffsetMHz: offset, PhaseRad: phase}
	a, err := ball.AcquireSinglePoint(pr)
	if err != nil {
		t.Fatal(err)
	}
	for d, delay := range pr.DelayUS {
		for s, g := range a.GradientMTPerM {
			for j := range a.Samples {
				us := (float64(j) + 18.5) * 0.025
				k := 28.0249513861e-3 * us // cycles/mm per mT/m
				q := 2 * math.Pi * k * radius * math.Sqrt(g[0]*g[0]+g[1]*g[1]+g[2]*g[2])
				want := 1.7 * 4 * math.Pi * math.Pow(radius, 3) * (math.Sin(q) - q*math.Cos(q)) / (q * q * q) *
					(1 - 1.9*math.Exp(-0.4*delay)) * math.Exp(-(r2+broad)*us)
				turn := phase + 2*math.Pi*(offset*us-k*(g[0]-2*g[1]+0.5*g[2]))
				// float32 of a signal of up to 460, in two channels
				if got := complex128(a.Trace(d, s)[j]); !(cmplx.Abs(got-cmplx.Rect(want, turn)) <= 6e-5) {
					t.Fatalf("delay %d shot %d sample %d: %v, want %v", d, s, j, got, cmplx.Rect(want, turn))
				}
			}
		}
	}
}

func TestSinglePointFreeDecayStartsAtThePulse(t *testing.T) {
	disc := Sum(2, Body{Shape: ellipse(3, 3, 0, 0, 0), Density: 1, R2PerUS: 0.5})
	a, err := disc.AcquireSinglePoint(SinglePointProtocol{Sequence: acquisition.FreeDecay, DelayUS: []float64{0},
		GradientMTPerM: CubeGradients(2, 3, 10), DwellNS: 100, Samples: 8, TimeZeroSample: 2.5})
	if err != nil {
		t.Fatal(err)
	}
	for j, v := range a.Trace(0, 4) { // the shot without gradient
		want := 0.0
		if j > 2 {
			want = 9 * math.Pi * math.Exp(-0.5*(float64(j)-2.5)*0.1)
		}
		if !(cmplx.Abs(complex128(v)-complex(want, 0)) <= 3e-6) { // float32 of 28
			t.Errorf("sample %d: %v, want %g", j, v, want)
		}
	}
}

func TestGradientSetsHaveTheirCountAndReach(t *testing.T) {
	for _, c := range []struct{ dim, n, cube, ball int }{{2, 5, 25, 13}, {2, 4, 16, 4}, {3, 3, 27, 7}, {3, 5, 125, 33}} {
		// Counted by hand: lattice points within the radius of the outermost point on an axis; for n = 4 the four inner ones
		// and, as (±3,±1)/3 lies outside the circle, no more.
		if got := len(CubeGradients(c.dim, c.n, 20)); got != c.cube {
			t.Errorf("%dD cube of %d: %d gradients, want %d", c.dim, c.n, got, c.cube)
		}
		if got := len(BallGradients(c.dim, c.n, 20)); got != c.ball {
			t.Errorf("%dD ball of %d: %d gradients, want %d", c.dim, c.n, got, c.ball)
		}
	}
	g := CubeGradients(3, 19, 30)
	first, last := [3]float64{-30, -30, -30}, [3]float64{30, 30, 30}
	if g[0] != first || g[len(g)-1] != last || !(math.Abs(g[1][0]-g[0][0]-60./18) <= 1e-13) {
		t.Errorf("cube of 19 runs from %v over %v to %v", g[0], g[1], g[len(g)-1])
	}
}
