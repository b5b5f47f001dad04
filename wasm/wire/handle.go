package wire

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"math"
	"math/cmplx"
	"strings"
	"time"
	"unsafe"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/exporter"
	"torrloom/recon/fault"
	"torrloom/recon/importer"
	"torrloom/recon/oxygen"
	"torrloom/recon/phantom"
	"torrloom/recon/recipe"
	"torrloom/recon/session"
	"torrloom/recon/volume"
)

// Engine answers requests about the one acquisition it holds. It serves one request at a time.
type Engine struct {
	build string
	open  *opened
}

// opened is the acquisition at hand with what was found out about it.
type opened struct {
	a        *acquisition.Acquisition
	hash     string
	facts    *session.Facts
	defaults recipe.Recipe
}

// NewEngine returns an engine with nothing open. Build names the sources it was made from.
func NewEngine(build string) *Engine { return &Engine{build: build} }

// Hello returns what the engine says first.
func (e *Engine) Hello() Hello {
	return Hello{Version: Version, Build: e.build, Catalogue: recipe.Catalogue(),
		Limits: Limits{MemoryBytes: session.MemoryLimit, Matrix: volume.MaxMatrix}}
}

// handler answers one kind of request.
type handler func(e *Engine, body []byte, buffers [][]byte, progress func(Progress)) (any, [][]byte, error)

// handlers has a row for every kind in Exchanges.
var handlers = map[string]handler{
	"open":        handleOpen,
	"demo":        handleDemo,
	"traces":      handleTraces,
	"plan":        handlePlan,
	"measure":     handleMeasure,
	"reconstruct": handleReconstruct,
	"fit":         handleFit,
	"derive":      handleDerive,
	"examine":     handleExamine,
	"directions":  handleDirections,
	"shot":        handleShot,
	"export":      handleExport,
}

// Handle answers one request: the reply's body, its buffers, or a fault.
func (e *Engine) Handle(kind string, body []byte, buffers [][]byte, progress func(Progress)) (any, [][]byte, error) {
	h := handlers[kind]
	if h == nil {
		return nil, nil, fault.New(fault.Bug, "request", "kind %q is not known", kind)
	}
	if e.open == nil && kind != "open" && kind != "demo" {
		return nil, nil, fault.New(fault.BadSetting, kind, "no acquisition is open; open a file or the demo first")
	}
	return h(e, body, buffers, progress)
}

func decode[T any](body []byte) (T, error) {
	var v T
	if err := json.Unmarshal(body, &v); err != nil {
		return v, fault.New(fault.Bug, "request", "body does not match its type: %v", err)
	}
	return v, nil
}

func handleOpen(e *Engine, body []byte, buffers [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[OpenRequest](body)
	if err != nil {
		return nil, nil, err
	}
	if len(q.Names) != 1 || len(buffers) != 1 {
		return nil, nil, fault.New(fault.Unsupported, strings.Join(q.Names, ", "), "%d files at once; this version opens one .npz file at a time", len(q.Names))
	}
	a, warnings, err := importer.Open(q.Names[0], buffers[0])
	if err != nil {
		return nil, nil, err
	}
	sum := sha256.Sum256(buffers[0])
	input := Input{Name: q.Names[0], Bytes: int64(len(buffers[0])), SHA256: hex.EncodeToString(sum[:])}
	return e.take(a, []Input{input}, input.SHA256, warnings)
}

func handleDemo(e *Engine, body []byte, _ [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[DemoRequest](body)
	if err != nil {
		return nil, nil, err
	}
	a, err := phantom.DemoAcquisition(q.Noise)
	if err != nil {
		return nil, nil, err
	}
	name := "demo without noise"
	if q.Noise {
		name = "demo"
	}
	return e.take(a, nil, name, nil)
}

// take makes a the open acquisition. What was open stays if a cannot be used.
func (e *Engine) take(a *acquisition.Acquisition, inputs []Input, hash string, warnings []string) (any, [][]byte, error) {
	facts, err := session.Survey(a)
	if err != nil {
		return nil, nil, fault.Within(a.Name, err)
	}
	e.open = &opened{a: a, hash: hash, facts: facts, defaults: facts.DefaultRecipe(a)}
	reply := describe(e.open)
	reply.Inputs, reply.Warnings = inputs, append(warnings, facts.Warnings...)
	return reply, nil, nil
}

func describe(o *opened) Opened {
	a, f := o.a, o.facts
	r := Opened{
		Name: a.Name, MadeUp: a.MadeUp, Delays: a.Delays, Shots: a.Shots, Samples: a.Samples, Dim: a.Dim,
		ImageShots: len(a.ImageShots()), DelayUS: a.DelayUS, DwellNS: a.DwellNS, TimeZero: a.TimeZeroSample,
		Sequence: string(a.Sequence), Encoding: string(a.Encoding), Domain: string(a.Domain), RateName: a.RateName(),
		KMax: f.KMaxPerMM, Resolution: f.ResolutionMM, AliasFree: f.AliasFreeMM, Extent: f.ExtentMM, SignalToNoise: f.SignalToNoise,
		Reference: a.ReferenceDelay(), Coverage: f.Coverage, Optional: a.Optional, Recipe: o.defaults, GradientMin: math.Inf(1),
	}
	for _, s := range a.ImageShots() {
		r.GradientMin, r.GradientMax = math.Min(r.GradientMin, a.Strength(s)), math.Max(r.GradientMax, a.Strength(s))
	}
	return r
}

func handleTraces(e *Engine, body []byte, _ [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[TracesRequest](body)
	if err != nil {
		return nil, nil, err
	}
	a, c := e.open.a, e.open.facts.Spokes
	if q.Delay < 0 || q.Delay >= a.Delays || q.Shot < 0 || q.Shot >= a.Shots {
		return nil, nil, fault.New(fault.BadSetting, "traces", "delay %d shot %d; there are %d delays and %d shots", q.Delay, q.Shot, a.Delays, a.Shots)
	}
	r := Traces{DelayUS: a.DelayUS, GradientMTm: a.GradientMTPerM[q.Shot]}
	if c == nil { // single-point data have no echo and no projections
		c = &condition.Constants{}
	}
	r.EchoHeight = c.EchoHeight
	if a.Domain == acquisition.Time {
		turn := cmplx.Rect(1, -c.PhaseRad)
		for j, v := range a.Trace(q.Delay, q.Shot) {
			z := (complex128(v) - complex(c.OffsetReal, c.OffsetImag)) * turn
			r.TimeNS = append(r.TimeNS, (float64(j)-a.TimeZeroSample)*a.DwellNS)
			r.Real, r.Imag = append(r.Real, real(z)), append(r.Imag, imag(z))
		}
	}
	if a.Encoding == acquisition.SinglePoint {
		return r, nil, nil
	}
	r.PositionMM, r.Projection, err = condition.ProjectionOf(a, condition.Defaults(), c, q.Delay, q.Shot)
	return r, nil, err
}

func handlePlan(e *Engine, body []byte, _ [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[PlanRequest](body)
	if err != nil {
		return nil, nil, err
	}
	r, err := recipe.Parse([]byte(q.Recipe), e.open.defaults)
	if err != nil {
		return nil, nil, err
	}
	p, err := session.NewPlan(e.open.a, e.open.hash, e.open.facts.ExtentMM, r, q.Workers)
	if err != nil {
		return nil, nil, err
	}
	return *p, nil, nil
}

func handleMeasure(e *Engine, body []byte, _ [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[MeasureRequest](body)
	if err != nil {
		return nil, nil, err
	}
	c, warnings, err := session.Measure(e.open.a, q.Recipe)
	if err != nil {
		return nil, nil, err
	}
	text, err := json.Marshal(c)
	return Measured{Constants: string(text), Warnings: warnings}, nil, err
}

func handleReconstruct(e *Engine, body []byte, _ [][]byte, progress func(Progress)) (any, [][]byte, error) {
	start := time.Now()
	q, err := decode[ReconstructRequest](body)
	if err != nil {
		return nil, nil, err
	}
	c, err := decode[session.Constants]([]byte(q.Constants))
	if err != nil {
		return nil, nil, err
	}
	images, err := session.Reconstruct(e.open.a, q.Recipe, &c, q.Frames, tell(progress, "reconstruct"))
	if err != nil {
		return nil, nil, err
	}
	return Reconstructed{NoiseSD: images.NoiseSD, Curve: images.Curve, Seconds: time.Since(start).Seconds()}, [][]byte{bytesOf(images.Values)}, nil
}

func tell(progress func(Progress), stage string) func(float64) {
	return func(fraction float64) { progress(Progress{Stage: stage, Fraction: fraction}) }
}

func handleFit(e *Engine, body []byte, buffers [][]byte, progress func(Progress)) (any, [][]byte, error) {
	start := time.Now()
	q, err := decode[FitRequest](body)
	if err != nil {
		return nil, nil, err
	}
	if len(buffers) != 1 || len(buffers[0]) != 4*q.Voxels*len(q.NoiseSD) {
		return nil, nil, fault.New(fault.Bug, "fit", "%d buffers for %d voxels in %d frames", len(buffers), q.Voxels, len(q.NoiseSD))
	}
	m, err := session.Fit(e.open.a, q.Recipe, q.NoiseSD, floatsOf(buffers[0]), tell(progress, "fit"))
	if err != nil {
		return nil, nil, err
	}
	out := [][]byte{bytesOf(m.Rate), bytesOf(m.RateSE), bytesOf(m.Amplitude), bytesOf(m.ChiSquare), m.Status, bytesOf(m.AmplitudeSE)}
	return Fitted{Seconds: time.Since(start).Seconds()}, out, nil
}

func handleDerive(e *Engine, body []byte, buffers [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[DeriveRequest](body)
	if err != nil {
		return nil, nil, err
	}
	if len(buffers) != 4 && len(buffers) != 6 {
		return nil, nil, fault.New(fault.Bug, "derive", "%d buffers; 4 or 6 are needed", len(buffers))
	}
	f := session.Fitted{Reference: floatsOf(buffers[0]), Rates: oxygen.Rates{Rate: floatsOf(buffers[1]), RateSE: floatsOf(buffers[2])}, Status: buffers[3]}
	if len(buffers) == 6 {
		f.Amplitude, f.AmplitudeSE = floatsOf(buffers[4]), floatsOf(buffers[5])
	}
	d, err := session.Derive(q.Recipe, f)
	if err != nil {
		return nil, nil, err
	}
	return d.Numbers, [][]byte{d.Fate, bytesOf(d.PO2), bytesOf(d.PO2SE), bytesOf(d.PO2CalibrationSE)}, nil
}

func handleExamine(e *Engine, body []byte, _ [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[ExamineRequest](body)
	if err != nil {
		return nil, nil, err
	}
	return *session.Examine(e.open.a, q.Recipe, q.Rates), nil, nil
}

func handleDirections(e *Engine, _ []byte, _ [][]byte, _ func(Progress)) (any, [][]byte, error) {
	a := e.open.a
	gradient, role := make([]float32, 0, 3*a.Shots), make([]byte, 0, a.Shots)
	for s, g := range a.GradientMTPerM {
		gradient = append(gradient, float32(g[0]), float32(g[1]), float32(g[2]))
		role = append(role, byte(a.ShotRole[s]))
	}
	return Directions{Dim: a.Dim}, [][]byte{bytesOf(gradient), role}, nil
}

func handleShot(e *Engine, body []byte, buffers [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[ShotRequest](body)
	if err != nil {
		return nil, nil, err
	}
	if len(buffers) > 1 {
		return nil, nil, fault.New(fault.Bug, "shot", "%d buffers; one image at most", len(buffers))
	}
	var image []float32
	if len(buffers) == 1 {
		image = floatsOf(buffers[0])
	}
	v, err := session.LookAt(e.open.a, q.Recipe, q.Shot, image)
	if err != nil {
		return nil, nil, err
	}
	return *v, nil, nil
}

func handleExport(e *Engine, body []byte, buffers [][]byte, _ func(Progress)) (any, [][]byte, error) {
	q, err := decode[ExportRequest](body)
	if err != nil {
		return nil, nil, err
	}
	if len(buffers) != 1 {
		return nil, nil, fault.New(fault.Bug, "export", "%d buffers; one map is needed", len(buffers))
	}
	a, r := e.open.a, q.Recipe.Reconstruction
	g, err := volume.Cube(a.Dim, r.Matrix, r.FieldOfViewMM)
	if err != nil {
		return nil, nil, err
	}
	var file bytes.Buffer
	if q.Quantity == "mask" {
		err = exporter.NIfTIMask(&file, "mask", g, session.InMask(buffers[0]))
	} else {
		err = exporter.NIfTI(&file, session.MapOf(q.Quantity, q.RateName, g, floatsOf(buffers[0])))
	}
	name := a.Name + "-" + strings.ToLower(q.Quantity) + ".nii.gz"
	return Exported{Name: name, Type: "application/gzip"}, [][]byte{file.Bytes()}, err
}

// bytesOf returns the memory of v as bytes, in the machine's order: little-endian on every machine that runs this.
func bytesOf(v []float32) []byte {
	if len(v) == 0 {
		return []byte{}
	}
	return unsafe.Slice((*byte)(unsafe.Pointer(&v[0])), 4*len(v))
}

// floatsOf returns the memory of b as float32. Buffers are allocations of their own and so are aligned.
func floatsOf(b []byte) []float32 {
	if len(b) < 4 {
		return []float32{}
	}
	return unsafe.Slice((*float32)(unsafe.Pointer(&b[0])), len(b)/4)
}
