package acquisition

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// noise returns a trace of noise about a slow wave, as a digitiser of 12 bits gives it.
func noise(n int) []float64 {
	random := rand.New(rand.NewPCG(4, 2))
	out := make([]float64, n)
	for i := range out {
		out[i] = math.Round(800*math.Sin(float64(i)/40) + 30*random.NormFloat64())
	}
	return out
}

func clippedAt(level float64, values []float64) []float64 {
	out := make([]float64, len(values))
	for i, v := range values {
		out[i] = math.Max(-level, math.Min(level, v))
	}
	return out
}

func TestEveryDoubtIsSaidInWords(t *testing.T) {
	zeros := make([]float64, 200)
	padded := append(noise(300), zeros...)
	spoiled := noise(100)
	spoiled[3], spoiled[7], spoiled[9] = math.NaN(), math.NaN(), math.Inf(-1)
	for name, c := range map[string]struct {
		values []float64
		words  string // empty for no doubt
	}{
		"a sound trace":             {noise(4000), ""},
		"a trace padded with zeros": {padded, ""},
		"few whole numbers":         {[]float64{0, 1, 1, 0, 1, 1, 1, 1, 0, 0, 1, 1}, ""},
		"a constant list":           {[]float64{4, 4, 4, 4, 4, 4}, ""},
		"NaN and infinity":          {spoiled, "2 values are NaN and 1 infinite, of 100"},
		"a dead channel":            {zeros, "all values are 0; the channel may not have been recorded"},
		"clipped on both sides":     {clippedAt(700, noise(4000)), "flat at 700 and at -700"},
		"clipped above": {append(clippedAt(700, noise(120)), noise(60)[:30]...),
			"flat at its greatest value 700"},
		"too small": {scaledBy(1e-21, noise(4000)), "the scale is unusual"},
		"too large": {scaledBy(1e16, noise(4000)), "the scale is unusual"},
	} {
		got := strings.Join(Doubts(named(t, "x", "", tableOf(len(c.values)), c.values)), "\n")
		if (got == "") != (c.words == "") || !strings.Contains(got, c.words) {
			t.Errorf("%s: %q, want %q", name, got, c.words)
		}
	}
}

// tableOf returns a shape of traces for n values, of a list for few.
func tableOf(n int) []int {
	if n < 64 {
		return []int{n}
	}
	return []int{5, n / 5}
}

func TestListsMayBeConstantOrFlat(t *testing.T) {
	roles := append(make([]float64, 200), 1, 1, 1, 1, 1)
	for _, shape := range [][]int{{205}, {1, 205}} {
		if got := Doubts(named(t, "shot_role", "", shape, roles)); len(got) != 0 {
			t.Errorf("%q", got)
		}
	}
	if got := Doubts(named(t, "gradient_mT_per_m", "", []int{100, 3}, make([]float64, 300))); len(got) != 0 {
		t.Errorf("%q", got)
	}
}

func TestTheChannelsOfComplexTracesAreDoubtedApart(t *testing.T) {
	good, dead := noise(500), make([]float64, 500)
	weave := func(re, im []float64) Array {
		var pairs []float64
		for i := range re {
			pairs = append(pairs, re[i], im[i])
		}
		return complexes(t, "x", []int{len(re)}, pairs)
	}
	if got := Doubts(weave(good, noise(500))); len(got) != 0 {
		t.Errorf("%q", got)
	}
	if got := Doubts(weave(good, dead)); len(got) != 1 ||
		!strings.HasPrefix(got[0], "x, imaginary part: all values are 0") {
		t.Errorf("%q", got)
	}
	if got := Doubts(weave(good, scaledBy(1e-5, good))); len(got) != 1 ||
		!strings.Contains(got[0], "one may be scaled otherwise") {
		t.Errorf("%q", got)
	}
}
