// Package recipe holds every setting of the chain as one JSON document: defaults, check, catalogue and hash. Same data
// and same recipe give the same numbers.
//
// To add a setting: a field in a struct here and a row in Catalogue; the page draws its form from that row.
package recipe

// Recipe is the whole chain. A nil Calibration means that the rate map is made and the pO2 map is not.
type Recipe struct {
	Recipe         int            `json:"recipe"` // format version, 1
	Conditioning   Conditioning   `json:"conditioning"`
	Reconstruction Reconstruction `json:"reconstruction"`
	Rates          Rates          `json:"rates"`
	Calibration    *Calibration   `json:"calibration,omitempty"`
	Mask           Mask           `json:"mask"`
}

// Conditioning prepares the traces.
type Conditioning struct {
	Offset           string  `json:"offset"`           // row of condition.Offsets
	Phase            string  `json:"phase"`            // "reference-delay" or "none"
	TimeShiftSamples float64 `json:"timeShiftSamples"` // added to the file's time zero
}

// Reconstruction turns conditioned spokes into one image per delay.
type Reconstruction struct {
	Method        string  `json:"method"`
	Matrix        int     `json:"matrix"`
	FieldOfViewMM float64 `json:"fieldOfViewMM"`
	Window        string  `json:"window"`
	Cutoff        float64 `json:"cutoff"` // fraction of k_max
}

// Rates bounds the rate fit. Zero means: from the delays.
type Rates struct {
	MinPerUS float64 `json:"minPerUS"`
	MaxPerUS float64 `json:"maxPerUS"`
}

// Calibration is pO2 = (R - zero)/slope.
type Calibration struct {
	Rate              string  `json:"rate"` // "R1" or "R2"
	ZeroPerUS         float64 `json:"zeroPerUS"`
	SlopePerUSPerTorr float64 `json:"slopePerUSPerTorr"`
}

// Mask keeps voxels whose reference-delay amplitude is at least a fraction of the image's strongest amplitude.
type Mask struct {
	AmplitudeFraction float64 `json:"amplitudeFraction"`
}

// Setting describes one leaf of the recipe for a form and for the check.
type Setting struct {
	Path    string   `json:"path"`  // "reconstruction.window"
	Group   string   `json:"group"` // heading of the form
	Label   string   `json:"label"`
	Unit    string   `json:"unit"`
	Kind    string   `json:"kind"` // "number", "integer" or "choice"
	Min     float64  `json:"min"`
	Max     float64  `json:"max"`
	Step    float64  `json:"step"`
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
