package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"flag"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/exporter"
	"torrloom/recon/fault"
	"torrloom/recon/importer"
	"torrloom/recon/quality"
	"torrloom/recon/recipe"
	"torrloom/recon/session"
)

// runFiles processes every file, goes on after one that is refused, and returns the code of the first that failed.
func runFiles(args []string, stdout, stderr io.Writer) int {
	flags := flag.NewFlagSet("run", flag.ContinueOnError)
	flags.SetOutput(stderr)
	recipePath := flags.String("recipe", "", "recipe (JSON); without it the defaults of each file")
	out := flags.String("out", "torrloom-out", "folder for the results")
	workers := flags.Int("workers", runtime.NumCPU(), "jobs at a time")
	if err := flags.Parse(args); err != nil {
		return exitUsage
	}
	if flags.NArg() == 0 {
		usage(stderr)
		return exitUsage
	}
	text, err := readRecipe(*recipePath)
	if err != nil {
		return report(stderr, err)
	}
	code := exitDone
	for _, path := range flags.Args() {
		err := runFile(path, text, *out, *workers, stdout)
		if err != nil && code == exitDone {
			code = report(stderr, err)
		} else if err != nil {
			report(stderr, err)
		}
	}
	return code
}

func readRecipe(path string) ([]byte, error) {
	if path == "" {
		return nil, nil
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, fault.New(fault.BadFile, path, "cannot be read: %v", err)
	}
	return text, nil
}

// load reads and opens one file, and returns its acquisition, its record and what is to be said of it.
func load(path string) (*acquisition.Acquisition, inputRecord, []string, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, inputRecord{}, nil, fault.New(fault.BadFile, path, "cannot be read: %v", err)
	}
	a, warnings, err := importer.Open(filepath.Base(path), data)
	if err != nil {
		return nil, inputRecord{}, nil, err
	}
	sum := sha256.Sum256(data)
	return a, inputRecord{Name: filepath.Base(path), Bytes: int64(len(data)), SHA256: hex.EncodeToString(sum[:])}, warnings, nil
}

func runFile(path string, recipeText []byte, out string, workers int, stdout io.Writer) error {
	a, input, warnings, err := load(path)
	if err != nil {
		return err
	}
	result, err := session.Run(a, input.SHA256, recipeText, max(1, workers))
	if err != nil {
		return fault.Within(input.Name, err)
	}
	folder := filepath.Join(out, stem(path))
	record := newRecord(a, input, append(warnings, result.Warnings...), result)
	if err := writeAll(folder, result, record); err != nil {
		return fault.New(fault.BadSetting, folder, "cannot be written: %v", err)
	}
	say(stdout, folder, result, record)
	if result.AnsweredCount() == 0 {
		return fault.New(fault.NoAnswer, input.Name, "no voxel has a rate; the images were written, look at amplitude.nii.gz and lower the mask level")
	}
	return nil
}

// stem returns the file name without its extension; of a .nii.gz-like double extension the first part.
func stem(path string) string {
	name := filepath.Base(path)
	if s := strings.TrimSuffix(name, filepath.Ext(name)); s != "" {
		return s
	}
	return name
}

// record is run.json: what was done to which input, by what, with what outcome.
type record struct {
	Program  string             `json:"program"`
	Version  string             `json:"version"`
	Inputs   []inputRecord      `json:"inputs"`
	MadeUp   bool               `json:"madeUp"`
	Recipe   recipe.Recipe      `json:"recipe"`
	Image    imageRecord        `json:"image"`
	Counts   map[string]int     `json:"counts"`
	Rate     session.Summary    `json:"rate"`
	PO2      *session.Summary   `json:"pO2"`
	Findings []quality.Finding  `json:"findings"`
	Timings  map[string]float64 `json:"timingsSeconds"`
	Warnings []string           `json:"warnings"`
	Caution  string             `json:"caution"`
}

type inputRecord struct {
	Name   string `json:"name"`
	Bytes  int64  `json:"bytes"`
	SHA256 string `json:"sha256"`
}

type imageRecord struct {
	N           [3]int     `json:"n"`
	VoxelMM     [3]float64 `json:"voxelMM"`
	FrameKind   string     `json:"frameKind"` // what the images run along: delay or sample time
	FrameUS     []float64  `json:"frameUS"`
	ReferenceUS float64    `json:"referenceUS"` // frame of amplitude.nii.gz and the mask
	MaskLevel   float64    `json:"maskLevel"`
	RateName    string     `json:"rate"`
	NoiseSD     []float64  `json:"noiseSD"` // of a voxel, per frame
	ExtentMM    float64    `json:"objectExtentMM"`
}

const caution = "Research use; not for diagnosis or treatment planning. Dose or boost decisions belong to licensed staff, their protocols and the local rules. A pO2 is only as good as the calibration entered."

func newRecord(a *acquisition.Acquisition, input inputRecord, warnings []string, r *session.Result) record {
	counts := map[string]int{"voxels": r.Grid.Voxels()}
	for _, f := range r.Derived.Numbers.Fates {
		counts[f.Label] = f.Count
	}
	if warnings == nil {
		warnings = []string{}
	}
	return record{
		Program: "torrloom", Version: version, Inputs: []inputRecord{input}, MadeUp: a.MadeUp, Recipe: r.Plan.Recipe,
		Image: imageRecord{N: r.Grid.N, VoxelMM: r.Grid.VoxelMM, ReferenceUS: r.Plan.Frames.TimeUS[r.Plan.Frames.Reference], FrameKind: r.Plan.Frames.Kind, FrameUS: r.Plan.Frames.TimeUS, MaskLevel: r.Derived.Numbers.MaskLevel,
			RateName: r.Plan.Frames.RateName, NoiseSD: r.NoiseSD, ExtentMM: r.Facts.ExtentMM},
		Counts: counts, Rate: r.Derived.Numbers.Rate, PO2: r.Derived.Numbers.PO2, Findings: r.Report.Findings, Timings: r.Seconds, Warnings: warnings, Caution: caution,
	}
}

// writeAll writes into a folder beside the wanted one and renames it at the end, so that a folder of results is whole or
// absent.
func writeAll(folder string, r *session.Result, rec record) error {
	parts := map[string]func(io.Writer) error{
		"amplitude.nii.gz": nifti("amplitude", r, r.Images[r.Plan.Frames.Reference]),
		"rate.nii.gz":      nifti("rate", r, answered(r, r.Maps.Rate)),
		"mask.nii.gz": func(w io.Writer) error {
			return exporter.NIfTIMask(w, "mask", r.Grid, session.InMask(r.Derived.Fate))
		},
		"run.json": func(w io.Writer) error {
			e := json.NewEncoder(w)
			e.SetIndent("", "  ")
			e.SetEscapeHTML(false)
			return e.Encode(rec)
		},
	}
	if r.Derived.PO2 != nil {
		parts["po2.nii.gz"] = nifti("pO2", r, r.Derived.PO2)
		parts["po2-se.nii.gz"] = nifti("pO2 random SE", r, r.Derived.PO2SE)
		if r.Plan.Recipe.Calibration.HasErrors() {
			parts["po2-calibration-se.nii.gz"] = nifti("pO2 calibration SE", r, r.Derived.PO2CalibrationSE)
		}
	}
	if err := os.MkdirAll(filepath.Dir(folder), 0o755); err != nil {
		return err
	}
	fresh, err := os.MkdirTemp(filepath.Dir(folder), ".torrloom-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(fresh)
	for name, write := range parts {
		var file bytes.Buffer
		if err := write(&file); err != nil {
			return err
		}
		if err := os.WriteFile(filepath.Join(fresh, name), file.Bytes(), 0o644); err != nil {
			return err
		}
	}
	return moveParts(fresh, folder, parts)
}

// moveParts puts the finished files in place and removes pO2 maps of an earlier run that this one did not make. Other files
// in the folder are left alone.
func moveParts(fresh, folder string, parts map[string]func(io.Writer) error) error {
	if err := os.MkdirAll(folder, 0o755); err != nil {
		return err
	}
	for _, name := range []string{"po2.nii.gz", "po2-se.nii.gz", "po2-calibration-se.nii.gz"} {
		if parts[name] == nil {
			if err := os.Remove(filepath.Join(folder, name)); err != nil && !os.IsNotExist(err) {
				return err
			}
		}
	}
	for name := range parts {
		if err := os.Rename(filepath.Join(fresh, name), filepath.Join(folder, name)); err != nil {
			return err
		}
	}
	return nil
}

func nifti(quantity string, r *session.Result, values []float32) func(io.Writer) error {
	return func(w io.Writer) error {
		return exporter.NIfTI(w, session.MapOf(quantity, r.Plan.Frames.RateName, r.Grid, values))
	}
}

// answered returns values with NaN outside the answered voxels of the mask, as the pO2 map has.
func answered(r *session.Result, values []float32) []float32 {
	return session.InMap(r.Derived.Fate, values)
}

func say(w io.Writer, folder string, r *session.Result, rec record) {
	fmt.Fprintf(w, "%s: %d voxels in the map, median %s %.4g 1/µs", folder, r.AnsweredCount(), rec.Image.RateName, rec.Rate.Median)
	if rec.PO2 != nil {
		fmt.Fprintf(w, ", median pO2 %.3g torr", rec.PO2.Median)
	}
	fmt.Fprintln(w)
	sayFindings(w, r.Report.Findings, quality.Fine)
	for _, warning := range rec.Warnings {
		fmt.Fprintln(w, "  note:", warning)
	}
}
