package compare

import (
	"math"
	"slices"
)

// edgesOf returns the edges of n equal bins that take in all values but the outermost thousandth on either side, so that
// a few wild voxels do not squeeze the rest together, and the values named in also.
func edgesOf(n int, values []float64, also ...float64) []float64 {
	v := sorted(values)
	low, high := v[len(v)/1000], v[len(v)-1-len(v)/1000]
	for _, edge := range also {
		low, high = math.Min(low, edge), math.Max(high, edge)
	}
	return evenEdges(n, low, high)
}

// evenEdges returns the edges of n equal bins from low to high; around low, if they are equal.
func evenEdges(n int, low, high float64) []float64 {
	if !(high > low) {
		reach := math.Max(0.5, 1e-6*math.Abs(low))
		low, high = low-reach, high+reach
	}
	out := make([]float64, n+1)
	for b := range out {
		out[b] = low + (high-low)*float64(b)/float64(n)
	}
	return out
}

// binOf returns the bin of x among equal bins, the last one closed, or -1.
func binOf(edges []float64, x float64) int {
	n := len(edges) - 1
	low, high := edges[0], edges[n]
	if !(x >= low && x <= high) {
		return -1
	}
	return min(n-1, int((x-low)/(high-low)*float64(n)))
}

func sorted(values []float64) []float64 {
	out := slices.Clone(values)
	slices.Sort(out)
	return out
}

// quantile interpolates linearly between the order statistics of sorted values, at q·(n-1).
func quantile(v []float64, q float64) float64 {
	at := q * float64(len(v)-1)
	i := int(at)
	if i+1 >= len(v) {
		return v[len(v)-1]
	}
	return v[i] + (at-float64(i))*(v[i+1]-v[i])
}
