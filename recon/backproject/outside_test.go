//go:build !js

package backproject

import (
	"bytes"
	"encoding/json"
	"math"
	"os/exec"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/phantom"
)

// iradonScript reads a sinogram from standard input and prints what skimage.transform.iradon makes of it: ramp filter,
// linear interpolation, density per pixel area.
const iradonScript = `
import json, sys
import numpy as np
from skimage.transform import iradon
job = json.load(sys.stdin)
sinogram = np.array(job["sinogram"]).T          # [position, view], as iradon wants it
image = iradon(sinogram, theta=np.array(job["degrees"]), filter_name="ramp", interpolation="linear", circle=True)
print(json.dumps(image.tolist()))
`

func iradon(t *testing.T, sinogram [][]float64, degrees []float64) [][]float64 {
	t.Helper()
	in, err := json.Marshal(map[string]any{"sinogram": sinogram, "degrees": degrees})
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command("/usr/bin/python3", "-c", iradonScript)
	cmd.Stdin = bytes.NewReader(in)
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("scikit-image did not run (apt-get install python3-skimage): %v\n%s", err, stderr.String())
	}
	var image [][]float64
	if err := json.Unmarshal(out, &image); err != nil {
		t.Fatal(err)
	}
	return image
}

// The same sinogram through scikit-image's iradon (Debian's python3-skimage). Both take |k| from the band-limited ramp
// kernel and linear interpolation between samples, so that with one sample per pixel they agree up to rounding of the
// coordinates and the different handling of the outermost samples.
func TestSameSinogramThroughScikitImage(t *testing.T) {
	const n, views = 96, 120
	head := sheppLogan()
	a := &acquisition.Acquisition{Dim: 2, Delays: 1, Shots: views, Samples: n, DelayUS: []float64{1}, Sequence: acquisition.EchoDecay,
		Domain: acquisition.Projection, PositionStepMM: 2. / n, TimeZeroSample: n / 2}
	sinogram, degrees := make([][]float64, views), make([]float64, views)
	for v, direction := range phantom.EqualAngles(views) {
		degrees[v] = 180 * float64(v) / views
		a.GradientMTPerM = append(a.GradientMTPerM, direction)
		for j := range n {
			p := head.Projection(direction, (float64(j)-n/2)*a.PositionStepMM)
			a.Signal = append(a.Signal, complex(float32(p), 0))
			sinogram[v] = append(sinogram[v], p)
		}
	}
	if err := a.Check(); err != nil {
		t.Fatal(err)
	}
	theirs := iradon(t, sinogram, degrees)
	g, ours := reconstructSampled(t, a, n, 2, "none", fineness{transformed: 1, between: 1024})
	sum, norm, count := 0.0, 0.0, 0
	for iy := range n {
		for ix := range n {
			if x, y := g.MM(0, ix), g.MM(1, iy); x*x+y*y > 0.95*0.95 {
				continue
			}
			// iradon's rows run down the page, so y = -(row - n/2)·step, and its density is per pixel length.
			row := n - iy
			if row >= n {
				continue
			}
			want := theirs[row][ix] / a.PositionStepMM
			d := float64(ours[g.Index(ix, iy, 0)]) - want
			sum, norm, count = sum+d*d, norm+want*want, count+1
		}
	}
	relative := math.Sqrt(sum / norm)
	t.Logf("relative difference %.2g", relative)
	if !(relative <= 3e-4) || count < 6000 { // the nearest of 1024 entries; measured 7e-5
		t.Errorf("relative difference %.4f over %d pixels", relative, count)
	}
}
