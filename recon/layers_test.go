//go:build !js

package recon_test

import (
	"encoding/json"
	"errors"
	"io"
	"os"
	"os/exec"
	"strings"
	"testing"
)

const module = "torrloom/"

// lines says how high each package stands. A package may import only what stands on a lower line, so that a reader can
// go from the bottom to the top and never meet what was not yet explained.
var lines = map[string]int{
	"recon":              0,
	"recon/fault":        -1, // under the lowest line, because everything reports with it
	"recon/fft":          0,
	"recon/volume":       1,
	"recon/nufft":        1,
	"recon/acquisition":  2,
	"recon/phantom":      3,
	"recon/importer":     3,
	"recon/condition":    3,
	"recon/quality":      5, // judges what conditioning measures, shares of directions and rates; proposes settings
	"recon/forward":      2,
	"recon/sampling":     3,
	"recon/backproject":  4,
	"recon/gridding":     4,
	"recon/singlepoint":  4,
	"recon/leastsquares": 4,
	"recon/relax":        4,
	"recon/oxygen":       4,
	"recon/region":       5,
	"recon/compare":      5,
	"recon/exporter":     5,
	"recon/recipe":       6,
	"recon/session":      7,
	"recon/cmd/torrloom": 8,
	"wasm/wire":          9,
	"wasm":               10,
}

type listed struct {
	ImportPath                string
	Name                      string
	Imports                   []string
	TestImports, XTestImports []string
}

func TestPackagesImportOnlyFromLowerLines(t *testing.T) {
	for _, p := range listPackages(t) {
		own, known := lines[strings.TrimPrefix(p.ImportPath, module)]
		if !known {
			t.Errorf("%s stands on no line; give it one in layers_test.go", p.ImportPath)
			continue
		}
		for _, imported := range p.Imports {
			name, ours := strings.CutPrefix(imported, module)
			if ours && lines[name] >= own {
				t.Errorf("%s (line %d) imports %s (line %d), wanted a lower line", p.ImportPath, own, imported, lines[name])
			}
		}
	}
}

// TestReconIsPureGo keeps the engine free of the browser and of libraries other than gonum.
func TestReconIsPureGo(t *testing.T) {
	for _, p := range listPackages(t) {
		if !strings.HasPrefix(p.ImportPath, module+"recon") {
			continue
		}
		for _, imported := range append(append(p.Imports, p.TestImports...), p.XTestImports...) {
			library := strings.Contains(strings.Split(imported, "/")[0], ".")
			allowed := strings.HasPrefix(imported, "gonum.org/v1/gonum/")
			if imported == "syscall/js" || imported == "C" || imported == "unsafe" || library && !allowed {
				t.Errorf("%s imports %s; recon is plain Go with the standard library and gonum", p.ImportPath, imported)
			}
		}
	}
}

// listPackages lists the packages as js/wasm sees them, so that files behind build tags are seen.
func listPackages(t *testing.T) []listed {
	t.Helper()
	list := exec.Command("go", "list", "-json=ImportPath,Name,Imports,TestImports,XTestImports", "./recon/...", "./wasm/...")
	list.Dir = ".."
	list.Env = append(os.Environ(), "GOOS=js", "GOARCH=wasm")
	list.Stderr = os.Stderr
	text, err := list.Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	var all []listed
	for decoder := json.NewDecoder(strings.NewReader(string(text))); ; {
		var p listed
		if err := decoder.Decode(&p); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatal(err)
		}
		all = append(all, p)
	}
	if len(all) < 5 {
		t.Fatalf("go list found %d packages, wanted the engine", len(all))
	}
	return all
}
