package main

import (
	"crypto/sha256"
	"encoding/base64"
	"fmt"
	"strings"
)

// chartStyles are the two texts that @observablehq/plot 0.6.17 writes into a <style> of every chart and of every colour
// ramp. They are constant; the page's tests draw both and see no refusal.
var chartStyles = []string{
	`:where(.plot-d6a7b5) {
  --plot-background: white;
  display: block;
  height: auto;
  height: intrinsic;
  max-width: 100%;
}
:where(.plot-d6a7b5 text),
:where(.plot-d6a7b5 tspan) {
  white-space: pre;
}`,
	`:where(.plot-d6a7b5-ramp) {
  display: block;
  height: auto;
  height: intrinsic;
  max-width: 100%;
  overflow: visible;
}
:where(.plot-d6a7b5-ramp text) {
  white-space: pre;
}`,
}

// securityPolicy returns the Content-Security-Policy under which exactly these script and style texts run, engines may
// be compiled and started as workers, and nothing can be asked of any network.
func securityPolicy(scripts, styles []string) string {
	return strings.Join([]string{
		"default-src 'none'",
		"script-src " + hashes(scripts) + " 'wasm-unsafe-eval'",
		"style-src " + hashes(styles),
		"worker-src blob:",
		"connect-src 'none'",
		"img-src data: blob:",
		"font-src 'none'",
		"base-uri 'none'",
		"form-action 'none'",
		"object-src 'none'",
		"frame-src 'none'",
	}, "; ")
}

func hashes(texts []string) string {
	all := make([]string, len(texts))
	for i, text := range texts {
		sum := sha256.Sum256([]byte(text))
		all[i] = fmt.Sprintf("'sha256-%s'", base64.StdEncoding.EncodeToString(sum[:]))
	}
	return strings.Join(all, " ")
}
