package quality

import (
	"math"
	"math/cmplx"
	"slices"

	"torrloom/recon/acquisition"
)

// Single-point data are judged sample time by sample time: each is a k-space grid of its own.

var singlePointChecks = []Check{
	{Name: "single-point-fold", Label: "sample times at which the object folds over", Needs: []Need{singlePoint},
		Rule: "the field of view 1/((γ/2π)·ΔG·t) is larger than the object", Source: "sampling theorem on the grid of gradients; the field shrinks as t grows",
		Advice: "leave the later sample times out, or take a finer gradient step", Run: singlePointFold},
	{Name: "single-point-noise", Label: "signal of the sample times", Needs: []Need{singlePoint},
		Rule: "the signal without gradient stands at least 10 times above the noise at the earliest usable time", Source: "own rule; noise from the mismatch of opposite gradients",
		Advice: "average more, or use fewer and earlier sample times", Run: singlePointNoise},
	{Name: "single-point-pairs", Label: "opposite gradients", Needs: []Need{singlePoint},
		Rule: "traces of opposite gradients have the same size, within six spreads of the others or 10 % of their own", Source: "the k-space of a real object is Hermitian",
		Advice: "leave these shots out", Run: singlePointPairs},
}

// gradientStep returns the distance of neighbouring grid values along an axis in mT/m, 0 when there is but one.
func (s *Subject) gradientStep(axis int) float64 {
	var values []float64
	for _, shot := range s.S.KeptShots(s.A) {
		values = append(values, s.A.GradientMTPerM[shot][axis])
	}
	slices.Sort(values)
	span := values[len(values)-1] - values[0]
	step := span
	for i := 1; i < len(values); i++ {
		// Steps far below the span are rounding of one value.
		if d := values[i] - values[i-1]; d > 1e-4*span {
			step = math.Min(step, d)
		}
	}
	return step
}

// axisLine lists the shots nearest to an axis through the origin of gradients, in order along it.
func (s *Subject) axisLine(axis int) []int {
	shots := s.S.KeptShots(s.A)
	aside := func(shot int) float64 {
		g := s.A.GradientMTPerM[shot]
		g[axis] = 0
		return math.Sqrt(g[0]*g[0] + g[1]*g[1] + g[2]*g[2])
	}
	least := math.Inf(1)
	for _, shot := range shots {
		least = math.Min(least, aside(shot))
	}
	seen := map[int64]bool{}
	var line []int
	step := math.Max(s.gradientStep(axis), 1e-9)
	for _, shot := range shots {
		key := int64(math.Round(2 * s.A.GradientMTPerM[shot][axis] / step))
		if aside(shot) <= least*(1+1e-6)+1e-9 && !seen[key] {
			seen[key] = true
			line = append(line, shot)
		}
	}
	slices.SortFunc(line, func(a, b int) int {
		if s.A.GradientMTPerM[a][axis] < s.A.GradientMTPerM[b][axis] {
			return -1
		}
		return 1
	})
	return line
}

// sampleTimeNS returns the time of a sample after k = 0.
func (s *Subject) sampleTimeNS(j int) float64 {
	return (float64(j) - s.A.TimeZeroSample - s.S.TimeShiftSamples) * s.A.DwellNS
}

// fieldMM returns the field of view along an axis at sample j.
func (s *Subject) fieldMM(axis, j int) float64 {
	return 1 / (acquisition.KPerNS(s.gradientStep(axis), math.Abs(s.sampleTimeNS(j))))
}

// extentAlong returns the diameter of the object along an axis around the gradient centre: where the projection of the
// earliest usable sample time falls below a tenth of its peak for good. Early times have a wide field, but little
// resolution: the first time whose line reaches at least four points across the object is used.
func (s *Subject) extentAlong(axis int) (mm float64, ok bool) {
	line := s.axisLine(axis)
	if len(line) < 5 {
		return 0, false
	}
	best := math.Inf(1)
	for j := range s.A.Samples {
		if s.sampleTimeNS(j) <= 0 {
			continue
		}
		width := s.widthAt(axis, j, line)
		field := s.fieldMM(axis, j)
		if width > 0.9*field {
			break // from here on the object folds over, and looks smaller than it is
		}
		best = math.Min(best, width)
	}
	return best, !math.IsInf(best, 1)
}

// widthAt returns twice the largest distance from the centre at which the windowed projection onto an axis at sample j
// is above a tenth of its peak, less what the window's own blur adds.
func (s *Subject) widthAt(axis, j int, line []int) float64 {
	const positions = 129
	delay := s.S.ReferenceDelay(s.A)
	field := s.fieldMM(axis, j)
	most := math.Abs(s.A.GradientMTPerM[line[len(line)-1]][axis])
	for _, shot := range line {
		most = math.Max(most, math.Abs(s.A.GradientMTPerM[shot][axis]))
	}
	perMM := acquisition.KPerNS(1, s.sampleTimeNS(j))
	value := make([]float64, positions)
	peak := 0.0
	for i := range value {
		x := field * (float64(i)/(positions-1) - 0.5)
		var sum complex128
		for _, shot := range line {
			g := s.A.GradientMTPerM[shot][axis]
			w := 0.5 + 0.5*math.Cos(math.Pi*g/(1.1*most))
			sum += complex128(s.A.Trace(delay, shot)[j]) * cmplx.Rect(w, 2*math.Pi*perMM*g*x)
		}
		value[i] = cmplx.Abs(sum)
		peak = math.Max(peak, value[i])
	}
	far := 0.0
	for i, v := range value {
		if v > 0.1*peak {
			far = math.Max(far, math.Abs(field*(float64(i)/(positions-1)-0.5)))
		}
	}
	return 2 * far
}

func singlePointFold(s *Subject) []Finding {
	var out []Finding
	for axis := range s.A.Dim {
		extent, ok := s.extentAlong(axis)
		name := [3]string{"x", "y", "z"}[axis]
		if !ok {
			out = append(out, found(Doubt, 0, "ns", "the object's extent along %s cannot be told: it folds over at every sample time, or the line of gradients is too short", name))
			continue
		}
		limit := 1 / (acquisition.KPerNS(s.gradientStep(axis), 1) * extent)
		last := s.sampleTimeNS(s.A.Samples - 1)
		f := doubtIf(last > limit, limit, "ns", "along %s the object is %.3g mm across; it folds over from %.4g ns on, the last sample is at %.4g ns", name, extent, limit, last)
		out = append(out, f)
	}
	return out
}

// oppositePairs lists the pairs of shots with opposite gradients, each once.
func (s *Subject) oppositePairs() [][2]int {
	type key [3]int64
	step := 0.0
	for axis := range 3 {
		step = math.Max(step, s.gradientStep(axis))
	}
	at := func(shot int, sign float64) (k key) {
		for axis, g := range s.A.GradientMTPerM[shot] {
			k[axis] = int64(math.Round(sign * g / math.Max(step, 1e-9) * 1000))
		}
		return k
	}
	seen := map[key]int{}
	var out [][2]int
	for _, shot := range s.S.KeptShots(s.A) {
		if other, ok := seen[at(shot, -1)]; ok {
			out = append(out, [2]int{other, shot})
			continue
		}
		seen[at(shot, 1)] = shot
	}
	return out
}

// mismatch returns the difference of size of two traces at the reference delay, root of the mean square over the
// samples, and the size itself.
func (s *Subject) mismatch(pair [2]int) (difference, size float64) {
	delay := s.S.ReferenceDelay(s.A)
	a, b := s.A.Trace(delay, pair[0]), s.A.Trace(delay, pair[1])
	for j := range a {
		x, y := cmplx.Abs(complex128(a[j])), cmplx.Abs(complex128(b[j]))
		difference += (x - y) * (x - y)
		size += (x*x + y*y) / 2
	}
	n := float64(len(a))
	return math.Sqrt(difference / n), math.Sqrt(size / n)
}

func singlePointPairs(s *Subject) []Finding {
	pairs := s.oppositePairs()
	if len(pairs) < 8 {
		return []Finding{found(Fine, 0, "", "fewer than eight pairs of opposite gradients; nothing to compare")}
	}
	var differences []float64
	for _, p := range pairs {
		d, _ := s.mismatch(p)
		differences = append(differences, d)
	}
	middle, limit := median(differences), 0.0
	limit = middle + manySpreads*math.Max(spread(differences), 0.1*middle)
	var bad []int
	for k, p := range pairs {
		if _, size := s.mismatch(p); differences[k] > limit && differences[k] > 0.1*size {
			bad = union(bad, p[:])
		}
	}
	worst := quantile(differences, 1) / math.Max(middle, math.SmallestNonzeroFloat64)
	f := doubtIf(len(bad) > 0, worst, "", "%d pairs of opposite gradients; the worst differs %.2g times as much as usual", len(pairs), worst)
	if len(bad) > 0 {
		f.Text += "; one of each pair is bad"
	}
	return []Finding{f.onShots(bad)}
}

func singlePointNoise(s *Subject) []Finding {
	pairs := s.oppositePairs()
	var squares []float64
	for _, p := range pairs {
		d, _ := s.mismatch(p)
		squares = append(squares, d)
	}
	if len(squares) < 8 {
		return []Finding{found(Fine, 0, "", "fewer than eight pairs of opposite gradients; the noise cannot be told")}
	}
	// Sizes of two complex values differ by noise of twice the variance of a channel, where the signal is strong; where
	// it is weak, by less.
	noise := median(squares) / math.Sqrt2
	strongest := 0.0
	delay := s.S.ReferenceDelay(s.A)
	for _, shot := range s.S.KeptShots(s.A) {
		for _, v := range s.A.Trace(delay, shot) {
			strongest = math.Max(strongest, cmplx.Abs(complex128(v)))
		}
	}
	ratio := strongest / math.Max(noise, math.SmallestNonzeroFloat64*1e10)
	ratio = math.Min(ratio, 1e9)
	return []Finding{doubtIf(ratio < 10, ratio, "", "the largest signal stands %.3g times above the noise", ratio)}
}
