package oxygen

import (
	"math"

	"torrloom/recon/fault"
)

// EnhancementCaution stands beside every map and figure of OER.
const EnhancementCaution = "An OER from these two constants describes cells in a dish at one dose rate; m and K are typed in, not measured here. " +
	"For research only: no diagnosis, dose, boost or treatment plan follows from it. Such decisions belong to licensed staff under their own protocols and local rules."

// Enhancement is the oxygen enhancement ratio as a function of pO2:
//
//	OER(p) = (m·p + K)/(p + K)
//
// It is 1 without oxygen, (m+1)/2 at p = K and tends to m. The published formula has a pole at p = -K, where no pO2
// exists; a pO2 below zero, which noise makes, is taken as no oxygen and has the OER 1.
//
// Source: Alper & Howard-Flanders, Nature 178 (1956) 978.
type Enhancement struct {
	M     float64 `json:"m"`     // largest ratio, 2.5 to 3 in many textbooks
	KTorr float64 `json:"kTorr"` // pO2 of half the effect, about 3 torr in many textbooks
}

// Check returns a fault when the constants give no ratio.
func (e Enhancement) Check() error {
	if !(e.M >= 1) || math.IsInf(e.M, 0) {
		return fault.New(fault.BadSetting, "enhancement.m", "%g; the largest ratio is at least 1, textbooks use 2.5 to 3", e.M)
	}
	if !(e.KTorr > 0) || math.IsInf(e.KTorr, 0) {
		return fault.New(fault.BadSetting, "enhancement.kTorr", "%g torr; a positive pressure is needed, textbooks use about 3 torr", e.KTorr)
	}
	return nil
}

// At returns the OER at a pO2, and NaN for NaN.
func (e Enhancement) At(torr float64) float64 {
	if torr < 0 {
		torr = 0
	}
	if math.IsInf(torr, 1) {
		return e.M
	}
	return (e.M*torr + e.KTorr) / (torr + e.KTorr)
}

// Slope returns dOER/dp = (m-1)·K/(p+K)², by which a standard error of pO2 becomes one of OER. Below zero it is that at
// zero, so that a voxel that noise pushed there does not look certain.
func (e Enhancement) Slope(torr float64) float64 {
	return (e.M - 1) * e.KTorr / square(math.Max(torr, 0)+e.KTorr)
}

// EnhancementMap is the OER of every voxel.
type EnhancementMap struct {
	OER, RandomSE []float32 // NaN where there is no pO2
	Raised        int       // voxels below zero that were taken as no oxygen
}

// Map returns the OER of a pO2 map and its random standard error, to first order.
//
// Errors: those of Check; bug when the lengths differ.
func (e Enhancement) Map(po2, se []float32) (*EnhancementMap, error) {
	if err := e.Check(); err != nil {
		return nil, err
	}
	if len(po2) != len(se) {
		return nil, fault.New(fault.Bug, "OER map", "%d values and %d standard errors; one of each per voxel is needed", len(po2), len(se))
	}
	m := &EnhancementMap{OER: make([]float32, len(po2)), RandomSE: make([]float32, len(po2)), Raised: Negatives(po2)}
	for i, p := range po2 {
		m.OER[i] = float32(e.At(float64(p)))
		m.RandomSE[i] = float32(e.Slope(float64(p)) * float64(se[i]))
	}
	return m, nil
}
