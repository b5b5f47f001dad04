package singlepoint

import (
	"math"
	"math/rand/v2"
)

// places are gradients together with their mirrors, each place once.
type places struct {
	dim    int
	g      [][3]float64
	count  []float64 // shots and mirrors that share the place
	of     []int     // [shot] its place
	mirror []int     // [shot] the place of its mirror
}

// placesOf returns the places of the gradients and their mirrors. Gradients closer than a millionth of most are one.
func placesOf(g [][3]float64, dim int, most float64) *places {
	p := &places{dim: dim, of: make([]int, len(g)), mirror: make([]int, len(g))}
	at := map[[3]int]int{}
	for s, v := range g {
		for _, sign := range [2]float64{-1, 1} {
			var key [3]int
			for axis := range dim {
				key[axis] = int(math.Round(sign * v[axis] / (1e-6 * most)))
			}
			i, seen := at[key]
			if !seen {
				i = len(p.g)
				at[key] = i
				p.g = append(p.g, [3]float64{sign * v[0], sign * v[1], sign * v[2]})
				p.count = append(p.count, 0)
			}
			p.count[i]++
			p.mirror[s], p.of[s] = p.of[s], i
		}
	}
	return p
}

// within returns how many places are no further than radius from the origin.
func (p *places) within(radius float64) (n int) {
	for _, g := range p.g {
		if length(g) <= radius*(1+1e-9) {
			n++
		}
	}
	return n
}

// touching is the number of directions reach looks in. Neighbours are 4° apart on the half sphere: a flat face is seen to
// 0.1 % of its distance.
const touching = 1600

// reach returns the least and the largest distance from the origin to the planes that touch the gradients and their
// mirrors: the radius of the largest ball in their hull, and of the smallest around it.
func reach(g [][3]float64, dim int) (least, most float64) {
	least = math.Inf(1)
	for i := range touching {
		z := 0.0
		sin, cos := math.Sincos(math.Pi * float64(i) / touching)
		if dim == 3 {
			z = 1 - (float64(i)+0.5)/touching
			sin, cos = math.Sincos(float64(i) * math.Pi * (3 - math.Sqrt(5)))
		}
		r, touch := math.Sqrt(1-z*z), 0.0
		for _, v := range g {
			touch = math.Max(touch, math.Abs(r*(v[0]*cos+v[1]*sin)+v[2]*z))
		}
		least, most = math.Min(least, touch), math.Max(most, touch)
	}
	return least, most
}

// The raster that counts cells, in points per mean cell edge. Around the origin, where a few shots carry most of the
// signal, the volume of a cell is known to 0.5 %; further out to 3 %, at random and so without effect on sums over many.
const innerCells = 2.5 // radius of the inner raster in mean cells

func rasters(dim int) (inner, outer float64) {
	if dim == 2 {
		return 48, 16
	}
	return 16, 6
}

// cellVolumes returns the volume of gradient space for which each shot stands, mirrors included: that of the points
// nearer to it than to any other place (its Voronoi cell), counted on a raster. Beyond the ball of radius least, which the
// windows keep, cells reach no further than half a mean cell. Shots outside get what is left there, and are not used.
func cellVolumes(p *places, least, cell float64) []float64 {
	search := newSearch(p, least+2*cell, cell)
	volume := make([]float64, len(p.g))
	inner, outer := innerCells*cell, least+cell/2
	count := func(step, from, to float64) {
		eachRasterPoint(p.dim, to/step, func(x [3]float64) {
			x = [3]float64{x[0] * step, x[1] * step, x[2] * step}
			r := length(x)
			if r <= from {
				return
			}
			if i := search.nearest(x); i >= 0 && (r <= least || r <= length(p.g[i])+cell/2) {
				volume[i] += math.Pow(step, float64(p.dim))
			}
		})
	}
	fine, coarse := rasters(p.dim)
	count(cell/fine, 0, min(inner, outer))
	count(cell/coarse, inner, outer)
	share := make([]float64, len(p.of))
	for s, i := range p.of {
		// Half of the raster was counted, of which a place and its mirror hold the two halves. A shot stands for its
		// mirror too; shots and mirrors at one place share it.
		share[s] = 2 * (volume[i] + volume[p.mirror[s]]) / p.count[i]
	}
	return share
}

// eachRasterPoint calls f for the half x >= 0 of a raster of edge 1 over the ball of a radius, with one point at random in
// each of its boxes, since a regular raster could run along the lattice of the gradients. The points are the same every time.
func eachRasterPoint(dim int, radius float64, f func(x [3]float64)) {
	r := rand.New(rand.NewPCG(1, 1))
	n := int(math.Ceil(radius))
	slices := n
	if dim == 2 {
		slices = 0
	}
	for iz := -slices; iz < max(slices, 1); iz++ {
		for iy := -n; iy < n; iy++ {
			for ix := range n {
				x := [3]float64{float64(ix) + r.Float64(), float64(iy) + r.Float64()}
				if dim == 3 {
					x[2] = float64(iz) + r.Float64()
				}
				if length(x) <= radius {
					f(x)
				}
			}
		}
	}
}

// search finds the nearest place by boxes of one mean cell.
type search struct {
	p     *places
	edge  float64
	n     int // boxes on either side of the middle one
	boxes [][]int32
}

func newSearch(p *places, radius, edge float64) *search {
	f := &search{p: p, edge: edge, n: int(math.Ceil(radius/edge)) + 1}
	width := 2*f.n + 1
	f.boxes = make([][]int32, width*width*width)
	for i, g := range p.g {
		if length(g) <= radius {
			b := f.box(g)
			f.boxes[f.index(b)] = append(f.boxes[f.index(b)], int32(i))
		}
	}
	return f
}

func (f *search) box(g [3]float64) (b [3]int) {
	for axis := range b {
		b[axis] = int(math.Round(g[axis]/f.edge)) + f.n
	}
	return b
}

func (f *search) index(b [3]int) int { return (b[2]*(2*f.n+1)+b[1])*(2*f.n+1) + b[0] }

// nearest returns the place nearest to x, -1 if there is none at all. Since x lies within half an edge of the middle of
// its box, the boxes up to ring away hold all places within ring edges.
func (f *search) nearest(x [3]float64) int {
	best, at := -1, f.box(x)
	for ring := 1; ring <= 2*f.n; ring++ {
		var distance float64
		best, distance = f.nearestWithin(x, at, ring)
		if distance <= float64(ring)*f.edge {
			break
		}
	}
	return best
}

func (f *search) nearestWithin(x [3]float64, at [3]int, ring int) (best int, distance float64) {
	best, least := -1, math.Inf(1)
	flat := ring
	if f.p.dim == 2 {
		flat = 0
	}
	for bz := max(0, at[2]-flat); bz <= min(2*f.n, at[2]+flat); bz++ {
		for by := max(0, at[1]-ring); by <= min(2*f.n, at[1]+ring); by++ {
			for bx := max(0, at[0]-ring); bx <= min(2*f.n, at[0]+ring); bx++ {
				for _, i := range f.boxes[f.index([3]int{bx, by, bz})] {
					g := f.p.g[i]
					dx, dy, dz := x[0]-g[0], x[1]-g[1], x[2]-g[2]
					if square := dx*dx + dy*dy + dz*dz; square < least {
						best, least = int(i), square
					}
				}
			}
		}
	}
	return best, math.Sqrt(least)
}
