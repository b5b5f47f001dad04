//go:build !js

package main

import (
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"testing"
)

// The script of the README writes a file that opens with no questions and gives the invented R1 and pO2.
func TestReadmeScriptWritesAFileThatOpens(t *testing.T) {
	readme, err := os.ReadFile("../../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	script := regexp.MustCompile("(?s)```python\n(.*?)```").FindSubmatch(readme)
	if script == nil {
		t.Fatal("the README holds no script")
	}
	folder := t.TempDir()
	cmd := exec.Command("/usr/bin/python3", "-c", string(script[1]))
	cmd.Dir = folder
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Fatalf("%v (apt-get install python3-numpy)\n%s", err, out)
	}
	if code, _, stderr := run("run", "-out", folder, filepath.Join(folder, "ball.npz")); code != exitDone {
		t.Fatal(stderr)
	}
	r := readRecord(t, filepath.Join(folder, "ball"))
	// Invented: R1 = 0.4 /µs, pO2 = (0.4 - 0.15)/0.0065 = 38.46 torr; a median over thousands of voxels.
	if !(math.Abs(r.Rate.Median-0.4) <= 0.004) || !(math.Abs(r.PO2.Median-38.46) <= 0.6) {
		t.Errorf("median R1 %.4f, median pO2 %.2f", r.Rate.Median, r.PO2.Median)
	}
}
