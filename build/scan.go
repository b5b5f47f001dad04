package main

import (
	"fmt"
	"regexp"
	"strings"
)

// forbidden is one way of reaching the network, or of leaving the page with data in the address. Most are refused by
// the security policy as well; this looks at what is shipped, where the policy has gaps. Allowed matches are whole
// texts that somebody has read, each with its reason.
type forbidden struct {
	what    string
	pattern *regexp.Regexp
	allowed []string
}

var forbiddenTexts = []forbidden{
	{"peer connection", regexp.MustCompile(`\w*RTC(PeerConnection|DataChannel)`), nil},
	{"early connection", regexp.MustCompile(`preconnect|prefetch|prerender|modulepreload|speculationrules`), nil},
	{"new window", regexp.MustCompile(`\b(window|globalThis|self|top|parent)\.open\b`), nil},
	// A call of open, as against a method of that name, whose arguments a brace follows.
	{"new window", regexp.MustCompile(`[^.\w$]open\(([^()]*\)([^{]|$)|[^()]*\()`), nil},
	{"navigation", regexp.MustCompile(`\blocation\s*=[^=]|\blocation\.(href\s*=[^=]|assign|replace)|\.navigate\(`), nil},
	{"refresh", regexp.MustCompile(`(?i)http-equiv=.?refresh`), nil},
	{"socket", regexp.MustCompile(`WebSocket|WebTransport|EventSource`), nil},
	{"beacon", regexp.MustCompile(`sendBeacon`), nil},
	{"request", regexp.MustCompile(`XMLHttpRequest|\bfetch\b`), nil},
	{"loaded script", regexp.MustCompile(`importScripts|\bimport\(|serviceWorker`), nil},
	{"foreign address", regexp.MustCompile(`(?i)\b(https?|wss?|ftp)://[^\s"'` + "`" + `)<>]*`), []string{
		// Names of XML vocabularies. They are compared and never asked for.
		"http://www.w3.org/2000/svg", "http://www.w3.org/1999/xhtml", "http://www.w3.org/1999/xlink",
		"http://www.w3.org/XML/1998/namespace", "http://www.w3.org/2000/xmlns/", "http://www.w3.org/1998/Math/MathML",
	}},
	{"foreign address", regexp.MustCompile("[\"'`(]//[a-z0-9-]+\\.[a-z]"), nil},
}

// scan returns what in text is forbidden and not allowed, each with the text around it.
func scan(text string) []string {
	var found []string
	for _, f := range forbiddenTexts {
		for _, at := range f.pattern.FindAllStringIndex(text, -1) {
			if !contains(f.allowed, text[at[0]:at[1]]) {
				found = append(found, fmt.Sprintf("%s: …%s…", f.what, around(text, at[0], at[1])))
			}
		}
	}
	return found
}

func around(text string, from, to int) string {
	const context = 60
	return strings.ToValidUTF8(text[max(0, from-context):min(len(text), to+context)], "")
}

func contains(all []string, one string) bool {
	for _, s := range all {
		if s == one {
			return true
		}
	}
	return false
}

func list(lines []string) string {
	return "  " + strings.Join(lines, "\n  ")
}
