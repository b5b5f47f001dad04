package session

import (
	"fmt"
	"math"
	"slices"
	"sort"

	"torrloom/recon/fault"
	"torrloom/recon/oxygen"
	"torrloom/recon/recipe"
	"torrloom/recon/relax"
)

// Fate is what became of a voxel.
type Fate uint8

// The fates, in the order of Fates.
const (
	OutsideView Fate = iota // not reconstructed
	BelowMask               // amplitude below the mask level
	NoSignal                // inside the mask, but nothing to fit
	Answered                // has a rate and, with a calibration, a pO2
	Negative                // has a rate; the pO2 is below zero, and kept
	BelowRange
	AboveRange
	WrongSign
)

// Fates says each fate in words, indexed by Fate.
var Fates = []string{
	"outside the field of view", "below the mask level", "no answer: no signal", "in the map", "in the map, pO2 below zero",
	"no answer: rate below the range", "no answer: rate above the range", "no answer: sign of the curve",
}

var fateOfStatus = map[relax.Status]Fate{
	relax.OutsideView: OutsideView, relax.Answered: Answered, relax.NoSignal: NoSignal,
	relax.BelowRange: BelowRange, relax.AboveRange: AboveRange, relax.WrongSign: WrongSign,
}

// Derived is the result of the last stage: the fate of every voxel, pO2 and its standard error from noise, and numbers.
type Derived struct {
	Fate             []uint8
	PO2              []float32 // empty without a calibration, as the two below
	PO2SE            []float32 // random: from the noise of the measurement
	PO2CalibrationSE []float32 // systematic: from the calibration; moves all voxels together
	Numbers          Numbers
}

// Fitted are the maps that the last stage starts from. Amplitude and AmplitudeSE may be nil unless the recipe corrects for
// the probe concentration.
type Fitted struct {
	Reference []float32 // image of the reference frame
	oxygen.Rates
	Status []uint8
}

// Numbers describes a derived map.
type Numbers struct {
	MaskLevel float64     `json:"maskLevel"` // amplitude at the threshold
	Fates     []FateCount `json:"fates"`
	Rate      Summary     `json:"rate"`
	PO2       *Summary    `json:"pO2"` // null without a calibration
	Negative  int         `json:"negative"`
	Warnings  []string    `json:"warnings"`
}

// FateCount counts the voxels that share a fate.
type FateCount struct {
	Value int    `json:"value"`
	Label string `json:"label"`
	Count int    `json:"count"`
}

// Derive masks the fitted voxels by the reference-delay image and turns rates into pO2.
//
// Errors: bug when the arrays differ in length.
func Derive(r recipe.Recipe, f Fitted) (*Derived, error) {
	n := len(f.Reference)
	if len(f.Rate) != n || len(f.RateSE) != n || len(f.Status) != n {
		return nil, fault.New(fault.Bug, "derive", "arrays of %d, %d, %d and %d voxels", n, len(f.Rate), len(f.RateSE), len(f.Status))
	}
	d := &Derived{Fate: make([]uint8, n)}
	d.Numbers.MaskLevel = r.Mask.AmplitudeFraction * strongest(f.Reference)
	if r.Calibration != nil {
		maps, err := oxygen.MapValues(f.Rates, *r.Calibration, r.Sample)
		if err != nil {
			return nil, fault.Within("recipe", err)
		}
		d.PO2, d.PO2SE, d.PO2CalibrationSE = maps.PO2, maps.RandomSE, maps.CalibrationSE
	}
	for i, amplitude := range f.Reference {
		d.decide(i, float64(amplitude), relax.Status(f.Status[i]))
	}
	d.count(r, f.Rate, f.RateSE)
	return d, nil
}

// strongest returns the amplitude that one in a thousand voxels of the field of view exceeds: the maximum, but for
// single voxels that noise or ringing lifted.
func strongest(reference []float32) float64 {
	var inside []float64
	for _, v := range reference {
		if v == v {
			inside = append(inside, float64(v))
		}
	}
	if len(inside) == 0 {
		return 0
	}
	sort.Float64s(inside)
	return math.Max(0, inside[len(inside)-1-len(inside)/1000])
}

// decide settles the fate of a voxel and takes pO2 from one that is not in the map.
func (d *Derived) decide(i int, amplitude float64, status relax.Status) {
	fate := fateOfStatus[status]
	if fate != OutsideView && !(amplitude >= d.Numbers.MaskLevel) {
		fate = BelowMask
	}
	if d.PO2 != nil && fate == Answered && d.PO2[i] < 0 {
		fate = Negative
	}
	d.Fate[i] = uint8(fate)
	if d.PO2 != nil && fate != Answered && fate != Negative {
		nan := float32(math.NaN())
		d.PO2[i], d.PO2SE[i], d.PO2CalibrationSE[i] = nan, nan, nan
	}
}

func (d *Derived) count(r recipe.Recipe, rate, rateSE []float32) {
	counts := make([]int, len(Fates))
	for _, f := range d.Fate {
		counts[f]++
	}
	for f, label := range Fates {
		d.Numbers.Fates = append(d.Numbers.Fates, FateCount{f, label, counts[f]})
	}
	d.Numbers.Negative = counts[Negative]
	d.Numbers.Rate = summarise("1/µs", d.Fate, rate, rateSE, nil)
	if r.Calibration != nil {
		s := summarise("torr", d.Fate, d.PO2, d.PO2SE, thresholdsTorr)
		s.MedianCalibrationSE = d.medianOf(d.PO2CalibrationSE)
		d.Numbers.PO2 = &s
		below, above := r.Calibration.OutsideRange(d.PO2)
		if text := r.Calibration.RangeWarning(below, above, s.Count); text != "" {
			d.Numbers.Warnings = append(d.Numbers.Warnings, text)
		}
	}
	if answered := counts[Answered] + counts[Negative]; answered == 0 {
		d.Numbers.Warnings = append(d.Numbers.Warnings, "no voxel has an answer; lower the mask level or look at the amplitude image")
	} else if share := float64(counts[Negative]) / float64(answered); share > 0.01 {
		d.Numbers.Warnings = append(d.Numbers.Warnings, fmt.Sprintf("%.1f %% of the answered voxels have a pO2 below zero; noise does that near zero, a wrong rate at zero oxygen does it everywhere", 100*share))
	}
}

// medianOf returns the median of the answered voxels, 0 when there are none.
func (d *Derived) medianOf(values []float32) float64 {
	var v []float64
	for i, f := range d.Fate {
		if Fate(f) == Answered || Fate(f) == Negative {
			v = append(v, float64(values[i]))
		}
	}
	if len(v) == 0 {
		return 0
	}
	slices.Sort(v)
	return quantile(v, 0.5)
}

// thresholdsTorr are the pO2 below which tissue is commonly called hypoxic.
// Source: HP2.5 and HP5 as in Nordsmark et al., Radiother. Oncol. 77 (2005) 18; 10 torr by analogy.
var thresholdsTorr = []float64{2.5, 5, 10}

// Summary describes the answered voxels of one map.
type Summary struct {
	Unit      string     `json:"unit"`
	Count     int        `json:"count"`
	Mean      float64    `json:"mean"`
	SD        float64    `json:"sd"`
	Median    float64    `json:"median"`
	Quartiles [2]float64 `json:"quartiles"`
	Range     [2]float64 `json:"range"`
	Central90 [2]float64 `json:"central90"` // 5 % of the voxels lie below the one and above the other
	MedianSE  float64    `json:"medianSE"`  // median of the voxels' random standard errors
	// MedianCalibrationSE is that of the systematic errors; 0 where the calibration states none.
	MedianCalibrationSE float64    `json:"medianCalibrationSE"`
	Fractions           []Fraction `json:"fractions"` // pO2 only
	Edges               []float64  `json:"edges"`     // of the histogram's bins
	Counts              []int      `json:"counts"`
	Below               int        `json:"below"` // voxels left of the first edge
	Above               int        `json:"above"` // voxels right of the last
}

// Fraction is the share of answered voxels at or below a threshold. Negative values count.
type Fraction struct {
	Threshold float64 `json:"threshold"`
	Share     float64 `json:"share"`
}

func summarise(unit string, fates []uint8, values, errors []float32, thresholds []float64) Summary {
	var v, se []float64
	for i, f := range fates {
		if Fate(f) == Answered || Fate(f) == Negative {
			v, se = append(v, float64(values[i])), append(se, float64(errors[i]))
		}
	}
	s := Summary{Unit: unit, Count: len(v)}
	if len(v) == 0 {
		return s
	}
	slices.Sort(v)
	slices.Sort(se)
	s.Mean, s.SD = meanAndSD(v)
	s.Median, s.Quartiles = quantile(v, 0.5), [2]float64{quantile(v, 0.25), quantile(v, 0.75)}
	s.Range = [2]float64{v[0], v[len(v)-1]}
	s.Central90 = [2]float64{quantile(v, 0.05), quantile(v, 0.95)}
	s.MedianSE = quantile(se, 0.5)
	for _, t := range thresholds {
		at := sort.Search(len(v), func(i int) bool { return v[i] > t })
		s.Fractions = append(s.Fractions, Fraction{t, float64(at) / float64(len(v))})
	}
	s.histogram(v)
	return s
}

func meanAndSD(v []float64) (mean, sd float64) {
	for _, x := range v {
		mean += x / float64(len(v))
	}
	for _, x := range v {
		sd += (x - mean) * (x - mean)
	}
	return mean, math.Sqrt(sd / math.Max(1, float64(len(v)-1)))
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

// bins of a histogram: fine enough to see inserts apart, coarse enough for a few thousand voxels.
const bins = 60

// histogram spans the central 99 % of the sorted values, so that a few wild voxels do not squeeze the rest together.
func (s *Summary) histogram(v []float64) {
	low, high := quantile(v, 0.005), quantile(v, 0.995)
	if !(high > low) {
		low, high = low-0.5, high+0.5
	}
	s.Counts = make([]int, bins)
	for b := range bins + 1 {
		s.Edges = append(s.Edges, low+(high-low)*float64(b)/bins)
	}
	for _, x := range v {
		switch b := int((x - low) / (high - low) * bins); {
		case x < low:
			s.Below++
		case x > high:
			s.Above++
		default:
			s.Counts[min(b, bins-1)]++
		}
	}
}
