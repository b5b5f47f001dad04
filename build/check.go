package main

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"time"

	"torrloom/wasm/wire"
)

// step is one part of the check.
type step struct {
	name string
	run  func(root string) error
}

var steps = []step{
	{"tools", installTools},
	{"format", checkFormat},
	{"vet", goCommand(nil, "vet", "./...")},
	{"vet as wasm", goCommand(wasmPlatform, "vet", "./recon/...", "./wasm/...")},
	{"staticcheck", goCommand(nil, "tool", "staticcheck", "./...")},
	{"staticcheck as wasm", staticcheckAsWasm},
	{"generated types", checkWireTypes},
	{"TypeScript", checkTypeScript},
	{"tests", goCommand(nil, "test", "./recon/...", "./wasm/...", "./build/...")},
	{"tests as wasm", testAsWasm},
	{"page twice the same", checkPageRepeats},
	{"page in a browser", goCommand(nil, "test", "-timeout", "5m", "./site/e2e")},
}

// runCheck runs every step, also after a failure, and ends with a table of what passed.
func runCheck(root string, _ []string) error {
	var table strings.Builder
	failed := 0
	for _, s := range steps {
		fmt.Printf("\n== %s\n", s.name)
		from := time.Now()
		err := s.run(root)
		verdict := "pass"
		if err != nil {
			verdict = "FAIL  " + firstLine(err)
			failed++
			fmt.Println(err)
		}
		fmt.Fprintf(&table, "%-20s %6.1f s  %s\n", s.name, time.Since(from).Seconds(), verdict)
	}
	fmt.Printf("\n%s", table.String())
	if failed > 0 {
		return fmt.Errorf("%d of %d steps failed", failed, len(steps))
	}
	return nil
}

func firstLine(err error) string {
	line, _, _ := strings.Cut(err.Error(), "\n")
	return line
}

// wasmPlatform makes Go work for the platform of the page.
var wasmPlatform = []string{"GOOS=js", "GOARCH=wasm"}

func goCommand(environment []string, arguments ...string) func(string) error {
	return func(root string) error {
		return command(root, environment, "go", arguments...).Run()
	}
}

// staticcheckAsWasm looks at the one package that no other platform sees. The tool itself has to be one for this
// machine, so it is asked for before the platform is changed.
func staticcheckAsWasm(root string) error {
	program, err := output(root, "go", "tool", "-n", "staticcheck")
	if err != nil {
		return err
	}
	return command(root, wasmPlatform, program, "./wasm").Run()
}

// testAsWasm runs the engine's own tests as the page would run them, in Node.
func testAsWasm(root string) error {
	goRoot, err := output(root, "go", "env", "GOROOT")
	if err != nil {
		return err
	}
	runner := filepath.Join(goRoot, "lib", "wasm", "go_js_wasm_exec")
	return goCommand(wasmPlatform, "test", "-exec", runner, "./recon/...")(root)
}

func checkFormat(root string) error {
	unformatted, err := output(root, "gofmt", "-l", "recon", "wasm", "build", "site/e2e")
	if err == nil && unformatted != "" {
		err = fmt.Errorf("gofmt would change: %s", strings.ReplaceAll(unformatted, "\n", " "))
	}
	return err
}

func checkWireTypes(root string) error {
	written, err := os.ReadFile(filepath.Join(root, "site", "wire.gen.ts"))
	if err == nil && string(written) != wire.TypeScript(wire.Exchanges) {
		err = errors.New("site/wire.gen.ts does not match wasm/wire; go run ./build site renews it")
	}
	return err
}

func checkTypeScript(root string) error {
	compiler := filepath.Join("node_modules", "typescript", "bin", "tsc")
	return command(filepath.Join(root, "site"), nil, "node", compiler, "--noEmit").Run()
}

func checkPageRepeats(root string) error {
	first, err := makePage(root)
	if err != nil {
		return err
	}
	second, err := makePage(root)
	if err == nil && !bytes.Equal(first.html, second.html) {
		err = errors.New("two builds of the page differ")
	}
	if err != nil {
		return err
	}
	return writePage(root, first)
}
