package sampling

import (
	"math"
	"sort"

	"torrloom/recon/fault"
)

// AxisWeights returns the share of directions that each spoke stands for: the angle (2D, rad, sum π) or solid angle (3D,
// sr, sum 2π) of the region of axes nearer to it than to any other. A spoke is an axis, n and -n being one; spokes
// along the same axis share its region evenly. Directions are unit vectors.
//
// Errors: no-answer when there are too few axes to divide the directions (one in 2D, three in general position in 3D),
// unsupported when the axes of a 3D set all lie in one plane.
func AxisWeights(dim int, directions [][3]float64) ([]float64, error) {
	axes, member := distinctAxes(directions)
	var (
		regions []float64
		err     error
	)
	if dim == 2 {
		regions = planarRegions(axes)
	} else {
		regions, err = sphericalRegions(axes)
	}
	if err != nil {
		return nil, err
	}
	return shareRegions(regions, member), nil
}

// sameAxis is the largest distance of two unit vectors that count as one axis: 1e-5 rad is far below any direction
// step in use and far above the rounding of gradients stored in single precision.
const sameAxis = 1e-5

// distinctAxes returns the different axes, each on the upper half, and for every direction the axis it lies on.
func distinctAxes(directions [][3]float64) (axes [][3]float64, member []int) {
	type cell [3]int
	seen := map[cell][]int{}
	member = make([]int, len(directions))
	for s, n := range directions {
		n = upper(n)
		found := -1
		for _, candidate := range []([3]float64){n, {-n[0], -n[1], -n[2]}} {
			base := cellOf(candidate)
			for step := range 27 {
				key := cell{base[0] + step%3 - 1, base[1] + step/3%3 - 1, base[2] + step/9 - 1}
				for _, a := range seen[key] {
					if distance(axes[a], candidate) < sameAxis {
						found = a
					}
				}
			}
		}
		if found < 0 {
			found = len(axes)
			axes = append(axes, n)
			key := cell(cellOf(n))
			seen[key] = append(seen[key], found)
		}
		member[s] = found
	}
	return axes, member
}

func cellOf(n [3]float64) [3]int {
	var c [3]int
	for i := range c {
		c[i] = int(math.Floor(n[i] / sameAxis))
	}
	return c
}

// upper returns n or -n, whichever has its last non-zero coordinate positive.
func upper(n [3]float64) [3]float64 {
	for i := 2; i >= 0; i-- {
		if n[i] > 0 {
			return n
		}
		if n[i] < 0 {
			return [3]float64{-n[0], -n[1], -n[2]}
		}
	}
	return n
}

func shareRegions(regions []float64, member []int) []float64 {
	sharers := make([]int, len(regions))
	for _, a := range member {
		sharers[a]++
	}
	out := make([]float64, len(member))
	for s, a := range member {
		out[s] = regions[a] / float64(sharers[a])
	}
	return out
}

// planarRegions returns half the gap to both neighbours in angle, modulo π.
func planarRegions(axes [][3]float64) []float64 {
	order := make([]int, len(axes))
	angle := make([]float64, len(axes))
	for i, n := range axes {
		order[i] = i
		angle[i] = math.Mod(math.Atan2(n[1], n[0])+math.Pi, math.Pi)
	}
	sort.Slice(order, func(i, j int) bool { return angle[order[i]] < angle[order[j]] })
	out := make([]float64, len(axes))
	for i, a := range order {
		next := order[(i+1)%len(order)]
		gap := angle[next] - angle[a]
		if i == len(order)-1 {
			gap += math.Pi
		}
		out[a] += gap / 2
		out[next] += gap / 2
	}
	return out
}

// sphericalRegions returns the areas of the Voronoi regions of the points {n, -n} on the unit sphere, one per axis.
// The regions follow from the convex hull: each of its triangles gives every corner the part of itself that is nearest
// to that corner, bounded by the edge middles and the circumcentre.
func sphericalRegions(axes [][3]float64) ([]float64, error) {
	if len(axes) < 3 {
		return nil, fault.New(fault.NoAnswer, "gradient_mT_per_m", "%d distinct spoke axes in 3D; at least 3 that span space are needed", len(axes))
	}
	points := make([][3]float64, 0, 2*len(axes))
	points = append(points, axes...)
	for _, n := range axes {
		points = append(points, [3]float64{-n[0], -n[1], -n[2]})
	}
	triangles, err := hullOfSphere(points)
	if err != nil {
		return nil, err
	}
	out := make([]float64, len(axes))
	for _, t := range triangles {
		a, b, c := points[t[0]], points[t[1]], points[t[2]]
		centre := unit(cross(sub(b, a), sub(c, a)))
		ab, bc, ca := unit(add(a, b)), unit(add(b, c)), unit(add(c, a))
		for i, part := range [3]float64{
			triangleArea(a, ab, centre) + triangleArea(a, centre, ca),
			triangleArea(b, bc, centre) + triangleArea(b, centre, ab),
			triangleArea(c, ca, centre) + triangleArea(c, centre, bc),
		} {
			// A region and its antipode are equal; half of each gives the axis its share of the half sphere.
			out[t[i]%len(axes)] += part / 2
		}
	}
	return out, nil
}

// triangleArea returns the signed solid angle of a spherical triangle, positive when a, b, c turn counter-clockwise seen
// from outside.
// Source: van Oosterom & Strackee, IEEE Trans. Biomed. Eng. 30 (1983) 125, eq. 8.
func triangleArea(a, b, c [3]float64) float64 {
	return 2 * math.Atan2(dot(a, cross(b, c)), 1+dot(a, b)+dot(b, c)+dot(c, a))
}

func dot(a, b [3]float64) float64 { return a[0]*b[0] + a[1]*b[1] + a[2]*b[2] }
func add(a, b [3]float64) [3]float64 {
	return [3]float64{a[0] + b[0], a[1] + b[1], a[2] + b[2]}
}
func sub(a, b [3]float64) [3]float64 {
	return [3]float64{a[0] - b[0], a[1] - b[1], a[2] - b[2]}
}
func cross(a, b [3]float64) [3]float64 {
	return [3]float64{a[1]*b[2] - a[2]*b[1], a[2]*b[0] - a[0]*b[2], a[0]*b[1] - a[1]*b[0]}
}
func unit(a [3]float64) [3]float64 {
	l := math.Sqrt(dot(a, a))
	return [3]float64{a[0] / l, a[1] / l, a[2] / l}
}
func distance(a, b [3]float64) float64 {
	d := sub(a, b)
	return math.Sqrt(dot(d, d))
}
