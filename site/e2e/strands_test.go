package e2e

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"

	"torrloom/recon/acquisition"
	"torrloom/recon/exporter"
	"torrloom/recon/phantom"
)

// within is JavaScript for the first element inside a variant that matches the CSS selector.
func within(strand int, selector string) string {
	return fmt.Sprintf("document.querySelector(`[data-strand=\"%d\"] %s`)", strand, selector)
}

// mappedIn is the JavaScript condition that a variant is worked out in full and drawn.
func mappedIn(strand int) string {
	return within(strand, `[data-stage="derive"][data-state="done"]`) + ` && ` + within(strand, `[data-map="pO2"] canvas[data-drawn]`) +
		` && !` + within(strand, `[data-coarse]`) + ` && !` + within(strand, `[data-older]`)
}

func (p *page) text(strand int, selector string) string {
	p.t.Helper()
	return evaluate[string](p, within(strand, selector)+".textContent")
}

// add adds a variant of another and waits for its map.
func (p *page) add(of, added int) {
	p.t.Helper()
	p.click(fmt.Sprintf(`[data-strand="%d"] [data-action="add"]`, of))
	p.waitFor(mappedIn(added))
}

// set gives a setting of a variant another value, as a person who types or picks it.
func (p *page) set(strand int, path, value string) {
	p.t.Helper()
	evaluate[string](p, fmt.Sprintf(`(() => { const e = %s; e.focus(); e.value = %q;
		e.dispatchEvent(new Event(e.localName === "select" ? "change" : "input", {bubbles: true})); return ""; })()`,
		within(strand, fmt.Sprintf(`[data-setting="%s"]`, path)), value))
}

// twoVariants opens the demo with a second variant of another method and cutoff.
func twoVariants(t *testing.T) *page {
	t.Helper()
	p := openDemo(t)
	p.waitFor(mappedIn(0))
	p.add(0, 1)
	p.set(1, "reconstruction.method", "gridding")
	p.set(1, "reconstruction.cutoff", "0.8")
	p.waitFor(within(1, `[data-older]`) + ` || ` + within(1, `[data-coarse]`))
	p.waitFor(mappedIn(1))
	return p
}

const median = `[data-number="median"]`

func TestVariantsStandAboveEachOtherAndSayWhatSetsThemApart(t *testing.T) {
	p := twoVariants(t)
	const wanted = "method gridding instead of back-projection; cutoff 0.8 instead of 1"
	if said := p.text(1, "[data-difference]"); said != wanted {
		t.Errorf("the second variant says %q, wanted %q", said, wanted)
	}
	if a, b := p.text(0, median), p.text(1, median); a == b {
		t.Errorf("both medians read %q, wanted those of two methods", a)
	}
	lefts := evaluate[[]float64](p, `[...document.querySelectorAll('[data-map="pO2"]')].flatMap((e) =>
		[e.getBoundingClientRect().left, e.getBoundingClientRect().top])`)
	if len(lefts) != 4 || lefts[0] != lefts[2] || !(lefts[1] < lefts[3]) {
		t.Errorf("the maps stand at %v (left, top, left, top), wanted one below the other", lefts)
	}
	p.demandSilence()
}

func TestAVariantIsRemovedAndBroughtBack(t *testing.T) {
	const count = `document.querySelectorAll("[data-strand]").length`
	p := twoVariants(t)
	before := p.text(1, median)
	p.click(`[data-strand="1"] [data-action="remove"]`)
	p.waitFor(count + ` === 1 && document.activeElement.matches('[data-strand="0"] [data-name]')`)
	if said := evaluate[string](p, `document.querySelector("[data-removed]").textContent`); !strings.Contains(said, "Variant B was removed") {
		t.Errorf("the notice reads %q, wanted the name of what was removed", said)
	}
	p.click("#bring-back")
	p.waitFor(count + ` === 2 && ` + mappedIn(1))
	if after := p.text(1, median); after != before {
		t.Errorf("brought back, its median is %q, wanted %q as before", after, before)
	}
	p.demandSilence()
}

// TestTheFirstVariantIsTheReferenceEvenAfterARemoval removes the first, so that the second has to take its place.
func TestTheFirstVariantIsTheReferenceEvenAfterARemoval(t *testing.T) {
	p := twoVariants(t)
	p.add(1, 2)
	p.set(2, "mask.amplitudeFraction", "0.4")
	p.click(`[data-strand="0"] [data-action="remove"]`)
	p.waitFor(`!document.querySelector('[data-strand="0"]')`)
	if said := p.text(2, "[data-difference]"); said != "mask level 0.4 instead of 0.2" {
		t.Errorf("the other says %q, wanted only what differs from the new reference", said)
	}
	if evaluate[bool](p, within(1, `[data-action="fold"]`)+" !== null") {
		t.Error("the reference can hide its settings; they are what the others are told apart from")
	}
}

func TestUndoActsOnTheVariantTouchedLast(t *testing.T) {
	p := twoVariants(t)
	cutoffs := func() string {
		return evaluate[string](p, `[0, 1].map((id) => document.querySelector('[data-strand="' + id +
			'"] [data-setting="reconstruction.cutoff"]').value).join(" ")`)
	}
	undo := func(strand int, wanted string) {
		t.Helper()
		evaluate[string](p, within(strand, `[data-map="pO2"] canvas`)+`.focus(); ""`)
		p.press("z", chromedp.KeyModifiers(2)) // Ctrl
		if got := cutoffs(); got != wanted {
			t.Errorf("after undo with the focus in variant %d the cutoffs are %s, wanted %s", strand, got, wanted)
		}
	}
	p.set(0, "reconstruction.cutoff", "0.6")
	undo(1, "0.6 1")
	undo(0, "1 1")
	p.waitFor(mappedIn(0) + " && " + mappedIn(1))
	p.demandSilence()
}

func TestAListIsTypedAndAFaultInItIsSaidAtItsField(t *testing.T) {
	const path = "conditioning.excludeShots"
	p := openDemo(t)
	p.waitFor(mappedIn(0))
	before := p.text(0, median)
	p.click(`[data-group="Conditioning"] > summary`)
	p.set(0, path, "3, 17, 40-44, 100-300")
	p.waitFor(within(0, median) + `.textContent !== "` + before + `" && ` + mappedIn(0))
	p.set(0, path, "3, x")
	p.waitFor(within(0, `[data-fault="`+path+`"]`))
	if said := p.text(0, `[data-fault="`+path+`"]`); said != "enter whole numbers and ranges, as in 3, 17, 40-44" {
		t.Errorf("the field says %q", said)
	}
	p.set(0, path, "3, 17, 40-44")
	p.waitFor(`!` + within(0, `[data-fault="`+path+`"]`))
	p.click(`[data-group="Conditioning"] > summary`)
	p.waitFor(within(0, `[data-group="Conditioning"] .departure`))
	if said := p.text(0, `[data-group="Conditioning"] .departure`); said != "leave out shots 3, 17, 40-44" {
		t.Errorf("folded, the group says %q", said)
	}
	p.demandSilence()
}

func TestOnlySettingsOfTheChosenMethodAreShown(t *testing.T) {
	p := openDemo(t)
	shown := func() string {
		return evaluate[string](p, `["density", "tolerance", "iterations"].filter((name) =>
			document.querySelector('[data-setting="reconstruction.' + name + '"]')).join(" ")`)
	}
	for method, wanted := range map[string]string{"back-projection": "", "gridding": "density tolerance", "least-squares": "density iterations"} {
		p.set(0, "reconstruction.method", method)
		if got := shown(); got != wanted {
			t.Errorf("%s shows %q, wanted %q", method, got, wanted)
		}
	}
}

// watchMaps writes down how the amplitude map of the first variant changes from now on: coarse, older or full.
const watchMaps = `(() => {
	globalThis.seen = [];
	const look = () => {
		const {coarse, older} = document.querySelector('[data-strand="0"] [data-map="amplitude"]').dataset;
		const now = older !== undefined ? "older" : coarse !== undefined ? "coarse" : "full";
		const savable = !document.querySelector("#save-amplitude").disabled;
		const words = now + (savable ? " to save" : "");
		if (seen.at(-1) !== words) seen.push(words);
		requestAnimationFrame(look);
	};
	look();
	return "";
})()`

func TestACoarseMapComesFirstAndGivesWayToTheFullOne(t *testing.T) {
	p := openDemo(t)
	p.waitFor(mappedIn(0))
	evaluate[string](p, watchMaps)
	p.set(0, "reconstruction.matrix", "72")
	p.waitFor(`seen.length >= 4 && ` + mappedIn(0))
	wanted := []string{"full to save", "older", "coarse", "full to save"}
	if seen := evaluate[[]string](p, "seen"); !slices.Equal(seen, wanted) {
		t.Errorf("the map was %q, wanted %q", seen, wanted)
	}
	p.set(0, "mask.amplitudeFraction", "0.3")
	p.waitFor(within(0, `[data-map="pO2"][data-older]`))
	p.waitFor(mappedIn(0))
	if seen := evaluate[[]string](p, "seen"); !slices.Equal(seen, wanted) {
		t.Errorf("after a change of the mask alone the images were made anew: %q", seen[len(wanted):])
	}
	p.demandSilence()
}

// TestOneJobIsGivenUpWithoutTheOthers aborts one of two jobs that would never end.
func TestOneJobIsGivenUpWithoutTheOthers(t *testing.T) {
	const limit = 200 * time.Millisecond // what a person takes for at once
	p := openEngine(t)
	evaluate[string](p, requestText("demo", "{noise: false}"))
	got := evaluate[struct {
		Given, Kept  string
		Milliseconds float64
	}](p, `(async () => {
		const stops = [new AbortController(), new AbortController()];
		const jobs = stops.map(({signal}) =>
			torrloomEngine.request("crash-on-purpose", "loop", [], {signal}).catch((e) => e.name));
		const after = (ms) => new Promise((resolve) => setTimeout(() => resolve("still running"), ms));
		await after(300);
		const from = performance.now();
		stops[0].abort();
		const Given = await jobs[0];
		const Milliseconds = performance.now() - from;
		const Kept = await Promise.race([jobs[1], after(300)]);
		stops[1].abort();
		await jobs[1];
		return {Given, Kept, Milliseconds};
	})()`)
	if got.Given != "Cancelled" || got.Kept != "still running" {
		t.Errorf("the one that was given up: %s; the other: %s", got.Given, got.Kept)
	}
	if !(got.Milliseconds < float64(limit.Milliseconds())) {
		t.Errorf("giving up took %.0f ms, wanted less than %v", got.Milliseconds, limit)
	}
	demandAllWorkersHoldTheData(t, p)
	p.demandSilence()
}

// TestAChangeOfOneVariantLeavesTheRunOfAnotherAlone counts how often the reconstruction of the other is begun.
func TestAChangeOfOneVariantLeavesTheRunOfAnotherAlone(t *testing.T) {
	p := twoVariants(t)
	evaluate[string](p, `(() => {
		globalThis.begun = [];
		const request = torrloomEngine.request.bind(torrloomEngine);
		torrloomEngine.request = (kind, body, ...rest) => {
			if (kind === "reconstruct" && body.recipe.reconstruction.matrix === 64) begun.push(body.frames.join());
			return request(kind, body, ...rest);
		};
		return "";
	})()`)
	p.set(0, "reconstruction.matrix", "64")
	p.waitFor("begun.length > 0")
	p.set(1, "reconstruction.cutoff", "0.7")
	time.Sleep(200 * time.Millisecond) // past the pause after typing, so that a run begins
	p.set(1, "reconstruction.cutoff", "0.9")
	p.waitFor(mappedIn(0) + " && " + mappedIn(1))
	begun := evaluate[[]string](p, "begun")
	slices.Sort(begun)
	if once := slices.Compact(slices.Clone(begun)); len(once) != len(begun) {
		t.Errorf("jobs of the first variant were begun more than once: %q", begun)
	}
	p.demandSilence()
}

func TestSixVariantsFitASmallScreen(t *testing.T) {
	p := openDemo(t)
	for added := 1; added < 6; added++ {
		p.add(added-1, added)
	}
	p.set(5, "reconstruction.window", "none")
	p.waitFor(within(5, "[data-older]"))
	p.waitFor(mappedIn(5))
	if width := evaluate[float64](p, `document.documentElement.scrollWidth`); !(width <= pageWidth) {
		t.Errorf("the page is %g px wide, wanted at most %d", width, pageWidth)
	}
	names := evaluate[string](p, `[...document.querySelectorAll("[data-name]")].map((e) => e.value.at(-1)).join("")`)
	if names != "ABCDEF" {
		t.Errorf("the variants are named %s, wanted ABCDEF", names)
	}
	p.demandSilence()
}

// TestAxeFindsNothingInTwoVariants has one of them folded, a group and a table open, a faulty list and a notice. Its
// pictures are those of the README.
func TestAxeFindsNothingInTwoVariants(t *testing.T) {
	rules, err := os.ReadFile("../node_modules/axe-core/axe.min.js")
	if err != nil {
		t.Fatal(err)
	}
	for _, scheme := range []string{"light", "dark"} {
		t.Run(scheme, func(t *testing.T) {
			p := twoVariants(t)
			p.preferScheme(scheme)
			p.click(`[data-strand="1"] [data-action="fold"]`)
			p.portrait("page-" + scheme)
			p.add(1, 2)
			p.click(`[data-strand="2"] [data-action="remove"]`)
			p.click(`[data-strand="0"] [data-group="Conditioning"] > summary`)
			p.set(0, "conditioning.excludeShots", "x")
			p.click(`[data-strand="0"] .behind > summary`)
			p.waitFor(within(0, `[data-fault="conditioning.excludeShots"]`) + ` && ` + within(0, "table"))
			evaluate[string](p, string(rules)+`; ""`)
			for _, violation := range evaluate[[]string](p, axeRun) {
				t.Error(violation)
			}
			p.screenshot("variants-" + scheme)
		})
	}
}

// portrait saves a picture of the whole page, however long it is.
func (p *page) portrait(name string) {
	p.t.Helper()
	height := evaluate[float64](p, `Math.ceil(document.querySelector("footer").getBoundingClientRect().bottom + scrollY)`)
	evaluate[string](p, `document.activeElement.blur(); scrollTo(0, 0); ""`)
	p.do(chromedp.EmulateViewport(pageWidth, int64(height)))
	p.waitFor("innerHeight > 720")
	time.Sleep(300 * time.Millisecond) // for the maps to be drawn once more
	p.screenshot(name)
	p.do(chromedp.EmulateViewport(pageWidth, pageHeight))
}

// tabTo presses Tab until an element that matches the CSS selector has the focus.
func (p *page) tabTo(selector string) {
	p.t.Helper()
	for range 200 {
		if evaluate[bool](p, "document.activeElement.matches(`"+selector+"`)") {
			return
		}
		p.press(kb.Tab)
	}
	p.t.Fatalf("Tab never reaches %s", selector)
}

// TestVariantsAreComparedByKeyboardAlone goes the whole way without a pointer.
func TestVariantsAreComparedByKeyboardAlone(t *testing.T) {
	p := openDemo(t)
	p.waitFor(mappedIn(0))
	p.tabTo(`[data-strand="0"] [data-action="add"]`)
	p.press(kb.Enter)
	p.waitFor(`document.activeElement.matches('[data-strand="1"] [data-name]') && ` + mappedIn(1))
	p.press("a", chromedp.KeyModifiers(2)) // Ctrl: all of the name
	p.press("finer" + kb.Enter)
	p.tabTo(`[data-strand="1"] [data-setting="reconstruction.method"]`)
	p.press("g")
	p.waitFor(within(1, "[data-difference]") + `.textContent === "method gridding instead of back-projection"`)
	p.waitFor(within(1, "[data-older]") + " || " + within(1, "[data-coarse]"))
	p.waitFor(mappedIn(1))
	if name := evaluate[string](p, within(1, "")+`.getAttribute("aria-label")`); name != "finer" {
		t.Errorf("the variant is named %q, wanted finer", name)
	}
	evaluate[string](p, within(1, "[data-name]")+`.focus(); ""`)
	p.tabTo(`[data-strand="1"] [data-action="fold"]`)
	p.press(kb.Enter)
	p.waitFor(`!` + within(1, "form"))
	p.tabTo(`[data-strand="1"] [data-action="remove"]`)
	p.press(kb.Enter)
	p.waitFor(`!document.querySelector('[data-strand="1"]') && document.activeElement.matches('[data-strand="0"] [data-name]')`)
	p.demandSilence()
}

// writeSinglePoint writes a free decay of the demo's body over gradients on a cube, with a dead time of 0.6 µs.
func writeSinglePoint(t *testing.T) string {
	t.Helper()
	a, err := phantom.Demo().AcquireSinglePoint(phantom.SinglePointProtocol{Sequence: acquisition.FreeDecay, DelayUS: []float64{0},
		GradientMTPerM: phantom.CubeGradients(3, 13, 6), DwellNS: 25, Samples: 40, TimeZeroSample: -24, NoiseSD: 1})
	if err != nil {
		t.Fatal(err)
	}
	var archive bytes.Buffer
	if err := exporter.Acquisition(&archive, a); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "decay.npz")
	if err := os.WriteFile(path, archive.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestSinglePointDataShowWhatTheirSampleTimesCover(t *testing.T) {
	p := openDemo(t)
	p.giveFiles("#open-files-input", writeSinglePoint(t))
	p.waitFor(`document.querySelector('[data-fact="name"]').textContent === "decay"`)
	p.waitFor(within(0, `[data-stage="derive"][data-state="done"]`) + ` && ` + within(0, `[data-map="rate"] canvas[data-drawn]`))
	titles := evaluate[string](p, `[...document.querySelectorAll(".acquisition figcaption")].map((e) => e.textContent).join("; ")`)
	if !strings.Contains(titles, "field of view, resolution (broken) in mm") || strings.Contains(titles, "projection") {
		t.Errorf("the charts are %q, wanted the coverage and no projection", titles)
	}
	p.click(`summary[aria-label="table: field of view, resolution (broken) in mm"]`)
	p.waitFor(`document.querySelector(".acquisition table")`)
	// The step of 1 mT/m at 0.6 µs: 1/(28.024951 MHz/mT · 1e-3 mT/mm · 0.6 µs) = 59.47 mm over 13 gradients.
	rows := evaluate[[]string](p, `[...document.querySelectorAll(".acquisition tbody tr")].map((r) => [...r.cells].map((c) => c.textContent).join(" "))`)
	if len(rows) != 40 || rows[0] != "0.6 59.47 4.57 yes" || !strings.HasSuffix(rows[39], "no") {
		t.Errorf("the table has %d rows, the first %q, the last %q", len(rows), rows[0], rows[len(rows)-1])
	}
	if kind := evaluate[string](p, `document.querySelector(".delay").textContent`); !strings.Contains(kind, "sample time") {
		t.Errorf("the frames are called %q, wanted sample times", kind)
	}
	p.screenshot("single-point")
	p.demandSilence()
}
