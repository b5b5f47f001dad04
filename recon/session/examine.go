package session

import (
	"torrloom/recon/acquisition"
	"torrloom/recon/quality"
	"torrloom/recon/recipe"
)

// Examine returns the findings on an acquisition as a recipe conditions it. Rates, which may be nil, sums up the fitted
// rates, by which the delays are judged.
func Examine(a *acquisition.Acquisition, r recipe.Recipe, rates *Summary) *quality.Report {
	var known quality.Known
	if rates != nil && rates.Count > 0 {
		known.Rates = &quality.Rates{LowPerUS: rates.Central90[0], MedianPerUS: rates.Median, HighPerUS: rates.Central90[1]}
	}
	if r.Conditioning.ReadoutDecay == "typed" {
		known.ReadoutDecayPerUS = &r.Conditioning.ReadoutDecayPerUS
	}
	return quality.Examine(a, r.Conditioning, known)
}
