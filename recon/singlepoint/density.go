package singlepoint

import (
	"math"
)

// points is a set of gradients together with their mirrors, each place once, with how many shots and mirrors share it.
type points struct {
	dim   int
	g     [][3]float64
	count []float64
	of    []int // [shot] its place
}

// mirrored returns the places of the gradients and their mirrors. Gradients closer than a millionth of most are one.
func mirrored(g [][3]float64, most float64) *points {
	p := &points{of: make([]int, len(g))}
	at := map[[3]int]int{}
	for s, v := range g {
		for _, sign := range [2]float64{1, -1} {
			var key [3]int
			for axis := range 3 {
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
			if sign > 0 {
				p.of[s] = i
			}
		}
	}
	return p
}

// within returns the places no further than radius from the origin.
func (p *points) within(radius float64) (list []int) {
	for i, g := range p.g {
		if length(g) <= radius*(1+1e-9) {
			list = append(list, i)
		}
	}
	return list
}

// hull is the convex hull of gradients and their mirrors, as its reach along many directions.
type hull struct {
	n           [][3]float64
	reach       []float64 // [direction] largest |g·n|
	least, most float64   // of reach: the radius of the largest ball inside, and of the smallest around
}

// directions see a flat face to 0.1 % of its distance: two neighbours are 4° apart on the half sphere.
const directions = 1600

func newHull(g [][3]float64, dim int) *hull {
	h := &hull{least: math.Inf(1)}
	for i := range directions {
		z := 0.0
		sin, cos := math.Sincos(math.Pi * float64(i) / directions)
		if dim == 3 {
			z = 1 - (float64(i)+0.5)/directions
			sin, cos = math.Sincos(float64(i) * math.Pi * (3 - math.Sqrt(5)))
		}
		r := math.Sqrt(1 - z*z)
		n, reach := [3]float64{r * cos, r * sin, z}, 0.0
		for _, v := range g {
			reach = math.Max(reach, math.Abs(v[0]*n[0]+v[1]*n[1]+v[2]*n[2]))
		}
		h.n, h.reach = append(h.n, n), append(h.reach, reach)
		h.least, h.most = math.Min(h.least, reach), math.Max(h.most, reach)
	}
	return h
}

// depth returns how far a gradient lies below the surface of the hull.
func (h *hull) depth(g [3]float64) float64 {
	least := math.Inf(1)
	for i, n := range h.n {
		least = math.Min(least, h.reach[i]-math.Abs(g[0]*n[0]+g[1]*n[1]+g[2]*n[2]))
	}
	return least
}

const (
	// kernelReach in mean cells. With the fourth power the sum of the kernel over a square or cubic lattice then equals
	// its integral to 0.4 %.
	kernelReach, kernelPower = 2.5, 4
	// densityRounds: from then on the weights of spirals and of random lists move by less than 1 %.
	densityRounds = 40
)

// density returns the volume of gradient space for which each shot stands, mirrors included: by the iteration
//
//	w ← w·inside/(w ⊛ ψ)
//
// over all places, with ψ ∝ (1-(r/R)²)⁴, ∫ψ = 1, R = 2.5 mean cells. Inside is the part of the kernel that lies in the
// hull grown by half a cell, its surface taken as flat; so places at the rim stand for a cell like the others.
//
// Approximate: exact on no finite set; 3 % in a weight of an even spread, more where the spacing varies within the kernel
// and in the corners of the hull, which lie beyond every window.
// Source: Pipe & Menon, Sampling density compensation in MRI, Magn. Reson. Med. 41 (1999) 179-186; the rim is ours.
func density(both *points, h *hull, dim int, cell float64) []float64 {
	near := neighboursOf(both, dim, kernelReach*cell)
	w, next := make([]float64, len(both.g)), make([]float64, len(both.g))
	inside := make([]float64, len(both.g))
	for i, v := range both.g {
		w[i] = math.Pow(cell, float64(dim))
		inside[i] = kernelBelow((h.depth(v)+cell/2)/(kernelReach*cell), dim)
	}
	for range densityRounds {
		for i, v := range w {
			sum := 0.0
			for _, n := range near[i] {
				sum += n.weight * w[n.at]
			}
			next[i] = v * inside[i] / sum
		}
		w, next = next, w
	}
	share := make([]float64, len(both.of))
	for s, i := range both.of {
		// Each place is shared by its shots and mirrors; a shot stands for itself and its mirror.
		share[s] = 2 * w[i] / both.count[i]
	}
	return share
}

type neighbour struct {
	at     int
	weight float64
}

// neighboursOf returns, for each place, those within radius and the kernel there. Places are sorted into boxes of that
// edge, so that only the boxes around are searched.
func neighboursOf(p *points, dim int, radius float64) [][]neighbour {
	boxes := map[[3]int][]int{}
	box := func(g [3]float64) (b [3]int) {
		for axis := range dim {
			b[axis] = int(math.Floor(g[axis] / radius))
		}
		return b
	}
	for i, g := range p.g {
		boxes[box(g)] = append(boxes[box(g)], i)
	}
	unit := kernelUnit(dim) / math.Pow(radius, float64(dim))
	out := make([][]neighbour, len(p.g))
	for i, g := range p.g {
		at := box(g)
		for o := range 27 {
			for _, j := range boxes[[3]int{at[0] + o%3 - 1, at[1] + o/3%3 - 1, at[2] + o/9 - 1}] {
				if u := distance(g, p.g[j]) / radius; u < 1 {
					out[i] = append(out[i], neighbour{j, unit * math.Pow(1-u*u, kernelPower)})
				}
			}
		}
	}
	return out
}

func distance(a, b [3]float64) float64 {
	return length([3]float64{a[0] - b[0], a[1] - b[1], a[2] - b[2]})
}

// kernelUnit returns 1/∫(1-r²)⁴ over the unit disc, 5/π, or ball, 3465/(512π).
func kernelUnit(dim int) float64 {
	if dim == 2 {
		return (kernelPower + 1) / math.Pi
	}
	return 3465 / (512 * math.Pi)
}

// kernelBelow returns the part of the kernel that lies at x < u: seen from the side it is (1-x²)^4.5 in 2D and (1-x²)⁵ in
// 3D, whose integral is taken in 200 steps.
func kernelBelow(u float64, dim int) float64 {
	power := kernelPower + float64(dim-1)/2
	if u >= 1 {
		return 1
	}
	const steps = 200
	below, all := 0.0, 0.0
	for i := range steps {
		x := -1 + (2*float64(i)+1)/steps
		v := math.Pow(1-x*x, power)
		all += v
		if x < u {
			below += v
		}
	}
	return below / all
}
