package wire

import (
	"bytes"
	"encoding/json"
	"fmt"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/exporter"
	"torrloom/recon/fault"
	"torrloom/recon/phantom"
	"torrloom/recon/session"
)

// ask sends a request the way the page does: through JSON in both directions.
func ask[Reply any](t *testing.T, e *Engine, kind string, body any, buffers ...[]byte) (Reply, [][]byte) {
	t.Helper()
	text, err := json.Marshal(body)
	if err != nil {
		t.Fatal(err)
	}
	reply, out, err := e.Handle(kind, text, buffers, func(Progress) {})
	if err != nil {
		t.Fatalf("%s: %v", kind, err)
	}
	written, err := Encode(reply)
	if err != nil {
		t.Fatal(err)
	}
	var r Reply
	if err := json.Unmarshal(written, &r); err != nil {
		t.Fatal(err)
	}
	return r, out
}

func disc(t *testing.T) []byte {
	t.Helper()
	s := phantom.Shape{Dim: 2, SemiMM: [3]float64{8, 7}, CentreMM: [3]float64{1, -1}}
	p := phantom.Sum(2, phantom.Body{Shape: s, Density: 2, R1PerUS: 0.3})
	a, err := p.Acquire(phantom.Protocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{0.4, 0.8, 1.5, 3, 25}, Inversion: 1.8,
		Directions: phantom.EqualAngles(60), GradientMTPerM: 18, DwellNS: 8, Samples: 240, TimeZeroSample: 119.6, NoiseSD: 0.3, PhaseRad: 1})
	if err != nil {
		t.Fatal(err)
	}
	zero, slope := 0.2, 0.005
	a.Optional.R1ZeroPerUS, a.Optional.R1SlopePerUSPerTorr = &zero, &slope
	var file bytes.Buffer
	if err := exporter.Acquisition(&file, a); err != nil {
		t.Fatal(err)
	}
	return file.Bytes()
}

// The chain asked for message by message, split over jobs, gives the numbers of session.Run.
func TestRequestsGiveTheNumbersOfTheNativeRun(t *testing.T) {
	e := NewEngine("test")
	opened, _ := ask[Opened](t, e, "open", OpenRequest{Names: []string{"disc.npz"}}, disc(t))
	if opened.Name != "disc" || len(opened.Inputs) != 1 || opened.RateName != "R1" || opened.Delays != 5 {
		t.Fatalf("opened %+v", opened)
	}
	plan, _ := ask[Plan](t, e, "plan", PlanRequest{Recipe: `{"recipe":1}`, Workers: 2})
	measured, _ := ask[Measured](t, e, "measure", MeasureRequest{Recipe: plan.Recipe})
	voxels := plan.N[0] * plan.N[1] * plan.N[2]
	images, noise := make([]float32, voxels*len(plan.Frames.TimeUS)), make([]float64, len(plan.Frames.TimeUS))
	for _, delays := range plan.ReconstructJobs {
		r, out := ask[Reconstructed](t, e, "reconstruct", ReconstructRequest{Recipe: plan.Recipe, Constants: measured.Constants, Frames: delays})
		for i, d := range delays {
			copy(images[d*voxels:], floatsOf(out[0])[i*voxels:(i+1)*voxels])
			noise[d] = r.NoiseSD[i]
		}
	}
	rate, se, status := make([]float32, voxels), make([]float32, voxels), make([]byte, voxels)
	for _, job := range plan.FitJobs {
		var part []float32
		for d := range opened.Delays {
			part = append(part, images[d*voxels+job[0]:d*voxels+job[1]]...)
		}
		_, out := ask[Fitted](t, e, "fit", FitRequest{Recipe: plan.Recipe, NoiseSD: noise, Voxels: job[1] - job[0]}, bytesOf(part))
		copy(rate[job[0]:], floatsOf(out[0]))
		copy(se[job[0]:], floatsOf(out[1]))
		copy(status[job[0]:], out[4])
	}
	ref := images[plan.Frames.Reference*voxels : (plan.Frames.Reference+1)*voxels]
	derived, out := ask[Derived](t, e, "derive", DeriveRequest{Recipe: plan.Recipe}, bytesOf(ref), bytesOf(rate), bytesOf(se), status)

	native, err := session.Run(e.open.a, e.open.hash, nil, 2)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(out[0], native.Derived.Fate) || !bytes.Equal(out[1], bytesOf(native.Derived.PO2)) || !bytes.Equal(out[2], bytesOf(native.Derived.PO2SE)) {
		t.Error("maps differ from the native run")
	}
	if derived.PO2.Median != native.Derived.Numbers.PO2.Median || plan.Keys != native.Plan.Keys {
		t.Errorf("median %v and %v, keys %v and %v", derived.PO2.Median, native.Derived.Numbers.PO2.Median, plan.Keys, native.Plan.Keys)
	}
	exported, file := ask[Exported](t, e, "export", ExportRequest{Recipe: plan.Recipe, Quantity: "pO2"}, out[1])
	if exported.Name != "disc-po2.nii.gz" || !bytes.HasPrefix(file[0], []byte{0x1f, 0x8b}) {
		t.Errorf("exported %+v, %d bytes", exported, len(file[0]))
	}
}

func TestRequestsThatCannotBeDoneAreFaultsAndKeepWhatIsOpen(t *testing.T) {
	e := NewEngine("test")
	for kind := range handlers {
		if kind == "open" || kind == "demo" {
			continue
		}
		if _, _, err := e.Handle(kind, []byte(`{}`), nil, func(Progress) {}); err == nil || fault.From(err).Kind != fault.BadSetting {
			t.Errorf("%s with nothing open gives %v", kind, err)
		}
	}
	ask[Opened](t, e, "open", OpenRequest{Names: []string{"disc.npz"}}, disc(t))
	for _, c := range []struct {
		kind    string
		body    any
		buffers [][]byte
		want    fault.Kind
		says    string
	}{
		{"open", OpenRequest{Names: []string{"bad.npz"}}, [][]byte{[]byte("nothing of the sort")}, fault.Unsupported, "bad.npz"},
		{"open", OpenRequest{Names: []string{"a", "b"}}, [][]byte{nil, nil}, fault.Unsupported, "2 files at once"},
		{"plan", PlanRequest{Recipe: `{"mask":{"amplitude":1}}`}, nil, fault.BadSetting, `key "amplitude"`},
		{"traces", TracesRequest{Shot: 60}, nil, fault.BadSetting, "shot 60"},
		{"reconstruct", ReconstructRequest{Recipe: e.open.defaults, Constants: `{}`, Frames: []int{9}}, nil, fault.BadSetting, "frame 9"},
		{"fit", FitRequest{Recipe: e.open.defaults, Voxels: 3, NoiseSD: []float64{1}}, [][]byte{make([]byte, 8)}, fault.Bug, "3 voxels"},
		{"derive", DeriveRequest{Recipe: e.open.defaults}, nil, fault.Bug, "0 buffers"},
		{"paint", nil, nil, fault.Bug, "paint"},
	} {
		body, _ := json.Marshal(c.body)
		_, _, err := e.Handle(c.kind, body, c.buffers, func(Progress) {})
		if err == nil || fault.From(err).Kind != c.want || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s gives %v, want kind %s with %q", c.kind, err, c.want, c.says)
		}
	}
	if e.open.a.Name != "disc" {
		t.Errorf("%s is open after refused requests", e.open.a.Name)
	}
}

func TestDemoIsMarkedAsMadeUp(t *testing.T) {
	e := NewEngine("test")
	opened, _ := ask[Opened](t, e, "demo", DemoRequest{Noise: true})
	if !opened.MadeUp || opened.Recipe.Calibration == nil || opened.Extent < 20 {
		t.Errorf("demo %+v", opened)
	}
	traces, _ := ask[Traces](t, e, "traces", TracesRequest{Delay: 0, Shot: 3})
	if len(traces.Real) != opened.Samples || len(traces.Projection) == 0 || len(traces.EchoHeight) != opened.Delays || !(traces.EchoHeight[0] < 0) {
		t.Errorf("traces of %d samples, %d positions, echo heights %v", len(traces.Real), len(traces.Projection), traces.EchoHeight)
	}
}

// Directions come as numbers of four bytes, and a shot with what the image would have given.
func TestAShotIsShownBesideItsNeighboursAndTheImage(t *testing.T) {
	e := NewEngine("test")
	opened, _ := ask[Opened](t, e, "open", OpenRequest{Names: []string{"disc.npz"}}, disc(t))
	directions, out := ask[Directions](t, e, "directions", DirectionsRequest{})
	if directions.Dim != 2 || len(out[0]) != 12*opened.Shots || len(out[1]) != opened.Shots {
		t.Fatalf("%dD, %d bytes of gradients and %d roles for %d shots", directions.Dim, len(out[0]), len(out[1]), opened.Shots)
	}
	if g := floatsOf(out[0])[3*7]; g != float32(e.open.a.GradientMTPerM[7][0]) {
		t.Errorf("gradient of shot 7 along x is %g, sent as %g", e.open.a.GradientMTPerM[7][0], g)
	}
	n := opened.Recipe.Reconstruction.Matrix
	shot, _ := ask[Shot](t, e, "shot", ShotRequest{Recipe: opened.Recipe, Shot: 7}, make([]byte, 4*n*n))
	if len(shot.Neighbours) != 2 || len(shot.FromImage) != len(shot.PositionMM) || shot.OffImage != 1 { // from an empty image by itself
		t.Errorf("%d neighbours, %d values of the image at %d positions, off by %g", len(shot.Neighbours), len(shot.FromImage), len(shot.PositionMM), shot.OffImage)
	}
	without, _ := ask[Shot](t, e, "shot", ShotRequest{Recipe: opened.Recipe, Shot: 7})
	if len(without.FromImage) != 0 || without.OffNeighbours != shot.OffNeighbours {
		t.Errorf("without an image: %d values", len(without.FromImage))
	}
}

// A sample at the pulse itself has no image; the coverage says so in numbers that JSON can hold.
func TestSinglePointFileWithASampleAtThePulseOpens(t *testing.T) {
	s := phantom.Shape{Dim: 2, SemiMM: [3]float64{6, 5}}
	p := phantom.Sum(2, phantom.Body{Shape: s, Density: 1, R2PerUS: 0.4})
	a, err := p.AcquireSinglePoint(phantom.SinglePointProtocol{Sequence: acquisition.FreeDecay, DelayUS: []float64{0},
		GradientMTPerM: phantom.CubeGradients(2, 15, 20), DwellNS: 50, Samples: 16, TimeZeroSample: 2, NoiseSD: 0.1})
	if err != nil {
		t.Fatal(err)
	}
	var file bytes.Buffer
	if err := exporter.Acquisition(&file, a); err != nil {
		t.Fatal(err)
	}
	opened, _ := ask[Opened](t, NewEngine("test"), "open", OpenRequest{Names: []string{"points.npz"}}, file.Bytes())
	for j, st := range opened.Coverage.Times {
		if usable := j > 2; st.Usable != usable || (st.FieldOfViewMM > 0) != usable {
			t.Errorf("sample %d: usable %v, field of view %g mm", j, st.Usable, st.FieldOfViewMM)
		}
	}
}

func TestProgressRisesToOne(t *testing.T) {
	e := NewEngine("test")
	ask[Opened](t, e, "demo", DemoRequest{Noise: false})
	plan, _ := ask[Plan](t, e, "plan", PlanRequest{Recipe: `{"reconstruction":{"matrix":16}}`})
	measured, _ := ask[Measured](t, e, "measure", MeasureRequest{Recipe: plan.Recipe})
	body, _ := json.Marshal(ReconstructRequest{Recipe: plan.Recipe, Constants: measured.Constants, Frames: []int{0}})
	var seen []string
	last := 0.0
	_, _, err := e.Handle("reconstruct", body, nil, func(p Progress) {
		if p.Fraction < last {
			t.Errorf("progress falls from %g to %g", last, p.Fraction)
		}
		last = p.Fraction
		seen = append(seen, fmt.Sprint(p))
	})
	if err != nil || last != 1 || len(seen) < 5 {
		t.Errorf("%v: %d messages, the last %g", err, len(seen), last)
	}
}
