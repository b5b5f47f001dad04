package recipe

import (
	"torrloom/recon/condition"
	"torrloom/recon/sampling"
	"torrloom/recon/volume"
)

// Setting describes one leaf of the recipe for a form and for the check. Numbers must lie in Min..Max, both allowed.
type Setting struct {
	Path    string   `json:"path"`  // "reconstruction.window"
	Group   string   `json:"group"` // heading of the form
	Label   string   `json:"label"`
	Unit    string   `json:"unit"`
	Kind    string   `json:"kind"` // "number", "integer" or "choice"
	Min     float64  `json:"min"`
	Max     float64  `json:"max"`
	Step    float64  `json:"step"` // of a form's arrows, not a restriction
	Choices []Choice `json:"choices"`
	Help    string   `json:"help"`
	Stage   string   `json:"stage"` // first stage that is redone: "measure", "reconstruct", "fit" or "derive"
}

// Choice is one value of a setting of kind "choice".
type Choice struct {
	Value string `json:"value"`
	Label string `json:"label"`
	Help  string `json:"help"`
}

// Methods are the reconstructions, in the order of a form. Each has its kernel in session.
var Methods = []Choice{
	{"back-projection", "back-projection", "filtered back-projection: |k| (2D) or k² (3D) times the window, smeared back with linear interpolation"},
}

// Catalogue returns every setting, in the order of the form.
func Catalogue() []Setting {
	return []Setting{
		{Path: "reconstruction.method", Group: "Reconstruction", Label: "Method", Kind: "choice", Choices: Methods, Stage: "reconstruct",
			Help: "How images are made from spokes. All methods return signal per mm³ (mm² in 2D)."},
		{Path: "reconstruction.matrix", Group: "Reconstruction", Label: "Matrix size", Unit: "voxels", Kind: "integer", Min: 8, Max: volume.MaxMatrix, Step: 8, Stage: "reconstruct",
			Help: "Voxels along each axis. Voxels much smaller than 1/(2 k_max) add time, not detail; larger ones cut k_max."},
		{Path: "reconstruction.fieldOfViewMM", Group: "Reconstruction", Label: "Field of view", Unit: "mm", Kind: "number", Min: 0.1, Max: 2000, Step: 1, Stage: "reconstruct",
			Help: "Edge of the image. A field smaller than the object shows its middle, unfolded."},
		{Path: "reconstruction.window", Group: "Reconstruction", Label: "Window", Kind: "choice", Choices: windowChoices(), Stage: "reconstruct",
			Help: "Weight over k up to the cutoff. Smoother windows trade resolution for noise and ringing."},
		{Path: "reconstruction.cutoff", Group: "Reconstruction", Label: "Cutoff", Unit: "of k_max", Kind: "number", Min: 0.05, Max: 1, Step: 0.05, Stage: "reconstruct",
			Help: "Where the window ends, as a fraction of the largest k that every spoke reaches."},
		{Path: "conditioning.offset", Group: "Conditioning", Label: "Offset", Kind: "choice", Choices: choicesOf(condition.Offsets), Stage: "measure",
			Help: "How the receiver's constant offset is found. An offset makes a spot at the gradient centre."},
		{Path: "conditioning.phase", Group: "Conditioning", Label: "Phase", Kind: "choice", Choices: choicesOf(condition.Phases), Stage: "measure",
			Help: "How the receiver phase is chosen. Signs along the delays are kept."},
		{Path: "conditioning.timeShiftSamples", Group: "Conditioning", Label: "Shift of time zero", Unit: "samples", Kind: "number", Min: -1e6, Max: 1e6, Step: 0.1, Stage: "measure",
			Help: "Added to the file's time zero. A wrong time zero twists the phase across each projection."},
		{Path: "rates.minPerUS", Group: "Rates", Label: "Slowest rate", Unit: "1/µs", Kind: "number", Min: 0, Max: 1e4, Step: 0.01, Stage: "fit",
			Help: "Lower end of the rates that can be an answer. 0: from the delays."},
		{Path: "rates.maxPerUS", Group: "Rates", Label: "Fastest rate", Unit: "1/µs", Kind: "number", Min: 0, Max: 1e4, Step: 0.1, Stage: "fit",
			Help: "Upper end of the rates that can be an answer. 0: from the delays."},
		{Path: "calibration.rate", Group: "Calibration", Label: "Rate", Kind: "choice", Choices: []Choice{{"R1", "R1", "from recovery delays"}, {"R2", "R2", "from decay delays"}}, Stage: "derive",
			Help: "The rate that the calibration was measured with. It must be the rate these data give."},
		{Path: "calibration.zeroPerUS", Group: "Calibration", Label: "Rate at zero oxygen", Unit: "1/µs", Kind: "number", Min: 0, Max: 1e3, Step: 0.001, Stage: "derive",
			Help: "Rate of the probe without oxygen, from your calibration."},
		{Path: "calibration.slopePerUSPerTorr", Group: "Calibration", Label: "Slope", Unit: "1/µs/torr", Kind: "number", Min: 0, Max: 10, Step: 0.0001, Stage: "derive",
			Help: "Gain in rate per torr, from your calibration. pO2 = (rate - zero)/slope."},
		{Path: "calibration.zeroSEPerUS", Group: "Calibration", Label: "Standard error of the zero", Unit: "1/µs", Kind: "number", Min: 0, Max: 1e3, Step: 0.001, Stage: "derive",
			Help: "Of the rate at zero oxygen. It becomes a systematic error of every pO2. 0: not known."},
		{Path: "calibration.slopeSEPerUSPerTorr", Group: "Calibration", Label: "Standard error of the slope", Unit: "1/µs/torr", Kind: "number", Min: 0, Max: 10, Step: 0.0001, Stage: "derive",
			Help: "Of the slope. It becomes a systematic error that grows with pO2. 0: not known."},
		{Path: "calibration.correlation", Group: "Calibration", Label: "Correlation of zero and slope", Kind: "number", Min: -1, Max: 1, Step: 0.1, Stage: "derive",
			Help: "Of their errors. A fitted line has a negative one: a zero that is too high goes with a slope that is too low."},
		{Path: "calibration.concentrationPerUSPerUM", Group: "Calibration", Label: "Gain per concentration", Unit: "1/µs/µM", Kind: "number", Min: -10, Max: 10, Step: 0.0001, Stage: "derive",
			Help: "Gain in rate per µM of probe; matters for R2. Used where the sample's amplitude gives the concentration. 0: none."},
		{Path: "calibration.concentrationSEPerUSPerUM", Group: "Calibration", Label: "Standard error of the gain per concentration", Unit: "1/µs/µM", Kind: "number", Min: 0, Max: 10, Step: 0.0001, Stage: "derive",
			Help: "Becomes a systematic error where the concentration differs from that of the calibration."},
		{Path: "calibration.concentrationUM", Group: "Calibration", Label: "Concentration of the calibration", Unit: "µM", Kind: "number", Min: 0, Max: 1e6, Step: 10, Stage: "derive",
			Help: "Probe concentration that the rate at zero oxygen holds for. 0: extrapolated to no probe."},
		{Path: "calibration.temperaturePerUSPerC", Group: "Calibration", Label: "Gain per temperature", Unit: "1/µs/°C", Kind: "number", Min: -10, Max: 10, Step: 0.001, Stage: "derive",
			Help: "Gain in rate per °C, used when the temperatures of calibration and sample are known. 0: none."},
		{Path: "calibration.temperatureSEPerUSPerC", Group: "Calibration", Label: "Standard error of the gain per temperature", Unit: "1/µs/°C", Kind: "number", Min: 0, Max: 10, Step: 0.001, Stage: "derive",
			Help: "Becomes a systematic error where the temperature differs from that of the calibration."},
		{Path: "calibration.temperatureC", Group: "Calibration", Label: "Temperature of the calibration", Unit: "°C", Kind: "number", Min: -100, Max: 400, Step: 1, Stage: "derive",
			Help: "Temperature that the line was measured at. 0: not known."},
		{Path: "calibration.fromTorr", Group: "Calibration", Label: "Calibrated from", Unit: "torr", Kind: "number", Min: 0, Max: 1e4, Step: 1, Stage: "derive",
			Help: "Lowest pO2 that was measured. A map that leaves the range says so."},
		{Path: "calibration.toTorr", Group: "Calibration", Label: "Calibrated to", Unit: "torr", Kind: "number", Min: 0, Max: 1e4, Step: 1, Stage: "derive",
			Help: "Highest pO2 that was measured. 0: not known."},
		{Path: "mask.amplitudeFraction", Group: "Mask", Label: "Mask level", Unit: "of strongest", Kind: "number", Min: 0, Max: 1, Step: 0.05, Stage: "derive",
			Help: "Voxels whose amplitude at the reference delay is below this fraction of the strongest are left out."},
	}
}

func windowChoices() []Choice {
	var out []Choice
	for _, w := range sampling.Windows {
		out = append(out, Choice{w.Name, w.Label, w.Help})
	}
	return out
}

func choicesOf(rows []condition.Choice) []Choice {
	var out []Choice
	for _, r := range rows {
		out = append(out, Choice{r.Name, r.Label, r.Help})
	}
	return out
}
