package e2e

import (
	"fmt"
	"net/http"
	"net/http/httptest"
	"sync"
	"testing"
	"time"
)

// attempts are ways for a script to send something. %s is where to; each is an expression that may throw. The form
// comes last, because it leaves the page.
var attempts = []struct{ name, script string }{
	{"fetch", `fetch("%s")`},
	{"request", `(() => { const r = new XMLHttpRequest(); r.open("POST", "%s"); r.send("x"); })()`},
	{"beacon", `navigator.sendBeacon("%s", "x")`},
	{"picture", `(() => { new Image().src = "%s"; })()`},
	{"script", `(() => { const s = document.createElement("script"); s.src = "%s"; document.head.append(s); })()`},
	{"sheet", `(() => { const l = document.createElement("link"); l.rel = "stylesheet"; l.href = "%s";
		document.head.append(l); })()`},
	{"font", `new FontFace("f", "url(%s)").load()`},
	{"frame", `(() => { const f = document.createElement("iframe"); f.src = "%s"; document.body.append(f); })()`},
	{"events", `(() => { new EventSource("%s"); })()`},
	{"socket", `(() => { new WebSocket("%s".replace("http", "ws")); })()`},
	{"worker", `(() => { new Worker(URL.createObjectURL(new Blob(['fetch("%s").catch(() => {})']))); })()`},
	{"form", `(() => { const f = document.createElement("form"); f.action = "%s"; f.method = "POST";
		document.body.append(f); f.submit(); })()`},
}

// settle is how long a request that was let through may take to arrive on the same machine.
const settle = time.Second

// TestNothingReachesTheNetwork tries to send from the page in every way that a policy can stop. A page without a
// policy tries the same and must get through with each, or else the test would prove nothing.
func TestNothingReachesTheNetwork(t *testing.T) {
	control, guarded := sendAll(t, unguarded(t)), sendAll(t, served)
	for _, attempt := range attempts {
		if control[attempt.name] == 0 {
			t.Errorf("%s: a page without a policy could not send either, so this attempt proves nothing", attempt.name)
		}
		if n := guarded[attempt.name]; n != 0 {
			t.Errorf("%s: %d requests left the page, wanted none", attempt.name, n)
		}
	}
}

// sendAll makes every attempt from the page at url and returns how many requests came out of each.
func sendAll(t *testing.T, url string) map[string]int {
	t.Helper()
	var mu sync.Mutex
	arrived := map[string]int{}
	sink := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		mu.Lock()
		defer mu.Unlock()
		arrived[r.URL.Path[1:]]++
	}))
	defer sink.Close()
	p := openPage(t, url)
	for _, attempt := range attempts {
		script := fmt.Sprintf(attempt.script, sink.URL+"/"+attempt.name)
		evaluate[string](p, "(async () => { try { await "+script+" } catch {} return ''; })()")
	}
	time.Sleep(settle)
	mu.Lock()
	defer mu.Unlock()
	return arrived
}

// unguarded returns the address of a page that has no policy.
func unguarded(t *testing.T) string {
	t.Helper()
	control := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Content-Type", "text/html")
		fmt.Fprint(w, `<!doctype html><title>control</title><link rel="icon" href="data:,"><body></body>`)
	}))
	t.Cleanup(control.Close)
	return control.URL + "/"
}
