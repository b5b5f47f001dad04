package phantom

import "torrloom/recon/acquisition"

// The invented calibration of the demo: R = zero + slope·pO2, in 1/µs and 1/µs/torr.
const (
	demoR1Zero, demoR1Slope = 0.142, 0.0068
	demoR2Zero, demoR2Slope = 0.31, 0.0071
)

// DemoInsert is one insert of the demo, for tests and for the words of the page.
type DemoInsert struct {
	Name     string
	CentreMM [3]float64
	RadiusMM float64
	PO2Torr  float64
}

// DemoInserts are three spheres of different oxygenation.
var DemoInserts = []DemoInsert{
	{"low", [3]float64{-5.2, 3.1, 1.2}, 4.4, 4},
	{"middle", [3]float64{5.4, 2.6, -1.5}, 4.0, 17},
	{"high", [3]float64{0.6, -5.6, 0.8}, 3.6, 42},
}

// DemoPlugPO2Torr is the pO2 of the gel plug around the inserts.
const DemoPlugPO2Torr = 74

// Demo returns the invented object of the demo: a gel plug with three inserts.
func Demo() *Phantom {
	plug := Shape{Dim: 3, CentreMM: [3]float64{0.4, -0.3, 0}, SemiMM: [3]float64{12.6, 11.8, 10.4}, AngleDeg: 20}
	bodies := []Body{demoBody("plug", plug, 0.62, DemoPlugPO2Torr)}
	for _, in := range DemoInserts {
		ball := Shape{Dim: 3, CentreMM: in.CentreMM, SemiMM: [3]float64{in.RadiusMM, in.RadiusMM, in.RadiusMM}}
		bodies = append(bodies, demoBody(in.Name, ball, 1, in.PO2Torr))
	}
	p, err := Nested(3, bodies...)
	if err != nil {
		panic(err) // the bodies above are constants; a test makes them
	}
	return p
}

func demoBody(name string, s Shape, density, pO2 float64) Body {
	return Body{Name: name, Shape: s, Density: density,
		R1PerUS: demoR1Zero + demoR1Slope*pO2, R2PerUS: demoR2Zero + demoR2Slope*pO2}
}

// DemoAcquisition returns an invented inversion-recovery acquisition of Demo, with noise from a fixed seed when noise is
// true.
func DemoAcquisition(noise bool) (*acquisition.Acquisition, error) {
	pr := Protocol{
		Sequence: acquisition.InversionRecovery,
		DelayUS:  []float64{0.4, 0.7, 1.2, 2.1, 3.6, 6.3, 11, 32}, EchoTimeUS: 1.1, Inversion: 1.82,
		Directions: GoldenHalfSphere(480), GradientMTPerM: 18, DwellNS: 6, Samples: 320, TimeZeroSample: 159.4,
		PhaseRad: 0.7, Seed: 11,
	}
	if noise {
		pr.NoiseSD = demoNoiseSD
	}
	a, err := Demo().Acquire(pr)
	if err != nil {
		return nil, err
	}
	a.Name = "demo"
	a.Optional.Note = "made-up data: three inserts in a gel plug, computed by Torrloom itself"
	zero, slope := demoR1Zero, demoR1Slope
	a.Optional.R1ZeroPerUS, a.Optional.R1SlopePerUSPerTorr = &zero, &slope
	return a, nil
}

// demoNoiseSD makes the inserts stand about 40 times above the noise of a voxel in the image of the longest delay.
const demoNoiseSD = 14
