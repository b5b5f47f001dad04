package oxygen

import (
	"slices"

	"torrloom/recon/fault"
)

// PascalPerMMHg is the conventional millimetre of mercury, 13595.1 kg/m³ · 9.80665 m/s² · 1 mm.
const PascalPerMMHg = 133.322387415

// Unit is a pressure unit that a person may read and type pO2 in. Everything is computed in torr.
type Unit struct {
	Name    string  `json:"name"`
	PerTorr float64 `json:"perTorr"` // one torr in this unit
}

// Units lists the units. mmHg differs from torr by 1.4e-7 of the value, far below any reading.
var Units = []Unit{
	{"torr", 1},
	{"mmHg", PascalPerTorr / PascalPerMMHg},
	{"kPa", PascalPerTorr / 1000},
}

// UnitNamed returns the unit with that name.
//
// Errors: bad-setting when there is none.
func UnitNamed(name string) (Unit, error) {
	at := slices.IndexFunc(Units, func(u Unit) bool { return u.Name == name })
	if at < 0 {
		return Unit{}, fault.New(fault.BadSetting, "unit", "%q is not a known pressure unit; use torr, mmHg or kPa", name)
	}
	return Units[at], nil
}

// FromTorr returns a pressure in torr in this unit.
func (u Unit) FromTorr(torr float64) float64 { return torr * u.PerTorr }

// ToTorr returns a pressure in this unit in torr.
func (u Unit) ToTorr(value float64) float64 { return value / u.PerTorr }
