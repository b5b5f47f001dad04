// Package e2e drives the finished page in a real browser, as a person would. It builds and serves the page with the
// build program itself, so that what is tested is what is handed out.
//
// To add a test: open a page with openPage, act with its methods, and end with demandSilence, which fails on any
// console line and on any request that went elsewhere.
package e2e

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// served is the address of the page.
var served string

func TestMain(m *testing.M) {
	code, err := serveAndRun(m)
	if err != nil {
		fmt.Fprintln(os.Stderr, "e2e:", err)
		code = 1
	}
	os.Exit(code)
}

func serveAndRun(m *testing.M) (int, error) {
	folder, err := os.MkdirTemp("", "torrloom-e2e-")
	if err != nil {
		return 1, err
	}
	defer os.RemoveAll(folder)
	server, address, err := startServer(folder)
	if err != nil {
		return 1, err
	}
	defer server.Wait()
	defer server.Process.Kill()
	served = address
	return m.Run(), nil
}

// startServer compiles the build program, lets it make and serve the page, and returns once it says where.
func startServer(folder string) (*exec.Cmd, string, error) {
	program := filepath.Join(folder, "build")
	compile := exec.Command("go", "build", "-o", program, "torrloom/build")
	if text, err := compile.CombinedOutput(); err != nil {
		return nil, "", fmt.Errorf("compile the build program: %w\n%s", err, text)
	}
	server := exec.Command(program, "serve", "-port", "0", "-with-parent")
	server.Stderr = os.Stderr
	if _, err := server.StdinPipe(); err != nil { // closed when this program ends, however it ends
		return nil, "", err
	}
	out, err := server.StdoutPipe()
	if err != nil {
		return nil, "", err
	}
	if err := server.Start(); err != nil {
		return nil, "", err
	}
	address, err := readAddress(out)
	if err != nil {
		server.Process.Kill()
		server.Wait()
	}
	return server, address, err
}

func readAddress(out io.Reader) (string, error) {
	lines := bufio.NewScanner(out)
	for lines.Scan() {
		if address, ok := strings.CutPrefix(lines.Text(), "serving "); ok {
			return address, nil
		}
	}
	return "", fmt.Errorf("the page was not built or not served")
}
