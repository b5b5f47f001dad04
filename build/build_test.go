package main

import (
	"bytes"
	"compress/gzip"
	"crypto/sha256"
	"encoding/base64"
	"html"
	"io"
	"net"
	"net/http/httptest"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// madePage builds the page once for all tests of it.
func madePage(t *testing.T) page {
	t.Helper()
	root, err := findRoot()
	if err != nil {
		t.Fatal(err)
	}
	p, err := makePage(root)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func TestThePolicyAllowsExactlyWhatThePageHolds(t *testing.T) {
	text := string(madePage(t).html)
	policy := html.UnescapeString(regexp.MustCompile(`<head>\s*<meta http-equiv="Content-Security-Policy" content="([^"]*)">`).
		FindStringSubmatch(text)[1])
	elements := regexp.MustCompile(`(?s)<(script|style)>(.*?)</(?:script|style)>`).FindAllStringSubmatch(text, -1)
	if len(elements) != 2 {
		t.Fatalf("the page has %d script and style elements, wanted one of each", len(elements))
	}
	for _, element := range elements {
		sum := sha256.Sum256([]byte(element[2]))
		wanted := element[1] + "-src 'sha256-" + base64.StdEncoding.EncodeToString(sum[:]) + "'"
		if !strings.Contains(policy, wanted) {
			t.Errorf("the policy %q lacks %s", policy, wanted)
		}
	}
	if hashes := strings.Count(policy, "'sha256-"); hashes != 2+len(chartStyles) {
		t.Errorf("the policy allows %d texts, wanted the page's two and the charts' %d", hashes, len(chartStyles))
	}
	for _, loose := range []string{"'unsafe-", "*", "http"} {
		if strings.Contains(policy, loose) {
			t.Errorf("the policy %q contains %q", policy, loose)
		}
	}
	// A browser looks for the encoding in the first 1024 bytes (HTML Living Standard, 4.2.5.4).
	if at := strings.Index(text, `<meta charset="utf-8">`); at < 0 || at > 1000 {
		t.Errorf("the encoding is stated at byte %d, wanted within the first 1024", at)
	}
}

// TestChartStylesAreThoseOfTheLibrary compares with the library's own source.
func TestChartStylesAreThoseOfTheLibrary(t *testing.T) {
	const source = "../site/node_modules/@observablehq/plot/src/"
	for i, path := range []string{"plot.js", "legends/ramp.js"} {
		text, err := os.ReadFile(filepath.FromSlash(source + path))
		if err != nil {
			t.Fatal(err)
		}
		found := regexp.MustCompile("(?s)append\\(\"style\"\\)\\.text\\(\\s*`(.*?)`").FindSubmatch(text)
		if found == nil {
			t.Fatalf("%s writes no style any more", path)
		}
		if style := strings.ReplaceAll(string(found[1]), "${className}", "plot-d6a7b5"); style != chartStyles[i] {
			t.Errorf("%s writes\n%s\nwanted\n%s", path, style, chartStyles[i])
		}
	}
}

func TestScanCatchesWhatReachesTheNetwork(t *testing.T) {
	for _, planted := range []string{
		`fetch("/x")`, `const f=fetch;`, `new XMLHttpRequest`, `navigator.sendBeacon(u)`, `new WebSocket(u)`,
		`new EventSource(u)`, `new RTCPeerConnection()`, `<link rel=preconnect href=x>`, `window.open(u)`,
		`x=1;open(u)`, `if(open(f(u)))y()`, `location.href=u`, `location=u`, `location.assign(u)`,
		`window.location.replace(u)`, `importScripts(u)`, `import("x")`, `navigator.serviceWorker`,
		`<a href="https://example.org">`, `"http://www.w3.org/2000/svgs"`, `src="//example.org/x"`, `navigation.navigate(u)`,
	} {
		if len(scan("before "+planted+" after")) == 0 {
			t.Errorf("%s was not noticed", planted)
		}
	}
}

func TestScanLeavesTheHarmlessAlone(t *testing.T) {
	for _, harmless := range []string{
		`{open(a,b,c){c()}}`, `engine.open(file)`, `dialog.open=true`, `location.hash`, `fetched`,
		`"http://www.w3.org/2000/svg"`, `allocation=3`, `a/b//c`,
	} {
		if found := scan(harmless); len(found) > 0 {
			t.Errorf("%s was taken for %s", harmless, found)
		}
	}
}

func TestFillRefusesWhatWouldBreakThePage(t *testing.T) {
	good := map[string]string{"a": "1", "b": "2"}
	if text, err := fill("{{a}}-{{b}}", good); err != nil || text != "1-2" {
		t.Errorf("filled %q, %v; wanted 1-2", text, err)
	}
	for name, try := range map[string]struct {
		template string
		texts    map[string]string
	}{
		"an unknown slot":   {"{{a}}{{b}}{{c}}", good},
		"a missing slot":    {"{{a}}", good},
		"a slot twice":      {"{{a}}{{b}}{{b}}", good},
		"an ended script":   {"{{a}}", map[string]string{"a": "</SCRIPT>"}},
		"an opened comment": {"{{a}}", map[string]string{"a": "<!-- "}},
	} {
		if _, err := fill(try.template, try.texts); err == nil {
			t.Errorf("%s was accepted", name)
		}
	}
}

func TestPackedModuleUnpacksToItself(t *testing.T) {
	module := bytes.Repeat([]byte("\x00asm"), 1000)
	packed, err := base64.StdEncoding.DecodeString(packModule(module))
	if err != nil {
		t.Fatal(err)
	}
	reader, err := gzip.NewReader(bytes.NewReader(packed))
	if err != nil {
		t.Fatal(err)
	}
	unpacked, err := io.ReadAll(reader)
	if err != nil || !bytes.Equal(unpacked, module) {
		t.Errorf("unpacked %d bytes, %v; wanted the %d that were packed", len(unpacked), err, len(module))
	}
}

func TestServedPageForbidsFramesAndConnections(t *testing.T) {
	p := page{html: []byte("<p>page"), policy: "default-src 'none'"}
	answer := httptest.NewRecorder()
	p.ServeHTTP(answer, httptest.NewRequest("GET", "/", nil))
	for name, wanted := range map[string]string{
		"Content-Security-Policy": "default-src 'none'; frame-ancestors 'none'",
		"Connection-Allowlist":    "(response-origin)",
		"Content-Type":            "text/html; charset=utf-8",
	} {
		if found := answer.Header().Get(name); found != wanted {
			t.Errorf("%s is %q, wanted %q", name, found, wanted)
		}
	}
	if answer.Body.String() != "<p>page" {
		t.Errorf("the body is %q", answer.Body)
	}
	elsewhere := httptest.NewRecorder()
	p.ServeHTTP(elsewhere, httptest.NewRequest("GET", "/other", nil))
	if elsewhere.Code != 404 {
		t.Errorf("another path answers %d, wanted 404", elsewhere.Code)
	}
}

func TestATakenPortIsPassedOver(t *testing.T) {
	first, err := listen(0)
	if err != nil {
		t.Fatal(err)
	}
	defer first.Close()
	taken := first.Addr().(*net.TCPAddr).Port
	second, err := listen(taken)
	if err != nil {
		t.Fatal(err)
	}
	defer second.Close()
	if port := second.Addr().(*net.TCPAddr).Port; port <= taken || port > taken+portsToTry {
		t.Errorf("port %d was taken and %d was given, wanted one of the next %d", taken, port, portsToTry)
	}
}
