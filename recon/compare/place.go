package compare

import (
	"math"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// corner is a voxel that takes part in the value between voxels, with its share.
type corner struct {
	index int
	share float64
}

// cornersOf returns the up to eight voxels around a point and their shares in trilinear interpolation, and whether the
// point lies within the voxel centres. Voxels with no share are left out. In a single slice z is ignored.
func cornersOf(g volume.Grid, mm [3]float64) ([]corner, bool) {
	out := make([]corner, 1, 8)
	out[0] = corner{0, 1}
	stride := 1
	for axis := range 3 {
		if g.N[axis] > 1 {
			at := mm[axis]/g.VoxelMM[axis] + float64(g.N[axis]/2)
			// The slack keeps points on the outermost centres in spite of rounding.
			if !(at >= -1e-9 && at <= float64(g.N[axis]-1)+1e-9) {
				return nil, false
			}
			at = math.Max(0, math.Min(at, float64(g.N[axis]-1)))
			low := min(int(at), g.N[axis]-2)
			out = split(out, low*stride, stride, at-float64(low))
		}
		stride *= g.N[axis]
	}
	return out, true
}

// split shares every corner out between two neighbours along one axis.
func split(corners []corner, offset, stride int, up float64) []corner {
	if up < 1e-9 || up > 1-1e-9 { // on a voxel, but for rounding
		for i := range corners {
			corners[i].index += offset + int(math.Round(up))*stride
		}
		return corners
	}
	for i, c := range corners[:len(corners):len(corners)] {
		corners[i] = corner{c.index + offset, c.share * (1 - up)}
		corners = append(corners, corner{c.index + offset + stride, c.share * up})
	}
	return corners
}

// valueAt returns the trilinear value at a point; NaN outside the voxel centres and where a voxel that takes part has no
// answer.
func valueAt(values []float32, g volume.Grid, mm [3]float64) float64 {
	corners, inside := cornersOf(g, mm)
	if !inside {
		return math.NaN()
	}
	sum := 0.0
	for _, c := range corners {
		sum += c.share * float64(values[c.index])
	}
	return sum
}

// OntoGrid returns values of one grid at the voxel centres of another, by trilinear interpolation; NaN where a voxel that
// takes part has none. Given standard errors it returns those of the values if the noise of neighbours were fully
// correlated, which is never too small.
//
// Errors: bug when the sizes differ; unsupported between a single slice and a volume.
func OntoGrid(values []float32, from, to volume.Grid) ([]float32, error) {
	if len(values) != from.Voxels() {
		return nil, fault.New(fault.Bug, "compare", "%d values on a grid of %d", len(values), from.Voxels())
	}
	if from.Dim() != to.Dim() {
		return nil, fault.New(fault.Unsupported, "compare", "a %dD map cannot be set against a %dD one", from.Dim(), to.Dim())
	}
	if from == to {
		return values, nil
	}
	out := make([]float32, 0, to.Voxels())
	for iz := range to.N[2] {
		for iy := range to.N[1] {
			for ix := range to.N[0] {
				out = append(out, float32(valueAt(values, from, [3]float64{to.MM(0, ix), to.MM(1, iy), to.MM(2, iz)})))
			}
		}
	}
	return out, nil
}

// Profile holds values along a line.
type Profile struct {
	AtMM   []float64 // distance from the start
	Values []float64 // NaN where there is no answer
}

// ProfileOf returns the trilinear values at points evenly spaced from one point to another, both included. In a single
// slice z is ignored.
//
// Errors: bad-setting for fewer than two points or a line without length; bug when the sizes differ.
func ProfileOf(values []float32, g volume.Grid, fromMM, toMM [3]float64, points int) (Profile, error) {
	if len(values) != g.Voxels() {
		return Profile{}, fault.New(fault.Bug, "profile", "%d values on a grid of %d", len(values), g.Voxels())
	}
	length := distance(fromMM, toMM)
	if points < 2 || !(length > 0) || math.IsInf(length, 0) {
		return Profile{}, fault.New(fault.BadSetting, "profile", "%d points along %g mm; a line needs two points or more and a length", points, length)
	}
	p := Profile{AtMM: make([]float64, points), Values: make([]float64, points)}
	for i := range points {
		f := float64(i) / float64(points-1)
		var mm [3]float64
		for axis := range mm {
			mm[axis] = fromMM[axis] + f*(toMM[axis]-fromMM[axis])
		}
		p.AtMM[i], p.Values[i] = f*length, valueAt(values, g, mm)
	}
	return p, nil
}

func distance(a, b [3]float64) float64 {
	return math.Hypot(math.Hypot(a[0]-b[0], a[1]-b[1]), a[2]-b[2])
}

// Histograms counts several sets of values over the same bins.
type Histograms struct {
	Edges  []float64 `json:"edges"`
	Counts [][]int   `json:"counts"` // [set][bin]
	Below  []int     `json:"below"`  // [set] values left of the first edge
	Above  []int     `json:"above"`
}

// HistogramsOf counts every map over a region (nil: everywhere) in shared bins that take in all answers but the outermost
// thousandth on either side of all maps together.
//
// Errors: no-answer when no map has an answer there; bug when sizes differ or bins is below 1.
func HistogramsOf(maps [][]float32, region []bool, bins int) (Histograms, error) {
	if bins < 1 {
		return Histograms{}, fault.New(fault.Bug, "histogram", "%d bins asked for", bins)
	}
	var all []float64
	ends := []int{0}
	for _, m := range maps {
		x, _, _, err := pairUp(m, m, region)
		if err != nil {
			return Histograms{}, err
		}
		all = append(all, x...)
		ends = append(ends, len(all))
	}
	if len(all) == 0 {
		return Histograms{}, fault.New(fault.NoAnswer, "histogram", "no voxel has an answer; choose another region")
	}
	h := Histograms{Edges: edgesOf(bins, all), Below: make([]int, len(maps)), Above: make([]int, len(maps))}
	for m := range maps {
		h.Counts = append(h.Counts, make([]int, bins))
		for _, v := range all[ends[m]:ends[m+1]] {
			h.count(m, v)
		}
	}
	return h, nil
}

func (h *Histograms) count(m int, v float64) {
	switch b := binOf(h.Edges, v); {
	case b >= 0:
		h.Counts[m][b]++
	case v < h.Edges[0]:
		h.Below[m]++
	default:
		h.Above[m]++
	}
}
