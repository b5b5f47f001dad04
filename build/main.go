// Command build makes, serves and checks Torrloom:
//
//	go run ./build site    writes out/torrloom.html, the whole program in one file
//	go run ./build serve   makes it and serves it on this machine
//	go run ./build check   runs every test; what a change has to pass
//	go run ./build bench   times it in Chromium, natively and beside peers
//
// To add a verb: a file of its name and a row in verbs.
package main

import (
	"fmt"
	"os"
	"path/filepath"
)

type verb struct {
	name, does string
	run        func(root string, arguments []string) error
}

var verbs = []verb{
	{"site", "write out/torrloom.html", runSite},
	{"serve", "make it and serve it on this machine; -port N", runServe},
	{"check", "run every test", runCheck},
	{"bench", "time it beside peers and write build/bench.md; -repeats N, -large=false", runBench},
}

func main() {
	if err := run(os.Args[1:]); err != nil {
		fmt.Fprintln(os.Stderr, "build:", err)
		os.Exit(1)
	}
}

func run(arguments []string) error {
	root, err := findRoot()
	if err != nil {
		return err
	}
	if len(arguments) > 0 {
		for _, v := range verbs {
			if v.name == arguments[0] {
				return v.run(root, arguments[1:])
			}
		}
	}
	return usage()
}

func usage() error {
	text := "usage: go run ./build VERB, where VERB is"
	for _, v := range verbs {
		text += fmt.Sprintf("\n  %-6s %s", v.name, v.does)
	}
	return fmt.Errorf("%s", text)
}

// findRoot returns the nearest folder upward that holds go.mod.
func findRoot() (string, error) {
	folder, err := os.Getwd()
	if err != nil {
		return "", err
	}
	for {
		if _, err := os.Stat(filepath.Join(folder, "go.mod")); err == nil {
			return folder, nil
		}
		if filepath.Dir(folder) == folder {
			return "", fmt.Errorf("no go.mod in this folder or above it; run from within the repository")
		}
		folder = filepath.Dir(folder)
	}
}
