// Package fault holds the one error type that reaches a person. A fault says what was found, what was wanted and what
// to try, and where; its text is shown word for word by the page and by the native command.
package fault

import (
	"errors"
	"fmt"
)

// Kind tells a caller how to react to a fault.
type Kind string

const (
	BadFile     Kind = "bad-file"    // the bytes contradict their own format or themselves
	Unsupported Kind = "unsupported" // well-formed, but outside what is read or computed
	BadSetting  Kind = "bad-setting" // a recipe or an option asks for something impossible
	TooLarge    Kind = "too-large"   // a stated limit would be passed
	NoAnswer    Kind = "no-answer"   // the data do not determine what was asked
	Bug         Kind = "bug"         // a broken promise of the program itself
)

// Fault is an error with a kind, a place ("traces.npz signal", "recipe reconstruction.window") and a text in lower
// case.
type Fault struct {
	Kind  Kind   `json:"kind"`
	Where string `json:"where"`
	Text  string `json:"text"`
}

// Error returns "where: text".
func (f *Fault) Error() string {
	if f.Where == "" {
		return f.Text
	}
	return f.Where + ": " + f.Text
}

// New returns a fault whose text is made as by fmt.Sprintf.
func New(kind Kind, where, format string, args ...any) *Fault {
	return &Fault{Kind: kind, Where: where, Text: fmt.Sprintf(format, args...)}
}

// From returns err as a fault. An error that is not one becomes a Bug, so that nothing is lost.
func From(err error) *Fault {
	var f *Fault
	if errors.As(err, &f) {
		return f
	}
	return &Fault{Kind: Bug, Text: err.Error()}
}

// Within returns err as a fault whose place is put behind outer, as a reader of one archive member does for the
// archive's name.
func Within(outer string, err error) *Fault {
	f := *From(err)
	if f.Where == "" {
		f.Where = outer
	} else {
		f.Where = outer + " " + f.Where
	}
	return &f
}
