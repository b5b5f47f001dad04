package session

import (
	"torrloom/recon/acquisition"
	"torrloom/recon/volume"
)

// MapOf names a quantity of the chain and its unit: "pO2", "rate" or "amplitude".
func MapOf(quantity string, a *acquisition.Acquisition, g volume.Grid, values []float32) volume.Map {
	m := volume.Map{Name: quantity, Unit: "torr", Grid: g, Values: values}
	switch quantity {
	case "rate":
		m.Name, m.Unit = a.RateName(), "1/us"
	case "amplitude":
		m.Unit = "1/mm3"
		if a.Dim == 2 {
			m.Unit = "1/mm2"
		}
	}
	return m
}

// InMask tells for every fate whether the voxel passed the mask.
func InMask(fate []uint8) []bool {
	out := make([]bool, len(fate))
	for i, f := range fate {
		out[i] = Fate(f) != OutsideView && Fate(f) != BelowMask
	}
	return out
}
