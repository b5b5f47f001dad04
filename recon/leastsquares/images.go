package leastsquares

import (
	"math"

	"torrloom/recon/condition"
	"torrloom/recon/volume"
)

// Result is what Images returns.
type Result struct {
	Values  []float32 // [delay][voxel]
	NoiseSD []float64 // [delay] SD of noise in a voxel, root mean square over the field of view
	Curve   [][]Point // [delay][iteration], the first being the gridded image that the iterations start from
}

// groupBytes bounds the working memory: delays that would need more are done one group after the other.
const groupBytes = 256 << 20

// Images returns the images of all delays of the spokes. Weights, [shot][m] with m = 0..sp.Half, are those of samples and
// mirrors alike, as for gridding: density weights, DeltaK included. Progress, if not nil, is called with the fraction
// done.
//
// Noise, from the function of that name, tells NoiseSD: it follows the noise realisations through the same iterations
// (see solver), and its own chance is about 1 part in √(2·voxels·realisations/blur), blur being the voxels over which noise
// is alike. Each realisation costs as much time as another delay; one is enough in 3D. Without noise, nil, NoiseSD is nil.
// With the "edges" penalty noise differs between flat parts and edges, and weak edges come and go with it; NoiseSD is then a
// guide, some 10 % low.
//
// Errors: those of Settings.Check; bad-setting for a negative weight, no-answer when all are 0, bug for a wrong number of
// them or for noise of other spokes.
func Images(sp, noise *condition.Spokes, g volume.Grid, weights []float64, s Settings, progress func(float64)) (*Result, error) {
	if err := s.Check(); err != nil {
		return nil, err
	}
	report := func(from, to float64) func(float64) {
		return func(done float64) {
			if progress != nil {
				progress(from + (to-from)*done)
			}
		}
	}
	const setUp = 0.1 // of the whole
	p, err := newProblem(sp, noise, g, weights, report(0, setUp))
	if err != nil {
		return nil, err
	}
	voxels, all := g.Voxels(), len(sp.Delays)
	out := &Result{Values: make([]float32, all*voxels)}
	group := p.delaysAtOnce(all)
	for from := 0; from < all; from += group {
		to := min(from+group, all)
		start := setUp + (1-setUp)*float64(from)/float64(all)
		if err := p.run(out, voxels, s, from, to, report(start, setUp+(1-setUp)*float64(to)/float64(all))); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// delaysAtOnce returns how many delays are worked on together: an even number where the noise does not fill the lanes,
// so that the same delays always share a lane.
func (p *problem) delaysAtOnce(all int) int {
	unit := 1 + p.perDelay%2
	most := int(groupBytes/p.bytesPerDelay()) / unit * unit
	return max(1, min(all, max(unit, most)))
}

// bytesPerDelay counts the working memory: the transform, a box, and five vectors.
func (p *problem) bytesPerDelay() int64 {
	perColumn := p.operator.Bytes(1, 4)/2 + 4*int64(p.n[0]*p.n[1]*p.n[2]) + 5*4*int64(len(p.support))
	return int64(p.perDelay) * perColumn
}

// Bytes returns about the memory that Images needs beside the spokes, for spokes of a band and so many noise
// realisations.
func Bytes(g volume.Grid, bandMM float64, delays, realisations int) int64 {
	n, _ := boxOf(g, bandMM)
	voxels, wide := int64(1), int64(1)
	for axis := range g.Dim() {
		voxels, wide = voxels*int64(n[axis]), wide*int64(2*n[axis])
	}
	perColumn := 4*wide/2 + 4*voxels + 5*4*voxels // as bytesPerDelay, of a full box
	atOnce := min(int64(delays)*int64(1+realisations)*perColumn, max(groupBytes, 2*int64(1+realisations)*perColumn))
	setUp := 8 * int64(float64(voxels)*math.Pow(accuracy.Oversampling, float64(g.Dim()))) // the grid that makes the operator
	return max(atOnce, setUp) + 4*wide + 4*int64(g.Voxels())*int64(delays)
}

// run makes the images of delays from..to-1.
func (p *problem) run(out *Result, voxels int, s Settings, from, to int, progress func(float64)) error {
	right, energy, err := p.gridded(from, to, func(done float64) { progress(0.1 * done) })
	if err != nil {
		return err
	}
	penalty, err := PenaltyNamed(s.Penalty)
	if err != nil {
		return err
	}
	cg := newSolver(p, right, energy, penalty.rule(p, s, to-from))
	curve := make([][]Point, to-from)
	note := func() {
		for d, point := range cg.point() {
			curve[d] = append(curve[d], point)
		}
	}
	for i := range s.Iterations {
		if startsRound(i, s.Iterations, penalty.Rounds) {
			cg.begin()
		}
		if i == 0 {
			note()
		}
		cg.step(func(done float64) { progress(0.1 + 0.9*(float64(i)+done)/float64(s.Iterations)) })
		note()
	}
	out.Curve = append(out.Curve, curve...)
	if p.noise != nil {
		out.NoiseSD = append(out.NoiseSD, p.noiseIn(cg.image, from, to)...)
	}
	p.store(out, voxels, cg.image, from, to)
	return nil
}

// startsRound tells whether iteration i of all is the first of one of so many equal rounds.
func startsRound(i, all, rounds int) bool {
	return i == 0 || i*rounds/all != (i-1)*rounds/all
}

// store cuts the field of view out of the support.
func (p *problem) store(out *Result, voxels int, image []float32, from, to int) {
	values, width := out.Values[from*voxels:to*voxels], p.columns(to-from)
	for i := range values {
		values[i] = float32(math.NaN())
	}
	for i, at := range p.inside {
		for d := range to - from {
			if at >= 0 {
				values[d*voxels+int(at)] = image[i*width+p.perDelay*d]
			}
		}
	}
}
