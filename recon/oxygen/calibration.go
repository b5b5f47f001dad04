package oxygen

import (
	"fmt"
	"math"

	"torrloom/recon/fault"
)

// Calibration is the line between rate and pO2 of one probe. It holds at one temperature and one probe concentration;
// the optional coefficients carry it to others. A zero among the optional numbers means: not known, or not used.
type Calibration struct {
	Rate              string  `json:"rate"`              // "R1", "R2" or "R2*": the rate it was measured for
	ZeroPerUS         float64 `json:"zeroPerUS"`         // R0, the rate without oxygen, in 1/µs
	SlopePerUSPerTorr float64 `json:"slopePerUSPerTorr"` // in 1/µs/torr

	ZeroSEPerUS         float64 `json:"zeroSEPerUS,omitempty"`
	SlopeSEPerUSPerTorr float64 `json:"slopeSEPerUSPerTorr,omitempty"`
	Correlation         float64 `json:"correlation,omitempty"` // of the errors of zero and slope, -1 to 1; fits give a negative one

	ConcentrationPerUSPerUM   float64 `json:"concentrationPerUSPerUM,omitempty"`   // kC, gain in rate per µM of probe
	ConcentrationSEPerUSPerUM float64 `json:"concentrationSEPerUSPerUM,omitempty"` // its standard error
	ConcentrationUM           float64 `json:"concentrationUM,omitempty"`           // that the zero holds for; 0 means extrapolated to no probe

	TemperaturePerUSPerC   float64 `json:"temperaturePerUSPerC,omitempty"`   // kT, gain in rate per °C
	TemperatureSEPerUSPerC float64 `json:"temperatureSEPerUSPerC,omitempty"` // its standard error
	TemperatureC           float64 `json:"temperatureC,omitempty"`           // that the line holds for

	FromTorr float64 `json:"fromTorr,omitempty"` // range that was measured
	ToTorr   float64 `json:"toTorr,omitempty"`   // 0 means that the range is not known
}

// Check returns a fault when the calibration gives no pO2: an unknown rate, a rate at zero oxygen that is negative, a
// slope that is not positive, or optional numbers that contradict each other.
func (c Calibration) Check() error {
	if c.Rate != "R1" && c.Rate != "R2" && c.Rate != "R2*" {
		return fault.New(fault.BadSetting, "calibration.rate", "%q is not a rate; use R1, R2 or R2*", c.Rate)
	}
	if !(c.ZeroPerUS >= 0) || math.IsInf(c.ZeroPerUS, 0) {
		return fault.New(fault.BadSetting, "calibration.zeroPerUS", "%g /µs; the rate without oxygen is finite and not negative", c.ZeroPerUS)
	}
	if !(c.SlopePerUSPerTorr > 0) || math.IsInf(c.SlopePerUSPerTorr, 0) {
		return fault.New(fault.BadSetting, "calibration.slopePerUSPerTorr", "%g /µs/torr; a positive slope is needed, as the rate rises with oxygen; the inverse, torr per /µs, must be turned over", c.SlopePerUSPerTorr)
	}
	if err := c.checkErrors(); err != nil {
		return err
	}
	if c.ToTorr != 0 && !(c.FromTorr < c.ToTorr) {
		return fault.New(fault.BadSetting, "calibration.toTorr", "the range from %g to %g torr is empty; the end must lie above the start, or be 0 when it is not known", c.FromTorr, c.ToTorr)
	}
	return nil
}

func (c Calibration) checkErrors() error {
	for _, e := range []struct {
		name  string
		value float64
	}{
		{"zeroSEPerUS", c.ZeroSEPerUS}, {"slopeSEPerUSPerTorr", c.SlopeSEPerUSPerTorr},
		{"concentrationSEPerUSPerUM", c.ConcentrationSEPerUSPerUM}, {"temperatureSEPerUSPerC", c.TemperatureSEPerUSPerC},
		{"concentrationUM", c.ConcentrationUM}, {"fromTorr", c.FromTorr}, {"toTorr", c.ToTorr},
	} {
		if !(e.value >= 0) || math.IsInf(e.value, 0) {
			return fault.New(fault.BadSetting, "calibration."+e.name, "%g; a finite number that is not negative is needed", e.value)
		}
	}
	for _, e := range []struct {
		name  string
		value float64
	}{
		{"concentrationPerUSPerUM", c.ConcentrationPerUSPerUM}, {"temperaturePerUSPerC", c.TemperaturePerUSPerC}, {"temperatureC", c.TemperatureC},
	} {
		if math.IsNaN(e.value) || math.IsInf(e.value, 0) {
			return fault.New(fault.BadSetting, "calibration."+e.name, "%g; a finite number is needed", e.value)
		}
	}
	if !(c.Correlation >= -1 && c.Correlation <= 1) {
		return fault.New(fault.BadSetting, "calibration.correlation", "%g; a correlation lies between -1 and 1", c.Correlation)
	}
	return nil
}

// HasErrors tells whether a systematic error can be stated.
func (c Calibration) HasErrors() bool { return c.ZeroSEPerUS > 0 || c.SlopeSEPerUSPerTorr > 0 }

// OutsideRange counts the voxels below and above the range that the calibration was measured in, none when it is not
// known.
func (c Calibration) OutsideRange(po2 []float32) (below, above int) {
	if c.ToTorr == 0 {
		return 0, 0
	}
	for _, p := range po2 {
		switch {
		case float64(p) < c.FromTorr:
			below++
		case float64(p) > c.ToTorr:
			above++
		}
	}
	return below, above
}

// RangeWarning says that a map leaves the calibrated range, or "" when it does not. Answered is how many voxels have a
// pO2.
func (c Calibration) RangeWarning(below, above, answered int) string {
	if below+above == 0 || answered == 0 {
		return ""
	}
	return fmt.Sprintf("%.1f %% of the voxels lie outside the calibrated %g to %g torr (%d below, %d above); there the line is an extrapolation",
		100*float64(below+above)/float64(answered), c.FromTorr, c.ToTorr, below, above)
}

// WithinSE returns pO2 of a rate when zero and slope are moved by that many standard errors along the two independent
// directions of their covariance,
//
//	zero + s0·u,   slope + s1·(ρ·u + √(1-ρ²)·v)
//
// which is how an interval of a figure that is not linear in the calibration is found.
func (c Calibration) WithinSE(u, v float64) Calibration {
	moved := c
	moved.ZeroPerUS += c.ZeroSEPerUS * u
	moved.SlopePerUSPerTorr += c.SlopeSEPerUSPerTorr * (c.Correlation*u + math.Sqrt(1-square(c.Correlation))*v)
	return moved
}
