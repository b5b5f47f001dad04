// Package oxygen turns relaxation rates into pO2. The rate of the probe rises linearly with pO2:
//
//	R = R0 + slope·pO2,   so   pO2 = (R - R0)/slope
//
// All members keep one promise: a voxel without a rate has no pO2, and a pO2 below zero is kept as it is. Noise puts
// it there; clipping it would push up every mean and every hypoxic fraction.
package oxygen

import (
	"math"

	"torrloom/recon/fault"
)

// Calibration is the line between rate and pO2 of one probe at one temperature.
type Calibration struct {
	Rate              string  `json:"rate"`              // "R1" or "R2": the rate it was measured for
	ZeroPerUS         float64 `json:"zeroPerUS"`         // R0, the rate without oxygen, in 1/µs
	SlopePerUSPerTorr float64 `json:"slopePerUSPerTorr"` // in 1/µs/torr
}

// Check returns a fault when the calibration gives no pO2: an unknown rate, a rate at zero oxygen that is negative, or a
// slope that is not positive.
func (c Calibration) Check() error {
	if c.Rate != "R1" && c.Rate != "R2" {
		return fault.New(fault.BadSetting, "calibration.rate", "%q is not a rate; use R1 or R2", c.Rate)
	}
	if !(c.ZeroPerUS >= 0) || math.IsInf(c.ZeroPerUS, 0) {
		return fault.New(fault.BadSetting, "calibration.zeroPerUS", "%g /µs; the rate without oxygen is finite and not negative", c.ZeroPerUS)
	}
	if !(c.SlopePerUSPerTorr > 0) || math.IsInf(c.SlopePerUSPerTorr, 0) {
		return fault.New(fault.BadSetting, "calibration.slopePerUSPerTorr", "%g /µs/torr; a positive slope is needed, as the rate rises with oxygen; the inverse, torr per /µs, must be turned over", c.SlopePerUSPerTorr)
	}
	return nil
}

// PO2 returns (R - R0)/slope and its standard error SE_R/slope. That error is of the rate alone: the calibration is
// taken as exact.
//
// Units: rates in 1/µs, pO2 in torr.
func (c Calibration) PO2(ratePerUS, rateSE float64) (torr, se float64) {
	return (ratePerUS - c.ZeroPerUS) / c.SlopePerUSPerTorr, rateSE / c.SlopePerUSPerTorr
}

// Map returns PO2 of every voxel. A NaN stays NaN and a pO2 below zero is kept.
//
// Shape: rate, rateSE and both results have one entry per voxel.
// Errors: those of Check; bug when the lengths differ.
func Map(rate, rateSE []float32, c Calibration) (po2, se []float32, err error) {
	if err := c.Check(); err != nil {
		return nil, nil, err
	}
	if len(rate) != len(rateSE) {
		return nil, nil, fault.New(fault.Bug, "pO2 map", "%d rates and %d standard errors; one of each per voxel is needed", len(rate), len(rateSE))
	}
	po2, se = make([]float32, len(rate)), make([]float32, len(rate))
	for v, r := range rate {
		torr, torrSE := c.PO2(float64(r), float64(rateSE[v]))
		po2[v], se[v] = float32(torr), float32(torrSE)
	}
	return po2, se, nil
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
