package compare

import (
	"encoding/csv"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/stat"

	"torrloom/recon/fault"
)

var nan32 = float32(math.NaN())

// near tells whether got lies within tolerance of want; a NaN does not.
func near(got, want, tolerance float64) bool { return math.Abs(got-want) <= tolerance }

// flowMeters reads the published pairs of readings: two by each of two peak-flow meters.
func flowMeters(t *testing.T) (wright1, wright2, mini1, mini2 []float32) {
	t.Helper()
	file, err := os.Open("../../testdata/reference/bland_altman.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	reader := csv.NewReader(file)
	reader.Comment = '#'
	rows, err := reader.ReadAll()
	if err != nil || len(rows) != 18 {
		t.Fatalf("%d rows, %v", len(rows), err)
	}
	columns := make([][]float32, 5)
	for _, row := range rows[1:] {
		for c, text := range row {
			v, err := strconv.ParseFloat(text, 32)
			if err != nil {
				t.Fatal(err)
			}
			columns[c] = append(columns[c], float32(v))
		}
	}
	return columns[1], columns[2], columns[3], columns[4]
}

// Expected values: computed independently of this project from the published table, to the digits given.
func TestAgreementReproducesBlandAltman1986(t *testing.T) {
	wright, wright2, mini, mini2 := flowMeters(t)
	a, err := Agree(mini, wright, nil, 1)
	if err != nil {
		t.Fatal(err)
	}
	for name, c := range map[string][2]float64{
		"bias": {a.Bias, -2.117647059}, "SD": {a.SD, 38.76512987}, "lower": {a.Limits[0], -78.09730161}, "upper": {a.Limits[1], 73.86200749},
		"Pearson": {a.Pearson, 0.9432794469}, "concordance": {a.Concordance, 0.9427424314},
	} {
		if !near(c[0], c[1], 1e-8) { // the last digit of the reference
			t.Errorf("%s %.10g, want %.10g", name, c[0], c[1])
		}
	}
	for name, c := range map[string][2]float64{
		"bias from": {a.BiasCI[0], -22.05}, "bias to": {a.BiasCI[1], 17.81}, "lower from": {a.LimitsCI[0][0], -114.17 + (2-limitWidth)*a.SD},
		"lower to": {a.LimitsCI[0][1], -45.13 + (2-limitWidth)*a.SD}, "upper from": {a.LimitsCI[1][0], 40.89 - (2-limitWidth)*a.SD},
		"upper to": {a.LimitsCI[1][1], 109.93 - (2-limitWidth)*a.SD},
	} {
		if !near(c[0], c[1], 0.006) { // printed to two places; there the limits are 2 SD away
			t.Errorf("%s %.4f, want %.4f", name, c[0], c[1])
		}
	}
	for _, c := range []struct {
		first, second []float32
		want          float64
	}{{wright, wright2, 43.29}, {mini, mini2, 56.32}} {
		if got, err := Repeatability(c.first, c.second, nil); err != nil || !near(got, c.want, 0.005) { // two places
			t.Errorf("repeatability %.4f, want %.2f (%v)", got, c.want, err)
		}
	}
}

// Lin's convention and the other one differ by a known amount on the published pairs.
func TestConcordanceUsesLinsVariances(t *testing.T) {
	wright, _, mini, _ := flowMeters(t)
	a, err := Agree(mini, wright, nil, 1)
	if err != nil {
		t.Fatal(err)
	}
	if !near(a.Concordance, 0.9427424314, 1e-9) || near(a.Concordance, 0.9427524675, 1e-6) {
		t.Errorf("concordance %.10f, want 0.9427424314 and not 0.9427524675", a.Concordance)
	}
}

func TestAgreementWithItselfIsPerfectAndAShiftIsBias(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	x, y := make([]float32, 500), make([]float32, 500)
	for i := range x {
		x[i] = float32(30 + 10*r.NormFloat64())
		y[i] = x[i] + 4
	}
	same, err := Agree(x, x, nil, 1)
	if err != nil || same.Bias != 0 || same.SD != 0 || !near(same.Concordance, 1, 1e-12) {
		t.Errorf("a map against itself: %+v %v", same, err)
	}
	shifted, err := Agree(x, y, nil, 1)
	// 1e-6: float32 values near 40
	if err != nil || !near(shifted.Bias, 4, 1e-6) || !near(shifted.Pearson, 1, 1e-9) || !(shifted.Concordance < 0.95) {
		t.Errorf("a shifted map: %+v %v", shifted, err)
	}
}

func TestPearsonEqualsTheLibrarys(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 2))
	x, y := make([]float32, 400), make([]float32, 400)
	var fx, fy []float64
	for i := range x {
		x[i] = float32(r.NormFloat64())
		y[i] = x[i]/2 + float32(r.NormFloat64())
		fx, fy = append(fx, float64(x[i])), append(fy, float64(y[i]))
	}
	a, err := Agree(x, y, nil, 1)
	if want := stat.Correlation(fx, fy, nil); err != nil || !near(a.Pearson, want, 1e-12) { // rounding
		t.Errorf("r %.15f, want %.15f (%v)", a.Pearson, want, err)
	}
}

// Of many noisy comparisons without a bias, 95 % of the bias intervals hold zero; where voxels come in equal blocks of
// four, they do so only when that is said.
func TestBiasIntervalHoldsItsLevelAlsoForVoxelsThatShareNoise(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	const runs, blocks = 1500, 20
	held := map[float64]int{}
	for range runs {
		x, y := make([]float32, 4*blocks), make([]float32, 4*blocks)
		for b := range blocks {
			shared := float32(r.NormFloat64())
			for i := range 4 {
				x[4*b+i] = float32(b)
				y[4*b+i] = x[4*b+i] + shared
			}
		}
		for _, perSample := range []float64{1, 4} {
			a, err := Agree(x, y, nil, perSample)
			if err != nil {
				t.Fatal(err)
			}
			if a.BiasCI[0] <= 0 && 0 <= a.BiasCI[1] {
				held[perSample]++
			}
		}
	}
	share := float64(held[4]) / runs
	if !near(share, 0.95, 0.025) || !(float64(held[1])/runs < 0.8) { // counting gives 0.0056; dividing the SD by n-1 of 80 costs 0.01
		t.Errorf("intervals hold zero in %.3f, and %.3f if voxels are taken as independent", share, float64(held[1])/runs)
	}
}

func TestVoxelsWithoutAPairAreCountedAndTakeNoPart(t *testing.T) {
	x := []float32{1, 2, 3, 4, nan32, 6, nan32, 100}
	y := []float32{1, 2, 3, nan32, 5, 7, nan32, 0}
	region := []bool{true, true, true, true, true, true, true, false}
	a, err := Agree(x, y, region, 1)
	if err != nil || a.Pairing != (Pairing{Pairs: 4, OnlyReference: 1, OnlyOther: 1}) || !near(a.Bias, 0.25, 1e-15) {
		t.Errorf("%+v %v", a, err)
	}
	s, err := ScatterOf(x, y, region, 3, 2)
	total := s.Outside
	for _, c := range s.Counts {
		total += c
	}
	if err != nil || total != 4 {
		t.Errorf("scatter holds %d of 4 pairs: %+v %v", total, s, err)
	}
}

func TestAgreementRefusesTooLittle(t *testing.T) {
	two := []float32{1, 2, nan32}
	for name, f := range map[string]func() error{
		"two pairs":      func() error { _, err := Agree(two, two, nil, 1); return err },
		"a flat map":     func() error { _, err := Agree([]float32{1, 1, 1}, []float32{1, 1, 1}, nil, 1); return err },
		"empty scatter":  func() error { _, err := ScatterOf(two, two, make([]bool, 3), 4, 4); return err },
		"repeat nothing": func() error { _, err := Repeatability(two[2:], two[2:], nil); return err },
	} {
		if err := f(); err == nil || fault.From(err).Kind != fault.NoAnswer {
			t.Errorf("%s gives %v, want no-answer", name, err)
		}
	}
	if _, err := Agree(two, two[:2], nil, 1); err == nil || fault.From(err).Kind != fault.Bug {
		t.Errorf("maps of different size give %v", err)
	}
}

func TestScatterPutsPairsWhereTheyBelong(t *testing.T) {
	// Means 0..9 and differences 0 but one of +8 at mean 5.
	var x, y []float32
	for i := range 10 {
		x, y = append(x, float32(i)), append(y, float32(i))
	}
	x[5], y[5] = 1, 9
	s, err := ScatterOf(x, y, nil, 5, 4)
	if err != nil {
		t.Fatal(err)
	}
	// Means 0..9 in five bins of 1.8, differences 0..8 in four of 2.
	want := []int{2, 2, 1, 2, 2, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 1, 0, 0}
	if !slices.Equal(s.Counts, want) || s.Outside != 0 || s.Most != 2 || s.DifferenceEdges[4] != 8 || s.MeanEdges[5] != 9 {
		t.Errorf("%+v", s)
	}
}
