package region

import (
	"math"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// Volume is a mask or image drawn elsewhere. Affine takes its voxel indices (i, j, k, 1) to mm, as in a NIfTI file;
// Values is i-fastest.
type Volume struct {
	N      [3]int
	Affine [3][4]float64
	Values []float32
}

// Carried is a mask from a file, resampled onto the grid. Inside is what holds the label, or without one what lies above
// the level.
type Carried struct {
	Source   string   `json:"source"`          // name of the file in the context
	Sampling string   `json:"sampling"`        // row of Samplings
	Label    *float64 `json:"label,omitempty"` // value of the voxels that belong
	Above    float64  `json:"above,omitempty"` // used without a label
	Move     *Rigid   `json:"move,omitempty"`  // from the file's mm to those of the acquisition
}

// Samplings lists how a mask is resampled: by the voxel centre, or by most of 27 points spread over the voxel, which keeps
// the volume of masks that are finer than the grid.
var Samplings = []string{"nearest", "majority"}

func (c *Carried) check() error {
	if c.Source == "" {
		return badSetting("carried.source", "no file named; open a mask first")
	}
	if c.Sampling != "nearest" && c.Sampling != "majority" {
		return badSetting("carried.sampling", "%q is not known; use nearest or majority", c.Sampling)
	}
	if !finite(c.Above) || c.Label != nil && !finite(*c.Label) {
		return badSetting("carried", "label and level are finite numbers")
	}
	if c.Move != nil {
		return c.Move.check()
	}
	return nil
}

func (c *Carried) mask(g volume.Grid, ctx Context) (Mask, error) {
	v, known := ctx.Volumes[c.Source]
	if !known {
		return nil, badSetting("carried.source", "the mask file %q is not open", c.Source)
	}
	read, err := v.reader(c.Move)
	if err != nil {
		return nil, err
	}
	inside := func(r [3]float64) bool {
		value, there := read(r)
		if c.Label != nil {
			return there && float64(value) == *c.Label
		}
		return there && float64(value) > c.Above
	}
	if c.Sampling == "nearest" {
		return where(g, inside), nil
	}
	return where(g, func(r [3]float64) bool { return most(g, r, inside) }), nil
}

// most asks 27 points at thirds of the voxel.
func most(g volume.Grid, r [3]float64, inside func([3]float64) bool) bool {
	count := 0
	for i := range 27 {
		p := [3]float64{
			r[0] + float64(i%3-1)*g.VoxelMM[0]/3,
			r[1] + float64(i/3%3-1)*g.VoxelMM[1]/3,
			r[2] + float64(i/9-1)*g.VoxelMM[2]/3,
		}
		if inside(p) {
			count++
		}
	}
	return count > 13
}

// reader returns a function that gives the value of the voxel that a place of the acquisition lies in.
//
// Errors: bad-file when the affine has no inverse or the values do not fill the volume.
func (v *Volume) reader(move *Rigid) (func(r [3]float64) (float32, bool), error) {
	if len(v.Values) != v.N[0]*v.N[1]*v.N[2] || len(v.Values) == 0 {
		return nil, fault.New(fault.BadFile, "mask", "%d values for %dx%dx%d voxels", len(v.Values), v.N[0], v.N[1], v.N[2])
	}
	toIndex, ok := invert(v.Affine)
	if !ok {
		return nil, fault.New(fault.BadFile, "mask affine", "it has no inverse, so that no place in mm belongs to a voxel; give the file an orientation")
	}
	return func(r [3]float64) (float32, bool) {
		if move != nil {
			r = move.Back(r)
		}
		index := 0
		for axis := 2; axis >= 0; axis-- {
			i := int(math.Round(along(toIndex[axis], r)))
			if i < 0 || i >= v.N[axis] {
				return 0, false
			}
			index = index*v.N[axis] + i
		}
		return v.Values[index], true
	}, nil
}

// At returns the value of the voxel that each voxel centre of a grid lies in, NaN outside: how an image made elsewhere is
// laid under a map. Move, which may be nil, goes from the image's mm to those of the grid.
//
// Errors: bad-file when the affine has no inverse or the values do not fill the volume.
func (v *Volume) At(g volume.Grid, move *Rigid) ([]float32, error) {
	read, err := v.reader(move)
	if err != nil {
		return nil, err
	}
	out := make([]float32, g.Voxels())
	i := 0
	where(g, func(r [3]float64) bool { // visits the voxels in their order
		value, there := read(r)
		if !there {
			value = float32(math.NaN())
		}
		out[i] = value
		i++
		return there
	})
	return out, nil
}

func along(row [4]float64, r [3]float64) float64 {
	return row[0]*r[0] + row[1]*r[1] + row[2]*r[2] + row[3]
}

// invert returns the inverse of an affine, by cofactors.
func invert(a [3][4]float64) (out [3][4]float64, ok bool) {
	minor := func(r, c int) float64 {
		r1, r2, c1, c2 := (r+1)%3, (r+2)%3, (c+1)%3, (c+2)%3
		return a[r1][c1]*a[r2][c2] - a[r1][c2]*a[r2][c1]
	}
	determinant, size := 0.0, 1.0
	for c := range 3 {
		determinant += a[0][c] * minor(0, c)
		size *= math.Sqrt(a[0][c]*a[0][c] + a[1][c]*a[1][c] + a[2][c]*a[2][c])
	}
	// Columns within about 1e-6 rad of one plane make no voxels.
	if !(math.Abs(determinant) > 1e-6*size) {
		return out, false
	}
	for r := range 3 {
		for c := range 3 {
			out[r][c] = minor(c, r) / determinant
			out[r][3] -= out[r][c] * a[c][3]
		}
	}
	return out, true
}
