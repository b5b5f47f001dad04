package main

import (
	"fmt"
	"os"
	"path/filepath"
)

// installLibraries runs npm ci in site/ when nothing is installed there or the lock file has changed since.
func installLibraries(root string) error {
	site := filepath.Join(root, "site")
	lock, err := os.Stat(filepath.Join(site, "package-lock.json"))
	if err != nil {
		return err
	}
	installed, err := os.Stat(filepath.Join(site, "node_modules", ".package-lock.json"))
	if err == nil && !installed.ModTime().Before(lock.ModTime()) {
		return nil
	}
	if err := command(site, nil, "npm", "ci", "--ignore-scripts").Run(); err != nil {
		return fmt.Errorf("npm ci in site/: %w; Node.js 20 or later with npm is needed", err)
	}
	return nil
}
