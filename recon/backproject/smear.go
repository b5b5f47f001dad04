package backproject

import "math"

// bundle is one table entry or one voxel of a growing image: up to ten delays, two to a word. A word holds two signed
// 32-bit fixed-point numbers a, b as a + b·2³² (modulo 2⁶⁴), so that one addition adds both. Sums may wrap on the way;
// only the finished voxel has to fit.
type bundle interface {
	[1]uint64 | [2]uint64 | [3]uint64 | [4]uint64 | [5]uint64
}

const mostPairs = 5

// pack returns a + b·2³², both rounded to the nearest whole number.
func pack(a, b float64) uint64 {
	return uint64(int64(math.RoundToEven(a))) + uint64(int64(math.RoundToEven(b)))<<32
}

// unpack returns the two numbers of a word.
func unpack(w uint64) (a, b float64) {
	low := int64(int32(uint32(w)))
	return float64(low), float64(int32(uint32((w - uint64(low)) >> 32)))
}

// walk is the place of a row's first voxel on a projection and the step to the next, in table entries with 32 binary
// places.
type walk struct{ at, by int64 }

// adder adds to every voxel of a row the nearest entries of four projections.
type adder[T bundle] func(row []T, tables [4][]T, w [4]walk)

// smear returns the images of the source's delays, [delay][voxel].
func smear[T bundle](s *source, add adder[T], progress func(float64)) []float32 {
	entries, shots := s.entries(), len(s.sp.Shot)
	sum := make([]T, s.g.Voxels())
	table := make([]T, chunk*entries)
	for from := 0; from < shots; from += chunk {
		to := min(from+chunk, shots)
		for i := from; i < to; {
			count := s.load(i, to)
			for q := range count {
				fill(s, q, table[(i+q-from)*entries:(i+q-from+1)*entries])
			}
			i += count
		}
		// A chunk that is not a multiple of four ends with empty projections.
		clear(table[(to-from)*entries : (to-from+3)/4*4*entries])
		for iz := 0; iz < s.g.N[2]; iz += slab {
			smearSlab(s, add, sum, table, from, to, iz, min(iz+slab, s.g.N[2]))
		}
		progress(float64(to) / float64(shots))
	}
	return finish(s, sum)
}

// fill writes spoke q of the loaded block into its table: the transformed samples and the straight lines between them.
func fill[T bundle](s *source, q int, entries []T) {
	for l := range s.pairs {
		a, b := s.at(-s.reach, q, l)
		at := 0
		for x := -s.reach + 1; x <= s.reach; x++ {
			nextA, nextB := s.at(x, q, l)
			stepA, stepB := (nextA-a)/float64(s.between), (nextB-b)/float64(s.between)
			for step := range s.between {
				entries[at][l] = pack(a+float64(step)*stepA, b+float64(step)*stepB)
				at++
			}
			a, b = nextA, nextB
		}
		entries[at][l] = pack(a, b)
	}
}

// smearSlab adds spokes from..to-1 of the table to the slices z0..z1-1, four spokes at a time.
func smearSlab[T bundle](s *source, add adder[T], sum, table []T, from, to, z0, z1 int) {
	entries := s.entries()
	for i := from; i < to; i += 4 {
		var tables [4][]T
		for q := range 4 {
			tables[q] = table[(i-from+q)*entries : (i-from+q+1)*entries]
		}
		for iz := z0; iz < z1; iz++ {
			for iy := range s.g.N[1] {
				if inside := s.rows[iz*s.g.N[1]+iy]; inside[0] < inside[1] {
					start := s.g.Index(0, iy, iz)
					add(sum[start+inside[0]:start+inside[1]], tables, s.walks(i, to, inside[0], iy, iz))
				}
			}
		}
	}
}

// walks returns how a row of voxels that starts at (first, iy, iz) runs over the projections of spokes i..i+3. A spoke
// that is not there has an empty projection and stands still.
func (s *source) walks(i, to, first, iy, iz int) (w [4]walk) {
	const one = 1 << 32
	for q := 0; q < 4 && i+q < to; q++ {
		n := s.sp.Directions[i+q]
		start := (n[0]*s.g.MM(0, first) + n[1]*s.g.MM(1, iy) + n[2]*s.g.MM(2, iz)) / s.stepMM
		w[q] = walk{int64((start + float64(s.reach*s.between) + 0.5) * one), int64(n[0] * s.g.VoxelMM[0] / s.stepMM * one)}
	}
	return w
}

// finish turns the sums into one image per delay, NaN outside the field of view.
func finish[T bundle](s *source, sum []T) []float32 {
	voxels := len(sum)
	out := make([]float32, (s.to-s.from)*voxels)
	for i := range out {
		out[i] = float32(math.NaN())
	}
	for iz := range s.g.N[2] {
		for iy := range s.g.N[1] {
			inside := s.rows[iz*s.g.N[1]+iy]
			for ix := inside[0]; ix < inside[1]; ix++ {
				i := s.g.Index(ix, iy, iz)
				for d := range s.scale {
					pair := [2]float64{}
					pair[0], pair[1] = unpack(sum[i][d/2])
					out[d*voxels+i] = float32(pair[d%2] / s.scale[d])
				}
			}
		}
	}
	return out
}
