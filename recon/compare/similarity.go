package compare

import (
	"math"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// Similarity is the structural similarity of two maps, 1 where they are equal.
type Similarity struct {
	Mean    float64   // over the windows
	Windows int       // windows that lie inside the image and hold an answer everywhere
	Values  []float32 // index at the centre of each window; NaN elsewhere
}

// The constants of the published index.
const (
	k1, k2      = 0.01, 0.03
	windowReach = 5 // voxels on either side: 11 in all
	windowSD    = 1.5
)

// SimilarityOf returns the structural similarity with the 11-voxel Gaussian window (SD 1.5 voxels), in the plane for a
// single slice and over 11³ voxels in a volume:
//
//	(2 μx μy + C1)(2 σxy + C2) / ((μx² + μy² + C1)(σx² + σy² + C2)),   C1 = (0.01 L)², C2 = (0.03 L)²
//
// L is the range of values that counts as full contrast. It is asked for and never taken from the maps, since an index on
// a range that follows the data cannot be compared with another.
//
// Only windows that lie wholly inside the image and have an answer in both maps everywhere are used.
//
// Errors: bad-setting for a range that is not positive; no-answer when no window fits; bug when sizes differ.
// Source: Wang, Bovik, Sheikh & Simoncelli, Image quality assessment: from error visibility to structural similarity, IEEE
// Trans. Image Process. 13 (2004) 600, eq. 13.
func SimilarityOf(reference, other []float32, g volume.Grid, fullRange float64) (Similarity, error) {
	if !(fullRange > 0) || math.IsInf(fullRange, 0) {
		return Similarity{}, fault.New(fault.BadSetting, "compare range", "%g; give the range of values that counts as full contrast, such as 100 torr", fullRange)
	}
	if len(reference) != g.Voxels() || len(other) != g.Voxels() {
		return Similarity{}, fault.New(fault.Bug, "similarity", "maps of %d and %d voxels on a grid of %d", len(reference), len(other), g.Voxels())
	}
	w := newWindows(reference, other, g)
	s := Similarity{Values: make([]float32, g.Voxels())}
	c1, c2 := k1*fullRange*k1*fullRange, k2*fullRange*k2*fullRange
	for i := range s.Values {
		s.Values[i] = float32(math.NaN())
		if w.whole[i] {
			index := w.at(i).index(c1, c2)
			s.Values[i] = float32(index)
			s.Mean += index
			s.Windows++
		}
	}
	if s.Windows == 0 {
		return s, fault.New(fault.NoAnswer, "similarity", "no window of %d voxels across has an answer in both maps everywhere; lower the mask level or take smaller voxels", 2*windowReach+1)
	}
	s.Mean /= float64(s.Windows)
	return s, nil
}

// moments are the weighted means, variances and covariance of one window.
type moments struct{ meanX, meanY, varX, varY, cov float64 }

func (m moments) index(c1, c2 float64) float64 {
	return (2*m.meanX*m.meanY + c1) * (2*m.cov + c2) / ((m.meanX*m.meanX + m.meanY*m.meanY + c1) * (m.varX + m.varY + c2))
}

// windows holds the Gaussian-weighted sums around every voxel.
type windows struct {
	sums  [5][]float64 // x, y, x², y², xy
	whole []bool       // the window lies inside and has answers everywhere
}

func newWindows(reference, other []float32, g volume.Grid) *windows {
	w := &windows{whole: make([]bool, g.Voxels())}
	missing := make([]float64, g.Voxels())
	for f := range w.sums {
		w.sums[f] = make([]float64, g.Voxels())
	}
	for i := range reference {
		x, y := float64(reference[i]), float64(other[i])
		if x != x || y != y {
			missing[i] = 1
			continue
		}
		for f, v := range [5]float64{x, y, x * x, y * y, x * y} {
			w.sums[f][i] = v
		}
	}
	for axis := range g.Dim() {
		for f := range w.sums {
			w.sums[f] = alongAxis(w.sums[f], g, axis, gaussianWeights)
		}
		missing = alongAxis(missing, g, axis, evenWeights)
	}
	for i := range w.whole {
		w.whole[i] = missing[i] == 0
	}
	return w
}

// at returns the moments of the window around voxel i.
func (w *windows) at(i int) moments {
	m := moments{meanX: w.sums[0][i], meanY: w.sums[1][i]}
	m.varX = math.Max(0, w.sums[2][i]-m.meanX*m.meanX)
	m.varY = math.Max(0, w.sums[3][i]-m.meanY*m.meanY)
	m.cov = w.sums[4][i] - m.meanX*m.meanY
	return m
}

var gaussianWeights, evenWeights = windowWeights()

func windowWeights() (gaussian, even [2*windowReach + 1]float64) {
	sum := 0.0
	for i := range gaussian {
		u := float64(i-windowReach) / windowSD
		gaussian[i], even[i] = math.Exp(-u*u/2), 1
		sum += gaussian[i]
	}
	for i := range gaussian {
		gaussian[i] /= sum
	}
	return gaussian, even
}

// alongAxis returns the weighted sums of values along one axis. Where the window leaves the image the sum is 1, which marks
// such voxels as missing and is of no use to anybody else.
func alongAxis(values []float64, g volume.Grid, axis int, weights [2*windowReach + 1]float64) []float64 {
	out := make([]float64, len(values))
	stride := [3]int{1, g.N[0], g.N[0] * g.N[1]}[axis]
	for i := range values {
		at := i / stride % g.N[axis]
		if at < windowReach || at >= g.N[axis]-windowReach {
			out[i] = 1
			continue
		}
		sum := 0.0
		for j, w := range weights {
			sum += w * values[i+(j-windowReach)*stride]
		}
		out[i] = sum
	}
	return out
}

// Slice returns one slice of a volume across an axis (0, 1, 2 for x, y, z) as a single-slice image whose x and y are the
// other two axes in order.
//
// Errors: bad-setting when there is no such slice; bug when the sizes differ.
func Slice(values []float32, g volume.Grid, axis, index int) ([]float32, volume.Grid, error) {
	if axis < 0 || axis > 2 || index < 0 || index >= g.N[axis] {
		return nil, volume.Grid{}, fault.New(fault.BadSetting, "slice", "slice %d of axis %d asked for; the image has %d x %d x %d voxels", index, axis, g.N[0], g.N[1], g.N[2])
	}
	if len(values) != g.Voxels() {
		return nil, volume.Grid{}, fault.New(fault.Bug, "slice", "%d values on a grid of %d", len(values), g.Voxels())
	}
	across, up := [3]int{1, 0, 0}[axis], [3]int{2, 2, 1}[axis]
	flat := volume.Grid{N: [3]int{g.N[across], g.N[up], 1}, VoxelMM: [3]float64{g.VoxelMM[across], g.VoxelMM[up], g.VoxelMM[axis]}}
	out := make([]float32, 0, flat.Voxels())
	for v := range g.N[up] {
		for u := range g.N[across] {
			var at [3]int
			at[axis], at[across], at[up] = index, u, v
			out = append(out, values[g.Index(at[0], at[1], at[2])])
		}
	}
	return out, flat, nil
}
