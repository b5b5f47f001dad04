// Package oxygen turns relaxation rates into pO2, with the calibration that this takes, and pO2 into the effect that
// oxygen has on radiation. The rate of the probe rises linearly with pO2:
//
//	R = R0 + slope·pO2,   so   pO2 = (R - R0)/slope
//
// All members keep one promise: a voxel without a rate has no pO2, and a pO2 below zero is kept as it is. Noise puts
// it there; clipping it would push up every mean and every hypoxic fraction.
//
// Two standard errors are kept apart throughout. The random one comes from the noise of the measurement and differs from
// voxel to voxel; the systematic one comes from the calibration and moves all voxels together, so that no averaging
// makes it smaller.
package oxygen

import (
	"math"

	"torrloom/recon/fault"
)

// PO2 returns (R - R0)/slope and its standard error SE_R/slope. That error is of the rate alone: Value holds that of the
// calibration.
//
// Units: rates in 1/µs, pO2 in torr.
func (c Calibration) PO2(ratePerUS, rateSE float64) (torr, se float64) {
	return (ratePerUS - c.ZeroPerUS) / c.SlopePerUSPerTorr, rateSE / c.SlopePerUSPerTorr
}

// Sample is what is known of the measured object beside its rates. The zero Sample says nothing: no correction is made.
type Sample struct {
	// TemperatureC corrects the rate when it is not zero and the calibration knows its own temperature.
	TemperatureC float64 `json:"temperatureC,omitempty"`
	// ReferenceUM is the probe concentration, in µM, of a place whose amplitude is ReferenceAmplitude. Together they turn
	// the amplitude of a voxel into its concentration; zero for either means that no concentration is known.
	ReferenceUM        float64 `json:"referenceUM,omitempty"`
	ReferenceSEUM      float64 `json:"referenceSEUM,omitempty"`
	ReferenceAmplitude float64 `json:"referenceAmplitude,omitempty"` // signal per mm³ (mm² in 2D)
}

// Check returns a fault for a negative or infinite number, or when only one half of the reference is given.
func (s Sample) Check() error {
	for _, n := range []struct {
		name  string
		value float64
	}{{"referenceUM", s.ReferenceUM}, {"referenceSEUM", s.ReferenceSEUM}, {"referenceAmplitude", s.ReferenceAmplitude}} {
		if !(n.value >= 0) || math.IsInf(n.value, 0) {
			return fault.New(fault.BadSetting, "sample."+n.name, "%g; a finite number that is not negative is needed", n.value)
		}
	}
	if (s.ReferenceUM > 0) != (s.ReferenceAmplitude > 0) {
		return fault.New(fault.BadSetting, "sample.referenceUM", "%g µM at an amplitude of %g; the concentration correction needs both, or neither", s.ReferenceUM, s.ReferenceAmplitude)
	}
	if math.IsNaN(s.TemperatureC) || math.IsInf(s.TemperatureC, 0) {
		return fault.New(fault.BadSetting, "sample.temperatureC", "%g °C; a finite temperature is needed", s.TemperatureC)
	}
	return nil
}

// Voxel is the fit of one voxel.
type Voxel struct {
	RatePerUS, RateSE      float64
	Amplitude, AmplitudeSE float64 // used by the concentration correction only
}

// Value is a pO2 with its two standard errors, in torr.
type Value struct {
	PO2Torr       float64 `json:"pO2Torr"`
	RandomSE      float64 `json:"randomSE"`      // from the noise
	CalibrationSE float64 `json:"calibrationSE"` // from the calibration
}

// Value returns
//
//	pO2 = (R - R0 - kC·(c - c0) - kT·(T - T0))/slope
//
// with c = c_ref·A/A_ref, where c0 and T0 are the concentration and temperature that R0 holds for. To first order in the
// errors
//
//	random²      = (SE_R² + (kC·SE_c)²)/slope²,   SE_c = c_ref·SE_A/A_ref
//	calibration² = (s0² + 2·p·ρ·s0·s1 + p²·s1² + (Δc·sC)² + (ΔT·sT)² + (kC·A/A_ref·SE_ref)²)/slope²
//
// Approximate: rate and amplitude of a voxel are taken as independent. A correction whose coefficient, reference or
// temperature is unknown (zero) is left out.
func (c Calibration) Value(v Voxel, s Sample) Value {
	shift, shiftVariance, noise := c.concentrationShift(v, s)
	if s.TemperatureC != 0 && c.TemperatureC != 0 {
		dt := s.TemperatureC - c.TemperatureC
		shift += c.TemperaturePerUSPerC * dt
		shiftVariance += square(c.TemperatureSEPerUSPerC * dt)
	}
	p := (v.RatePerUS - c.ZeroPerUS - shift) / c.SlopePerUSPerTorr
	line := square(c.ZeroSEPerUS) + 2*p*c.Correlation*c.ZeroSEPerUS*c.SlopeSEPerUSPerTorr + square(p*c.SlopeSEPerUSPerTorr)
	return Value{
		PO2Torr:       p,
		RandomSE:      math.Hypot(v.RateSE, noise) / c.SlopePerUSPerTorr,
		CalibrationSE: math.Sqrt(math.Max(0, line)+shiftVariance) / c.SlopePerUSPerTorr,
	}
}

// concentrationShift returns the part of the rate that the probe's concentration makes, the variance it has from the
// calibration and from the reference, and the error it takes over from the amplitude's noise.
func (c Calibration) concentrationShift(v Voxel, s Sample) (shift, variance, noise float64) {
	if s.ReferenceUM == 0 || s.ReferenceAmplitude == 0 || c.ConcentrationPerUSPerUM == 0 {
		return 0, 0, 0
	}
	relative := v.Amplitude / s.ReferenceAmplitude
	off := relative*s.ReferenceUM - c.ConcentrationUM
	variance = square(off*c.ConcentrationSEPerUSPerUM) + square(c.ConcentrationPerUSPerUM*relative*s.ReferenceSEUM)
	noise = c.ConcentrationPerUSPerUM * s.ReferenceUM * v.AmplitudeSE / s.ReferenceAmplitude
	return c.ConcentrationPerUSPerUM * off, variance, noise
}

func square(x float64) float64 { return x * x }

// Maps are pO2 and its two standard errors for every voxel.
type Maps struct {
	PO2, RandomSE, CalibrationSE []float32 // torr; NaN where there is no rate
	Negative                     int       // voxels below zero, kept
	BelowRange, AboveRange       int       // voxels outside the range that the calibration was measured in
}

// Rates are the fitted maps that pO2 is made from. Amplitude and AmplitudeSE may be nil when no concentration correction
// is asked for.
type Rates struct {
	Rate, RateSE, Amplitude, AmplitudeSE []float32
}

// MapValues returns Value of every voxel. A NaN stays NaN and a pO2 below zero is kept.
//
// Errors: those of Check of both; bug when the lengths differ.
func MapValues(r Rates, c Calibration, s Sample) (*Maps, error) {
	for _, err := range []error{c.Check(), s.Check(), r.check(s)} {
		if err != nil {
			return nil, err
		}
	}
	n := len(r.Rate)
	m := &Maps{PO2: make([]float32, n), RandomSE: make([]float32, n), CalibrationSE: make([]float32, n)}
	for i := range r.Rate {
		value := c.Value(r.voxel(i), s)
		m.PO2[i], m.RandomSE[i], m.CalibrationSE[i] = float32(value.PO2Torr), float32(value.RandomSE), float32(value.CalibrationSE)
	}
	m.Negative = Negatives(m.PO2)
	m.BelowRange, m.AboveRange = c.OutsideRange(m.PO2)
	return m, nil
}

func (r Rates) check(s Sample) error {
	n := len(r.Rate)
	if len(r.RateSE) != n {
		return fault.New(fault.Bug, "pO2 map", "%d rates and %d standard errors; one of each per voxel is needed", n, len(r.RateSE))
	}
	if s.ReferenceUM > 0 && (len(r.Amplitude) != n || len(r.AmplitudeSE) != n) {
		return fault.New(fault.Bug, "pO2 map", "%d rates, %d amplitudes and %d of their errors; the concentration correction needs one of each per voxel",
			n, len(r.Amplitude), len(r.AmplitudeSE))
	}
	return nil
}

func (r Rates) voxel(i int) Voxel {
	v := Voxel{RatePerUS: float64(r.Rate[i]), RateSE: float64(r.RateSE[i])}
	if r.Amplitude != nil && r.AmplitudeSE != nil {
		v.Amplitude, v.AmplitudeSE = float64(r.Amplitude[i]), float64(r.AmplitudeSE[i])
	}
	return v
}

// Map returns PO2 of every voxel. A NaN stays NaN and a pO2 below zero is kept.
//
// Shape: rate, rateSE and both results have one entry per voxel.
// Errors: those of Check; bug when the lengths differ.
func Map(rate, rateSE []float32, c Calibration) (po2, se []float32, err error) {
	m, err := MapValues(Rates{Rate: rate, RateSE: rateSE}, c, Sample{})
	if err != nil {
		return nil, nil, err
	}
	return m.PO2, m.RandomSE, nil
}

// Negatives returns how many voxels have a pO2 below zero.
func Negatives(po2 []float32) int {
	count := 0
	for _, p := range po2 {
		if p < 0 {
			count++
		}
	}
	return count
}
