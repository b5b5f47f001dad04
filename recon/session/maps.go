package session

import (
	"math"

	"torrloom/recon/volume"
)

// MapOf names a quantity of the chain and its unit: "pO2", "rate" (whose own name is given) or "amplitude".
func MapOf(quantity, rateName string, g volume.Grid, values []float32) volume.Map {
	m := volume.Map{Name: quantity, Unit: "torr", Grid: g, Values: values}
	switch quantity {
	case "rate":
		m.Name, m.Unit = rateName, "1/us"
	case "amplitude":
		m.Unit = "1/mm3"
		if g.Dim() == 2 {
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

// InMap returns a copy of values with NaN wherever the voxel has no answer in the map.
func InMap(fate []uint8, values []float32) []float32 {
	out := make([]float32, len(values))
	for i, v := range values {
		if out[i] = float32(math.NaN()); Fate(fate[i]) == Answered || Fate(fate[i]) == Negative {
			out[i] = v
		}
	}
	return out
}
