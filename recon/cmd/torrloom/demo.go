package main

import (
	"bytes"
	"flag"
	"io"
	"os"

	"torrloom/recon/exporter"
	"torrloom/recon/fault"
	"torrloom/recon/phantom"
)

func writeDemo(args []string, _, stderr io.Writer) int {
	flags := flag.NewFlagSet("demo", flag.ContinueOnError)
	flags.SetOutput(stderr)
	noise := flags.Bool("noise", true, "with noise")
	if err := flags.Parse(args); err != nil || flags.NArg() != 1 {
		usage(stderr)
		return exitUsage
	}
	a, err := phantom.DemoAcquisition(*noise)
	if err != nil {
		return report(stderr, err)
	}
	var file bytes.Buffer
	if err := exporter.Acquisition(&file, a); err != nil {
		return report(stderr, err)
	}
	if err := os.WriteFile(flags.Arg(0), file.Bytes(), 0o644); err != nil {
		return report(stderr, fault.New(fault.BadSetting, flags.Arg(0), "cannot be written: %v", err))
	}
	return exitDone
}
