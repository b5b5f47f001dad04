package oxygen

import (
	"math"
	"slices"

	"torrloom/recon/fault"
)

// Published is a calibration as papers print it: a constant and a factor in one of Directions, in a pressure unit.
type Published struct {
	Direction   string  `json:"direction"` // row of Directions
	Unit        string  `json:"unit"`      // row of Units
	Rate        string  `json:"rate"`      // "R1" or "R2"
	Constant    float64 `json:"constant"`
	ConstantSE  float64 `json:"constantSE,omitempty"`
	Factor      float64 `json:"factor"`
	FactorSE    float64 `json:"factorSE,omitempty"`
	Correlation float64 `json:"correlation,omitempty"` // of the errors of constant and factor
}

// Direction is one way to print the line. The numbers of one mistaken for those of another are wrong by orders of
// magnitude, which the sign and size of R0 betray.
type Direction struct {
	Name    string `json:"name"`
	Label   string `json:"label"`
	Formula string `json:"formula"`

	// line returns zero and slope from constant and factor (p in torr), and back.
	line, print func(constant, factor float64) (float64, float64)
}

// Directions lists what is understood.
var Directions = []Direction{
	{"rate-of-pO2", "1/µs per pressure", "R = constant + factor·pO2",
		func(a, b float64) (float64, float64) { return a, b },
		func(zero, slope float64) (float64, float64) { return zero, slope }},
	{"pO2-of-rate", "pressure per 1/µs", "pO2 = factor·(R - constant)",
		func(a, b float64) (float64, float64) { return a, 1 / b },
		func(zero, slope float64) (float64, float64) { return zero, 1 / slope }},
	{"pO2-of-rate-offset", "pressure per 1/µs, constant in pressure", "pO2 = factor·R + constant",
		func(a, b float64) (float64, float64) { return -a / b, 1 / b },
		func(zero, slope float64) (float64, float64) { return -zero / slope, 1 / slope }},
}

func directionNamed(name string) (Direction, error) {
	at := slices.IndexFunc(Directions, func(d Direction) bool { return d.Name == name })
	if at < 0 {
		return Direction{}, fault.New(fault.BadSetting, "published.direction", "%q is not known; use rate-of-pO2, pO2-of-rate or pO2-of-rate-offset", name)
	}
	return Directions[at], nil
}

// pressurePowers says with which power of the pressure unit constant and factor are printed.
func (d Direction) pressurePowers() (constant, factor float64) {
	switch d.Name {
	case "rate-of-pO2":
		return 0, -1
	case "pO2-of-rate":
		return 0, 1
	}
	return 1, 1
}

// Calibration returns the line that a printed one stands for, errors carried over to first order.
//
// Errors: bad-setting for an unknown direction or unit, or numbers that give no calibration.
func (p Published) Calibration() (Calibration, error) {
	d, err := directionNamed(p.Direction)
	if err != nil {
		return Calibration{}, err
	}
	u, err := UnitNamed(p.Unit)
	if err != nil {
		return Calibration{}, err
	}
	if p.Factor == 0 {
		return Calibration{}, fault.New(fault.BadSetting, "published.factor", "0; the factor between rate and pO2 cannot be zero")
	}
	powerA, powerB := d.pressurePowers()
	inA, inB := math.Pow(u.PerTorr, -powerA), math.Pow(u.PerTorr, -powerB)
	pair := turn(twoNumbers{p.Constant * inA, p.ConstantSE * inA, p.Factor * inB, p.FactorSE * inB, p.Correlation}, d.line)
	c := Calibration{Rate: p.Rate, ZeroPerUS: pair.first, ZeroSEPerUS: pair.firstSE,
		SlopePerUSPerTorr: pair.second, SlopeSEPerUSPerTorr: pair.secondSE, Correlation: pair.correlation}
	return c, c.Check()
}

// Published returns the calibration as it would be printed in a direction and a unit.
//
// Errors: bad-setting for an unknown direction or unit, or a calibration that fails its check.
func (c Calibration) Published(direction, unit string) (Published, error) {
	d, err := directionNamed(direction)
	if err != nil {
		return Published{}, err
	}
	u, err := UnitNamed(unit)
	if err != nil {
		return Published{}, err
	}
	if err := c.Check(); err != nil {
		return Published{}, err
	}
	powerA, powerB := d.pressurePowers()
	inA, inB := math.Pow(u.PerTorr, powerA), math.Pow(u.PerTorr, powerB)
	pair := turn(twoNumbers{c.ZeroPerUS, c.ZeroSEPerUS, c.SlopePerUSPerTorr, c.SlopeSEPerUSPerTorr, c.Correlation}, d.print)
	return Published{Direction: direction, Unit: unit, Rate: c.Rate, Constant: pair.first * inA, ConstantSE: pair.firstSE * inA,
		Factor: pair.second * inB, FactorSE: pair.secondSE * inB, Correlation: pair.correlation}, nil
}

// twoNumbers are two numbers with correlated errors.
type twoNumbers struct{ first, firstSE, second, secondSE, correlation float64 }

// turn carries two numbers and their covariance through f to first order. The derivatives are central differences: f is
// made of ratios, and a relative step of 1e-5 leaves a relative error of 1e-10.
func turn(n twoNumbers, f func(a, b float64) (float64, float64)) twoNumbers {
	ha, hb := step(n.first), step(n.second)
	a1, b1 := f(n.first+ha, n.second)
	a2, b2 := f(n.first-ha, n.second)
	a3, b3 := f(n.first, n.second+hb)
	a4, b4 := f(n.first, n.second-hb)
	ja, jb := [2]float64{(a1 - a2) / (2 * ha), (a3 - a4) / (2 * hb)}, [2]float64{(b1 - b2) / (2 * ha), (b3 - b4) / (2 * hb)}
	covariance := n.correlation * n.firstSE * n.secondSE
	product := func(p, q [2]float64) float64 {
		return p[0]*q[0]*square(n.firstSE) + (p[0]*q[1]+p[1]*q[0])*covariance + p[1]*q[1]*square(n.secondSE)
	}
	var out twoNumbers
	out.first, out.second = f(n.first, n.second)
	out.firstSE, out.secondSE = math.Sqrt(math.Max(0, product(ja, ja))), math.Sqrt(math.Max(0, product(jb, jb)))
	if out.firstSE > 0 && out.secondSE > 0 {
		out.correlation = math.Max(-1, math.Min(1, product(ja, jb)/(out.firstSE*out.secondSE)))
	}
	return out
}

func step(x float64) float64 { return 1e-5 * math.Max(math.Abs(x), 1e-5) }
