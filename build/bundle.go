package main

import (
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"sort"
	"strings"

	"github.com/evanw/esbuild/pkg/api"
)

// bundle is the page's own code, and the folders of the libraries in it, relative to site/.
type bundle struct {
	script, style string
	packages      []string
}

// bundleSite bundles site/main.ts and the style sheets that it imports. The worker's script reaches it as the module
// "torrloom:worker".
func bundleSite(root string) (bundle, error) {
	worker, err := workerScript(root)
	if err != nil {
		return bundle{}, err
	}
	options := bundling(root, "main.ts")
	options.Plugins = []api.Plugin{textModule("torrloom:worker", worker)}
	result := api.Build(options)
	if err := messages(result.Errors); err != nil {
		return bundle{}, err
	}
	b := bundle{packages: packagesIn(result.Metafile)}
	for _, file := range result.OutputFiles {
		switch filepath.Ext(file.Path) {
		case ".js":
			b.script = strings.TrimSpace(string(file.Contents))
		case ".css":
			b.style = strings.TrimSpace(string(file.Contents))
		}
	}
	if b.script == "" || b.style == "" {
		return bundle{}, fmt.Errorf("site/main.ts must exist and import \"./style.css\"")
	}
	return b, nil
}

// workerScript returns Go's own loader and engine/worker.ts as one script.
func workerScript(root string) (string, error) {
	goRoot, err := output(root, "go", "env", "GOROOT")
	if err != nil {
		return "", err
	}
	loader, err := os.ReadFile(filepath.Join(goRoot, "lib", "wasm", "wasm_exec.js"))
	if err != nil {
		return "", err
	}
	small := api.Transform(string(loader), api.TransformOptions{
		MinifyWhitespace: true, MinifyIdentifiers: true, MinifySyntax: true, Target: api.ES2022,
	})
	if err := messages(small.Errors); err != nil {
		return "", err
	}
	own := api.Build(bundling(root, "engine/worker.ts"))
	if err := messages(own.Errors); err != nil {
		return "", err
	}
	return string(small.Code) + string(own.OutputFiles[0].Contents), nil
}

func bundling(root, entry string) api.BuildOptions {
	site := filepath.Join(root, "site")
	return api.BuildOptions{
		AbsWorkingDir:     site,
		EntryPoints:       []string{entry},
		Outdir:            filepath.Join(site, "bundled"),
		Bundle:            true,
		Metafile:          true,
		Format:            api.FormatIIFE,
		Target:            api.ES2022,
		Charset:           api.CharsetUTF8,
		LegalComments:     api.LegalCommentsNone,
		MinifyWhitespace:  true,
		MinifyIdentifiers: true,
		MinifySyntax:      true,
		JSX:               api.JSXAutomatic,
		JSXImportSource:   "preact",
		Loader:            map[string]api.Loader{".svg": api.LoaderDataURL},
		LogLevel:          api.LogLevelWarning,
	}
}

// textModule is a plugin that makes text the default export of the module called name.
func textModule(name, text string) api.Plugin {
	return api.Plugin{Name: name, Setup: func(build api.PluginBuild) {
		build.OnResolve(api.OnResolveOptions{Filter: "^" + name + "$"},
			func(api.OnResolveArgs) (api.OnResolveResult, error) {
				return api.OnResolveResult{Path: name, Namespace: "made"}, nil
			})
		build.OnLoad(api.OnLoadOptions{Filter: "^" + name + "$", Namespace: "made"},
			func(api.OnLoadArgs) (api.OnLoadResult, error) {
				return api.OnLoadResult{Contents: &text, Loader: api.LoaderText}, nil
			})
	}}
}

func messages(all []api.Message) error {
	if len(all) == 0 {
		return nil
	}
	texts := api.FormatMessages(all, api.FormatMessagesOptions{Kind: api.ErrorMessage})
	return fmt.Errorf("the page does not bundle:\n%s", strings.Join(texts, ""))
}

// packagesIn returns the library folders that the bundle took files from, sorted.
func packagesIn(metafile string) []string {
	var meta struct {
		Inputs map[string]json.RawMessage `json:"inputs"`
	}
	if err := json.Unmarshal([]byte(metafile), &meta); err != nil {
		panic(err)
	}
	seen := map[string]bool{}
	for path := range meta.Inputs {
		if folder := packageFolder(path); folder != "" {
			seen[folder] = true
		}
	}
	folders := make([]string, 0, len(seen))
	for folder := range seen {
		folders = append(folders, folder)
	}
	sort.Strings(folders)
	return folders
}

// packageFolder returns node_modules/name or node_modules/@scope/name of a file, or "" for a file of our own.
func packageFolder(path string) string {
	const libraries = "node_modules/"
	at := strings.LastIndex(path, libraries)
	if at < 0 {
		return ""
	}
	parts := strings.Split(path[at+len(libraries):], "/")
	names := 1
	if strings.HasPrefix(parts[0], "@") {
		names = 2
	}
	return path[:at+len(libraries)] + strings.Join(parts[:names], "/")
}
