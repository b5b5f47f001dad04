package main

import (
	"fmt"
	"os"
	"os/exec"
	"strings"
)

// tool is something that the tests need and that does not come with Go. A test that lacks it fails.
type tool struct {
	what   string
	debian []string // packages
	probe  []string // a command that succeeds when it is there
}

var tools = []tool{
	{"Node.js 20 or later", []string{"nodejs", "npm"},
		[]string{"node", "-e", "process.exit(parseInt(process.versions.node) < 20 ? 1 : 0)"}},
	{"npm", []string{"npm"}, []string{"npm", "--version"}},
	{"Chromium", []string{"chromium"}, []string{"chromium", "--version"}},
	{"Python with NumPy", []string{"python3-numpy"}, []string{"/usr/bin/python3", "-c", "import numpy"}},
	{"SciPy", []string{"python3-scipy"}, []string{"/usr/bin/python3", "-c", "import scipy"}},
	{"scikit-image", []string{"python3-skimage"}, []string{"/usr/bin/python3", "-c", "import skimage"}},
	{"NiBabel", []string{"python3-nibabel"}, []string{"/usr/bin/python3", "-c", "import nibabel"}},
}

// installTools installs what is missing, where that can be done unasked: as root on Debian, and npm's packages in the
// page's own folder. Errors: names everything that somebody has to install.
func installTools(root string) error {
	missing := missingTools()
	if len(missing) > 0 && os.Getuid() == 0 && onDebian() {
		if err := installOnDebian(root, missing); err != nil {
			return err
		}
		missing = missingTools()
	}
	if len(missing) > 0 {
		return fmt.Errorf("missing: %s", describe(missing))
	}
	return installLibraries(root)
}

func missingTools() []tool {
	var missing []tool
	for _, t := range tools {
		if exec.Command(t.probe[0], t.probe[1:]...).Run() != nil {
			missing = append(missing, t)
		}
	}
	return missing
}

func onDebian() bool {
	_, err := os.Stat("/etc/debian_version")
	return err == nil
}

func installOnDebian(root string, missing []tool) error {
	quiet := []string{"DEBIAN_FRONTEND=noninteractive"}
	if err := command(root, quiet, "apt-get", "-qq", "update").Run(); err != nil {
		return fmt.Errorf("apt-get update: %w", err)
	}
	arguments := []string{"-qq", "install", "-y", "--no-install-recommends"}
	for _, t := range missing {
		arguments = append(arguments, t.debian...)
	}
	if err := command(root, quiet, "apt-get", arguments...).Run(); err != nil {
		return fmt.Errorf("apt-get install: %w; missing: %s", err, describe(missing))
	}
	return nil
}

func describe(missing []tool) string {
	var texts []string
	for _, t := range missing {
		texts = append(texts, fmt.Sprintf("%s (on Debian: apt-get install %s)", t.what, strings.Join(t.debian, " ")))
	}
	return strings.Join(texts, ", ")
}
