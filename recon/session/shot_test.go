package session

import (
	"math"
	"slices"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/phantom"
	"torrloom/recon/recipe"
)

// The image of a sound acquisition gives back every projection; a foreign shot stands out from neighbours and image.
func TestAForeignShotLeavesNeighboursAndImage(t *testing.T) {
	for dim, a := range map[int]*acquisition.Acquisition{2: small(t, acquisition.InversionRecovery), 3: scrambledDemo(t)} {
		run, err := Run(a, "shots", []byte(`{"reconstruction":{"matrix":40,"window":"none"}}`), 2)
		if err != nil {
			t.Fatal(err)
		}
		r := run.Plan.Recipe
		image := run.Images[run.Plan.Frames.Reference]
		sound, err := LookAt(a, r, 17, image)
		if err != nil {
			t.Fatal(err)
		}
		// Noise over the whole view is a few percent of a projection, and the image lacks what passes its voxels.
		if !(sound.OffNeighbours < 0.1) || !(sound.OffImage < 0.1) {
			t.Errorf("%dD: a sound shot is off its neighbours by %.3f and off the image by %.3f", dim, sound.OffNeighbours, sound.OffImage)
		}
		if len(sound.Neighbours) != neighboursShown(dim) || !slices.IsSortedFunc(sound.Neighbours, byAngle) {
			t.Errorf("%dD: neighbours %+v", dim, sound.Neighbours)
		}
		spoilt := phantom.Clone(a)
		phantom.Weaken(spoilt, 17, 0.5)
		weak, err := LookAt(spoilt, r, 17, image)
		if err != nil {
			t.Fatal(err)
		}
		// Half the signal is off by as much as it has left.
		if !(math.Abs(weak.OffNeighbours-1) < 0.15) || !(math.Abs(weak.OffImage-1) < 0.15) {
			t.Errorf("%dD: a shot of half the signal is off its neighbours by %.3f and off the image by %.3f, want 1", dim, weak.OffNeighbours, weak.OffImage)
		}
	}
}

func byAngle(a, b Neighbour) int {
	if a.AngleDeg < b.AngleDeg {
		return -1
	}
	return 1
}

// Antipodes give mirrored projections, and a view turns them round.
func TestOppositeNeighboursAreTurnedRound(t *testing.T) {
	s := phantom.Shape{Dim: 2, SemiMM: [3]float64{8, 3}, CentreMM: [3]float64{3, -1}}
	pr := phantom.Protocol{Sequence: acquisition.EchoDecay, DelayUS: []float64{1, 2}, GradientMTPerM: 18, DwellNS: 8, Samples: 240, TimeZeroSample: 119.6, Seed: 2}
	for _, n := range phantom.EqualAngles(30) {
		pr.Directions = append(pr.Directions, n, [3]float64{-n[0], -n[1], 0})
	}
	a, err := phantom.Sum(2, phantom.Body{Shape: s, Density: 2, R2PerUS: 0.5}).Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	v, err := LookAt(a, recipe.Recipe{Conditioning: condition.Defaults()}, 8, nil)
	if err != nil {
		t.Fatal(err)
	}
	n := v.Neighbours[0]
	if n.Shot != 9 || !n.Opposite || !(n.AngleDeg < 1e-4) { // rounding of a cosine near 1
		t.Fatalf("nearest is %d at %g°, opposite %v", n.Shot, n.AngleDeg, n.Opposite)
	}
	if off := distance(v.Projection, n.Projection); !(off < 1e-3) { // samples are complex64, and k = 0 lies between two
		t.Errorf("the antipode differs by %g", off)
	}
	if off := distance(v.Real, n.Real); !(off < 1e-3) {
		t.Errorf("the real part of the antipode differs by %g", off)
	}
	if len(v.FromImage) != 0 || v.OffImage != 0 {
		t.Error("something comes of no image")
	}
}

func TestWhatHasNoProjectionSaysSo(t *testing.T) {
	a := small(t, acquisition.InversionRecovery)
	r := recipe.Recipe{Conditioning: condition.Defaults()}
	if _, err := LookAt(a, r, a.Shots, nil); err == nil || fault.From(err).Kind != fault.BadSetting {
		t.Errorf("shot %d of %d gives %v", a.Shots, a.Shots, err)
	}
	r.Reconstruction.Matrix, r.Reconstruction.FieldOfViewMM = 16, 20
	if _, err := LookAt(a, r, 0, make([]float32, 9)); err == nil || fault.From(err).Kind != fault.Bug {
		t.Errorf("an image of 9 voxels gives %v", err)
	}
	a.GradientMTPerM[4] = [3]float64{}
	a.ShotRole[4] = acquisition.RoleZeroGradient
	v, err := LookAt(a, r, 4, nil)
	if err != nil || len(v.Projection) != 0 || len(v.Neighbours) != 0 || len(v.Real) != a.Samples {
		t.Errorf("a zero-gradient shot: %v, %+v", err, v)
	}
}
