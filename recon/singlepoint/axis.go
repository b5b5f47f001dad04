package singlepoint

import "math"

// axis carries lines of k-space to lines of voxels along one axis of a lattice:
//
//	f(x_p) = Σ_q s(q) exp(i2π·turns·(q/2)·p),   p = x_p/voxel
//
// with turns = (γ/2π)·step·t·voxel, the phase in cycles that one step of the lattice makes over one voxel. Lines are
// kept as planes, [point][re, im][line], with the lines innermost, so that one pass of a loop serves them all.
type axis interface {
	// full takes src, [point][2][lines] for q = -most..most, to dst, [voxel][2][lines].
	full(dst, src []float64, lines int)
	// half takes the points q >= 0 only and puts the real part of the sum into dst, [voxel][lines]. The real part of point
	// m begins at src[m·stride], its imaginary part at src[m·stride+imag]. Voxels further than reach from the gradient
	// centre are left as they are.
	half(dst, src []float64, stride, imag, lines, reach int)
}

// directLimit is the number of k-points per axis up to which direct sums are faster than chirp-z at 64 voxels.
const directLimit = 31

func newAxis(x latticeAxis, voxels int, turns float64) axis {
	if x.points() <= directLimit {
		return newDirect(x, voxels, turns)
	}
	return newChirpPair(x, voxels, turns)
}

// direct sums with cosines and sines. Pairing +q with -q and +p with -p leaves a quarter of the products.
type direct struct {
	voxels, parity, points int       // points counts q >= 0
	cos, sin               []float64 // [p][m] of 2π·turns·(q/2)·p, p = 0..voxels/2
}

func newDirect(x latticeAxis, voxels int, turns float64) *direct {
	d := &direct{voxels: voxels, parity: x.parity(), points: x.most/2 + 1}
	for p := range voxels/2 + 1 {
		for m := range d.points {
			q := float64(d.parity + 2*m)
			sin, cos := math.Sincos(math.Pi * math.Remainder(turns*q*float64(p), 2))
			d.cos, d.sin = append(d.cos, cos), append(d.sin, sin)
		}
	}
	return d
}

func (d *direct) full(dst, src []float64, lines int) {
	even, odd := d.fold(src, lines)
	plus, minus := make([]float64, 2*lines), make([]float64, 2*lines)
	for p := range d.voxels/2 + 1 {
		weigh(plus, even, 2*lines, d.cos[p*d.points:(p+1)*d.points])
		weigh(minus, odd, 2*lines, d.sin[p*d.points:(p+1)*d.points])
		d.store(dst, p, plus, minus)
	}
}

// fold returns, for each q >= 0, the sum of the points ±q, and their difference times i.
func (d *direct) fold(src []float64, lines int) (even, odd []float64) {
	row := 2 * lines
	even, odd = make([]float64, d.points*row), make([]float64, d.points*row)
	last := len(src)/row - 1
	for m := range d.points {
		up := (last+d.parity)/2 + m
		u, v := src[up*row:(up+1)*row], src[(last-up)*row:(last-up+1)*row]
		e, o := even[m*row:(m+1)*row], odd[m*row:(m+1)*row]
		if up == last-up {
			copy(e, u) // q = 0 is its own mirror
			continue
		}
		for l := range lines {
			e[l], e[lines+l] = u[l]+v[l], u[lines+l]+v[lines+l]
			o[l], o[lines+l] = v[lines+l]-u[lines+l], u[l]-v[l]
		}
	}
	return even, odd
}

// store puts plus + minus at voxel +p and plus - minus at voxel -p.
func (d *direct) store(dst []float64, p int, plus, minus []float64) {
	width, centre := len(plus), d.voxels/2
	down := dst[(centre-p)*width : (centre-p+1)*width]
	for l, v := range plus {
		down[l] = v - minus[l]
	}
	if centre+p < d.voxels { // an even number of voxels has none at +n/2
		up := dst[(centre+p)*width : (centre+p+1)*width]
		for l, v := range plus {
			up[l] = v + minus[l]
		}
	}
}

func (d *direct) half(dst, src []float64, stride, imag, lines, reach int) {
	plus, minus := make([]float64, lines), make([]float64, lines)
	for p := range min(d.voxels/2, reach) + 1 {
		weigh(plus, src, stride, d.cos[p*d.points:(p+1)*d.points])
		weigh(minus, src[imag:], stride, d.sin[p*d.points:(p+1)*d.points])
		for l := range minus {
			minus[l] = -minus[l]
		}
		d.store(dst, p, plus, minus)
	}
}

// weigh sets out to the sum of the rows src[m·stride:] times their weights. Four rows per pass keep the loads and stores
// of out from dominating.
func weigh(out, src []float64, stride int, weights []float64) {
	clear(out)
	n := len(out)
	m := 0
	for ; m+4 <= len(weights); m += 4 {
		a, b := src[m*stride:m*stride+n], src[(m+1)*stride:(m+1)*stride+n]
		c, d := src[(m+2)*stride:(m+2)*stride+n], src[(m+3)*stride:(m+3)*stride+n]
		a, b, c, d = a[:len(out)], b[:len(out)], c[:len(out)], d[:len(out)]
		wa, wb, wc, wd := weights[m], weights[m+1], weights[m+2], weights[m+3]
		for i := range out {
			out[i] += wa*a[i] + wb*b[i] + wc*c[i] + wd*d[i]
		}
	}
	for ; m < len(weights); m++ {
		a, w := src[m*stride : m*stride+n][:len(out)], weights[m]
		for i := range out {
			out[i] += w * a[i]
		}
	}
}
