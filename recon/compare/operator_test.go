package compare

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/stat"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/volume"
)

// noiseImages returns images of noise alone, one realisation after the other, through the whole chain.
func noiseImages(t *testing.T, c chain, dim, spokes, runs int) (volume.Grid, [][]float32) {
	t.Helper()
	g := c.grid(t, dim)
	var out [][]float32
	for seed := range (runs + 1) / 2 {
		images := c.images(t, shots(t, dim, spokes, 1, uint64(seed)), PointSettings(condition.Defaults()), noObject)
		out = append(out, images[:g.Voxels()], images[g.Voxels():])
	}
	return g, out
}

// lagged gathers values of voxels and of their neighbours at a step.
func lagged(g volume.Grid, images [][]float32, step [3]int) (x, y []float64) {
	for _, image := range images {
		for iz := range g.N[2] {
			for iy := range g.N[1] {
				for ix := range g.N[0] {
					jx, jy, jz := ix+step[0], iy+step[1], iz+step[2]
					if jx >= g.N[0] || jy >= g.N[1] || jz >= g.N[2] {
						continue
					}
					a, b := image[g.Index(ix, iy, iz)], image[g.Index(jx, jy, jz)]
					if a == a && b == b {
						x, y = append(x, float64(a)), append(y, float64(b))
					}
				}
			}
		}
	}
	return x, y
}

func TestNoiseCorrelationEqualsMonteCarlo(t *testing.T) {
	for dim, spokes := range map[int]int{2: 60, 3: 150} {
		// Some 10⁴ pairs, of which a few share noise, give 0.01. The resampling of traces smears a hard edge of k-space by half
		// a step of 36, and the noise there counts three times its share of k.
		for window, tolerance := range map[string]float64{"none": 0.05, "hann": 0.03} {
			c := chain{map[int]int{2: 32, 3: 16}[dim], 24, window, 1}
			o := c.operator(t, shots(t, dim, spokes, 0, 1))
			g, images := noiseImages(t, c, dim, spokes, 16)
			for axis := range dim {
				for lag := 1; lag <= 3; lag++ {
					var step [3]int
					var mm [3]float64
					step[axis], mm[axis] = lag, float64(lag)*g.VoxelMM[axis]
					x, y := lagged(g, images, step)
					got, want := stat.Correlation(x, y, nil), o.Noise(mm)/o.Noise([3]float64{})
					if !near(got, want, tolerance) {
						t.Errorf("%dD %s axis %d lag %d: %.3f, predicted %.3f", dim, window, axis, lag, got, want)
					}
				}
			}
		}
	}
}

// The spread of the sample variance of Gaussian noise is √(2/(n/VoxelsPerSample)) of it.
func TestVoxelsPerSampleTellHowWellAVarianceIsKnown(t *testing.T) {
	c := chain{32, 24, "hann", 1}
	g, images := noiseImages(t, c, 2, 60, 400)
	var variances []float64
	n := 0
	for _, image := range images {
		sum := 0.0
		n = 0
		for _, v := range image {
			if v == v {
				sum, n = sum+float64(v)*float64(v), n+1
			}
		}
		variances = append(variances, sum/float64(n))
	}
	mean, sd := stat.MeanStdDev(variances, nil)
	got := float64(n) * (sd / mean) * (sd / mean) / 2
	want := c.operator(t, shots(t, 2, 60, 0, 1)).VoxelsPerSample(g)
	// A variance of 400 values is known to 7 %, and the rim of the circle shares noise with fewer neighbours.
	if !(math.Abs(got/want-1) <= 0.2) || !(want > 2) {
		t.Errorf("%d voxels scatter like %d/%.2f, predicted /%.2f", n, n, got, want)
	}
	coarse := volume.Grid{N: [3]int{4, 4, 1}, VoxelMM: [3]float64{8, 8, 8}}
	if alone := c.operator(t, shots(t, 2, 60, 0, 1)).VoxelsPerSample(coarse); !near(alone, 1, 0.05) { // far beyond the correlation
		t.Errorf("voxels far apart share noise: %.3f", alone)
	}
}

func TestCorrelationOfTwoReconstructionsEqualsMonteCarlo(t *testing.T) {
	base := chain{32, 24, "none", 1}
	for name, other := range map[string]chain{
		"itself": base, "another window": {32, 24, "hann", 1}, "a lower cutoff": {32, 24, "none", 0.7}, "another window and band": {32, 24, "gaussian", 0.8},
	} {
		_, x := noiseImages(t, base, 2, 60, 10)
		_, y := noiseImages(t, other, 2, 60, 10)
		var fx, fy []float64
		for run := range x {
			for i, v := range x[run] {
				if v == v && y[run][i] == y[run][i] {
					fx, fy = append(fx, float64(v)), append(fy, float64(y[run][i]))
				}
			}
		}
		a := shots(t, 2, 60, 0, 1)
		got, want := stat.Correlation(fx, fy, nil), base.operator(t, a).Correlation(other.operator(t, a))
		if !near(got, want, 0.03) { // 8000 voxels of which a few share noise: 0.015
			t.Errorf("%s: %.3f, predicted %.3f", name, got, want)
		}
	}
}

// A larger field of view samples spokes more finely; the noise it shares with the smaller one is the same.
func TestCorrelationDoesNotHangOnTheStepAlongTheSpoke(t *testing.T) {
	a := shots(t, 3, 150, 0, 1)
	// Equal voxels, so that both end at the same k.
	small, large := chain{24, 24, "hann", 1}.operator(t, a), chain{40, 40, "hann", 1}.operator(t, a)
	if got := small.Correlation(large); !near(got, 1, 0.01) || !near(large.Correlation(small), got, 1e-3) {
		t.Errorf("correlation %.4f and %.4f", got, large.Correlation(small))
	}
}

func TestReconstructionsFromOtherShotsShareLessNoise(t *testing.T) {
	a := shots(t, 2, 60, 0, 1)
	half := func(keep int) *SpokeOperator {
		s := PointSettings(condition.Defaults())
		for shot := range a.Shots {
			if shot%2 != keep {
				s.ExcludeShots = append(s.ExcludeShots, shot)
			}
		}
		c := chain{32, 24, "hann", 1}
		sp, axis, filter := c.spokes(t, a, s, noObject)
		o, err := NewSpokeOperator(sp, perSample(sp, axis, filter))
		if err != nil {
			t.Fatal(err)
		}
		return o
	}
	all := chain{32, 24, "hann", 1}.operator(t, a)
	// Independent halves of equal weight: the whole shares 1/√2 with each.
	if even, odd := half(0), half(1); even.Correlation(odd) != 0 || !near(all.Correlation(even), math.Sqrt(0.5), 1e-3) {
		t.Errorf("halves %.4f, whole and half %.4f", even.Correlation(odd), all.Correlation(even))
	}
}

// Where only one half of the echo was recorded the noise of a sample doubles there, which weighs its frequencies higher.
func TestOneSidedEchoesWeighTheirNoise(t *testing.T) {
	a := shots(t, 2, 60, 0, 1)
	c := chain{32, 24, "none", 1}
	sp, axis, filter := c.spokes(t, a, PointSettings(condition.Defaults()), noObject)
	for s := range sp.OneSided {
		sp.OneSided[s] = 0
	}
	all, err := NewSpokeOperator(sp, perSample(sp, axis, filter))
	if err != nil {
		t.Fatal(err)
	}
	if ratio := all.Noise([3]float64{}) / c.operator(t, a).Noise([3]float64{}); !near(ratio, 2, 1e-12) {
		t.Errorf("noise variance rises %g times, want 2", ratio)
	}
	if _, err := NewSpokeOperator(sp, axis); err == nil {
		t.Error("weights of the wrong number are taken")
	}
}

func TestMeasuredPointKeepsTheRolesOfShots(t *testing.T) {
	a := shots(t, 2, 6, 1, 1)
	a.ShotRole = []int{0, 0, 0, 0, acquisition.RoleZeroGradient, acquisition.RoleOffResonance}
	a.GradientMTPerM[4] = [3]float64{}
	p, err := Point{AtMM: [3]float64{3, 0, 0}}.Measured(a, condition.Defaults())
	if err != nil {
		t.Fatal(err)
	}
	if p.Trace(0, 4)[7] != 1 || p.Trace(0, 5)[7] != 0 || p.Delays != 1 || a.Delays != 2 || fmt.Sprint(p.ShotRole) != fmt.Sprint(a.ShotRole) {
		t.Errorf("%v %v %d", p.Trace(0, 4)[7], p.Trace(0, 5)[7], p.Delays)
	}
}
