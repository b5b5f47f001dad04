package acquisition

import (
	"slices"
	"strings"
)

// Unit is one row of the table of units: a value in it times Factor, plus Offset, is the value in Base.
type Unit struct {
	Name     string   `json:"name"`
	Aliases  []string `json:"-"`    // other spellings, in small letters
	Base     string   `json:"base"` // the unit of the field dictionary it is turned into
	Factor   float64  `json:"factor"`
	Offset   float64  `json:"offset"`
	Interval bool     `json:"interval"` // a rate: its inverse is what the field wants
}

// torrPerKPa is exact: 1 torr is 1/760 of 101.325 kPa.
const torrPerKPa = 760 / 101.325

// Units lists every unit that a mapping can turn into one of the dictionary's. A unit with several bases has a row for each.
var Units = []Unit{
	{Name: "mT/m", Base: "mT/m", Factor: 1, Aliases: []string{"ut/mm"}},
	{Name: "T/m", Base: "mT/m", Factor: 1000, Aliases: []string{"mt/mm"}},
	{Name: "G/cm", Base: "mT/m", Factor: 10, Aliases: []string{"gauss/cm"}}, // 1e-4 T in 1e-2 m
	{Name: "mT/cm", Base: "mT/m", Factor: 100},

	{Name: "ns", Base: "ns", Factor: 1, Aliases: []string{"nanoseconds", "nsec"}},
	{Name: "us", Base: "ns", Factor: 1e3, Aliases: []string{"microseconds", "usec"}},
	{Name: "ms", Base: "ns", Factor: 1e6, Aliases: []string{"milliseconds", "msec"}},
	{Name: "s", Base: "ns", Factor: 1e9, Aliases: []string{"seconds", "sec"}},
	{Name: "GHz", Base: "ns", Factor: 1, Interval: true},
	{Name: "MHz", Base: "ns", Factor: 1e3, Interval: true, Aliases: []string{"ms/s"}},
	{Name: "kHz", Base: "ns", Factor: 1e6, Interval: true},
	{Name: "Hz", Base: "ns", Factor: 1e9, Interval: true, Aliases: []string{"s/s"}},

	{Name: "ns", Base: "us", Factor: 1e-3, Aliases: []string{"nanoseconds", "nsec"}},
	{Name: "us", Base: "us", Factor: 1, Aliases: []string{"microseconds", "usec"}},
	{Name: "ms", Base: "us", Factor: 1e3, Aliases: []string{"milliseconds", "msec"}},
	{Name: "s", Base: "us", Factor: 1e6, Aliases: []string{"seconds", "sec"}},

	{Name: "s", Base: "s", Factor: 1, Aliases: []string{"seconds", "sec"}},
	{Name: "ms", Base: "s", Factor: 1e-3, Aliases: []string{"milliseconds", "msec"}},
	{Name: "us", Base: "s", Factor: 1e-6, Aliases: []string{"microseconds", "usec"}},
	{Name: "min", Base: "s", Factor: 60},
	{Name: "h", Base: "s", Factor: 3600},

	{Name: "MHz", Base: "MHz", Factor: 1},
	{Name: "Hz", Base: "MHz", Factor: 1e-6},
	{Name: "kHz", Base: "MHz", Factor: 1e-3},
	{Name: "GHz", Base: "MHz", Factor: 1e3},

	{Name: "mm", Base: "mm", Factor: 1},
	{Name: "um", Base: "mm", Factor: 1e-3},
	{Name: "cm", Base: "mm", Factor: 10},
	{Name: "m", Base: "mm", Factor: 1000},

	{Name: "degC", Base: "degC", Factor: 1, Aliases: []string{"cel", "°c", "c"}},
	{Name: "K", Base: "degC", Factor: 1, Offset: -273.15},

	{Name: "1/us", Base: "1/us", Factor: 1, Aliases: []string{"/us", "us^-1", "us-1"}},
	{Name: "1/ms", Base: "1/us", Factor: 1e-3, Aliases: []string{"/ms"}},
	{Name: "1/s", Base: "1/us", Factor: 1e-6, Aliases: []string{"/s", "s^-1", "s-1"}},
	{Name: "1/us/torr", Base: "1/us/torr", Factor: 1, Aliases: []string{"1/(us*torr)", "1/(us torr)", "1/us/mmhg"}},
	{Name: "1/us/kPa", Base: "1/us/torr", Factor: 1 / torrPerKPa},
	{Name: "1/s/torr", Base: "1/us/torr", Factor: 1e-6, Aliases: []string{"1/s/mmhg"}},

	{Name: "points", Base: "points", Factor: 1, Aliases: []string{"samples", "pts", "point", "sample"}},
}

// UnitFor returns the row that turns a unit, however it is spelled, into base. The micro sign counts as u.
func UnitFor(spelled, base string) (Unit, bool) {
	plain := plainUnit(spelled)
	small := strings.ToLower(plain)
	// The exact spelling goes first: M is mega and m is milli.
	for _, u := range Units {
		if u.Base == base && u.Name == plain {
			return u, true
		}
	}
	for _, u := range Units {
		if u.Base == base && slices.Contains(u.Aliases, small) {
			return u, true
		}
	}
	return Unit{}, false
}

// KnownUnit tells whether a word is a unit of the table.
func KnownUnit(word string) bool {
	for _, u := range Units {
		if _, known := UnitFor(word, u.Base); known {
			return true
		}
	}
	return false
}

func plainUnit(spelled string) string {
	return strings.NewReplacer("µ", "u", "μ", "u", " ", "", "°C", "degC").Replace(strings.TrimSpace(spelled))
}

// unitsFor returns the names of the units that can be turned into base.
func unitsFor(base string) (names []string) {
	for _, u := range Units {
		if u.Base == base {
			names = append(names, u.Name)
		}
	}
	return names
}

// to returns a value in the base unit.
func (u Unit) to(v float64) float64 {
	if u.Interval {
		return u.Factor / v
	}
	return v*u.Factor + u.Offset
}
