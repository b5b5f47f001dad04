package e2e

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// startLimit is how long a person waits without wondering.
const startLimit = 1500 * time.Millisecond

// openEngine opens the page and waits until its engine has said hello.
func openEngine(t *testing.T) *page {
	t.Helper()
	p := openPage(t, served)
	p.waitFor("globalThis.torrloomEngine")
	return p
}

func TestPageStartsAndTheEngineSaysHello(t *testing.T) {
	p := openEngine(t)
	if build := evaluate[string](p, "torrloomEngine.hello.build"); len(build) != 12 {
		t.Errorf("the engine is stamped %q, wanted the 12 digits of its sources", build)
	}
	ready := evaluate[float64](p, `performance.getEntriesByName("engine-ready")[0].startTime`)
	t.Logf("ready after %.0f ms", ready)
	if !(ready < float64(startLimit.Milliseconds())) {
		t.Errorf("the engine was ready after %.0f ms, wanted less than %v", ready, startLimit)
	}
	p.demandSilence()
}

// TestAnEngineThatHasGrownTooLargeIsReplaced asks for more than the limit of 1 GiB and looks at what is left of it.
func TestAnEngineThatHasGrownTooLargeIsReplaced(t *testing.T) {
	const grown = `torrloomEngine.slots[0].client.memoryBytes`
	p := openEngine(t)
	evaluate[string](p, requestText("demo", "{noise: false}"))
	evaluate[string](p, `globalThis.firstClient = torrloomEngine.slots[0].client; ""`)
	said := evaluate[string](p, `torrloomEngine.request("crash-on-purpose", "grow", [], {worker: 0}).catch((e) =>
		e.fault.kind + " " + (firstClient.memoryBytes > 2 ** 30))`)
	if said != "bug true" {
		t.Fatalf("the worker did not grow: %s", said)
	}
	if evaluate[bool](p, `torrloomEngine.slots[0].client === firstClient`) {
		t.Error("the worker was kept")
	}
	demandAllWorkersHoldTheData(t, p)
	if after := evaluate[float64](p, grown); !(after > 0 && after < 1<<30) {
		t.Errorf("the worker that took its place holds %g bytes, wanted less than 1 GiB", after)
	}
	p.demandSilence()
}

func TestPageStartsFromDisk(t *testing.T) {
	path, err := filepath.Abs("../../out/torrloom.html")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(path); err != nil {
		t.Fatal(err)
	}
	p := openPage(t, "file://"+path)
	p.waitFor("globalThis.torrloomEngine")
	p.demandSilence()
}

// requestText is JavaScript that makes a request and returns "done" or the name and text of the error.
func requestText(kind, body string) string {
	return `torrloomEngine.request("` + kind + `", ` + body + `).then(() => "done", (e) => e.name + ": " + e.message)`
}

func TestPageSurvivesEveryDeathOfAnEngine(t *testing.T) {
	p := openEngine(t)
	for how, word := range map[string]string{
		"panic":     "panic: crash on purpose",
		"goroutine": "panic: crash on purpose, in a goroutine",
		"stack":     "stack",
		"memory":    "ran out of memory",
		"blocked":   "deadlock",
	} {
		t.Run(how, func(t *testing.T) {
			p.t = t
			evaluate[string](p, requestText("demo", "{noise: false}"))
			said := evaluate[string](p, requestText("crash-on-purpose", `"`+how+`"`))
			if !strings.HasPrefix(said, "EngineFault: crash-on-purpose: ") || !strings.Contains(said, word) {
				t.Errorf("the page was told %q, wanted an EngineFault that says %q", said, word)
			}
			demandAllWorkersHoldTheData(t, p)
		})
	}
	p.t = t
	p.demandSilence()
}

// demandAllWorkersHoldTheData asks every worker for something that needs an open acquisition.
func demandAllWorkersHoldTheData(t *testing.T, p *page) {
	t.Helper()
	said := evaluate[[]string](p, `Promise.all(Array.from({length: torrloomEngine.workers}, (_, worker) =>
		torrloomEngine.request("traces", {delay: 0, shot: 0}, [], {worker}).then(() => "done", (e) => e.message)))`)
	for worker, text := range said {
		if text != "done" {
			t.Errorf("worker %d lost the acquisition: %s", worker, text)
		}
	}
}

// TestCancelEndsARunningJob gives up jobs that would never end.
func TestCancelEndsARunningJob(t *testing.T) {
	const limit = 200 * time.Millisecond // what a person takes for at once
	p := openEngine(t)
	evaluate[string](p, requestText("demo", "{noise: false}"))
	took := evaluate[struct {
		Names        []string
		Milliseconds float64
	}](p, `(async () => {
		const jobs = [1, 2, 3, 4, 5].map(() => torrloomEngine.request("crash-on-purpose", "loop").catch((e) => e.name));
		await new Promise((resolve) => setTimeout(resolve, 300));
		const from = performance.now();
		torrloomEngine.cancel();
		const Names = await Promise.all(jobs);
		return {Names, Milliseconds: performance.now() - from};
	})()`)
	for _, name := range took.Names {
		if name != "Cancelled" {
			t.Errorf("a job ended with %q, wanted Cancelled", name)
		}
	}
	if !(took.Milliseconds < float64(limit.Milliseconds())) {
		t.Errorf("cancel took %.0f ms, wanted less than %v", took.Milliseconds, limit)
	}
	demandAllWorkersHoldTheData(t, p)
	p.demandSilence()
}
