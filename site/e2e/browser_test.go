package e2e

import (
	"context"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/cdp"
	"github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/network"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/cdproto/target"
	"github.com/chromedp/chromedp"
)

const (
	// patience is how long a test waits for what the page should do at once. The machines that run it are slow.
	patience = 30 * time.Second
	// pageWidth and pageHeight are the smallest screen that the page promises to fit.
	pageWidth, pageHeight = 1280, 720
)

// page is one tab of a browser of its own, with a fresh profile. It writes down all that the page says and asks for.
type page struct {
	t   *testing.T
	ctx context.Context
	url string

	mu       sync.Mutex
	console  []string
	requests []string
}

// openPage opens url in a new browser and returns when it is loaded. The test ends the browser.
func openPage(t *testing.T, url string) *page {
	t.Helper()
	p := &page{t: t, url: url}
	p.ctx = newTab(t, p.hear)
	// The first run starts the browser, which lives as long as that run's context: no time limit here.
	start := chromedp.Func(func(ctx context.Context, tab *chromedp.Target) error {
		if _, err := cdp.Call(ctx, tab, network.Enable, network.EnableParams{}); err != nil {
			return err
		}
		_, err := cdp.Call(ctx, tab, log.Enable, cdp.Empty{})
		return err
	})
	if err := chromedp.Do(p.ctx, start); err != nil {
		t.Fatalf("start the browser: %v", err)
	}
	p.do(chromedp.EmulateViewport(pageWidth, pageHeight), chromedp.Navigate(url))
	return p
}

// newTab starts a browser. Whatever it or a page asks of another machine goes to a proxy that refuses.
func newTab(t *testing.T, hear func(any)) context.Context {
	refuse := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		http.Error(w, "nothing leaves this machine", http.StatusForbidden)
	}))
	t.Cleanup(refuse.Close)
	options := []chromedp.ExecAllocatorOption{
		chromedp.ExecPath(browserPath(t)),
		chromedp.Flag("proxy-server", refuse.URL),
	}
	for _, flag := range []string{"headless", "no-sandbox", "disable-gpu", "disable-quic", "no-first-run",
		"disable-background-networking", "disable-component-update", "disable-sync", "disable-default-apps",
		"disable-dev-shm-usage"} {
		options = append(options, chromedp.Flag(flag, true))
	}
	browser, stop := chromedp.NewExecAllocator(context.Background(), options...)
	t.Cleanup(stop)
	ctx, cancel := chromedp.NewContext(browser, chromedp.WithListener(hear))
	t.Cleanup(cancel)
	return ctx
}

// browserPath finds Chromium. Without it nothing here can be tested, so its absence is a failure.
func browserPath(t *testing.T) string {
	t.Helper()
	for _, name := range []string{os.Getenv("TORRLOOM_BROWSER"), "chromium", "chromium-browser", "google-chrome"} {
		if path, err := exec.LookPath(name); name != "" && err == nil {
			return path
		}
	}
	t.Fatal("no Chromium found; install it, or name it in TORRLOOM_BROWSER")
	return ""
}

// hear writes down console lines, exceptions and requests.
func (p *page) hear(event any) {
	switch e := event.(type) {
	case *runtime.EventConsoleAPICalled:
		p.note(&p.console, fmt.Sprintf("console.%s: %s", e.Type, argumentTexts(e.Args)))
	case *runtime.EventExceptionThrown:
		p.note(&p.console, "exception: "+exceptionText(e.ExceptionDetails))
	case *log.EventEntryAdded:
		p.note(&p.console, fmt.Sprintf("log %s: %s %s", e.Entry.Level, e.Entry.Text, e.Entry.URL))
	case *network.EventRequestWillBeSent:
		if !p.isOwn(e.Request.URL) {
			p.note(&p.requests, e.Request.Method+" "+e.Request.URL)
		}
	case *network.EventWebSocketCreated:
		p.note(&p.requests, "socket "+e.URL)
	}
}

func (p *page) note(notes *[]string, line string) {
	p.mu.Lock()
	defer p.mu.Unlock()
	*notes = append(*notes, line)
}

// isOwn tells the page itself, and what it holds within itself, from any other place.
func (p *page) isOwn(url string) bool {
	return url == p.url || strings.HasPrefix(url, "data:") || strings.HasPrefix(url, "blob:")
}

func argumentTexts(arguments []*runtime.RemoteObject) string {
	var texts []string
	for _, a := range arguments {
		texts = append(texts, fmt.Sprint(string(a.Value), a.Description))
	}
	return strings.Join(texts, " ")
}

func exceptionText(details *runtime.ExceptionDetails) string {
	if details.Exception != nil {
		return details.Text + " " + details.Exception.Description
	}
	return details.Text
}

// do runs actions and fails the test on the first error.
func (p *page) do(actions ...chromedp.Action[chromedp.Void]) {
	p.t.Helper()
	ctx, cancel := context.WithTimeout(p.ctx, patience)
	defer cancel()
	if err := chromedp.Do(ctx, actions...); err != nil {
		p.t.Fatalf("in the browser: %v\n%s", err, p.said())
	}
}

// said returns all console lines, for a failure's message.
func (p *page) said() string {
	p.mu.Lock()
	defer p.mu.Unlock()
	return "the page said:\n  " + strings.Join(p.console, "\n  ")
}

// evaluate returns the value of a JavaScript expression, after its promise if it is one.
func evaluate[T any](p *page, expression string) T {
	p.t.Helper()
	ctx, cancel := context.WithTimeout(p.ctx, patience)
	defer cancel()
	value, err := chromedp.Run(ctx, chromedp.Evaluate[T](expression, chromedp.EvalAwaitPromise))
	if err != nil {
		p.t.Fatalf("evaluate %s: %v\n%s", expression, err, p.said())
	}
	return value
}

// waitFor returns when the JavaScript condition holds, and fails the test when it does not come to hold.
func (p *page) waitFor(condition string) {
	p.t.Helper()
	for end := time.Now().Add(patience); time.Now().Before(end); time.Sleep(20 * time.Millisecond) {
		if evaluate[bool](p, "Boolean("+condition+")") {
			return
		}
	}
	p.screenshot("failed")
	p.t.Fatalf("waited in vain for %s\n%s", condition, p.said())
}

// click presses the first element that matches the CSS selector.
func (p *page) click(selector string) {
	p.t.Helper()
	p.do(chromedp.Click(chromedp.CSS(selector), chromedp.NodeVisible))
}

// press types keys at the element that has the focus. Named keys are in package kb.
func (p *page) press(keys string, options ...chromedp.KeyOption) {
	p.t.Helper()
	p.do(chromedp.KeyEvent(keys, options...))
}

// giveFiles puts files into a file input, as its dialog would.
func (p *page) giveFiles(selector string, paths ...string) {
	p.t.Helper()
	p.do(chromedp.SetUploadFiles(chromedp.CSS(selector), paths))
}

// screenshot saves what is seen as NAME.png in the folder TORRLOOM_SHOTS, else in one that the test removes.
func (p *page) screenshot(name string) {
	p.t.Helper()
	folder := os.Getenv("TORRLOOM_SHOTS")
	if folder == "" {
		folder = p.t.TempDir()
	}
	picture, err := chromedp.Run(p.ctx, chromedp.CaptureScreenshot())
	if err != nil {
		p.t.Fatalf("screenshot: %v", err)
	}
	path := filepath.Join(folder, name+".png")
	if err := os.MkdirAll(folder, 0o755); err != nil {
		p.t.Fatal(err)
	}
	if err := os.WriteFile(path, picture, 0o644); err != nil {
		p.t.Fatal(err)
	}
	p.t.Logf("screenshot: %s", path)
}

// demandSilence fails the test if page or workers have written to the console or asked for anything outside.
func (p *page) demandSilence() {
	p.t.Helper()
	p.hearWorkers()
	p.mu.Lock()
	defer p.mu.Unlock()
	for _, line := range p.console {
		p.t.Errorf("console line: %s", line)
	}
	for _, request := range p.requests {
		p.t.Errorf("request to elsewhere: %s", request)
	}
}

// hearWorkers attaches to the workers of the page, which then repeat their console lines.
func (p *page) hearWorkers() {
	p.t.Helper()
	for _, id := range p.workers() {
		if err := p.hearWorker(id); err != nil && !p.ends(id) {
			p.t.Fatalf("listen to worker %s: %v", id, err)
		}
	}
}

// ends tells whether a worker ends by itself: the browser lists one that was stopped for some seconds more.
func (p *page) ends(id target.ID) bool {
	p.t.Helper()
	for end := time.Now().Add(patience); time.Now().Before(end); time.Sleep(100 * time.Millisecond) {
		if !slices.Contains(p.workers(), id) {
			return true
		}
	}
	return false
}

func (p *page) workers() []target.ID {
	p.t.Helper()
	targets, err := chromedp.Targets(p.ctx)
	if err != nil {
		p.t.Fatalf("list the workers: %v", err)
	}
	var ids []target.ID
	for _, info := range targets {
		if info.Type == "worker" {
			ids = append(ids, info.TargetID)
		}
	}
	return ids
}

// hearWorker gives up after a while, because a worker that is being stopped may never answer.
func (p *page) hearWorker(id target.ID) error {
	limited, cancel := context.WithTimeout(p.ctx, patience/3)
	p.t.Cleanup(cancel)
	ctx, cancel := chromedp.NewContext(limited, chromedp.WithTargetID(id), chromedp.WithListener(p.hear))
	p.t.Cleanup(cancel)
	_, err := chromedp.Run(ctx, chromedp.Evaluate[int]("1"))
	return err
}
