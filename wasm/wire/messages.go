// Package wire is the boundary between the page and the engine: the message types, and Handle, which answers one
// request. It has no syscall/js, so that every request can be tested natively; wasm/main.go only carries bytes.
//
// Promise: one request yields any number of progress messages, then exactly one reply or one fault. Bodies are small
// JSON. Arrays travel as buffers beside the body, never inside it. All buffers hold little-endian numbers, x-fastest.
//
// To add a request: a row in requests (handle.go), its body types here, then go run ./build site to renew
// site/wire.gen.ts.
package wire

import (
	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/leastsquares"
	"torrloom/recon/quality"
	"torrloom/recon/recipe"
	"torrloom/recon/session"
	"torrloom/recon/singlepoint"
)

// Version changes whenever a message changes its shape or meaning. Page and engine refuse to talk across versions.
const Version = 1

// Hello is what an engine says first, before any request.
type Hello struct {
	Version   int              `json:"version"`
	Build     string           `json:"build"`
	Limits    Limits           `json:"limits"`
	Catalogue []recipe.Setting `json:"catalogue"`
}

// Limits are the sizes past which a request is refused.
type Limits struct {
	MemoryBytes int64 `json:"memoryBytes"` // estimated need of one engine
	Matrix      int   `json:"matrix"`      // voxels per axis
}

// Progress is sent while a request is being worked on.
type Progress struct {
	Stage    string  `json:"stage"`    // "reconstruct", "fit", ...
	Fraction float64 `json:"fraction"` // 0..1
}

// OpenRequest opens the files whose bytes are the buffers, in the same order.
type OpenRequest struct {
	Names []string `json:"names"`
}

// DemoRequest makes the invented demo acquisition.
type DemoRequest struct {
	Noise bool `json:"noise"`
}

// Opened answers OpenRequest and DemoRequest: what was read.
type Opened struct {
	Name          string                `json:"name"`
	MadeUp        bool                  `json:"madeUp"`
	Inputs        []Input               `json:"inputs"`
	Delays        int                   `json:"delays"`
	Shots         int                   `json:"shots"`
	ImageShots    int                   `json:"imageShots"`
	Samples       int                   `json:"samples"`
	Dim           int                   `json:"dim"`
	DelayUS       []float64             `json:"delayUS"`
	DwellNS       float64               `json:"dwellNS"`
	TimeZero      float64               `json:"timeZeroSample"`
	Sequence      string                `json:"sequence"`
	Encoding      string                `json:"encoding"`
	Domain        string                `json:"domain"`
	RateName      string                `json:"rateName"` // R1 or R2
	GradientMin   float64               `json:"gradientMinMTPerM"`
	GradientMax   float64               `json:"gradientMaxMTPerM"`
	KMax          float64               `json:"kMaxPerMM"`      // that every direction reaches
	Resolution    float64               `json:"resolutionMM"`   // 1/(2 kMax)
	AliasFree     float64               `json:"aliasFreeMM"`    // field of view the sampling interval allows
	Extent        float64               `json:"extentMM"`       // measured diameter of the object around the gradient centre
	Reference     int                   `json:"referenceDelay"` // index of the delay of phase reference and mask
	Coverage      *singlepoint.Coverage `json:"coverage"`       // of single-point data: what each sample time covers
	SignalToNoise float64               `json:"signalToNoise"`  // echo height over noise SD at the reference delay
	Optional      acquisition.Optional  `json:"optional"`
	Recipe        recipe.Recipe         `json:"recipe"` // defaults for these data
	Warnings      []string              `json:"warnings"`
}

// Input names one file and its SHA-256.
type Input struct {
	Name   string `json:"name"`
	Bytes  int64  `json:"bytes"`
	SHA256 string `json:"sha256"`
}

// TracesRequest asks for one shot at one delay, and for the whole signal over the delays.
type TracesRequest struct {
	Delay int `json:"delay"`
	Shot  int `json:"shot"`
}

// Traces answers TracesRequest. Numbers are few (one shot), so they travel in the body.
type Traces struct {
	TimeNS      []float64  `json:"timeNS"` // from the echo centre or pulse; empty for projection data
	Real        []float64  `json:"real"`   // phased trace
	Imag        []float64  `json:"imag"`
	PositionMM  []float64  `json:"positionMM"`
	Projection  []float64  `json:"projection"`
	DelayUS     []float64  `json:"delayUS"`
	EchoHeight  []float64  `json:"echoHeight"` // mean over the image shots of the phased signal at k = 0, per delay
	GradientMTm [3]float64 `json:"gradientMTPerM"`
}

// PlanRequest asks what a recipe would do to the open acquisition. Recipe is JSON text, so that a faulty one is
// answered with a fault that names the key.
type PlanRequest struct {
	Recipe  string `json:"recipe"`
	Workers int    `json:"workers"`
}

// Plan answers PlanRequest.
type Plan = session.Plan

// MeasureRequest asks for what conditioning needs to know about the whole acquisition before it can be split.
type MeasureRequest struct {
	Recipe recipe.Recipe `json:"recipe"`
}

// Measured answers MeasureRequest. Constants is opaque to the page, which hands it to every later job.
type Measured struct {
	Constants string   `json:"constants"`
	Warnings  []string `json:"warnings"`
}

// ReconstructRequest asks for the images of some frames. The reply has one buffer, float32 [frame][voxel].
type ReconstructRequest struct {
	Recipe    recipe.Recipe `json:"recipe"`
	Constants string        `json:"constants"`
	Frames    []int         `json:"frames"`
}

// Reconstructed answers ReconstructRequest.
type Reconstructed struct {
	NoiseSD []float64 `json:"noiseSD"` // predicted noise SD of a voxel, per frame of the request
	Seconds float64   `json:"seconds"`

	Curve [][]leastsquares.Point `json:"curve"` // [frame][iteration] of an iterative method; empty otherwise
}

// FitRequest asks for the rates of voxels. The buffer is float32 [frame][voxel] over the job's voxels, all frames.
// The reply has the buffers rate, rateSE, amplitude, chiSquare (float32), status (uint8) and amplitudeSE
// (float32), each over those voxels.
type FitRequest struct {
	Recipe  recipe.Recipe `json:"recipe"`
	NoiseSD []float64     `json:"noiseSD"`
	Voxels  int           `json:"voxels"`
}

// Fitted answers FitRequest.
type Fitted struct {
	Seconds float64 `json:"seconds"`
}

// DeriveRequest asks for mask, pO2 and numbers. Buffers: the image of the reference frame, rate, rateSE (float32), status
// (uint8) and, when the recipe corrects for the probe concentration, amplitude and amplitudeSE (float32), over all voxels.
// The reply has the buffers fate (uint8, see session.Fates), pO2, pO2SE and pO2CalibrationSE (float32; empty without a
// calibration).
type DeriveRequest struct {
	Recipe recipe.Recipe `json:"recipe"`
}

// Derived answers DeriveRequest.
type Derived = session.Numbers

// ExamineRequest asks what is to be said of the acquisition as the recipe conditions it. Rates, which may be missing, sums
// up the fitted rates.
type ExamineRequest struct {
	Recipe recipe.Recipe    `json:"recipe"`
	Rates  *session.Summary `json:"rates"`
}

// Examined answers ExamineRequest: findings, proposed conditioning, and numbers per shot.
type Examined = quality.Report

// DirectionsRequest asks for the gradients of all shots. The reply has the buffers gradient (float32 [shot][3], mT/m) and role
// (uint8 [shot], 0 image, 1 zero gradient, 2 off resonance).
type DirectionsRequest struct{}

// Directions answers DirectionsRequest.
type Directions struct {
	Dim int `json:"dim"`
}

// ShotRequest asks for one shot at the reference delay beside its neighbours in direction and what an image would have
// given. The buffer, which may be missing, is that image (float32, of the reference frame).
type ShotRequest struct {
	Recipe recipe.Recipe `json:"recipe"`
	Shot   int           `json:"shot"`
}

// Shot answers ShotRequest.
type Shot = session.ShotView

// ExportRequest asks for one map as a file. The buffer holds its values; the reply has one buffer, the file's bytes.
type ExportRequest struct {
	Recipe   recipe.Recipe `json:"recipe"`
	Quantity string        `json:"quantity"` // "pO2", "rate", "amplitude", "mask"
	RateName string        `json:"rateName"` // of the plan's frames
}

// Exported answers ExportRequest.
type Exported struct {
	Name string `json:"name"`
	Type string `json:"type"` // media type
}

// Failure answers a request that could not be done.
type Failure struct {
	Fault fault.Fault `json:"fault"`
}
