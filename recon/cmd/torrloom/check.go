package main

import (
	"encoding/json"
	"flag"
	"fmt"
	"io"

	"torrloom/recon/fault"
	"torrloom/recon/quality"
	"torrloom/recon/recipe"
	"torrloom/recon/session"
)

// checkFiles prints the findings on every file. Its code is that of the first file refused, else 5 when any finding says
// stop.
func checkFiles(args []string, stdout, stderr io.Writer) int {
	flags := flag.NewFlagSet("check", flag.ContinueOnError)
	flags.SetOutput(stderr)
	recipePath := flags.String("recipe", "", "recipe (JSON) whose conditioning is judged; without it the defaults")
	asJSON := flags.Bool("json", false, "print one line of JSON per file")
	if err := flags.Parse(args); err != nil {
		return exitUsage
	}
	if flags.NArg() == 0 {
		usage(stderr)
		return exitUsage
	}
	text, err := readRecipe(*recipePath)
	if err != nil {
		return report(stderr, err)
	}
	refused, stopped := 0, false
	for _, path := range flags.Args() {
		input, findings, err := examineFile(path, text)
		if err != nil {
			if code := report(stderr, err); refused == 0 {
				refused = code
			}
			continue
		}
		stopped = stopped || quality.Worst(findings) == quality.Stop
		tell(stdout, input, findings, *asJSON)
	}
	switch {
	case refused != 0:
		return refused
	case stopped:
		return exitStop
	}
	return exitDone
}

func examineFile(path string, recipeText []byte) (inputRecord, []quality.Finding, error) {
	a, input, _, err := load(path)
	if err != nil {
		return input, nil, err
	}
	facts, err := session.Survey(a)
	if err != nil {
		return input, nil, fault.Within(input.Name, err)
	}
	r := facts.DefaultRecipe(a)
	if recipeText != nil {
		if r, err = recipe.Parse(recipeText, r); err != nil {
			return input, nil, err
		}
	}
	return input, session.Examine(a, r, nil).Findings, nil
}

func tell(w io.Writer, input inputRecord, findings []quality.Finding, asJSON bool) {
	if asJSON {
		line, err := json.Marshal(map[string]any{"input": input, "findings": findings})
		if err != nil {
			panic(err) // findings are plain numbers and texts
		}
		fmt.Fprintf(w, "%s\n", line)
		return
	}
	fmt.Fprintf(w, "%s: %s\n", input.Name, quality.Worst(findings))
	sayFindings(w, findings, "")
}

// sayFindings prints findings, worst first, but for those of one level.
func sayFindings(w io.Writer, findings []quality.Finding, except quality.Level) {
	for _, f := range findings {
		if f.Level == except {
			continue
		}
		fmt.Fprintf(w, "  %s: %s: %s\n", f.Level, f.Check, f.Text)
		if f.Advice != "" {
			fmt.Fprintf(w, "      %s\n", f.Advice)
		}
	}
}
