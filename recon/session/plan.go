// Package session knows the order of the stages, how to split them into jobs, and by which hash a result may be reused.
// The page and the native command drive the same functions:
//
//	Measure → Reconstruct (per group of delays) → Fit (per block of voxels) → Derive
package session

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"

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
	ReconstructJobs [][]int       `json:"reconstructJobs"` // delay indices of each job
	FitJobs         [][2]int      `json:"fitJobs"`         // voxel range [from, to) of each job
	Reference       int           `json:"referenceDelay"`
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
	if r.Calibration != nil && r.Calibration.Rate != a.RateName() {
		return nil, fault.New(fault.BadSetting, "recipe calibration.rate", "the calibration is for %s, these %s data give %s; enter a calibration of %s or remove it",
			r.Calibration.Rate, a.Sequence, a.RateName(), a.RateName())
	}
	g, err := volume.Cube(a.Dim, r.Reconstruction.Matrix, r.Reconstruction.FieldOfViewMM)
	if err != nil {
		return nil, err
	}
	workers = max(1, workers)
	p := &Plan{Recipe: r, Keys: keysOf(dataHash, r), N: g.N, VoxelMM: g.VoxelMM, Reference: a.ReferenceDelay(), Warnings: planWarnings(a, r)}
	for axis := range 3 {
		p.OriginMM[axis] = g.MM(axis, 0)
	}
	p.ReconstructJobs = splitDelays(a.Delays, workers)
	p.FitJobs = splitVoxels(g.Voxels(), workers)
	p.MemoryBytes = estimate(a, r, g, extentMM, largest(p.ReconstructJobs))
	if p.MemoryBytes > MemoryLimit {
		return nil, fault.New(fault.TooLarge, "recipe reconstruction.matrix", "%dx%dx%d voxels at %d delays need about %.1f GiB per worker, the limit is %.1f GiB; lower the matrix size",
			g.N[0], g.N[1], g.N[2], a.Delays, float64(p.MemoryBytes)/(1<<30), float64(MemoryLimit)/(1<<30))
	}
	return p, nil
}

// splitDelays deals the delays out to at most workers jobs, in order and in pairs: two delays share one complex lane, so
// that a pair is the unit of work, and the rounding of a delay must not depend on how many workers there are.
func splitDelays(delays, workers int) [][]int {
	pairs := (delays + 1) / 2
	jobs := min(pairs, workers)
	out := make([][]int, jobs)
	for d := range delays {
		j := d / 2 * jobs / pairs
		out[j] = append(out[j], d)
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
// images of its delays, and once the images of all delays for the fit.
func estimate(a *acquisition.Acquisition, r recipe.Recipe, g volume.Grid, extentMM float64, delays int) int64 {
	cut, _ := kCut(a, r)
	geometry := condition.Plan(a, &condition.Constants{ExtentMM: extentMM}, r.Reconstruction.FieldOfViewMM, cut)
	images := int64(g.Voxels()) * int64(delays) * 4
	fit := int64(g.Voxels()) * int64(4*a.Delays+4*6)
	return a.Bytes() + max(geometry.Bytes(a, delays)+2*images, fit)
}

func keysOf(dataHash string, r recipe.Recipe) Keys {
	var k Keys
	k.Measure = hash(dataHash, r.Conditioning)
	k.Reconstruct = hash(k.Measure, r.Reconstruction)
	k.Fit = hash(k.Reconstruct, r.Rates)
	k.Derive = hash(k.Fit, r.Mask, r.Calibration)
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
