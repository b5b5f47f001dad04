// Package nufft computes Fourier sums between an image on voxels and points at arbitrary places of k-space, in one, two
// or three dimensions, for several right-hand sides ("lanes") at once. It knows no spokes and no units.
//
//	adjoint:  image_i = Σ_j value_j exp(+i2π k_j·x_i)
//	forward:  value_j = Σ_i image_i exp(-i2π k_j·x_i)
//
// with k in cycles per field of view and x_i = (i - floor(n/2))/n per axis, so that the voxel floor(n/2) sits at the
// origin. An axis with n = 1 is absent. Voxels sample the waves so that k and k + n are the same point: any finite k is
// allowed.
//
// Arrays hold complex numbers as pairs (real, imaginary) of float32 or float64, with the lanes innermost: values are
// [point][lane], images [iz][iy][ix][lane]. Geometry, index and kernel are worked out once for all lanes; and products
// with the real kernel stay real products.
//
// Promise: forward and adjoint are each other's adjoint up to rounding, whatever the accuracy of either.
//
// Method: each point is spread onto a finer periodic grid with a Kaiser-Bessel kernel, the grid is Fourier transformed
// line by line, and the image is divided by the transform of the kernel.
// Sources: Jackson, Meyer, Nishimura & Macovski, IEEE Trans. Med. Imaging 10 (1991) 473, for the kernel; Beatty,
// Nishimura & Pauly, IEEE Trans. Med. Imaging 24 (2005) 799, eq. 5, for its shape at any oversampling.
package nufft

import (
	"torrloom/recon/fault"
	"torrloom/recon/fft"
)

// Float is a real number type of the arrays. Pairs of it are complex64 or complex128 numbers.
type Float interface{ float32 | float64 }

// Settings choose between speed and accuracy.
type Settings struct {
	Width        int     // grid cells, per axis, that one point is spread over: 3 to 8
	Oversampling float64 // cells per voxel and axis, 1.25 to 2; rounded up to a fast transform length
}

const (
	MinWidth, MaxWidth               = 3, 8
	MinOversampling, MaxOversampling = 1.25, 2.0
)

// Check returns a bad-setting fault for a setting out of range.
func (s Settings) Check() error {
	if s.Width < MinWidth || s.Width > MaxWidth {
		return fault.New(fault.BadSetting, "gridding width", "%d cells; use %d to %d", s.Width, MinWidth, MaxWidth)
	}
	return checkOversampling(s.Oversampling)
}

func checkOversampling(oversampling float64) error {
	if !(oversampling >= MinOversampling && oversampling <= MaxOversampling) {
		return fault.New(fault.BadSetting, "gridding oversampling", "%g; use %g to %g", oversampling, MinOversampling, MaxOversampling)
	}
	return nil
}

// Plan holds what all sums of one image size share. It is read-only; several goroutines may share it.
type Plan[F Float] struct {
	axes [3]axis
}

// axis is the geometry of one axis.
type axis struct {
	n          int       // voxels
	length     int       // cells of the periodic grid
	width      int       // cells that a point touches
	scale      float64   // cells per unit of k
	kernel     *kernel   // nil when the axis is absent
	correction []float64 // per voxel: 1 over the transform of the kernel there
}

// NewPlan returns the plan for images of n voxels along x, y, z.
//
// Errors: those of Settings.Check; bad-setting when an axis has no voxel.
func NewPlan[F Float](n [3]int, s Settings) (*Plan[F], error) {
	if err := s.Check(); err != nil {
		return nil, err
	}
	p := &Plan[F]{}
	for i := range n {
		if n[i] < 1 {
			return nil, fault.New(fault.BadSetting, "gridding", "%d voxels along an axis; at least 1 is needed", n[i])
		}
		if i > 0 && n[i] == n[i-1] {
			p.axes[i] = p.axes[i-1]
		} else {
			p.axes[i] = newAxis(n[i], s)
		}
	}
	return p, nil
}

func newAxis(n int, s Settings) axis {
	if n == 1 {
		return axis{n: 1, length: 1, width: 1, scale: 1, correction: []float64{1}}
	}
	a := axis{n: n, length: gridLength(n, s.Oversampling), width: s.Width}
	a.scale = float64(a.length) / float64(n)
	a.kernel = newKernel(s.Width, a.scale)
	a.correction = make([]float64, n)
	for i := range a.correction {
		a.correction[i] = 1 / a.kernel.transform(float64(i-n/2)/float64(a.length))
	}
	return a
}

// gridLength returns the shortest fast length of at least n·oversampling. The slack keeps a product that is whole, such
// as 40·1.35, from being pushed up by its rounding.
func gridLength(n int, oversampling float64) int {
	length := int(float64(n)*oversampling*(1-1e-12)) + 1
	return fft.FastLength(length)
}

// Voxels returns the number of voxels of an image.
func (p *Plan[F]) Voxels() int { return p.axes[0].n * p.axes[1].n * p.axes[2].n }

// Cells returns the number of cells of a grid: a grid of some lanes holds twice as many numbers per lane.
func (p *Plan[F]) Cells() int { return p.rowCells() * p.axes[1].length * p.axes[2].length }

// Touched returns the number of cells that one point is spread over.
func (p *Plan[F]) Touched() int { return p.axes[0].width * p.axes[1].width * p.axes[2].width }

// rowCells returns the cells stored per row along x: the period and, beyond it, room for points near its end.
func (p *Plan[F]) rowCells() int { return p.axes[0].length + p.axes[0].width }

// Adjoint returns the image, [voxel][lane], of values at points, [point][lane].
//
// Errors: bad-setting when a point is not finite or values does not hold lanes pairs per point.
func (p *Plan[F]) Adjoint(points [][3]float64, values []F, lanes int) ([]F, error) {
	g := p.NewGrid(lanes)
	if err := g.Spread(points, values); err != nil {
		return nil, err
	}
	image := make([]F, p.Voxels()*2*lanes)
	g.Image(image, nil)
	return image, nil
}

// Forward returns the values at points, [point][lane], of an image, [voxel][lane].
//
// Errors: bad-setting when a point is not finite or the image does not hold lanes pairs per voxel.
func (p *Plan[F]) Forward(points [][3]float64, image []F, lanes int) ([]F, error) {
	if len(image) != p.Voxels()*2*lanes {
		return nil, fault.New(fault.BadSetting, "gridding", "an image of %d numbers for %d voxels in %d lanes", len(image), p.Voxels(), lanes)
	}
	g := p.NewGrid(lanes)
	g.Load(image, nil)
	values := make([]F, len(points)*2*lanes)
	return values, g.Interpolate(points, values)
}
