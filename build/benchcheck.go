package main

import (
	"fmt"
	"time"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/quality"
)

// runCheck times the check of an acquisition natively. It should take less than its reconstruction.
func (b *bench) runCheck(a *acquisition.Acquisition, repeats int) {
	var seconds []float64
	for range repeats {
		start := time.Now()
		quality.Examine(a, condition.Defaults(), quality.Known{})
		seconds = append(seconds, time.Since(start).Seconds())
	}
	b.checkSeconds = medianOf(seconds)
}

// checkLine compares the check with the quicker reconstruction of the same case.
func (b *bench) checkLine() string {
	image := 0.0
	for _, r := range b.rows {
		if s := r.seconds["native"]; r.size == smallBench.name && (r.job == "gridding" || r.job == "back-projection") && (image == 0 || s < image) {
			image = s
		}
	}
	return fmt.Sprintf("\nCheck of the bench case, Go native: %.2f s, %.2f × its reconstruction (target: < 1).\n", b.checkSeconds, b.checkSeconds/image)
}
