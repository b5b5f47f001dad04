package main

import (
	"fmt"
	"html"
	"os"
	"path/filepath"
	"strings"
)

// licenceTexts returns the licences of Go's library and of the packages in the page, each under its name. Their terms
// ask that a copy carries them.
func licenceTexts(root string, packages []string) (string, error) {
	goRoot, err := output(root, "go", "env", "GOROOT")
	if err != nil {
		return "", err
	}
	var all strings.Builder
	if err := addLicence(&all, "The Go library", goRoot); err != nil {
		return "", err
	}
	for _, folder := range packages {
		name := folder[strings.LastIndex(folder, "node_modules/")+len("node_modules/"):]
		if err := addLicence(&all, name, filepath.Join(root, "site", folder)); err != nil {
			return "", err
		}
	}
	return all.String(), nil
}

func addLicence(all *strings.Builder, name, folder string) error {
	for _, pattern := range []string{"LICENSE*", "LICENCE*", "license*", "licence*", "COPYING*"} {
		paths, err := filepath.Glob(filepath.Join(folder, pattern))
		if err != nil || len(paths) == 0 {
			continue
		}
		text, err := os.ReadFile(paths[0])
		if err != nil {
			return err
		}
		fmt.Fprintf(all, "%s\n\n%s\n\n", name, html.EscapeString(strings.TrimSpace(string(text))))
		return nil
	}
	return fmt.Errorf("%s has no licence text in %s; it may not be shipped so", name, folder)
}
