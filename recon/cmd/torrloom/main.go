// Command torrloom runs the chain natively: the same engine as the page, the same numbers.
//
//	torrloom run [-recipe R.json] [-out DIR] [-workers N] FILE...
//	torrloom check [-recipe R.json] [-json] FILE...
//
// Exit codes: 0 done, 2 usage, 3 input refused, 4 nothing could be computed, 5 a finding says stop. Faults go to standard error as
// "where: text", one line each.
package main

import (
	"fmt"
	"io"
	"os"

	"torrloom/recon/fault"
)

// Exit codes.
const (
	exitDone    = 0
	exitUsage   = 2
	exitRefused = 3
	exitNothing = 4
	exitStop    = 5
)

// verb is one word of the command line.
type verb struct {
	name, usage, purpose string
	run                  func(args []string, stdout, stderr io.Writer) int
}

func verbs() []verb {
	return []verb{
		{"run", "run [-recipe R.json] [-out DIR] [-workers N] FILE...", "reconstruct, fit and convert to pO2; writes maps and run.json into DIR/<file stem>/", runFiles},
		{"check", "check [-recipe R.json] [-json] FILE...", "say what is right and wrong with an acquisition; exit code 5 when it must not be used as it is", checkFiles},
		{"demo", "demo [-noise=false] FILE.npz", "write the invented demo acquisition by the field dictionary", writeDemo},
	}
}

// version names the sources; the linker may set it.
var version = "unnamed"

func main() { os.Exit(command(os.Args[1:], os.Stdout, os.Stderr)) }

func command(args []string, stdout, stderr io.Writer) int {
	if len(args) > 0 {
		for _, v := range verbs() {
			if v.name == args[0] {
				return v.run(args[1:], stdout, stderr)
			}
		}
		fmt.Fprintf(stderr, "torrloom: %q is not known\n", args[0])
	}
	usage(stderr)
	return exitUsage
}

func usage(w io.Writer) {
	fmt.Fprintln(w, "usage:")
	for _, v := range verbs() {
		fmt.Fprintf(w, "  torrloom %s\n      %s\n", v.usage, v.purpose)
	}
	fmt.Fprintln(w, "Research use; not for diagnosis or treatment planning. A pO2 is only as good as the calibration entered.")
}

// report writes a fault and returns its exit code.
func report(stderr io.Writer, err error) int {
	f := fault.From(err)
	fmt.Fprintln(stderr, f.Error())
	switch f.Kind {
	case fault.NoAnswer, fault.Bug:
		return exitNothing
	}
	return exitRefused
}
