// Package session knows the order of the stages, how to split them into jobs, and by which hash a result may be reused.
// The page and the native command drive the same functions:
//
//	Measure → Reconstruct (per group of delays) → Fit (per block of voxels) → Derive
package session

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"math"
	"slices"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/recipe"
	"torrloom/recon/volume"
)

// MemoryLimit is the estimated need of one engine past which a run is refused. A browser gives one module at most
// 4 GiB, and half of that leaves room for what an estimate cannot see.
const MemoryLimit = 2 << 30

// Plan is what a recipe would do to an acquisition. Two plans with the same key share that stage's result.
type Plan struct {
	Recipe          recipe.Recipe `json:"recipe"` // complete, every default filled in
	Keys            Keys          `json:"keys"`
	N               [3]int        `json:"n"`
	VoxelMM         [3]float64    `json:"voxelMM"`
	OriginMM        [3]float64    `json:"originMM"` // centre of voxel (0,0,0)
	MemoryBytes     int64         `json:"memoryBytes"`
	Frames          Frames        `json:"frames"`
	ReconstructJobs [][]int       `json:"reconstructJobs"` // frame indices of each job
	FitJobs         [][2]int      `json:"fitJobs"`         // voxel range [from, to) of each job
	Warnings        []string      `json:"warnings"`
}

// Keys are hashes of the data and of all settings that reach a stage.
type Keys struct {
	Measure     string `json:"measure"`
	Reconstruct string `json:"reconstruct"`
	Fit         string `json:"fit"`
	Derive      string `json:"derive"`
}

// NewPlan checks a recipe against an acquisition and splits its work for workers engines. dataHash identifies the
// input; extentMM is the object's measured diameter.
//
// Errors: bad-setting from the recipe; too-large when the estimate passes MemoryLimit.
func NewPlan(a *acquisition.Acquisition, dataHash string, extentMM float64, r recipe.Recipe, workers int) (*Plan, error) {
	if err := r.Check(); err != nil {
		return nil, err
	}
	f, err := FramesOf(a, r)
	if err != nil {
		return nil, err
	}
	if r.Calibration != nil && r.Calibration.Rate != f.RateName {
		return nil, fault.New(fault.BadSetting, "recipe calibration.rate", "the calibration is for %s, these %s data give %s; enter a calibration of %s or remove it",
			r.Calibration.Rate, a.Sequence, f.RateName, f.RateName)
	}
	g, err := gridOf(a, r)
	if err != nil {
		return nil, err
	}
	workers = max(1, workers)
	p := &Plan{Recipe: r, Keys: keysOf(dataHash, r), N: g.N, VoxelMM: g.VoxelMM, Frames: f, Warnings: planWarnings(a, r, f)}
	for axis := range 3 {
		p.OriginMM[axis] = g.MM(axis, 0)
	}
	p.ReconstructJobs = splitFrames(len(f.TimeUS), workers)
	p.FitJobs = splitVoxels(g.Voxels(), workers)
	p.MemoryBytes = estimate(a, r, g, extentMM, len(f.TimeUS), largest(p.ReconstructJobs))
	if p.MemoryBytes > MemoryLimit {
		return nil, fault.New(fault.TooLarge, "recipe reconstruction.matrix", "%dx%dx%d voxels in %d images need about %.1f GiB per worker, the limit is %.1f GiB; lower the matrix size",
			g.N[0], g.N[1], g.N[2], len(f.TimeUS), float64(p.MemoryBytes)/(1<<30), float64(MemoryLimit)/(1<<30))
	}
	return p, nil
}

// splitFrames deals the frames out to at most workers jobs, in order and in pairs: two images share one complex lane, so
// that a pair is the unit of work, and the rounding of an image must not depend on how many workers there are.
func splitFrames(frames, workers int) [][]int {
	pairs := (frames + 1) / 2
	jobs := min(pairs, workers)
	out := make([][]int, jobs)
	for f := range frames {
		j := f / 2 * jobs / pairs
		out[j] = append(out[j], f)
	}
	return out
}

func largest(jobs [][]int) int {
	most := 0
	for _, job := range jobs {
		most = max(most, len(job))
	}
	return most
}

func splitVoxels(voxels, workers int) [][2]int {
	var out [][2]int
	for j := range workers {
		from, to := j*voxels/workers, (j+1)*voxels/workers
		if to > from {
			out = append(out, [2]int{from, to})
		}
	}
	return out
}

// estimate returns the bytes one engine needs for its largest job: the signal, the spokes, the growing and the finished
// images of its frames, and once the images of all frames for the fit.
func estimate(a *acquisition.Acquisition, r recipe.Recipe, g volume.Grid, extentMM float64, frames, inJob int) int64 {
	images := int64(g.Voxels()) * int64(inJob) * 4
	work := 2 * images
	if a.Encoding == acquisition.Spoke {
		cut, _ := kCut(a, r)
		geometry := condition.Plan(a, &condition.Constants{ExtentMM: extentMM}, r.Reconstruction.FieldOfViewMM, cut)
		work += geometry.Bytes(a, inJob)
	}
	if slices.Contains(gridders, r.Reconstruction.Method) {
		work += int64(float64(images) * math.Pow(r.Reconstruction.Oversampling, float64(a.Dim)))
	}
	if r.Reconstruction.Method == "least-squares" {
		work += images/int64(inJob)*int64(inJob+noiseRealisations(a.Dim))*4 + int64(g.Voxels())<<a.Dim*8 // vectors, and the doubled grid
	}
	fit := int64(g.Voxels()) * int64(4*frames+4*6)
	return a.Bytes() + max(work, fit)
}

// gridders are the methods that hold an oversampled grid beside the images.
var gridders = []string{"gridding", "least-squares"}

func keysOf(dataHash string, r recipe.Recipe) Keys {
	var k Keys
	k.Measure = hash(dataHash, r.Conditioning, r.SinglePoint)
	if r.Reconstruction.Method == singlePointMethod {
		k.Measure = hash(k.Measure, r.Reconstruction) // windows and noise of single-point images are planned on their grid
	}
	k.Reconstruct = hash(k.Measure, r.Reconstruction)
	k.Fit = hash(k.Reconstruct, r.Rates)
	k.Derive = hash(k.Fit, r.Mask, r.Calibration, r.Sample)
	return k
}

func hash(parts ...any) string {
	text, err := json.Marshal(parts)
	if err != nil {
		panic(err) // settings are plain numbers and texts
	}
	sum := sha256.Sum256(text)
	return hex.EncodeToString(sum[:12])
}
