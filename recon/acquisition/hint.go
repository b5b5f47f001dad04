package acquisition

import (
	"slices"
	"strings"
	"unicode"
)

// hints are the words by which people call what a field wants, a row for each field and way to take it. A phrase counts
// when its words end the name of an array, whatever the case and whatever stands between the words.
var hints = []struct {
	field   string
	take    Take
	phrases []string
}{
	{"gradient_mT_per_m", Values, []string{"gradient", "gradients", "grad", "grads", "g", "gxyz", "gradient table",
		"directions"}},
	{"delay_us", Values, []string{"delay", "delays", "tau", "t rec", "trec", "t inv", "tinv", "ti", "recovery",
		"recovery delay", "inversion delay", "delay time", "delay times", "delay axis"}},
	{"dwell_ns", Values, []string{"dwell", "dwell time", "dt", "sampling interval", "sample interval", "sample time",
		"sampling time", "time step", "tstep", "sampling period",
		"sampling rate", "sample rate", "samplerate", "sampling frequency", "fs", "rate", "spectral width", "sw"}},
	{"time_zero_sample", Values, []string{"time zero", "t zero", "tzero", "t0", "zero", "echo centre", "echo center",
		"centre sample", "center sample", "zero sample", "zero index"}},
	{"sequence", Values, []string{"sequence", "pulse sequence", "seq", "experiment", "method"}},
	{"encoding", Values, []string{"encoding", "encoding scheme"}},
	{"position_step_mm", Values, []string{"position step", "dx", "dr", "pixel", "pixel size", "bin size"}},
	{"shot_role", Values, []string{"role", "roles", "shot role", "shot type"}},
	{"shot_time_s", Values, []string{"shot time", "shot times", "timestamp", "timestamps", "elapsed"}},
	{"echo_time_us", Values, []string{"echo time", "te"}},
	{"repetition_us", Values, []string{"repetition", "repetition time", "tr", "shot repetition time"}},
	{"carrier_MHz", Values, []string{"carrier", "carrier frequency", "microwave frequency", "rf frequency", "frequency",
		"freq", "f0"}},
	{"temperature_C", Values, []string{"temperature", "temp"}},
	{"probe", Values, []string{"probe", "spin probe", "probe name"}},
	{"note", Values, []string{"note", "notes", "comment", "comments", "remark", "remarks"}},
}

// axisPhrases call an axis of time or position that runs along a trace.
var axisPhrases = []string{"t", "x", "time", "times", "time axis", "taxis", "first column", "axis", "position", "positions"}

// signalPhrases call the signal.
var signalPhrases = []string{"signal", "signals", "sig", "data", "trace", "traces", "fid", "fids", "echo", "echoes",
	"projection", "projections", "raw"}

// pairPhrases call the real and the imaginary part.
var pairPhrases = [][2]string{{"re", "im"}, {"real", "imag"}, {"real", "imaginary"}, {"r", "i"}, {"i", "q"},
	{"inphase", "quadrature"}, {"cos", "sin"}, {"x", "y"}, {"0", "90"}}

// nameWords parts a name into small words: at anything but letters and digits, and where a capital follows a small letter. A
// last word that is a unit, or "#", is returned apart.
func nameWords(name string) (words []string, unit string) {
	if open := strings.LastIndexAny(name, "[("); open > 0 {
		if inner := strings.Trim(name[open:], "[]() "); KnownUnit(inner) {
			words, _ = nameWords(name[:open])
			return words, inner
		}
	}
	apart := strings.FieldsFunc(name, func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
	if n := len(apart); n > 1 {
		tail := apart[n-1]
		switch {
		case n > 3 && apart[n-2] == "per" && KnownUnit(apart[n-3]+"/"+tail): // mT_per_m
			unit, apart = apart[n-3]+"/"+tail, apart[:n-3]
		case KnownUnit(tail) && !strings.EqualFold(tail, "c"):
			unit, apart = tail, apart[:n-1]
		}
	}
	for _, word := range apart {
		words = append(words, capitalParts(word)...)
	}
	return lower(words), unit
}

// capitalParts parts a word where a capital follows a small letter.
func capitalParts(word string) (parts []string) {
	start := 0
	before := rune(0)
	for at, r := range word {
		if unicode.IsUpper(r) && unicode.IsLower(before) {
			parts = append(parts, word[start:at])
			start = at
		}
		before = r
	}
	return append(parts, word[start:])
}

func lower(words []string) []string {
	out := make([]string, len(words))
	for i, w := range words {
		out[i] = strings.ToLower(w)
	}
	return out
}

// calls tells whether words end in one of the phrases, and how many words of it did.
func calls(words []string, phrases []string) int {
	best := 0
	for _, phrase := range phrases {
		wanted := strings.Fields(phrase)
		if n := len(wanted); n > best && n <= len(words) && slices.Equal(words[len(words)-n:], wanted) {
			best = n
		}
	}
	return best
}
