package recipe

import (
	"torrloom/recon/condition"
	"torrloom/recon/leastsquares"
	"torrloom/recon/sampling"
	"torrloom/recon/singlepoint"
	"torrloom/recon/volume"
)

// Setting describes one leaf of the recipe for a form and for the check. Numbers must lie in Min..Max, both allowed.
type Setting struct {
	Path    string   `json:"path"`  // "reconstruction.window"
	Group   string   `json:"group"` // heading of the form
	Label   string   `json:"label"`
	Unit    string   `json:"unit"`
	Kind    string   `json:"kind"` // "number", "integer", "choice" or "list" (of integers)
	Min     float64  `json:"min"`
	Max     float64  `json:"max"`
	Step    float64  `json:"step"` // of a form's arrows, not a restriction
	Choices []Choice `json:"choices"`
	Help    string   `json:"help"`
	Methods []string `json:"methods"` // reconstruction methods that use it; empty: all
	Stage   string   `json:"stage"`   // first stage that is redone: "measure", "reconstruct", "fit" or "derive"
}

// Choice is one value of a setting of kind "choice".
type Choice struct {
	Value string `json:"value"`
	Label string `json:"label"`
	Help  string `json:"help"`
}

// Methods are the reconstructions, in the order of a form. Each has its kernel in session.
var Methods = []Choice{
	{"back-projection", "back-projection", "filtered back-projection: |k| (2D) or k² (3D) times the window, smeared back"},
	{"gridding", "gridding", "the weighted sum over all k-space samples, made fast by a Kaiser-Bessel kernel; same sum as back-projection, no interpolation of projections"},
	{"least-squares", "least squares", "the image whose spokes come closest to the measured ones, held down by a penalty; conjugate gradients from the gridded image"},
	{"single-point", "single-point", "for single-point encoding: each sample time is its own k-space, all brought to one field of view"},
}

var (
	weighing = []string{"gridding", "least-squares"}
	gridding = []string{"gridding"}
	solving  = []string{"least-squares"}
	single   = []string{"single-point"}
)

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
		{Path: "reconstruction.density", Group: "Reconstruction", Label: "Density weights", Kind: "choice", Choices: densityChoices(), Methods: weighing, Stage: "reconstruct",
			Help: "How much of k-space each sample stands for."},
		{Path: "reconstruction.tolerance", Group: "Reconstruction", Label: "Kernel tolerance", Kind: "number", Min: 1e-6, Max: 0.1, Step: 0.001, Methods: gridding, Stage: "reconstruct",
			Help: "Relative error of the gridding kernel; its width follows from it."},
		{Path: "reconstruction.oversampling", Group: "Reconstruction", Label: "Grid oversampling", Kind: "number", Min: 1.25, Max: 2, Step: 0.25, Methods: gridding, Stage: "reconstruct",
			Help: "Cells of the gridding grid per voxel and axis. More memory, narrower kernel."},
		{Path: "reconstruction.penalty", Group: "Reconstruction", Label: "Penalty", Kind: "choice", Choices: penaltyChoices(), Methods: solving, Stage: "reconstruct",
			Help: "What is held down beside the misfit."},
		{Path: "reconstruction.penaltyWeight", Group: "Reconstruction", Label: "Penalty weight", Kind: "number", Min: 0, Max: 100, Step: 0.001, Methods: solving, Stage: "reconstruct",
			Help: "As a share of the misfit: 0.001 smooths next to nothing, 0.1 much."},
		{Path: "reconstruction.edgeStep", Group: "Reconstruction", Label: "Edge", Unit: "of the height", Kind: "number", Min: 0.001, Max: 10, Step: 0.01, Methods: solving, Stage: "reconstruct",
			Help: "For the edge-preserving penalty: the step between neighbouring voxels that counts as an edge."},
		{Path: "reconstruction.iterations", Group: "Reconstruction", Label: "Iterations", Kind: "integer", Min: 1, Max: 200, Step: 1, Methods: solving, Stage: "reconstruct",
			Help: "Of the conjugate gradients. More sharpen and let noise grow; the residual curve shows when no more is gained."},
		{Path: "singlePoint.axis", Group: "Single point", Label: "Images along", Kind: "choice", Choices: choicesOf(singlepoint.Axes), Methods: single, Stage: "measure",
			Help: "What the rate is fitted over."},
		{Path: "singlePoint.firstUS", Group: "Single point", Label: "First sample time", Unit: "µs", Kind: "number", Min: 0, Max: 1e4, Step: 0.01, Methods: single, Stage: "measure",
			Help: "Earliest sample time used. Early times have a large field of view and a coarse resolution."},
		{Path: "singlePoint.lastUS", Group: "Single point", Label: "Last sample time", Unit: "µs", Kind: "number", Min: 0, Max: 1e4, Step: 0.01, Methods: single, Stage: "measure",
			Help: "Latest sample time used. Late times resolve more, but their field of view may be smaller than the object, which then folds."},
		{Path: "singlePoint.count", Group: "Single point", Label: "Sample times", Kind: "integer", Min: 1, Max: 256, Step: 1, Methods: single, Stage: "measure",
			Help: "How many sample times are used, evenly between the first and the last."},
		{Path: "singlePoint.resolution", Group: "Single point", Label: "Resolution", Kind: "choice", Choices: choicesOf(singlepoint.Resolutions), Methods: single, Stage: "measure",
			Help: "Whether all sample times end at one k_max."},
		{Path: "conditioning.offset", Group: "Conditioning", Label: "Offset", Kind: "choice", Choices: choicesOf(condition.Offsets), Stage: "measure",
			Help: "How the receiver's constant offset is found. An offset makes a spot at the gradient centre."},
		{Path: "conditioning.phase", Group: "Conditioning", Label: "Phase", Kind: "choice", Choices: choicesOf(condition.Phases), Stage: "measure",
			Help: "How the receiver phase is chosen. Signs along the delays are kept."},
		{Path: "conditioning.timeShiftSamples", Group: "Conditioning", Label: "Shift of time zero", Unit: "samples", Kind: "number", Min: -1e6, Max: 1e6, Step: 0.1, Stage: "measure",
			Help: "Added to the file's time zero. A wrong time zero twists the phase across each projection."},
		{Path: "conditioning.shotPhase", Group: "Conditioning", Label: "Phase of single shots", Kind: "choice", Choices: choicesOf(condition.ShotPhases), Stage: "measure",
			Help: "Whether every shot is turned by its own phase."},
		{Path: "conditioning.shotTime", Group: "Conditioning", Label: "Time zero of single shots", Kind: "choice", Choices: choicesOf(condition.ShotTimes), Stage: "measure",
			Help: "Whether every shot has its own echo centre."},
		{Path: "conditioning.quadratureGain", Group: "Conditioning", Label: "Quadrature gain", Kind: "number", Min: -0.9, Max: 9, Step: 0.01, Stage: "measure",
			Help: "Excess gain of the second channel over the first."},
		{Path: "conditioning.quadratureSkewDeg", Group: "Conditioning", Label: "Quadrature skew", Unit: "°", Kind: "number", Min: -80, Max: 80, Step: 0.5, Stage: "measure",
			Help: "By how much the two channels miss 90°."},
		{Path: "conditioning.phaseDriftDeg", Group: "Conditioning", Label: "Phase drift", Unit: "°", Kind: "number", Min: -36000, Max: 36000, Step: 1, Stage: "measure",
			Help: "Phase of the last shot less that of the first."},
		{Path: "conditioning.frequencyKHz", Group: "Conditioning", Label: "Frequency", Unit: "kHz", Kind: "number", Min: -1e5, Max: 1e5, Step: 1, Stage: "measure",
			Help: "Frequency of the signal off the receiver's, in the middle of the acquisition. It shifts every projection."},
		{Path: "conditioning.frequencyDriftKHz", Group: "Conditioning", Label: "Frequency drift", Unit: "kHz", Kind: "number", Min: -1e5, Max: 1e5, Step: 1, Stage: "measure",
			Help: "Frequency of the last shot less that of the first."},
		{Path: "conditioning.amplitudeDrift", Group: "Conditioning", Label: "Amplitude drift", Kind: "number", Min: -1.8, Max: 1.8, Step: 0.01, Stage: "measure",
			Help: "Signal of the last shot less that of the first, over the signal in the middle."},
		{Path: "conditioning.deadSamples", Group: "Conditioning", Label: "Dead samples", Kind: "integer", Min: 0, Max: 1e6, Step: 1, Stage: "measure",
			Help: "Samples after k = 0 that are not used, because the receiver was not ready."},
		{Path: "conditioning.firstShot", Group: "Subset of shots", Label: "First shot", Kind: "integer", Min: 0, Max: 1e9, Step: 1, Stage: "measure",
			Help: "Shots before this one, numbered from 0 in the order of the file, are left out."},
		{Path: "conditioning.lastShot", Group: "Subset of shots", Label: "Last shot", Kind: "integer", Min: 0, Max: 1e9, Step: 1, Stage: "measure",
			Help: "Shots after this one are left out. 0: to the end."},
		{Path: "conditioning.every", Group: "Subset of shots", Label: "Every n-th", Kind: "integer", Min: 1, Max: 1e9, Step: 1, Stage: "measure",
			Help: "Keeps one image shot in so many: what fewer projections would have given."},
		{Path: "conditioning.readoutDecay", Group: "Readout decay", Label: "Decay", Kind: "choice", Choices: choicesOf(condition.ReadoutDecays), Stage: "measure",
			Help: "Whether the decay along each trace, which blurs, is undone."},
		{Path: "conditioning.readoutDecayPerUS", Group: "Readout decay", Label: "Rate", Unit: "1/µs", Kind: "number", Min: 0, Max: 1000, Step: 0.05, Stage: "measure",
			Help: "Rate of the decay, where it is typed in. Undone at twice the rate, an object gets rims."},
		{Path: "conditioning.readoutGainCap", Group: "Readout decay", Label: "Largest gain", Kind: "number", Min: 0, Max: 1000, Step: 0.5, Stage: "measure",
			Help: "Samples are multiplied by at most this, since where the signal is gone only noise grows."},
		{Path: "conditioning.excludeShots", Group: "Conditioning", Label: "Leave out shots", Kind: "list", Min: 0, Max: 1e9, Step: 1, Stage: "measure",
			Help: "Numbers of shots, from 0, that do not enter the image; weights are made anew from the others."},
		{Path: "conditioning.excludeDelays", Group: "Conditioning", Label: "Leave out delays", Kind: "list", Min: 0, Max: 1e9, Step: 1, Stage: "measure",
			Help: "Numbers of delays, from 0, that are not used."},
		{Path: "rates.minPerUS", Group: "Rates", Label: "Slowest rate", Unit: "1/µs", Kind: "number", Min: 0, Max: 1e4, Step: 0.01, Stage: "fit",
			Help: "Lower end of the rates that can be an answer. 0: from the delays."},
		{Path: "rates.maxPerUS", Group: "Rates", Label: "Fastest rate", Unit: "1/µs", Kind: "number", Min: 0, Max: 1e4, Step: 0.1, Stage: "fit",
			Help: "Upper end of the rates that can be an answer. 0: from the delays."},
		{Path: "calibration.rate", Group: "Calibration", Label: "Rate", Kind: "choice", Choices: []Choice{{"R1", "R1", "from recovery delays"}, {"R2", "R2", "from decay delays"}, {"R2*", "R2*", "from a free decay"}}, Stage: "derive",
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
		{Path: "sample.temperatureC", Group: "Sample", Label: "Temperature", Unit: "°C", Kind: "number", Min: -100, Max: 200, Step: 0.5, Stage: "derive",
			Help: "Of the sample, where the calibration knows its own temperature and how the rate changes with it. 0: no correction."},
		{Path: "sample.referenceUM", Group: "Sample", Label: "Reference concentration", Unit: "µM", Kind: "number", Min: 0, Max: 1e6, Step: 10, Stage: "derive",
			Help: "Probe concentration of a place whose amplitude is known; turns amplitude into concentration. 0: no correction."},
		{Path: "sample.referenceSEUM", Group: "Sample", Label: "Its standard error", Unit: "µM", Kind: "number", Min: 0, Max: 1e6, Step: 1, Stage: "derive",
			Help: "Of the reference concentration; becomes a systematic error."},
		{Path: "sample.referenceAmplitude", Group: "Sample", Label: "Reference amplitude", Kind: "number", Min: 0, Max: 1e12, Step: 0.01, Stage: "derive",
			Help: "Fitted amplitude, signal per mm³ (mm² in 2D), of the place with the reference concentration. 0: no correction."},
		{Path: "mask.amplitudeFraction", Group: "Mask", Label: "Mask level", Unit: "of strongest", Kind: "number", Min: 0, Max: 1, Step: 0.05, Stage: "derive",
			Help: "Voxels whose amplitude at the reference delay is below this fraction of the strongest are left out."},
	}
}

func penaltyChoices() []Choice {
	var out []Choice
	for _, p := range leastsquares.Penalties {
		out = append(out, Choice{p.Name, p.Label, p.Help})
	}
	return out
}

func densityChoices() []Choice {
	var out []Choice
	for _, d := range sampling.Densities {
		out = append(out, Choice{d.Name, d.Label, d.Help})
	}
	return out
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
