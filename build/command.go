package main

import (
	"fmt"
	"os"
	"os/exec"
	"strings"
)

// command returns a command in dir whose output is seen, with environment added to this program's own.
func command(dir string, environment []string, name string, arguments ...string) *exec.Cmd {
	c := exec.Command(name, arguments...)
	c.Dir, c.Stdout, c.Stderr = dir, os.Stdout, os.Stderr
	c.Env = append(os.Environ(), environment...)
	return c
}

// output runs a command and returns what it printed, without the space around it.
func output(dir, name string, arguments ...string) (string, error) {
	c := command(dir, nil, name, arguments...)
	c.Stdout = nil
	text, err := c.Output()
	if err != nil {
		return "", fmt.Errorf("%s %s: %w", name, strings.Join(arguments, " "), err)
	}
	return strings.TrimSpace(string(text)), nil
}
