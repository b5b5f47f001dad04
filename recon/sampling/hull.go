package sampling

import (
	"math"
	"math/rand/v2"

	"torrloom/recon/fault"
)

// triangle holds three point indices, counter-clockwise seen from outside.
type triangle [3]int

// nudge moves points off exact common planes and circles, where the hull is not unique. It changes areas by about its
// own size, far below any use of them.
const nudge = 1e-9

// hullOfSphere returns the triangles of the convex hull of points on the unit sphere, by adding one point at a time and
// replacing the triangles it sees. Time grows with the square of the number of points; 6000 points take about 0.3 s.
//
// Errors: unsupported when all points lie in one plane through the origin.
func hullOfSphere(points [][3]float64) ([]triangle, error) {
	p := nudged(points)
	hull, first, err := startTetrahedron(p)
	if err != nil {
		return nil, err
	}
	used := map[int]bool{first[0]: true, first[1]: true, first[2]: true, first[3]: true}
	for i := range p {
		if !used[i] {
			hull = addPoint(hull, p, i)
		}
	}
	out := make([]triangle, len(hull))
	for i, f := range hull {
		out[i] = f.corners
	}
	return out, nil
}

func nudged(points [][3]float64) [][3]float64 {
	r := rand.New(rand.NewPCG(1, 2)) // fixed, so that the same gradients always get the same weights
	out := make([][3]float64, len(points))
	for i, n := range points {
		for axis := range n {
			n[axis] += nudge * (r.Float64() - 0.5)
		}
		out[i] = unit(n)
	}
	return out
}

// face is a triangle with its plane normal·x = offset.
type face struct {
	corners triangle
	normal  [3]float64
	offset  float64
}

func newFace(p [][3]float64, t triangle) face {
	n := cross(sub(p[t[1]], p[t[0]]), sub(p[t[2]], p[t[0]]))
	return face{t, n, dot(n, p[t[0]])}
}

func startTetrahedron(p [][3]float64) ([]face, [4]int, error) {
	a := 0
	b := farthest(p, func(q [3]float64) float64 { return 1 - math.Abs(dot(q, p[a])) })
	normal := unit(cross(p[a], p[b]))
	c := farthest(p, func(q [3]float64) float64 { return math.Abs(dot(q, normal)) })
	if math.Abs(dot(p[c], normal)) < 1e-4 {
		return nil, [4]int{}, fault.New(fault.Unsupported, "gradient_mT_per_m", "all spokes of a 3D acquisition lie in one plane; for a 2D acquisition write the gradients as [shot, 2] (x and y)")
	}
	plane := newFace(p, triangle{a, b, c})
	d := farthest(p, func(q [3]float64) float64 { return math.Abs(dot(q, plane.normal) - plane.offset) })
	if dot(plane.normal, p[d]) > plane.offset {
		b, c = c, b
	}
	var hull []face
	for _, t := range []triangle{{a, b, c}, {a, d, b}, {b, d, c}, {c, d, a}} {
		hull = append(hull, newFace(p, t))
	}
	return hull, [4]int{a, b, c, d}, nil
}

func farthest(p [][3]float64, measure func([3]float64) float64) int {
	best, at := -1.0, 0
	for i, q := range p {
		if m := measure(q); m > best {
			best, at = m, i
		}
	}
	return at
}

// addPoint returns the hull with point i added: the triangles that i sees are replaced by a fan from i to their rim.
func addPoint(hull []face, p [][3]float64, i int) []face {
	kept := hull[:0]
	var rim [][2]int
	for _, f := range hull {
		if dot(f.normal, p[i]) <= f.offset {
			kept = append(kept, f)
			continue
		}
		for e := range 3 {
			rim = toggleEdge(rim, f.corners[e], f.corners[(e+1)%3])
		}
	}
	for _, e := range rim {
		kept = append(kept, newFace(p, triangle{e[0], e[1], i}))
	}
	return kept
}

// toggleEdge adds the directed edge from→to, or removes its reverse: what is left after all visible triangles is the rim.
func toggleEdge(rim [][2]int, from, to int) [][2]int {
	for k, e := range rim {
		if e[0] == to && e[1] == from {
			rim[k] = rim[len(rim)-1]
			return rim[:len(rim)-1]
		}
	}
	return append(rim, [2]int{from, to})
}
