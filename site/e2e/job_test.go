package e2e

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/chromedp/cdproto/cdp"
	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"

	"torrloom/recon/exporter"
	"torrloom/recon/phantom"
)

// mapped is the JavaScript condition that the first variant is worked out and drawn.
const mapped = `document.querySelector('[data-strand="0"] [data-stage="derive"][data-state="done"]') &&
	document.querySelector('[data-strand="0"] [data-map="pO2"] canvas[data-drawn]')`

// openDemo opens the page and waits until the demo that it starts with is a pO2 map.
func openDemo(t *testing.T) *page {
	t.Helper()
	p := openPage(t, served)
	p.waitFor(mapped)
	return p
}

func TestTheDemoBecomesAMapByItself(t *testing.T) {
	p := openDemo(t)
	p.screenshot("demo")
	median := evaluate[string](p, `document.querySelector('[data-strand="0"] [data-number="median"]').textContent`)
	if !strings.ContainsAny(median, "0123456789") {
		t.Errorf("the median reads %q, wanted a number", median)
	}
	p.demandSilence()
}

// writeDemoArchive writes the demo as a NumPy archive, as somebody who owns an imager would send it.
func writeDemoArchive(t *testing.T, name string) string {
	t.Helper()
	a, err := phantom.DemoAcquisition(true)
	if err != nil {
		t.Fatal(err)
	}
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

func TestAFileOpensAndGivesItsMap(t *testing.T) {
	p := openDemo(t)
	p.giveFiles("#open-files-input", writeDemoArchive(t, "sent-by-mail.npz"))
	p.waitFor(`document.querySelector('[data-fact="name"]').textContent.includes("sent-by-mail")`)
	p.waitFor(mapped)
	crashEveryWorker(p)
	demandAllWorkersHoldTheData(t, p)
	p.demandSilence()
}

// crashEveryWorker kills all engines, which are then replaced.
func crashEveryWorker(p *page) {
	p.t.Helper()
	evaluate[string](p, `Promise.allSettled(Array.from({length: torrloomEngine.workers}, (_, worker) =>
		torrloomEngine.request("crash-on-purpose", "panic", [], {worker}))).then(() => "")`)
}

// TestAFileThatHasChangedIsAskedForAgain changes a file on disk after it was opened, so that no new worker can open it.
func TestAFileThatHasChangedIsAskedForAgain(t *testing.T) {
	p := openDemo(t)
	path := writeDemoArchive(t, "changing.npz")
	p.giveFiles("#open-files-input", path)
	p.waitFor(`document.querySelector('[data-fact="name"]').textContent.includes("changing")`)
	p.waitFor(mapped)
	if err := os.WriteFile(path, []byte("overwritten"), 0o644); err != nil {
		t.Fatal(err)
	}
	crashEveryWorker(p)
	const wanted = "EngineFault: changing.npz: the file has changed or gone since you picked it; drop it again"
	if said := evaluate[string](p, requestText("traces", "{delay: 0, shot: 0}")); said != wanted {
		t.Errorf("the page was told %q, wanted %q", said, wanted)
	}
	evaluate[string](p, requestText("demo", "{noise: false}"))
	demandAllWorkersHoldTheData(t, p)
}

func TestABrokenFileIsNamedAndTheOldDataStay(t *testing.T) {
	p := openDemo(t)
	path := filepath.Join(t.TempDir(), "broken.npz")
	if err := os.WriteFile(path, []byte("this is no archive"), 0o644); err != nil {
		t.Fatal(err)
	}
	before := evaluate[string](p, `document.querySelector('[data-fact="name"]').textContent`)
	p.giveFiles("#open-files-input", path)
	p.waitFor(`document.querySelector('[data-fault="open"]')?.textContent.includes("broken.npz")`)
	if after := evaluate[string](p, `document.querySelector('[data-fact="name"]').textContent`); after != before {
		t.Errorf("the acquisition is now %q, wanted the old one, %q", after, before)
	}
	demandAllWorkersHoldTheData(t, p)
	p.demandSilence()
}

// TestThePageFitsASmallScreen at 1280 x 720, where it promises no scrolling sideways.
func TestThePageFitsASmallScreen(t *testing.T) {
	p := openDemo(t)
	if width := evaluate[float64](p, `document.documentElement.scrollWidth`); !(width <= pageWidth) {
		t.Errorf("the page is %g px wide, wanted at most %d", width, pageWidth)
	}
}

// TestAxeFindsNothing runs the rules of axe-core 4.14.1 in both colour schemes.
func TestAxeFindsNothing(t *testing.T) {
	rules, err := os.ReadFile("../node_modules/axe-core/axe.min.js")
	if err != nil {
		t.Fatal(err)
	}
	for _, scheme := range []string{"light", "dark"} {
		t.Run(scheme, func(t *testing.T) {
			p := openDemo(t)
			p.preferScheme(scheme)
			evaluate[string](p, string(rules)+`; ""`)
			for _, violation := range evaluate[[]string](p, axeRun) {
				t.Error(violation)
			}
			p.screenshot(scheme)
		})
	}
}

// axeRun returns one line for each element that breaks a rule.
const axeRun = `axe.run().then(({violations}) => violations.flatMap((v) => v.nodes.map((n) =>
	v.id + ": " + n.target.join(" ") + ": " + n.failureSummary.replace(/\s+/g, " "))))`

func (p *page) preferScheme(scheme string) {
	p.t.Helper()
	p.do(chromedp.Func(func(ctx context.Context, tab *chromedp.Target) error {
		_, err := cdp.Call(ctx, tab, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{
			Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}},
		})
		return err
	}))
}

// reachable is JavaScript that gives a name to every control that Tab has to reach: all but the switched-off, the
// unseen, and those of a radio group that are not chosen, between which the arrow keys move.
const reachable = `(() => {
	const named = (e) => (e.id || e.getAttribute("aria-label") || e.dataset.setting || e.dataset.action ||
		e.textContent.trim().slice(0, 30) || e.name) + " <" + e.localName + ">";
	const all = [...document.querySelectorAll("button, select, input, summary, [tabindex='0']")].filter((e) =>
		!e.disabled && e.tabIndex >= 0 && e.checkVisibility({visibilityProperty: true}) &&
		!(e.type === "radio" && !e.checked));
	globalThis.nameOfFocus = () => document.activeElement === document.body ? "" : named(document.activeElement);
	return all.map(named);
})()`

func TestEveryControlIsReachedByTab(t *testing.T) {
	p := openDemo(t)
	wanted := evaluate[[]string](p, reachable)
	if len(wanted) < 20 {
		t.Fatalf("the page has %d controls, wanted a page full", len(wanted))
	}
	reached := map[string]bool{}
	for range 3 * len(wanted) { // links and scrolled regions are reached too, but the way ends
		p.press(kb.Tab)
		reached[evaluate[string](p, "nameOfFocus()")] = true
	}
	for _, name := range wanted {
		if !reached[name] {
			t.Errorf("Tab never reaches %s", name)
		}
	}
}

// TestASettingIsChangedAndUndone by keyboard and by a click, with the map following both ways.
func TestASettingIsChangedAndUndone(t *testing.T) {
	const median = `document.querySelector('[data-strand="0"] [data-number="median"]').textContent`
	const cutoff = `document.querySelector('[data-setting="reconstruction.cutoff"]')`
	p := openDemo(t)
	before := evaluate[string](p, median)
	evaluate[string](p, cutoff+`.focus(); `+cutoff+`.select(); ""`)
	p.press("0.4" + kb.Enter)
	p.waitFor(median + ` !== "` + before + `" && (` + mapped + `)`)
	p.click(`[data-strand="0"] [data-action="undo"]`)
	p.waitFor(median + ` === "` + before + `" && (` + mapped + `)`)
	if value := evaluate[string](p, cutoff+".value"); value != "1" {
		t.Errorf("after undo the cutoff is %s, wanted 1", value)
	}
	p.demandSilence()
}
