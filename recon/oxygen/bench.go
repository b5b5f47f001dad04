package oxygen

import (
	"math"

	"torrloom/recon/fault"
)

// Reading is one measured rate of a sample equilibrated with a known gas. Exactly one of OxygenFraction and PO2Torr is
// given. Repeat readings are further rows with the same gas.
type Reading struct {
	Label           string   `json:"label,omitempty"`
	OxygenFraction  *float64 `json:"oxygenFraction,omitempty"` // mole fraction of the dry gas, 0 to 1
	FractionSE      float64  `json:"fractionSE,omitempty"`
	PO2Torr         *float64 `json:"pO2Torr,omitempty"`
	PO2SETorr       float64  `json:"pO2SETorr,omitempty"`
	RatePerUS       float64  `json:"ratePerUS"`
	RateSEPerUS     float64  `json:"rateSEPerUS,omitempty"`
	ConcentrationUM *float64 `json:"concentrationUM,omitempty"` // of the probe
	TemperatureC    *float64 `json:"temperatureC,omitempty"`    // of this sample, when it differs from the bench's
	LeftOut         bool     `json:"leftOut,omitempty"`         // shown, but not fitted
}

// Bench is everything a calibration is fitted from.
type Bench struct {
	Rate          string    `json:"rate"`          // "R1" or "R2"
	BarometerTorr float64   `json:"barometerTorr"` // total pressure over the samples
	Humid         bool      `json:"humid"`         // gas saturated with water at the sample's temperature
	TemperatureC  float64   `json:"temperatureC"`
	Regression    string    `json:"regression"`    // row of Regressions
	ErrorsFrom    string    `json:"errorsFrom"`    // row of ErrorSources
	Concentration bool      `json:"concentration"` // fit a term for the probe concentration
	Temperature   bool      `json:"temperature"`   // fit a term for the temperature
	Readings      []Reading `json:"readings"`
}

// ErrorSource says where the standard errors of a fit come from.
type ErrorSource struct {
	Name  string `json:"name"`
	Label string `json:"label"`
	Help  string `json:"help"`
}

// ErrorSources lists the two conventions in use. Ordinary regression knows no given errors and always takes the scatter.
var ErrorSources = []ErrorSource{
	{"given", "the given errors", "standard errors follow from the errors of the readings alone"},
	{"scatter", "the scatter about the line", "standard errors are scaled by √(χ²/(n-p)), so that only the ratios of the given errors matter"},
}

// NewBench returns an empty bench with common settings: one atmosphere, humid gas at 37 °C, ordinary regression.
func NewBench(rate string) Bench {
	return Bench{Rate: rate, BarometerTorr: 760, Humid: true, TemperatureC: 37, Regression: "ordinary", ErrorsFrom: "scatter"}
}

// point is one reading as a regression sees it. Terms holds what stands beside pO2: concentration, temperature.
type point struct {
	reading    int // index in the bench
	x, y       float64
	xSE, ySE   float64
	terms      []float64
	conditions [2]float64 // concentration and temperature, for telling repeats
}

// points returns the readings that are fitted.
//
// Errors: bad-setting naming the reading.
func (b Bench) points() ([]point, error) {
	var out []point
	for i, r := range b.Readings {
		if r.LeftOut {
			continue
		}
		p, err := b.point(i, r)
		if err != nil {
			return nil, fault.Within(readingName(i), err)
		}
		out = append(out, p)
	}
	return out, nil
}

func (b Bench) point(i int, r Reading) (point, error) {
	if !(r.RatePerUS > 0) || math.IsInf(r.RatePerUS, 0) {
		return point{}, fault.New(fault.BadSetting, "ratePerUS", "%g /µs; a positive rate is needed", r.RatePerUS)
	}
	if !(r.RateSEPerUS >= 0 && r.PO2SETorr >= 0 && r.FractionSE >= 0) {
		return point{}, fault.New(fault.BadSetting, "standard errors", "%g /µs, %g torr, fraction %g; they are not negative", r.RateSEPerUS, r.PO2SETorr, r.FractionSE)
	}
	p := point{reading: i, y: r.RatePerUS, ySE: r.RateSEPerUS}
	var err error
	if p.x, p.xSE, err = b.pO2Of(r); err != nil {
		return point{}, err
	}
	return p, b.addTerms(&p, r)
}

// pO2Of returns the oxygen pressure of a reading and its error.
func (b Bench) pO2Of(r Reading) (torr, se float64, err error) {
	if (r.OxygenFraction == nil) == (r.PO2Torr == nil) {
		return 0, 0, fault.New(fault.BadSetting, "oxygen", "a reading needs either a gas fraction or a pO2, not both or neither")
	}
	if r.PO2Torr != nil {
		if !(*r.PO2Torr >= 0) || math.IsInf(*r.PO2Torr, 0) {
			return 0, 0, fault.New(fault.BadSetting, "pO2Torr", "%g torr; a pressure that is not negative is needed", *r.PO2Torr)
		}
		return *r.PO2Torr, r.PO2SETorr, nil
	}
	gas := Gas{OxygenFraction: *r.OxygenFraction, PressureTorr: b.BarometerTorr, TemperatureC: b.temperatureOf(r), Humid: b.Humid}
	if torr, err = gas.PO2Torr(); err != nil {
		return 0, 0, err
	}
	gas.OxygenFraction = 1
	whole, err := gas.PO2Torr()
	return torr, math.Hypot(r.FractionSE*whole, r.PO2SETorr), err
}

func (b Bench) temperatureOf(r Reading) float64 {
	if r.TemperatureC != nil {
		return *r.TemperatureC
	}
	return b.TemperatureC
}

func (b Bench) addTerms(p *point, r Reading) error {
	p.conditions[1] = b.temperatureOf(r)
	if r.ConcentrationUM != nil {
		p.conditions[0] = *r.ConcentrationUM
	}
	if b.Concentration {
		if r.ConcentrationUM == nil || !(*r.ConcentrationUM >= 0) || math.IsInf(*r.ConcentrationUM, 0) {
			return fault.New(fault.BadSetting, "concentrationUM", "every reading needs a concentration when its term is fitted; enter it or turn the term off")
		}
		p.terms = append(p.terms, *r.ConcentrationUM)
	}
	if b.Temperature {
		p.terms = append(p.terms, b.temperatureOf(r))
	}
	return nil
}
