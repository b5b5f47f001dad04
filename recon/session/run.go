package session

import (
	"encoding/json"
	"sync"
	"time"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/oxygen"
	"torrloom/recon/quality"
	"torrloom/recon/recipe"
	"torrloom/recon/relax"
	"torrloom/recon/volume"
)

// Result is the whole chain's outcome for one acquisition.
type Result struct {
	Plan      *Plan
	Grid      volume.Grid
	Facts     *Facts
	Constants *Constants
	Images    [][]float32 // [frame][voxel]
	NoiseSD   []float64   // [frame]
	Maps      *relax.Maps
	Derived   *Derived
	Report    *quality.Report
	Warnings  []string
	Seconds   map[string]float64 // wall time per stage
}

// Run takes an acquisition through the whole chain with workers goroutines, in the same jobs as the page. A recipe text
// of nil means the defaults.
//
// Errors: those of the stages.
func Run(a *acquisition.Acquisition, dataHash string, recipeText []byte, workers int) (*Result, error) {
	r := &runner{a: a, workers: workers, out: &Result{Seconds: map[string]float64{}}}
	steps := []struct {
		name string
		do   func() error
	}{
		{"measure", func() error { return r.measure(dataHash, recipeText) }},
		{"reconstruct", r.reconstruct}, {"fit", r.fit}, {"derive", r.derive}, {"examine", r.examine},
	}
	for _, step := range steps {
		start := time.Now()
		if err := step.do(); err != nil {
			return nil, err
		}
		r.out.Seconds[step.name] = time.Since(start).Seconds()
	}
	return r.out, nil
}

type runner struct {
	a       *acquisition.Acquisition
	workers int
	recipe  recipe.Recipe
	out     *Result
}

// measure finds the object first, since the default field of view follows from it.
func (r *runner) measure(dataHash string, text []byte) error {
	facts, err := Survey(r.a)
	if err != nil {
		return err
	}
	r.recipe = facts.DefaultRecipe(r.a)
	if text != nil {
		if r.recipe, err = recipe.Parse(text, r.recipe); err != nil {
			return err
		}
	}
	if r.out.Plan, err = NewPlan(r.a, dataHash, facts.ExtentMM, r.recipe, r.workers); err != nil {
		return err
	}
	c, warnings, err := Measure(r.a, r.recipe)
	if err != nil {
		return err
	}
	r.out.Facts, r.out.Warnings = facts, append(r.out.Plan.Warnings, warnings...)
	r.out.Grid = volume.Grid{N: r.out.Plan.N, VoxelMM: r.out.Plan.VoxelMM}
	r.out.Constants, err = throughJSON(c)
	return err
}

// throughJSON sends the constants the way the page sends them, so that both use the same numbers.
func throughJSON(c *Constants) (*Constants, error) {
	text, err := json.Marshal(c)
	if err != nil {
		return nil, err
	}
	var out Constants
	return &out, json.Unmarshal(text, &out)
}

func (r *runner) reconstruct() error {
	voxels := r.out.Grid.Voxels()
	r.out.Images = make([][]float32, len(r.out.Plan.Frames.TimeUS))
	r.out.NoiseSD = make([]float64, len(r.out.Plan.Frames.TimeUS))
	jobs := r.out.Plan.ReconstructJobs
	return r.beside(len(jobs), func(j int) error {
		images, err := Reconstruct(r.a, r.recipe, r.out.Constants, jobs[j], nil)
		if err != nil {
			return err
		}
		for i, f := range jobs[j] {
			r.out.Images[f] = images.Values[i*voxels : (i+1)*voxels]
			r.out.NoiseSD[f] = images.NoiseSD[i]
		}
		return nil
	})
}

func (r *runner) fit() error {
	f, err := r.out.Plan.Frames.fitter(r.a, r.recipe, r.out.NoiseSD)
	if err != nil {
		return err
	}
	r.out.Maps = relax.NewMaps(r.out.Grid.Voxels())
	jobs := r.out.Plan.FitJobs
	return r.beside(len(jobs), func(j int) error {
		f.FitBlock(r.out.Images, jobs[j][0], jobs[j][1], r.out.Maps)
		return nil
	})
}

func (r *runner) derive() (err error) {
	m := r.out.Maps
	rates := oxygen.Rates{Rate: m.Rate, RateSE: m.RateSE, Amplitude: m.Amplitude, AmplitudeSE: m.AmplitudeSE}
	r.out.Derived, err = Derive(r.recipe, Fitted{Reference: r.out.Images[r.out.Plan.Frames.Reference], Rates: rates, Status: m.Status})
	if err == nil {
		r.out.Warnings = append(r.out.Warnings, r.out.Derived.Numbers.Warnings...)
	}
	return err
}

func (r *runner) examine() error {
	r.out.Report = Examine(r.a, r.recipe, &r.out.Derived.Numbers.Rate)
	return nil
}

// beside runs n jobs in goroutines and returns the first error. A panic of a job becomes a bug fault.
func (r *runner) beside(n int, job func(j int) error) error {
	errs := make([]error, n)
	var wait sync.WaitGroup
	for j := range n {
		wait.Go(func() {
			defer func() {
				if p := recover(); p != nil {
					errs[j] = fault.New(fault.Bug, "job", "%v", p)
				}
			}()
			errs[j] = job(j)
		})
	}
	wait.Wait()
	for _, err := range errs {
		if err != nil {
			return err
		}
	}
	return nil
}

// AnsweredCount returns how many voxels of the mask have a rate.
func (r *Result) AnsweredCount() int { return r.Derived.Numbers.Rate.Count }
