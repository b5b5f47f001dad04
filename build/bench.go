package main

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"flag"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"time"

	"torrloom/recon/acquisition"
	"torrloom/recon/exporter"
	"torrloom/recon/phantom"
	"torrloom/recon/recipe"
	"torrloom/recon/sampling"
	"torrloom/recon/session"
)

// runBench times the chain in Chromium with one and two workers, natively, and beside peers made on the spot, all in
// turns, and writes build/bench.md. It asserts nothing: times belong to a machine, and the table says which.
func runBench(root string, arguments []string) error {
	flags := flag.NewFlagSet("bench", flag.ContinueOnError)
	repeats := flags.Int("repeats", 5, "runs of each kind; the median counts")
	large := flags.Bool("large", true, "also the large case")
	if err := flags.Parse(arguments); err != nil {
		return err
	}
	if err := installTools(root); err != nil {
		return err
	}
	work, err := os.MkdirTemp("", "torrloom-bench-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(work)
	b := &bench{root: root, work: work, repeats: *repeats}
	if err := b.prepare(); err != nil {
		return err
	}
	defer b.close()
	cases := []benchCase{smallBench}
	if *large {
		cases = append(cases, largeBench)
	}
	for _, c := range cases {
		if err := b.run(c); err != nil {
			return fmt.Errorf("%s: %w", c.name, err)
		}
	}
	if err := b.runOutside(); err != nil {
		return err
	}
	return os.WriteFile(filepath.Join(root, "build", "bench.md"), []byte(b.table()), 0o644)
}

// benchCase is one size of the job.
type benchCase struct {
	name           string
	spokes, matrix int
	repeats        int // 0: as asked
}

var (
	smallBench = benchCase{name: "bench case", spokes: 828, matrix: 64}
	largeBench = benchCase{name: "large case", spokes: 3000, matrix: 128, repeats: 1}
)

const benchField, benchDelays = 30.0, 10

func (c benchCase) acquire() (*acquisition.Acquisition, error) {
	a, err := phantom.Demo().Acquire(phantom.Protocol{Sequence: acquisition.InversionRecovery, Inversion: 1.8,
		DelayUS:    []float64{0.3, 0.52, 0.89, 1.5, 2.6, 4.6, 7.8, 13.5, 23, 40},
		Directions: phantom.GoldenHalfSphere(c.spokes), GradientMTPerM: 24, DwellNS: 5, Samples: 320 * c.matrix / 64, TimeZeroSample: 160*float64(c.matrix)/64 - 0.6, NoiseSD: 14, Seed: 3})
	if err == nil {
		a.Name = "bench"
	}
	return a, err
}

func (c benchCase) recipe(method string) string {
	return fmt.Sprintf(`{"reconstruction":{"method":%q,"matrix":%d,"fieldOfViewMM":%g,"window":"hann","cutoff":1,"tolerance":0.003,"oversampling":1.5}}`, method, c.matrix, benchField)
}

// timing is the median seconds of one job done in several ways.
type timing struct {
	job, size string
	seconds   map[string]float64 // by way: "wasm", "wasm 2 workers", "first", "native", "C"
	target    string
}

type bench struct {
	root, work string
	repeats    int
	peers      string
	browser    *benchBrowser
	rows       []timing
	outside    struct{ FitPerVoxel, Iradon float64 }
	iradonWasm float64
	memory     map[string]int64

	checkSeconds float64
}

func (b *bench) prepare() error {
	b.memory = map[string]int64{}
	b.peers = filepath.Join(b.work, "peers")
	c := command(b.root, nil, "gcc", "-O3", "-march=native", "-ffast-math", fmt.Sprintf("-DDELAYS=%d", benchDelays), "build/bench/peers.c", "-o", b.peers, "-lfftw3f", "-lm")
	if err := c.Run(); err != nil {
		return fmt.Errorf("gcc with FFTW (apt-get install gcc libfftw3-dev): %w", err)
	}
	p, err := makePage(b.root)
	if err != nil {
		return err
	}
	b.browser, err = openBenchBrowser(p)
	return err
}

func (b *bench) close() { b.browser.close() }

func (b *bench) run(c benchCase) error {
	a, err := c.acquire()
	if err != nil {
		return err
	}
	raw, npz := filepath.Join(b.work, "bench.bin"), filepath.Join(b.work, "bench.npz")
	if err := writeRaw(raw, a, c); err != nil {
		return err
	}
	var file bytes.Buffer
	if err := exporter.Acquisition(&file, a); err != nil {
		return err
	}
	if err := os.WriteFile(npz, file.Bytes(), 0o644); err != nil {
		return err
	}
	if err := b.browser.open(npz); err != nil {
		return err
	}
	facts, err := session.Survey(a)
	if err != nil {
		return err
	}
	repeats := b.repeats
	if c.repeats > 0 {
		repeats = c.repeats
	}
	for _, method := range []string{"gridding", "back-projection"} {
		if err := b.runMethod(c, method, a, facts, raw, repeats); err != nil {
			return err
		}
	}
	if c.name == smallBench.name {
		b.runCheck(a, repeats)
	}
	return nil
}

var targets = map[string]string{"gridding": "≤ 2.5 × C", "back-projection": "≤ 0.6 × C", "fit": "≤ 2.4 × C", "chain": "≤ 2.8 × C"}

// runMethod takes each way in turn, repeats times.
func (b *bench) runMethod(c benchCase, method string, a *acquisition.Acquisition, facts *session.Facts, raw string, repeats int) error {
	job := map[string]string{"gridding": "gridding", "back-projection": "backproject"}[method]
	text := c.recipe(method)
	r, err := recipe.Parse([]byte(text), facts.DefaultRecipe(a))
	if err != nil {
		return err
	}
	plan, err := session.NewPlan(a, "bench", facts.ExtentMM, r, 1)
	if err != nil {
		return err
	}
	b.memory[c.name+", "+method] = plan.MemoryBytes
	samples := map[string][]float64{}
	add := func(way string, s float64) { samples[way] = append(samples[way], s) }
	for i := range repeats {
		fmt.Printf("%s, %s: round %d of %d\n", c.name, method, i+1, repeats)
		one, err := b.browser.chain(text, 1)
		if err != nil {
			return err
		}
		two, err := b.browser.chain(text, 2)
		if err != nil {
			return err
		}
		native, err := nativeChain(a, r)
		if err != nil {
			return err
		}
		if i == 0 {
			add("image first", one.Image)
		}
		add("image wasm", one.Image)
		add("image wasm 2", two.Image)
		add("image native", native.Image)
		add("fit wasm", one.Fit)
		add("fit wasm 2", two.Fit)
		add("fit native", native.Fit)
		add("chain wasm", one.Measure+one.Image+one.Fit)
		add("chain wasm 2", two.Measure+two.Image+two.Fit)
		add("chain native", native.Measure+native.Image+native.Fit)
		for _, peer := range []struct{ way, job string }{{"image C", job}, {"fit C", "fit"}, {"chain C", "chain"}} {
			if peer.job == "chain" && method == "gridding" {
				continue
			}
			s, err := b.peer(raw, peer.job)
			if err != nil {
				return err
			}
			add(peer.way, s)
		}
	}
	for _, part := range []string{"image", "fit", "chain"} {
		if method == "gridding" && part != "image" {
			continue
		}
		row := timing{job: map[string]string{"image": method, "fit": "rate fit", "chain": "raw to rate map, " + method}[part], size: c.name,
			seconds: map[string]float64{}, target: targets[map[string]string{"image": method, "fit": "fit", "chain": "chain"}[part]]}
		for way, s := range samples {
			if rest, ok := strings.CutPrefix(way, part+" "); ok {
				row.seconds[rest] = medianOf(s)
			}
		}
		b.rows = append(b.rows, row)
	}
	return nil
}

// chainSeconds are the times of the stages.
type chainSeconds struct{ Measure, Image, Fit float64 }

func nativeChain(a *acquisition.Acquisition, r recipe.Recipe) (t chainSeconds, err error) {
	start := time.Now()
	lap := func() float64 {
		s := time.Since(start).Seconds()
		start = time.Now()
		return s
	}
	c, _, err := session.Measure(a, r)
	if err != nil {
		return t, err
	}
	t.Measure = lap()
	frames := make([]int, a.Delays)
	for i := range frames {
		frames[i] = i
	}
	images, err := session.Reconstruct(a, r, c, frames, nil)
	if err != nil {
		return t, err
	}
	t.Image = lap()
	_, err = session.Fit(a, r, images.NoiseSD, images.Values, nil)
	t.Fit = lap()
	return t, err
}

func (b *bench) peer(raw, job string) (float64, error) {
	text, err := exec.Command(b.peers, raw, job, "1").Output()
	if err != nil {
		return 0, err
	}
	return strconv.ParseFloat(strings.TrimSpace(string(text)), 64)
}

// writeRaw writes what the C peers read: header, directions, weights, delays, signal.
func writeRaw(path string, a *acquisition.Acquisition, c benchCase) error {
	var directions [][3]float64
	for s := range a.Shots {
		g, n := a.GradientMTPerM[s], a.Strength(s)
		directions = append(directions, [3]float64{g[0] / n, g[1] / n, g[2] / n})
	}
	axis, err := sampling.AxisWeights(3, directions)
	if err != nil {
		return err
	}
	cut := math.Min(a.SmallestKMax(), float64(c.matrix)/(2*benchField))
	var out bytes.Buffer
	for _, v := range []any{
		[4]int32{int32(a.Shots), int32(a.Samples), int32(a.Delays), int32(c.matrix)},
		[4]float64{benchField, acquisition.KPerNS(a.Strength(0), a.DwellNS), a.TimeZeroSample, cut},
		flat32(directions), narrow(axis), a.DelayUS, a.Signal,
	} {
		if err := binary.Write(&out, binary.LittleEndian, v); err != nil {
			return err
		}
	}
	return os.WriteFile(path, out.Bytes(), 0o644)
}

func flat32(v [][3]float64) []float32 {
	var out []float32
	for _, n := range v {
		out = append(out, float32(n[0]), float32(n[1]), float32(n[2]))
	}
	return out
}

func narrow(v []float64) []float32 {
	out := make([]float32, len(v))
	for i, x := range v {
		out[i] = float32(x)
	}
	return out
}

func medianOf(v []float64) float64 {
	v = slices.Sorted(slices.Values(v))
	return v[len(v)/2]
}

// runOutside times the peers from Debian, and the 2D back-projection in the browser beside them.
func (b *bench) runOutside() error {
	text, err := output(b.root, "/usr/bin/python3", "build/bench/peers.py")
	if err != nil {
		return err
	}
	if err := json.Unmarshal([]byte(text), &b.outside); err != nil {
		return err
	}
	const pixels, views = 256, 180
	a := &acquisition.Acquisition{Name: "disc", Dim: 2, Delays: 1, Shots: views, Samples: pixels, DelayUS: []float64{1}, Sequence: acquisition.EchoDecay,
		Domain: acquisition.Projection, PositionStepMM: 2.0 / pixels, TimeZeroSample: pixels / 2}
	for _, n := range phantom.EqualAngles(views) {
		a.GradientMTPerM = append(a.GradientMTPerM, n)
		for j := range pixels {
			x := (float64(j) - pixels/2) * a.PositionStepMM
			a.Signal = append(a.Signal, complex(float32(math.Sqrt(math.Max(0, 0.64-x*x))), 0))
		}
	}
	if err := a.Check(); err != nil {
		return err
	}
	var file bytes.Buffer
	if err := exporter.Acquisition(&file, a); err != nil {
		return err
	}
	path := filepath.Join(b.work, "disc.npz")
	if err := os.WriteFile(path, file.Bytes(), 0o644); err != nil {
		return err
	}
	if err := b.browser.open(path); err != nil {
		return err
	}
	var times []float64
	for range b.repeats {
		t, err := b.browser.images(fmt.Sprintf(`{"reconstruction":{"method":"back-projection","matrix":%d,"fieldOfViewMM":2,"window":"none"},"calibration":null}`, pixels))
		if err != nil {
			return err
		}
		times = append(times, t.Image)
	}
	b.iradonWasm = medianOf(times)
	return nil
}

// table returns bench.md.
func (b *bench) table() string {
	var t strings.Builder
	fmt.Fprintf(&t, "# Speed\n\nMade by `go run ./build bench` on %s, %d processors, %s; Chromium runs the same engine as WebAssembly. Medians of %d rounds (large case: 1), all ways in turns.\n"+
		"C is gcc -O3 -march=native with FFTW, one thread, linear interpolation; image jobs start from the raw traces. Ratios travel between machines, seconds do not.\n\n", runtime.GOARCH, runtime.NumCPU(), runtime.Version(), b.repeats)
	t.WriteString("| job | size | wasm, 1 worker | 2 workers | first run | Go native | C | wasm / C | wasm / native | 1 / 2 workers | target |\n|---|---|---|---|---|---|---|---|---|---|---|\n")
	for _, r := range b.rows {
		s := r.seconds
		fmt.Fprintf(&t, "| %s | %s | %.2f s | %.2f s | %s | %.2f s | %.2f s | %.2f | %.2f | %.2f | %s |\n", r.job, r.size, s["wasm"], s["wasm 2"], orDash(s["first"]), s["native"], s["C"],
			s["wasm"]/s["C"], s["wasm"]/s["native"], s["wasm"]/s["wasm 2"], r.target)
	}
	t.WriteString(b.checkLine())
	inside := 0.0
	for _, r := range b.rows {
		if r.job == "rate fit" && r.size == smallBench.name {
			inside = r.seconds["wasm"] / (math.Pi / 6 * 64 * 64 * 64)
		}
	}
	fmt.Fprintf(&t, "\n| beside Debian's Python | Torrloom, wasm | peer | faster by | target |\n|---|---|---|---|---|\n"+
		"| 2D back-projection, 256 pixels, 180 angles | %.3f s | scikit-image `iradon` %.3f s | %.1f | ≥ 3.5 |\n| rate fit, one voxel, 10 delays | %.2f µs | scipy `curve_fit` %.0f µs | %.0f | ≥ 250 |\n",
		b.iradonWasm, b.outside.Iradon, b.outside.Iradon/b.iradonWasm, 1e6*inside, 1e6*b.outside.FitPerVoxel, b.outside.FitPerVoxel/inside)
	t.WriteString("\nMemory of one worker, as stated before the run (the limit is 2 GiB):\n\n")
	for _, name := range slices.Sorted(mapsKeys(b.memory)) {
		fmt.Fprintf(&t, "- %s: %.2f GiB\n", name, float64(b.memory[name])/(1<<30))
	}
	return t.String()
}

func mapsKeys(m map[string]int64) func(func(string) bool) {
	return func(yield func(string) bool) {
		for k := range m {
			if !yield(k) {
				return
			}
		}
	}
}

func orDash(s float64) string {
	if s == 0 {
		return "-"
	}
	return fmt.Sprintf("%.2f s", s)
}
