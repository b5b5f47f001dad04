package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"os"
	"path/filepath"
)

// largestPage keeps the file one that can be mailed and that starts in a second and a half.
const largestPage = 4 << 20

// page is the finished file and the policy that it states.
type page struct {
	html   []byte
	policy string
}

func runSite(root string, _ []string) error {
	p, err := makePage(root)
	if err != nil {
		return err
	}
	return writePage(root, p)
}

// makePage builds the whole page from the sources. The same sources give the same bytes.
func makePage(root string) (page, error) {
	if err := installLibraries(root); err != nil {
		return page{}, err
	}
	if err := renewWireTypes(root); err != nil {
		return page{}, err
	}
	id, err := sourceID(root)
	if err != nil {
		return page{}, err
	}
	module, err := compileEngine(root, id)
	if err != nil {
		return page{}, err
	}
	b, err := bundleSite(root)
	if err != nil {
		return page{}, err
	}
	return assemble(root, b, module)
}

// assemble fills the template, then checks the result against its own rules.
func assemble(root string, b bundle, module []byte) (page, error) {
	template, err := os.ReadFile(filepath.Join(root, "site", "index.html"))
	if err != nil {
		return page{}, err
	}
	licences, err := licenceTexts(root, b.packages)
	if err != nil {
		return page{}, err
	}
	policy := securityPolicy([]string{b.script}, append([]string{b.style}, chartStyles...))
	text, err := fill(string(template), map[string]string{
		"policy": policy, "style": b.style, "script": b.script,
		"module": packModule(module), "licences": licences,
	})
	if err != nil {
		return page{}, err
	}
	if found := scan(withoutDataBlocks(text)); len(found) > 0 {
		return page{}, fmt.Errorf("the page holds what could reach the network:\n%s", list(found))
	}
	if len(text) > largestPage {
		return page{}, fmt.Errorf("the page has %d bytes, the limit is %d; leave a library out", len(text), largestPage)
	}
	return page{html: []byte(text), policy: policy}, nil
}

// writePage puts the page in place in one step, so that a reader never sees half of it, and prints how to know it again.
func writePage(root string, p page) error {
	path := filepath.Join(root, "out", "torrloom.html")
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return err
	}
	if err := replaceFile(path, p.html); err != nil {
		return err
	}
	sum := sha256.Sum256(p.html)
	fmt.Printf("out/torrloom.html: %d bytes, SHA-256 %s\n", len(p.html), hex.EncodeToString(sum[:]))
	return nil
}

// replaceFile writes content to path in one step. It leaves a file that holds it already as it is.
func replaceFile(path string, content []byte) error {
	if old, err := os.ReadFile(path); err == nil && bytes.Equal(old, content) {
		return nil
	}
	temporary, err := os.CreateTemp(filepath.Dir(path), ".writing-*")
	if err != nil {
		return err
	}
	defer os.Remove(temporary.Name())
	if _, err := temporary.Write(content); err != nil {
		return err
	}
	if err := temporary.Chmod(0o644); err != nil {
		return err
	}
	if err := temporary.Close(); err != nil {
		return err
	}
	return os.Rename(temporary.Name(), path)
}
