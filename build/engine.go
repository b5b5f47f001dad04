package main

import (
	"bytes"
	"compress/gzip"
	"crypto/sha256"
	"encoding/base64"
	"encoding/hex"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"

	"torrloom/wasm/wire"
)

// sourceFolders are what the page is made from.
var sourceFolders = []string{"recon", "wasm", "site", "build"}

// renewWireTypes writes site/wire.gen.ts from the message types.
func renewWireTypes(root string) error {
	return replaceFile(filepath.Join(root, "site", "wire.gen.ts"), []byte(wire.TypeScript(wire.Exchanges)))
}

// compileEngine returns the engine as WebAssembly, stamped with the id.
func compileEngine(root, id string) ([]byte, error) {
	folder, err := os.MkdirTemp("", "torrloom-engine-")
	if err != nil {
		return nil, err
	}
	defer os.RemoveAll(folder)
	path := filepath.Join(folder, "engine.wasm")
	stamp := "-s -w -buildid= -X main.build=" + id
	environment := append([]string{"GOFLAGS="}, wasmPlatform...)
	build := command(root, environment, "go", "build", "-trimpath", "-buildvcs=false", "-ldflags", stamp, "-o", path, "./wasm")
	if err := build.Run(); err != nil {
		return nil, fmt.Errorf("the engine does not compile: %w", err)
	}
	return os.ReadFile(path)
}

// packModule returns base64 of the module's gzip. The gzip header holds no time, so that equal modules stay equal.
func packModule(module []byte) string {
	var packed bytes.Buffer
	w, err := gzip.NewWriterLevel(&packed, gzip.BestCompression)
	if err != nil {
		panic(err)
	}
	if _, err := w.Write(module); err != nil {
		panic(err)
	}
	if err := w.Close(); err != nil {
		panic(err)
	}
	return base64.StdEncoding.EncodeToString(packed.Bytes())
}

// sourceID returns 12 hex digits of the SHA-256 over all sources and the compiler's version. It does not depend on git,
// so that an unpacked archive gives the same page as a clone.
func sourceID(root string) (string, error) {
	sum := sha256.New()
	fmt.Fprintln(sum, runtime.Version())
	paths, err := sourcePaths(root)
	if err != nil {
		return "", err
	}
	for _, path := range paths {
		content, err := os.ReadFile(filepath.Join(root, path))
		if err != nil {
			return "", err
		}
		fmt.Fprintf(sum, "%s %d\n", path, len(content))
		sum.Write(content)
	}
	return hex.EncodeToString(sum.Sum(nil))[:12], nil
}

// sourcePaths lists the files that reach the page, in the order of their names.
func sourcePaths(root string) ([]string, error) {
	paths := []string{"go.mod", "go.sum"}
	for _, folder := range sourceFolders {
		err := fs.WalkDir(os.DirFS(root), folder, func(path string, entry fs.DirEntry, err error) error {
			if err != nil {
				return err
			}
			if entry.IsDir() && skippedFolder(entry.Name()) {
				return fs.SkipDir
			}
			if isSource(entry) {
				paths = append(paths, path)
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return paths, nil
}

func skippedFolder(name string) bool {
	return name == "node_modules" || name == "e2e" || name == "testdata"
}

func isSource(entry fs.DirEntry) bool {
	name := entry.Name()
	return entry.Type().IsRegular() && !strings.HasPrefix(name, ".") && !strings.HasSuffix(name, "_test.go")
}
