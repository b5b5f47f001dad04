package leastsquares

import (
	"math"
	"slices"

	"torrloom/recon/fault"
)

// Penalty is one way to prefer some images to others. Its rule is made for one group of delays.
type Penalty struct {
	Name  string
	Label string
	Help  string
	// Rounds is how often the rule is renewed from the image; a linear penalty needs 1.
	Rounds int

	rule func(p *problem, s Settings, delays int) rule
}

// rule is a penalty as a quadratic form Σ f·R f. Vectors are [supported voxel][column].
type rule interface {
	// renew adapts R to the image.
	renew(f []float32)
	// add adds λ R f to out.
	add(out, f []float32)
	// value returns λ times the penalty itself, per delay.
	value(f []float32) []float64
}

// Penalties is the table of penalties. To add one: a row here.
var Penalties = []Penalty{
	{"tikhonov", "Tikhonov",
		"λ ∫f²: holds down what the data hardly determine; linear, and reads low by λ/(1+λ) of the value (Tikhonov 1963)", 1,
		func(p *problem, s Settings, delays int) rule { return &identity{p, s.Weight, delays} }},
	{"edges", "edge-preserving",
		"smooths steps between neighbouring voxels that are small against the edge setting and leaves larger ones; " +
			"not linear: contrast below the edge setting is lost, and noise is no longer the same everywhere " +
			"(Charbonnier et al. 1997, lagged weights of Vogel & Oman 1996)", 3,
		newEdges},
}

// PenaltyNamed returns the row of Penalties with that name.
//
// Errors: bad-setting when there is none.
func PenaltyNamed(name string) (Penalty, error) {
	known := ""
	for _, p := range Penalties {
		if p.Name == name {
			return p, nil
		}
		known += " " + p.Name
	}
	return Penalty{}, fault.New(fault.BadSetting, "recipe reconstruction.penalty", "penalty %q is not known; use one of%s", name, known)
}

// identity is Tikhonov's penalty, ∫f².
// Source: Tikhonov, Solution of incorrectly formulated problems and the regularization method, Soviet Math. Dokl. 4 (1963)
// 1035.
type identity struct {
	p      *problem
	weight float64
	delays int
}

func (r *identity) renew([]float32) {}

func (r *identity) add(out, f []float32) {
	w := float32(r.weight)
	for i, v := range f {
		out[i] += w * v
	}
}

func (r *identity) value(f []float32) []float64 {
	out := r.p.dot(f, f, r.delays)
	for d := range out {
		out[d] *= r.weight
	}
	return out
}

// edges is the penalty 2 h ∫ (√(|Df|²+(εh)²) - εh), D the differences of a voxel to its next neighbours along the axes, h
// the height of the image. Each round replaces it by the quadratic that touches it from above at the image so far,
// ∫ h|Df|²/√(|Df₀|²+(εh)²), whose minimum can only lower it.
//
// Sources: Charbonnier, Blanc-Féraud, Aubert & Barlaud, IEEE Trans. Image Process. 6 (1997) 298, for the function and the
// argument; Vogel & Oman, Iterative methods for total variation denoising, SIAM J. Sci. Comput. 17 (1996) 227, for the
// lagged weights.
type edges struct {
	p      *problem
	weight float64
	edge   float64
	delays int
	height []float64 // [delay], of the first image
	lagged []float32 // [supported voxel][delay]: λ h/√(…)
}

func newEdges(p *problem, s Settings, delays int) rule {
	return &edges{p: p, weight: s.Weight, edge: s.Edge, delays: delays, lagged: make([]float32, len(p.support)*delays)}
}

// heightShare is the share of voxels that are lower than what counts as the height of an image: high enough for a small
// object, low enough that single outliers do not set it.
const heightShare = 0.99

func (r *edges) renew(f []float32) {
	if r.height == nil {
		r.height = r.heights(f)
	}
	r.each(f, func(i, d int, square float64) {
		h := r.height[d]
		r.lagged[i*r.delays+d] = float32(r.weight * h / math.Sqrt(square+r.edge*r.edge*h*h))
	})
}

func (r *edges) heights(f []float32) []float64 {
	width, out := r.p.columns(r.delays), make([]float64, r.delays)
	column := make([]float64, len(r.p.support))
	for d := range out {
		for i := range column {
			column[i] = math.Abs(float64(f[i*width+r.p.perDelay*d]))
		}
		slices.Sort(column)
		// An image of zeros has no edges; any positive height will do.
		out[d] = math.Max(column[int(heightShare*float64(len(column)-1))], 1e-30)
	}
	return out
}

// each calls do with every supported voxel, delay and |Df|² of the image of that delay.
func (r *edges) each(f []float32, do func(i, d int, square float64)) {
	width := r.p.columns(r.delays)
	for i, next := range r.p.next {
		for d := range r.delays {
			at, square := r.p.perDelay*d, 0.0
			for _, j := range next {
				if j >= 0 {
					step := float64(f[int(j)*width+at] - f[i*width+at])
					square += step * step
				}
			}
			do(i, d, square)
		}
	}
}

func (r *edges) add(out, f []float32) {
	width := r.p.columns(r.delays)
	for i, next := range r.p.next {
		for _, j := range next {
			if j < 0 {
				continue
			}
			here, there := f[i*width:(i+1)*width], f[int(j)*width:(int(j)+1)*width]
			outHere, outThere := out[i*width:(i+1)*width], out[int(j)*width:(int(j)+1)*width]
			for d, w := range r.lagged[i*r.delays : (i+1)*r.delays] {
				for c := r.p.perDelay * d; c < r.p.perDelay*(d+1); c++ {
					step := w * (there[c] - here[c])
					outHere[c] -= step
					outThere[c] += step
				}
			}
		}
	}
}

func (r *edges) value(f []float32) []float64 {
	out := make([]float64, r.delays)
	r.each(f, func(_, d int, square float64) {
		h, floor := r.height[d], r.edge*r.height[d]
		out[d] += 2 * r.weight * h * (math.Sqrt(square+floor*floor) - floor) * r.p.voxel
	})
	return out
}
