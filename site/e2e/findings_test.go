package e2e

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/chromedp/chromedp/kb"

	"torrloom/recon/acquisition"
	"torrloom/recon/exporter"
	"torrloom/recon/phantom"
)

// checked is the JavaScript condition that the findings are those of the settings as they stand.
const checked = `(` + mapped + `) && document.querySelector('[data-check]:not([data-check=""]):not([data-older])')`

const verdict = `document.querySelector('[data-verdict]').textContent`

// openCheck opens the check of a page with a map and waits for what only it shows.
func openCheck(p *page) {
	p.t.Helper()
	p.waitFor(checked)
	p.click(`.check > summary`)
	p.waitFor(`document.querySelector('[data-shots-drawn]') && document.querySelector('[data-off-image]')`)
}

func TestTheDemoIsCheckedByItself(t *testing.T) {
	p := openDemo(t)
	p.waitFor(checked)
	if said := evaluate[string](p, verdict); !strings.Contains(said, "fine") || !strings.Contains(said, "0 stop, 0 doubt") {
		t.Errorf("of the sound demo the check says %q", said)
	}
	openCheck(p)
	if dots := evaluate[int](p, `Number(document.querySelector('[data-shots-drawn]').dataset.shotsDrawn)`); dots != 480 {
		t.Errorf("%d dots, wanted one for each of 480 shots", dots)
	}
	p.click(`.check .fold > summary`)
	p.waitFor(`document.querySelectorAll('[data-finding][data-level="fine"]').length > 30`)
	if off := evaluate[string](p, `document.querySelector('[data-off-image]').textContent`); percentOf(t, off) > 12 {
		t.Errorf("a sound shot differs from the projection of the image by %s", off) // the window takes the sharpest edges
	}
	p.demandSilence()
}

func percentOf(t *testing.T, text string) float64 {
	t.Helper()
	value, err := strconv.ParseFloat(strings.TrimSpace(strings.TrimSuffix(strings.TrimPrefix(text, "<"), "%")), 64)
	if err != nil {
		t.Fatalf("%q is no percentage", text)
	}
	return value
}

// TestTheCheckIsAccessible runs axe over the open check in both colour schemes.
func TestTheCheckIsAccessible(t *testing.T) {
	rules, err := os.ReadFile("../node_modules/axe-core/axe.min.js")
	if err != nil {
		t.Fatal(err)
	}
	for _, scheme := range []string{"light", "dark"} {
		p := openDemo(t)
		p.giveFiles("#open-files-input", writeArchive(t, "spoilt.npz", spoiltAcquisition(t)))
		p.waitFor(`document.querySelector('[data-fact="name"]').textContent.includes("spoilt")`)
		p.preferScheme(scheme)
		openCheck(p)
		evaluate[string](p, string(rules)+`; ""`)
		for _, violation := range evaluate[[]string](p, axeRun) {
			t.Errorf("%s: %s", scheme, violation)
		}
		if width := evaluate[float64](p, `document.documentElement.scrollWidth`); !(width <= pageWidth) {
			t.Errorf("with the check open the page is %g px wide, wanted at most %d", width, pageWidth)
		}
		evaluate[string](p, `document.querySelector('.check').scrollIntoView(); ""`)
		p.screenshot("check-" + scheme)
		evaluate[string](p, `document.querySelector('.shot-curves').scrollIntoView(); ""`)
		p.screenshot("check-shot-" + scheme)
		p.demandSilence()
	}
}

// The faults that are planted: two weak shots, two of noise, two turned.
var brokenShots = []int{37, 101, 180, 250, 333, 396}

// scrambled returns the demo's object measured with 400 shots in an order that jumps over the half sphere.
func scrambled(t *testing.T) *acquisition.Acquisition {
	t.Helper()
	pr := phantom.Protocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{0.4, 0.7, 1.2, 2.1, 3.6, 6.3, 11, 32}, EchoTimeUS: 1.1,
		Inversion: 1.82, GradientMTPerM: 18, DwellNS: 6, Samples: 320, TimeZeroSample: 159.4, PhaseRad: 0.7, NoiseSD: 14, Seed: 21}
	golden := phantom.GoldenHalfSphere(400)
	for i := range golden {
		pr.Directions = append(pr.Directions, golden[i*151%400])
	}
	a, err := phantom.Demo().Acquire(pr)
	if err != nil {
		t.Fatal(err)
	}
	demo, err := phantom.DemoAcquisition(false)
	if err != nil {
		t.Fatal(err)
	}
	a.Optional = demo.Optional // the calibration
	return a
}

// spoiltAcquisition is scrambled with six broken shots, a drift of 90 kHz, an offset of 1 % and a time zero 3 ns off.
func spoiltAcquisition(t *testing.T) *acquisition.Acquisition {
	a := scrambled(t)
	echo := 0.0
	for _, v := range a.Trace(a.ReferenceDelay(), 0) {
		echo = math.Max(echo, math.Hypot(float64(real(v)), float64(imag(v))))
	}
	phantom.DriftFrequency(a, 0, 90)
	phantom.Weaken(a, 37, 0.5)
	phantom.Weaken(a, 250, 0.7)
	phantom.Silence(a, 101, 14, 5)
	phantom.Silence(a, 333, 14, 6)
	phantom.Turn(a, 180, 2)
	phantom.Turn(a, 396, math.Pi)
	phantom.AddOffset(a, complex(0.008*echo, -0.006*echo))
	phantom.MistakeTimeZero(a, 3)
	return a
}

func writeArchive(t *testing.T, name string, a *acquisition.Acquisition) string {
	t.Helper()
	var archive bytes.Buffer
	if err := exporter.Acquisition(&archive, a); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, archive.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// openArchive opens an acquisition and returns the median and the quartiles that the page makes of it.
func openArchive(p *page, name string, a *acquisition.Acquisition) []float64 {
	p.t.Helper()
	p.giveFiles("#open-files-input", writeArchive(p.t, name+".npz", a))
	p.waitFor(`document.querySelector('[data-fact="name"]').textContent.includes("` + name + `")`)
	p.waitFor(checked)
	return medians(p)
}

// medians returns the median and the quartiles of pO2 as the page shows them.
func medians(p *page) []float64 {
	p.t.Helper()
	var out []float64
	for _, key := range []string{"median", "quartiles"} {
		text := evaluate[string](p, `document.querySelector('[data-strand="0"] [data-number="`+key+`"]').textContent`)
		for _, word := range strings.Fields(strings.ReplaceAll(text, "\u2212", "-")) {
			if v, err := strconv.ParseFloat(word, 64); err == nil {
				out = append(out, v)
			}
		}
	}
	if len(out) != 3 {
		p.t.Fatalf("median and quartiles read %v", out)
	}
	return out
}

func apart(a, b []float64) float64 {
	sum := 0.0
	for i := range a {
		sum += math.Abs(a[i] - b[i])
	}
	return sum
}

// named returns the shots that findings worse than fine name.
func named(p *page) []int {
	p.t.Helper()
	text := evaluate[string](p, `[...document.querySelectorAll('[data-finding]:not([data-level="fine"]) [data-shots]')].map((e) => e.dataset.shots).join(" ")`)
	var out []int
	for _, word := range strings.Fields(text) {
		n, err := strconv.Atoi(word)
		if err != nil {
			p.t.Fatal(err)
		}
		out = append(out, n)
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// TestBrokenShotsAreNamedAndThePageShowsWhatTheyDid opens the clean and the spoilt set, and applies what is proposed.
func TestBrokenShotsAreNamedAndThePageShowsWhatTheyDid(t *testing.T) {
	p := openDemo(t)
	clean := openArchive(p, "sound", scrambled(t))
	spoilt := openArchive(p, "spoilt", spoiltAcquisition(t))
	openCheck(p)
	if got := named(p); !slices.Equal(got, brokenShots) {
		t.Errorf("shots %v are named, planted were %v", got, brokenShots)
	}
	if said := evaluate[string](p, verdict); !strings.HasPrefix(strings.TrimLeft(said, "▲■● "), "doubt") {
		t.Errorf("the verdict is %q, wanted doubt", said)
	}
	p.click(`#apply-proposed`)
	p.waitFor(`document.querySelector('[data-before-after="done"]')`)
	after := medians(p)
	t.Logf("median and quartiles: clean %v, spoilt %v, put right %v torr", clean, spoilt, after)
	if !(apart(after, clean) < 0.5*apart(spoilt, clean)) {
		t.Errorf("median and quartiles are %v of clean data, %v before and %v after", clean, spoilt, after)
	}
	if said := evaluate[string](p, verdict); !strings.Contains(said, "0 stop, 0 doubt") {
		t.Errorf("after what was proposed the verdict is %q", said)
	}
	shown := evaluate[string](p, `document.querySelector('[data-before-after]').textContent`)
	for _, wanted := range []string{"median pO₂", "doubt", "fine"} {
		if !strings.Contains(shown, wanted) {
			t.Errorf("before and after read %q, without %q", shown, wanted)
		}
	}
	evaluate[string](p, `document.querySelector('.check').scrollIntoView(); ""`)
	p.screenshot("check-applied")
	if value := evaluate[string](p, `document.querySelector('[data-setting="conditioning.excludeShots"]').value`); value != "37, 101, 180, 250, 333, 396" {
		t.Errorf("the setting of left-out shots reads %q", value)
	}
	p.click(`#take-back`)
	p.waitFor(`document.querySelector('[data-left-out=""]')`)
	p.waitFor(checked)
	if got := medians(p); !(apart(got, spoilt) < 0.02) { // the digits shown
		t.Errorf("taken back, median and quartiles are %v, wanted %v as before", got, spoilt)
	}
	p.demandSilence()
}

// TestAShotIsLeftOutByKeyboard finds its way over the map of directions without a mouse.
func TestAShotIsLeftOutByKeyboard(t *testing.T) {
	const leftOut = `document.querySelector('[data-left-out]').dataset.leftOut`
	const chosen = `document.querySelector('#check-shot').value`
	p := openDemo(t)
	p.waitFor(checked)
	evaluate[string](p, `document.querySelector('.check > summary').focus(); ""`)
	p.press(kb.Enter)
	p.waitFor(`document.querySelector('[data-shots-drawn]')`)
	evaluate[string](p, `document.querySelector('[data-shots-drawn]').focus(); ""`)
	first := evaluate[string](p, chosen)
	p.press(kb.ArrowRight)
	second := evaluate[string](p, chosen)
	if second == first {
		p.press(kb.ArrowLeft)
		second = evaluate[string](p, chosen)
	}
	if second == first {
		t.Fatalf("no arrow leads away from shot %s", first)
	}
	p.press(kb.Enter)
	p.waitFor(leftOut + ` === "` + second + `"`)
	p.waitFor(checked)
	p.waitFor(`document.querySelector('[data-strand="0"] [data-warnings]')?.textContent.includes("1 of 480 shots are left out")`)
	p.press(" ")
	p.waitFor(leftOut + ` === ""`)
	p.waitFor(checked)
	p.demandSilence()
}

// TestAcquisitionsOfOtherKindsAreChecked opens flat spokes, which lie on a half circle, and single points, which have none.
func TestAcquisitionsOfOtherKindsAreChecked(t *testing.T) {
	p := openDemo(t)
	disc := phantom.Sum(2, phantom.Body{Density: 2, R1PerUS: 0.3, Shape: phantom.Shape{Dim: 2, SemiMM: [3]float64{8, 5}, CentreMM: [3]float64{1, -1}}})
	flat, err := disc.Acquire(phantom.Protocol{Sequence: acquisition.InversionRecovery, DelayUS: []float64{0.4, 0.8, 1.5, 3, 25}, Inversion: 1.8,
		Directions: phantom.EqualAngles(90), GradientMTPerM: 18, DwellNS: 8, Samples: 240, TimeZeroSample: 119.6, NoiseSD: 0.3, PhaseRad: 1})
	if err != nil {
		t.Fatal(err)
	}
	for name, a := range map[string]*acquisition.Acquisition{"flat": flat, "points": gridOfPoints(t)} {
		p.giveFiles("#open-files-input", writeArchive(t, name+".npz", a))
		p.waitFor(fmt.Sprintf(`document.querySelector('[data-fact="name"]').textContent.includes(%q)`, name))
		p.waitFor(`document.querySelector('[data-check]:not([data-check=""]):not([data-older])')`)
		if !evaluate[bool](p, `document.querySelector('.check').open`) {
			p.click(`.check > summary`)
		}
		wanted := map[string]string{"flat": `document.querySelector('[data-shots-drawn="90"]')`, "points": `document.querySelector('[data-no-directions]')`}[name]
		p.waitFor(wanted)
		p.screenshot("check-" + name)
	}
	p.demandSilence()
}

func gridOfPoints(t *testing.T) *acquisition.Acquisition {
	t.Helper()
	ball := phantom.Shape{Dim: 3, SemiMM: [3]float64{9, 8, 7}, CentreMM: [3]float64{1, -1, 0.5}}
	a, err := phantom.Sum(3, phantom.Body{Density: 1, R1PerUS: 0.4, R2PerUS: 0.6, Shape: ball}).AcquireSinglePoint(phantom.SinglePointProtocol{
		Sequence: acquisition.FreeDecay, DelayUS: []float64{0}, GradientMTPerM: phantom.CubeGradients(3, 11, 20), DwellNS: 20, Samples: 11, TimeZeroSample: -10, NoiseSD: 3, Seed: 5})
	if err != nil {
		t.Fatal(err)
	}
	return a
}
