package region

import (
	"math"

	"torrloom/recon/volume"
)

// Ellipsoid is a sphere or an ellipsoid with axes along x, y, z, turned about z by an angle.
type Ellipsoid struct {
	CentreMM [3]float64 `json:"centreMM"`
	SemiMM   [3]float64 `json:"semiMM"`
	AngleDeg float64    `json:"angleDeg,omitempty"`
}

func (e *Ellipsoid) check() error {
	if !positive(e.SemiMM[:]...) || !finite(e.CentreMM[:]...) || !finite(e.AngleDeg) {
		return badSetting("ellipsoid", "semi-axes %v mm about %v mm; positive semi-axes are needed", e.SemiMM, e.CentreMM)
	}
	return nil
}

func (e *Ellipsoid) mask(g volume.Grid, _ Context) (Mask, error) {
	return where(g, func(r [3]float64) bool {
		d := turned(r, e.CentreMM, e.AngleDeg)
		sum := 0.0
		for axis, semi := range e.SemiMM {
			sum += d[axis] / semi * (d[axis] / semi)
		}
		return sum <= 1+rounding
	}), nil
}

// Box is a box with edges along x, y, z, turned about z by an angle.
type Box struct {
	CentreMM [3]float64 `json:"centreMM"`
	EdgeMM   [3]float64 `json:"edgeMM"`
	AngleDeg float64    `json:"angleDeg,omitempty"`
}

func (b *Box) check() error {
	if !positive(b.EdgeMM[:]...) || !finite(b.CentreMM[:]...) || !finite(b.AngleDeg) {
		return badSetting("box", "edges %v mm about %v mm; positive edges are needed", b.EdgeMM, b.CentreMM)
	}
	return nil
}

// mask takes a voxel on the upper faces and leaves one on the lower, so that boxes side by side share none.
func (b *Box) mask(g volume.Grid, _ Context) (Mask, error) {
	return where(g, func(r [3]float64) bool {
		d := turned(r, b.CentreMM, b.AngleDeg)
		for axis, edge := range b.EdgeMM {
			if !(d[axis] > -edge/2+rounding && d[axis] <= edge/2+rounding) {
				return false
			}
		}
		return true
	}), nil
}

// turned returns r seen from the centre in axes that are turned about z.
func turned(r, centre [3]float64, angleDeg float64) [3]float64 {
	sin, cos := math.Sincos(angleDeg * math.Pi / 180)
	x, y := r[0]-centre[0], r[1]-centre[1]
	return [3]float64{cos*x + sin*y, cos*y - sin*x, r[2] - centre[2]}
}
