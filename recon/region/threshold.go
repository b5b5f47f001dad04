package region

import (
	"math"
	"slices"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// Threshold is where a map lies between two values, both allowed; a voxel without a value is outside. Of what is left,
// all voxels are taken, or the connected piece that holds a seed, or the largest one.
type Threshold struct {
	Map        string      `json:"map"` // "pO2", "rate", "amplitude"
	AtLeast    *float64    `json:"atLeast,omitempty"`
	AtMost     *float64    `json:"atMost,omitempty"`
	Connected  string      `json:"connected"`            // row of Connections
	Neighbours int         `json:"neighbours,omitempty"` // 6 (faces) or 26 (faces, edges, corners); in 2D 4 or 8 of them
	SeedMM     *[3]float64 `json:"seedMM,omitempty"`
}

// Connections lists what of a threshold is taken.
var Connections = []string{"all", "seed", "largest"}

func (t *Threshold) check() error {
	if t.Map == "" {
		return badSetting("threshold.map", "no map named; use the name of a map, such as pO2 or amplitude")
	}
	if t.AtLeast == nil && t.AtMost == nil {
		return badSetting("threshold", "neither atLeast nor atMost; give at least one bound")
	}
	for _, bound := range []*float64{t.AtLeast, t.AtMost} {
		if bound != nil && !finite(*bound) {
			return badSetting("threshold", "a bound of %g; bounds are finite, leave one out for none", *bound)
		}
	}
	if !slices.Contains(Connections, t.Connected) {
		return badSetting("threshold.connected", "%q is not known; use all, seed or largest", t.Connected)
	}
	if t.Connected != "all" && t.Neighbours != 6 && t.Neighbours != 26 {
		return badSetting("threshold.neighbours", "%d; use 6 or 26", t.Neighbours)
	}
	if t.Connected == "seed" && (t.SeedMM == nil || !finite(t.SeedMM[:]...)) {
		return badSetting("threshold.seedMM", "no seed; give a place in mm, or take the largest piece")
	}
	return nil
}

func (t *Threshold) mask(g volume.Grid, c Context) (Mask, error) {
	values, known := c.Maps[t.Map]
	if !known {
		return nil, badSetting("threshold.map", "there is no map %q here; it may need a calibration or another stage first", t.Map)
	}
	if len(values) != g.Voxels() {
		return nil, fault.New(fault.Bug, "threshold.map", "%d values of %q for %d voxels", len(values), t.Map, g.Voxels())
	}
	out := make(Mask, len(values))
	for i, v := range values {
		out[i] = v == v && !(t.AtLeast != nil && float64(v) < *t.AtLeast) && !(t.AtMost != nil && float64(v) > *t.AtMost)
	}
	switch t.Connected {
	case "seed":
		return t.fromSeed(g, out)
	case "largest":
		return Largest(g, out, t.Neighbours), nil
	}
	return out, nil
}

func (t *Threshold) fromSeed(g volume.Grid, m Mask) (Mask, error) {
	seed, inside := VoxelAt(g, *t.SeedMM)
	if !inside || !m[seed] {
		return nil, badSetting("threshold.seedMM", "the voxel at %v mm does not lie within the bounds; move the seed or widen them", *t.SeedMM)
	}
	return Connected(g, m, seed, t.Neighbours), nil
}

// VoxelAt returns the voxel whose centre is nearest to a place, and whether the place lies in the grid.
func VoxelAt(g volume.Grid, mm [3]float64) (index int, inside bool) {
	var at [3]int
	for axis, v := range mm {
		at[axis] = int(math.Round((v - g.MM(axis, 0)) / g.VoxelMM[axis]))
		if at[axis] < 0 || at[axis] >= g.N[axis] {
			return 0, false
		}
	}
	return g.Index(at[0], at[1], at[2]), true
}

// Connected returns the voxels of m that are joined to a seed in m through 6 or 26 neighbours.
func Connected(g volume.Grid, m Mask, seed, neighbours int) Mask {
	out := make(Mask, len(m))
	if !m[seed] {
		return out
	}
	flood(g, m, seed, neighbours, out)
	return out
}

// Largest returns the connected piece of m with the most voxels, the first of equals; nothing of an empty mask.
func Largest(g volume.Grid, m Mask, neighbours int) Mask {
	seen, most, best := make(Mask, len(m)), 0, -1
	for i, in := range m {
		if in && !seen[i] {
			if n := flood(g, m, i, neighbours, seen); n > most {
				most, best = n, i
			}
		}
	}
	if best < 0 {
		return make(Mask, len(m))
	}
	return Connected(g, m, best, neighbours)
}

// flood marks the piece of m around a voxel in seen and returns its size.
func flood(g volume.Grid, m Mask, from, neighbours int, seen Mask) int {
	stack, count := []int{from}, 0
	seen[from] = true
	for len(stack) > 0 {
		i := stack[len(stack)-1]
		stack = stack[:len(stack)-1]
		count++
		eachNeighbour(g, i, neighbours, func(j int) {
			if m[j] && !seen[j] {
				seen[j] = true
				stack = append(stack, j)
			}
		})
	}
	return count
}

func eachNeighbour(g volume.Grid, i, neighbours int, visit func(j int)) {
	x, y, z := i%g.N[0], i/g.N[0]%g.N[1], i/(g.N[0]*g.N[1])
	for dz := -1; dz <= 1; dz++ {
		for dy := -1; dy <= 1; dy++ {
			for dx := -1; dx <= 1; dx++ {
				steps := dx*dx + dy*dy + dz*dz
				if steps == 0 || neighbours == 6 && steps > 1 {
					continue
				}
				if nx, ny, nz := x+dx, y+dy, z+dz; nx >= 0 && ny >= 0 && nz >= 0 && nx < g.N[0] && ny < g.N[1] && nz < g.N[2] {
					visit(g.Index(nx, ny, nz))
				}
			}
		}
	}
}
