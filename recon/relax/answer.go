package relax

import "math"

// Status says whether a voxel has a rate and, if not, why.
type Status uint8

// OutsideView is zero so that a voxel nobody has written to is not taken for an answer.
const (
	OutsideView Status = iota // the images hold NaN here: the voxel was not reconstructed
	Answered                  // the numbers are the least-squares fit
	NoSignal                  // not finite, all zero, or without any change along the delays
	BelowRange                // the best fit lies at or below the slowest rate of the range
	AboveRange                // the best fit lies at or above the fastest rate of the range
	WrongSign                 // the best fit has A <= 0 or, with an offset, B <= 0
	statusCount
)

var statusTexts = [statusCount]string{
	"outside the field of view", "answered", "no signal", "below the rate range", "above the rate range", "wrong sign",
}

// String returns the words that a page or a report shows.
func (s Status) String() string {
	if s < statusCount {
		return statusTexts[s]
	}
	return "unknown status"
}

// Statuses lists every status in the order of its number.
func Statuses() []Status {
	return []Status{OutsideView, Answered, NoSignal, BelowRange, AboveRange, WrongSign}
}

// Answer is the fit of one voxel. All numbers are NaN unless Status is Answered.
//
// Standard errors follow from the noise given to NewFitter: they are the Cramér-Rao bound at the fitted values, the
// roots of the diagonal of (JᵀWJ)⁻¹ with W = 1/noiseSD². Multiplied by Fitter.ResidualScale they become those scaled
// by the residuals, which is what to use when the noise is not known and ones were given.
type Answer struct {
	Rate, RateSE           float64 // 1/µs
	Amplitude, AmplitudeSE float64 // A, in the unit of the images
	Inverted               float64 // B, in the unit of the images; NaN for a model without an offset
	ChiSquare              float64 // Σ ((y - fit)/noiseSD)²
	Status                 Status
}

func unanswered(s Status) Answer {
	nan := math.NaN()
	return Answer{Rate: nan, RateSE: nan, Amplitude: nan, AmplitudeSE: nan, Inverted: nan, ChiSquare: nan, Status: s}
}

// Maps holds the answers of many voxels. All slices have the same length; a number is NaN where Status is not Answered.
type Maps struct {
	Rate, RateSE           []float32 // 1/µs
	Amplitude, AmplitudeSE []float32 // in the unit of the images
	ChiSquare              []float32
	Status                 []uint8 // a Status each
}

// NewMaps returns maps for a number of voxels, all of them OutsideView with NaN for every number.
func NewMaps(voxels int) *Maps {
	m := &Maps{
		Rate: make([]float32, voxels), RateSE: make([]float32, voxels),
		Amplitude: make([]float32, voxels), AmplitudeSE: make([]float32, voxels),
		ChiSquare: make([]float32, voxels), Status: make([]uint8, voxels),
	}
	none := unanswered(OutsideView)
	for v := range voxels {
		m.put(v, &none)
	}
	return m
}

func (m *Maps) put(v int, a *Answer) {
	m.Rate[v], m.RateSE[v] = float32(a.Rate), float32(a.RateSE)
	m.Amplitude[v], m.AmplitudeSE[v] = float32(a.Amplitude), float32(a.AmplitudeSE)
	m.ChiSquare[v], m.Status[v] = float32(a.ChiSquare), uint8(a.Status)
}

// Count returns how many voxels have each status, indexed by Status.
func (m *Maps) Count() []int {
	counts := make([]int, statusCount)
	for _, s := range m.Status {
		counts[s]++
	}
	return counts
}
