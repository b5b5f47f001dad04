package oxygen

import (
	"math"

	"torrloom/recon/fault"
)

const (
	// PascalPerTorr is the definition of the torr, 1 atm/760. The conventional millimetre of mercury is 1.4e-7 larger.
	PascalPerTorr = 101325.0 / 760
	// DryAirFraction is the mole fraction of oxygen in dry air used with oxygen solubility. Standard atmospheres carry
	// values up to 0.20948, 0.01 torr more in air.
	DryAirFraction = 0.20946
)

// KPa returns a pressure in torr as kPa.
func KPa(torr float64) float64 { return torr * PascalPerTorr / 1000 }

// Torr returns a pressure in kPa as torr.
func Torr(kPa float64) float64 { return kPa * 1000 / PascalPerTorr }

// Gas is a mixture that a sample was equilibrated with. Whether it was humid matters: at 37 °C water takes 47 torr.
type Gas struct {
	OxygenFraction float64 `json:"oxygenFraction"` // mole fraction of the dry gas, 0 to 1
	PressureTorr   float64 `json:"pressureTorr"`   // barometer
	TemperatureC   float64 `json:"temperatureC"`   // of the sample; it sets the water vapour
	Humid          bool    `json:"humid"`          // saturated with water at TemperatureC
}

// Check returns a fault when the fraction is outside 0 to 1, the pressure is not positive, or the temperature of a humid
// gas is one at which water boils or the equation does not hold.
func (g Gas) Check() error {
	if !(g.OxygenFraction >= 0 && g.OxygenFraction <= 1) {
		return fault.New(fault.BadSetting, "gas oxygenFraction", "%g; a mole fraction from 0 to 1 is needed, 5 %% is 0.05", g.OxygenFraction)
	}
	if !(g.PressureTorr > 0) || math.IsInf(g.PressureTorr, 0) {
		return fault.New(fault.BadSetting, "gas pressureTorr", "%g torr; a positive pressure is needed, 760 torr is one atmosphere", g.PressureTorr)
	}
	if !g.Humid {
		return nil
	}
	water, err := WaterVapourTorr(g.TemperatureC)
	if err != nil {
		return err
	}
	if !(water < g.PressureTorr) {
		return fault.New(fault.BadSetting, "gas temperatureC", "water boils at %g °C under %g torr; check temperature and pressure", g.TemperatureC, g.PressureTorr)
	}
	return nil
}

// PO2Torr returns the oxygen partial pressure in torr, FO2·P for a dry gas and FO2·(P - PH2O(T)) for a humid one.
//
// Errors: those of Check.
func (g Gas) PO2Torr() (float64, error) {
	if err := g.Check(); err != nil {
		return 0, err
	}
	if !g.Humid {
		return g.OxygenFraction * g.PressureTorr, nil
	}
	water, err := WaterVapourTorr(g.TemperatureC)
	return g.OxygenFraction * (g.PressureTorr - water), err
}

// Saturated water: critical point and the coefficients a_i with their powers of τ.
const (
	criticalK  = 647.096
	criticalPa = 22.064e6
	zeroK      = 273.15 // 0 °C
	tripleC    = 0.01
)

var saturation = []struct{ a, power float64 }{
	{-7.85951783, 1}, {1.84408259, 1.5}, {-11.7866497, 3}, {22.6807411, 3.5}, {-15.9618719, 4}, {1.80122502, 7.5},
}

// WaterVapourTorr returns the saturation pressure of water in torr:
//
//	ln(p/pc) = (Tc/T) Σ a_i τ^n_i,   τ = 1 - T/Tc
//
// Errors: bad-setting outside 0.01 °C to 373.946 °C, the triple and the critical point.
// Source: Wagner & Pruss, Journal of Physical and Chemical Reference Data 22, 1993, 783, eq. 1 (IAPWS SR1-86).
func WaterVapourTorr(temperatureC float64) (float64, error) {
	t := temperatureC + zeroK
	if !(temperatureC >= tripleC && t <= criticalK) {
		return 0, fault.New(fault.BadSetting, "gas temperatureC", "%g °C; liquid water needs 0.01 °C to 373.946 °C", temperatureC)
	}
	tau, sum := 1-t/criticalK, 0.0
	for _, term := range saturation {
		sum += term.a * math.Pow(tau, term.power)
	}
	return criticalPa * math.Exp(criticalK/t*sum) / PascalPerTorr, nil
}
