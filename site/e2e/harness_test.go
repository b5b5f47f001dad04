package e2e

import (
	"strings"
	"testing"
)

// TestTheHarnessHearsPageAndWorkers makes every kind of noise in a page without a policy. If it went unheard, silence
// elsewhere would mean nothing.
func TestTheHarnessHearsPageAndWorkers(t *testing.T) {
	p := openPage(t, unguarded(t))
	evaluate[string](p, `(async () => {
		console.log("from the page");
		setTimeout(() => { throw new Error("thrown in the page"); });
		await fetch("http://elsewhere.invalid/").catch(() => {});
		const text = 'console.log("from a worker"); postMessage(0);';
		globalThis.worker = new Worker(URL.createObjectURL(new Blob([text])));
		await new Promise((resolve) => { worker.onmessage = resolve; });
		return "";
	})()`)
	p.hearWorkers()
	heard := strings.Join(append(p.console, p.requests...), "\n")
	for _, wanted := range []string{"from the page", "thrown in the page", "GET http://elsewhere.invalid/", "from a worker"} {
		if !strings.Contains(heard, wanted) {
			t.Errorf("%q was not heard, only:\n%s", wanted, heard)
		}
	}
}
