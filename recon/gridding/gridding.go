// Package gridding reconstructs by direct summation over k-space, made fast by gridding, for several delays at once:
//
//	f(r) = Σ_s Σ_{m=-M..M} w_{s,|m|} S_s(m) exp(i2π m·DeltaK n_s·r),   S_s(-m) = S_s(m)*
//
// which is the sum that back-projection evaluates by interpolating projections. Here the weight may differ from sample
// to sample, and the only error is that of the gridding kernel, which Settings choose. The result is quantitative:
// signal per mm² or mm³. Voxels outside the circle or sphere of the field of view are NaN. The noise of the images is
// that of condition.Spokes.NoiseSDOf.
//
// Source: O'Sullivan, A fast sinc function gridding algorithm for Fourier inversion in computer tomography, IEEE Trans.
// Med. Imaging 4 (1985) 200, for reconstruction by gridding; package nufft for the kernel.
package gridding

import (
	"math"

	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/nufft"
	"torrloom/recon/volume"
)

// Settings choose between speed and accuracy.
type Settings struct {
	Width        int     // kernel width in grid cells, 3 to 8; 0 chooses it by Tolerance
	Tolerance    float64 // largest expected relative error of the sum (nufft.Error), where Width is 0
	Oversampling float64 // grid cells per voxel and axis, 1.25 to 2
}

// Defaults returns width 4 and oversampling 1.5: an error of 2e-4 for an object that keeps away from the rim of
// the field of view, below that of any measured data.
func Defaults() Settings { return Settings{Width: 4, Oversampling: 1.5} }

// Check returns a bad-setting fault for a setting out of range.
func (s Settings) Check() error {
	_, err := s.kernel()
	return err
}

// kernel returns the settings of the sum.
func (s Settings) kernel() (nufft.Settings, error) {
	k := nufft.Settings{Width: s.Width, Oversampling: s.Oversampling}
	if s.Width == 0 {
		w, err := nufft.Width(s.Tolerance, s.Oversampling)
		if err != nil {
			return k, err
		}
		k.Width = w
	}
	return k, k.Check()
}

// gridBytes bounds the grid: delays that would need more are done one group after the other. Within it, a larger group
// is faster.
const gridBytes = 192 << 20

// transformCost is the time to transform one cell, in units of the time to add to one cell.
const transformCost = 10

// Bytes returns the memory that Images needs for its grid and images, beside the spokes.
//
// Errors: those of Settings.Check.
func Bytes(g volume.Grid, delays int, s Settings) (int64, error) {
	plan, err := newPlan(g, s)
	if err != nil {
		return 0, err
	}
	lanes := int64(lanesAtOnce(plan, delays))
	return 8*int64(plan.Cells())*lanes + int64(g.Voxels())*(8*lanes+4*int64(delays)), nil
}

func newPlan(g volume.Grid, s Settings) (*nufft.Plan[float32], error) {
	k, err := s.kernel()
	if err != nil {
		return nil, err
	}
	return nufft.NewPlan[float32](g.N, k)
}

// lanesAtOnce returns how many complex lanes, of two delays each, are worked on together: as even groups as can be.
func lanesAtOnce(plan *nufft.Plan[float32], delays int) int {
	lanes := (delays + 1) / 2
	most := max(1, gridBytes/(8*plan.Cells()))
	groups := (lanes + most - 1) / most
	return max(1, (lanes+groups-1)/max(1, groups))
}

// Images returns the images of all delays of the spokes, [delay][voxel] in one array. Weights, [shot][m] with m =
// 0..sp.Half, are the factors of S(m) and of its mirror S(-m) in the sum; they include the step DeltaK. Progress, if not
// nil, is called with the fraction done.
//
// Errors: those of Settings.Check; bug when weights has the wrong length.
func Images(sp *condition.Spokes, g volume.Grid, weights []float64, s Settings, progress func(float64)) ([]float32, error) {
	if want := len(sp.Shot) * (sp.Half + 1); len(weights) != want {
		return nil, fault.New(fault.Bug, "gridding", "%d density weights for %d samples", len(weights), want)
	}
	plan, err := newPlan(g, s)
	if err != nil {
		return nil, err
	}
	out := make([]float32, len(sp.Delays)*g.Voxels())
	lanes := lanesAtOnce(plan, len(sp.Delays))
	sum := newSummer(sp, g, weights, plan, lanes)
	for from := 0; from < len(sp.Delays); from += 2 * lanes {
		to := min(from+2*lanes, len(sp.Delays))
		if err := sum.run(from, to, within(progress, from, to, len(sp.Delays))); err != nil {
			return nil, err
		}
		sum.store(out, from, to)
	}
	return out, nil
}

// within turns the progress of delays from..to-1 into that of all.
func within(progress func(float64), from, to, all int) func(float64) {
	return func(done float64) {
		if progress != nil {
			progress((float64(from) + done*float64(to-from)) / float64(all))
		}
	}
}

// summer holds the grid of one group of delays and the points of one spoke.
type summer struct {
	sp      *condition.Spokes
	g       volume.Grid
	weights []float64
	grid    *nufft.Grid[float32]
	lanes   int
	image   []float32 // [voxel][2·lanes]
	points  [][3]float64
	values  []float32 // [point][2·lanes] pairs
	share   float64   // of the work that is spreading
}

func newSummer(sp *condition.Spokes, g volume.Grid, weights []float64, plan *nufft.Plan[float32], lanes int) *summer {
	s := &summer{sp: sp, g: g, weights: weights, grid: plan.NewGrid(lanes), lanes: lanes}
	s.image = make([]float32, g.Voxels()*2*lanes)
	touched := float64(len(weights)) * 2 * float64(plan.Touched())
	s.share = touched / (touched + transformCost*float64(plan.Cells()))
	return s
}

// run makes the images of delays from..to-1.
func (s *summer) run(from, to int, progress func(float64)) error {
	s.grid.Reset()
	for i := range s.sp.Shot {
		s.load(i, from, to)
		if err := s.grid.SpreadReal(s.points, s.values); err != nil {
			return err
		}
		progress(s.share * float64(i+1) / float64(len(s.sp.Shot)))
	}
	s.grid.Image(s.image, func(done float64) { progress(s.share + (1-s.share)*done) })
	return nil
}

// load puts the samples of spoke i that have a weight into points and values, at their places in cycles per field of view.
// The sample at the origin is its own mirror and would count twice.
func (s *summer) load(i, from, to int) {
	s.points, s.values = s.points[:0], s.values[:0]
	for m := range s.sp.Half + 1 {
		weight := s.weights[i*(s.sp.Half+1)+m]
		if m == 0 {
			weight /= 2
		}
		if weight == 0 {
			continue
		}
		var k [3]float64
		for axis, n := range s.sp.Directions[i] {
			k[axis] = float64(m) * s.sp.DeltaK * n * float64(s.g.N[axis]) * s.g.VoxelMM[axis]
		}
		s.points = append(s.points, k)
		for _, v := range s.sp.Row(i, m)[from:to] {
			s.values = append(s.values, float32(weight)*real(v), float32(weight)*imag(v))
		}
		for range 2*s.lanes - (to - from) {
			s.values = append(s.values, 0, 0)
		}
	}
}

// store copies the images of delays from..to-1 out of their lanes.
func (s *summer) store(out []float32, from, to int) {
	voxels := s.g.Voxels()
	nan := float32(math.NaN())
	i := 0
	for iz := range s.g.N[2] {
		for iy := range s.g.N[1] {
			for ix := range s.g.N[0] {
				inside := s.g.InsideFieldOfView(ix, iy, iz)
				for d := from; d < to; d++ {
					if inside {
						out[d*voxels+i] = s.image[i*2*s.lanes+d-from]
					} else {
						out[d*voxels+i] = nan
					}
				}
				i++
			}
		}
	}
}
