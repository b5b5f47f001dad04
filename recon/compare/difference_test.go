package compare

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"torrloom/recon/fault"
)

// sharedNoise returns, for many voxels of true value zero, two maps whose noise has SDs a and b and the given correlation.
func sharedNoise(r *rand.Rand, n int, a, b, correlation float64) (reference, other Layer) {
	for range n {
		u, v := r.NormFloat64(), r.NormFloat64()
		v = correlation*u + math.Sqrt(1-correlation*correlation)*v
		reference.Values, reference.SE = append(reference.Values, float32(a*u)), append(reference.SE, float32(a))
		other.Values, other.SE = append(other.Values, float32(b*v)), append(other.SE, float32(b))
	}
	return reference, other
}

func TestDifferenceOfSharedNoiseStandsOutAsOftenAsChanceSays(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	for _, correlation := range []float64{0, 0.6, 0.95, -0.3} {
		reference, other := sharedNoise(r, 40000, 3, 2, correlation)
		d, err := Difference(reference, other, correlation, 2)
		if err != nil {
			t.Fatal(err)
		}
		share := float64(d.Numbers.Clear) / float64(d.Numbers.Pairs)
		// Gaussian tables: 4.55 % lie beyond 2 SD; counting 40000 voxels gives 0.1 %.
		if !near(d.Numbers.ByChance, 0.0455, 1e-4) || !near(share, 0.0455, 0.005) {
			t.Errorf("correlation %g: %.4f of the voxels stand out, %.4f by chance", correlation, share, d.Numbers.ByChance)
		}
	}
	reference, other := sharedNoise(r, 40000, 3, 3, 0.95)
	unpaired, err := Difference(reference, other, 0, 2)
	if err != nil || unpaired.Numbers.Clear != 0 {
		t.Errorf("judged as two measurements, %d voxels stand out: the test would not see a lost correlation (%v)", unpaired.Numbers.Clear, err)
	}
}

func TestTrueDifferenceStandsOut(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 6))
	reference, other := sharedNoise(r, 5000, 3, 3, 0.9)
	se := 3 * math.Sqrt(2-2*0.9)
	for i := range other.Values {
		other.Values[i] += float32(4 * se)
	}
	d, err := Difference(reference, other, 0.9, 2)
	share := float64(d.Numbers.Clear) / 5000
	if err != nil || !near(share, 0.977, 0.01) { // Φ(2) of the voxels; counting gives 0.2 %
		t.Errorf("%.3f of the voxels stand out, want 0.977 (%v)", share, err)
	}
	if !near(d.Numbers.Largest, (4+2.326)*se, 0.3) { // the 99 % point of a Gaussian; counting gives 0.07
		t.Errorf("largest difference %g", d.Numbers.Largest)
	}
}

func TestDifferenceKeepsVoxelsWithoutAnswerEmpty(t *testing.T) {
	reference := Layer{[]float32{1, nan32, 3, 4, 5}, []float32{1, nan32, 1, nan32, 0}}
	other := Layer{[]float32{9, 2, nan32, 4, 5}, []float32{1, 1, nan32, 1, 0}}
	d, err := Difference(reference, other, 0.5, 2)
	if err != nil {
		t.Fatal(err)
	}
	want := []Standing{Clear, NoPair, NoPair, NoPair, Pale}
	for i, s := range d.Standing {
		if Standing(s) != want[i] {
			t.Errorf("voxel %d stands as %d, want %d", i, s, want[i])
		}
	}
	n := d.Numbers
	if n.Pairing != (Pairing{3, 1, 1}) || n.WithoutSE != 1 || n.Clear != 1 || n.Pale != 1 || d.Values[0] != 8 || d.Values[1] == d.Values[1] {
		t.Errorf("%+v %v", n, d.Values)
	}
}

// wiggle is a statistic that is not linear in the data, like a median of a fitted map.
func wiggle(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v
	}
	return math.Exp(sum / float64(len(x)))
}

// The jackknifed error of a difference equals the spread over many repeated measurements.
func TestJackknifeOfTheDifferenceEqualsItsSpread(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 7))
	const runs, groups, shots = 400, 20, 200
	var differences, errors []float64
	held := 0
	for range runs {
		x, y := make([]float64, shots), make([]float64, shots)
		for i := range x {
			u := r.NormFloat64()
			x[i], y[i] = u, 0.8*u+0.3*r.NormFloat64()
		}
		p, err := Paired(replicates(x, groups), replicates(y, groups))
		if err != nil {
			t.Fatal(err)
		}
		differences, errors = append(differences, p.Difference.Value), append(errors, p.Difference.SE)
		if !p.Stands { // both are 1 on average over the noise but for a difference of 1e-3
			held++
		}
	}
	spread := math.Sqrt(products(differences, differences) / (runs - 1))
	if mean := meanOf(errors); !near(mean/spread, 1, 0.1) { // the spread of 400 is known to 3.5 %
		t.Errorf("mean jackknife error %.4g, spread %.4g", mean, spread)
	}
	if share := float64(held) / runs; !near(share, 0.95, 0.035) { // counting gives 0.011
		t.Errorf("%.3f of the intervals hold zero", share)
	}
}

func replicates(x []float64, groups int) Replicates {
	out := Replicates{Full: wiggle(x)}
	for g := range groups {
		var kept []float64
		for i, v := range x {
			if i%groups != g {
				kept = append(kept, v)
			}
		}
		out.Groups = append(out.Groups, wiggle(kept))
	}
	return out
}

// The jackknife of a mean of G values is its textbook standard error s/√G.
func TestJackknifeOfAMeanIsItsStandardError(t *testing.T) {
	x := []float64{3, 5, 4, 9, 2, 7}
	r := Replicates{Full: meanOf(x)}
	for g := range x {
		r.Groups = append(r.Groups, (30-x[g])/5)
	}
	e, err := JackknifeEstimate(r)
	s := math.Sqrt(products(x, x) / 5)
	// Student's t of 5 degrees of freedom, 97.5 %: 2.570582, from tables.
	if err != nil || !near(e.SE, s/math.Sqrt(6), 1e-12) || !near(e.Interval[1]-e.Value, 2.570582*e.SE, 1e-5) {
		t.Errorf("%+v, want SE %g (%v)", e, s/math.Sqrt(6), err)
	}
}

func TestGatheredJackknifeEqualsThatOfSingleNumbers(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 8))
	var j DifferenceJackknife
	var a, b Replicates
	for range 7 {
		u, v := float32(r.NormFloat64()), float32(r.NormFloat64())
		if err := j.Add([]float32{u, 1, u}, []float32{v, 1, nan32}); err != nil {
			t.Fatal(err)
		}
		a.Groups, b.Groups = append(a.Groups, float64(u)), append(b.Groups, float64(v))
	}
	a.Full, b.Full = 1, 2
	p, err := Paired(a, b)
	if err != nil {
		t.Fatal(err)
	}
	d, err := j.Difference([]float32{1, 1, 1}, []float32{2, 1, 2}, 2)
	if err != nil || !near(float64(d.SE[0]), p.Difference.SE, 1e-6) || d.SE[1] != 0 || d.Numbers.WithoutSE != 1 { // float32
		t.Errorf("%v %+v, want SE %g (%v)", d.SE, d.Numbers, p.Difference.SE, err)
	}
	if Standing(d.Standing[1]) != Pale {
		t.Error("equal voxels stand out")
	}
}

func TestPairingSharpensTheInterval(t *testing.T) {
	a := Replicates{Full: 10, Groups: []float64{9, 10, 11, 12, 8, 10}}
	b := Replicates{Full: 11, Groups: []float64{10.1, 11, 11.9, 13.1, 9, 10.9}}
	p, err := Paired(a, b)
	if err != nil {
		t.Fatal(err)
	}
	if !(p.Difference.SE < p.UnpairedSE/5) || !p.Stands || !(p.Correlation > 0.98) {
		t.Errorf("%+v", p)
	}
	torr := Number{Name: "median pO2", Unit: "torr", Places: 1}
	want := "the median pO2 goes from 10.0 torr to 11.0 torr, by +1.0 torr ("
	if got := p.Words(torr); !strings.HasPrefix(got, want) || !strings.HasSuffix(got, "the settings make this difference, not the noise") {
		t.Errorf("%q", got)
	}
	b.Full = 10.05
	if p, err = Paired(a, b); err != nil || p.Stands || !strings.HasSuffix(p.Words(torr), "noise alone could make this difference") {
		t.Errorf("%+v %q %v", p, p.Words(torr), err)
	}
	if p, err = Paired(a, a); err != nil || p.Stands || p.Words(torr) != "the median pO2 is the same, 10.0 torr" {
		t.Errorf("%+v %q %v", p, p.Words(torr), err)
	}
}

func TestDifferencesRefuseWhatTheyCannotJudge(t *testing.T) {
	one := Layer{[]float32{1}, []float32{1}}
	nan := math.NaN()
	for name, c := range map[string]struct {
		kind fault.Kind
		err  error
	}{
		"correlation of 2":  {fault.BadSetting, second(Difference(one, one, 2, 2))},
		"correlation NaN":   {fault.BadSetting, second(Difference(one, one, nan, 2))},
		"no threshold":      {fault.BadSetting, second(Difference(one, one, 0, 0))},
		"other grid":        {fault.Bug, second(Difference(one, Layer{[]float32{1, 2}, []float32{1, 2}}, 0, 2))},
		"lost errors":       {fault.Bug, second(Difference(one, Layer{Values: []float32{1}}, 0, 2))},
		"one group":         {fault.NoAnswer, second(Paired(Replicates{1, []float64{1}}, Replicates{1, []float64{1}}))},
		"NaN number":        {fault.NoAnswer, second(Paired(Replicates{1, []float64{1, nan}}, Replicates{1, []float64{1, 2}}))},
		"unlike groups":     {fault.Bug, second(Paired(Replicates{1, []float64{1, 2}}, Replicates{1, []float64{1, 2, 3}}))},
		"jackknife of none": {fault.NoAnswer, second((&DifferenceJackknife{}).Difference(one.Values, one.Values, 2))},
	} {
		if c.err == nil || fault.From(c.err).Kind != c.kind {
			t.Errorf("%s gives %v, want %s", name, c.err, c.kind)
		}
	}
}

func second[T any](_ T, err error) error { return err }

func TestNumbersAreWrittenPlainly(t *testing.T) {
	share := Number{Name: "hypoxic fraction", Unit: "%", Scale: 100}
	torr := Number{Name: "bias", Unit: "torr", Places: 1}
	for got, want := range map[string]string{
		share.Text(0.234): "23 %", share.Span(0.19, 0.27): "19-27 %", torr.Span(-1.2, 3): "-1.2 to 3.0 torr",
		torr.signed().Text(0.01): "0.0 torr", torr.Text(-0.04): "0.0 torr", torr.signed().Bare(2): "+2.0", Number{}.Text(3): "3",
	} {
		if got != want {
			t.Errorf("%q, want %q", got, want)
		}
	}
}
