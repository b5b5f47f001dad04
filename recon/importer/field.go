package importer

import (
	"bytes"
	"math"
	"strconv"
)

// fieldsOf splits a line into its fields, without the spaces around them and the quotes (RFC 4180: a doubled quote stands
// for one). White space as delimiter is any run of it. The result reuses the room of into.
func fieldsOf(line []byte, delimiter byte, into [][]byte) [][]byte {
	into = into[:0]
	if delimiter == ' ' {
		return append(into, bytes.Fields(line)...)
	}
	for {
		line = bytes.TrimLeft(line, " ")
		if len(line) > 0 && line[0] == '"' {
			field, rest, closed := quotedField(line)
			end := bytes.IndexByte(rest, delimiter)
			if closed && len(bytes.TrimSpace(rest[:max(end, 0)])) == 0 {
				into = append(into, field)
				if end < 0 {
					return into
				}
				line = rest[end+1:]
				continue
			}
		}
		end := bytes.IndexByte(line, delimiter)
		if end < 0 {
			return append(into, bytes.TrimSpace(line))
		}
		into = append(into, bytes.TrimSpace(line[:end]))
		line = line[end+1:]
	}
}

// quotedField returns the text within the quotes at the head of a line, and what follows.
func quotedField(line []byte) (field, rest []byte, closed bool) {
	for at := 1; at < len(line); at++ {
		if line[at] != '"' {
			continue
		}
		if at+1 < len(line) && line[at+1] == '"' {
			at++
			continue
		}
		return bytes.ReplaceAll(line[1:at], []byte(`""`), []byte(`"`)), line[at+1:], true
	}
	return nil, nil, false
}

// missing are the words that programs write for no number, in small letters; the empty field is one.
var missing = map[string]bool{
	"": true, "nan": true, "+nan": true, "-nan": true, "na": true, "n/a": true, "#n/a": true, "null": true, "none": true, "-": true, "--": true,
	"1.#ind": true, "-1.#ind": true, "1.#qnan": true, "-1.#qnan": true, "nan(ind)": true, "-nan(ind)": true, "missing": true,
}

// infinite are the words for an infinite number, without sign.
var infinite = map[string]bool{"inf": true, "infinity": true, "1.#inf": true}

// parseNumber reads a real or complex number ("1.5", "-2e3", "1.5D-3", "(1+2j)", "3-4i") or a word for none, which is NaN.
// A decimal comma is read only when asked for.
func parseNumber(field []byte, decimal byte) (re, im float64, ok bool) {
	if v, ok := parseReal(field, decimal); ok {
		return v, 0, true
	}
	if word, ok := parseWord(field); ok {
		return word, 0, true
	}
	return parseComplex(field, decimal)
}

func parseWord(field []byte) (float64, bool) {
	if len(field) > len("-infinity") {
		return 0, false
	}
	word := string(bytes.ToLower(field))
	if missing[word] {
		return math.NaN(), true
	}
	sign := 1
	if word[0] == '-' || word[0] == '+' {
		if word[0] == '-' {
			sign = -1
		}
		word = word[1:]
	}
	return math.Inf(sign), infinite[word]
}

// parseReal reads digits with an optional decimal mark and exponent, and nothing else that strconv would let pass.
func parseReal(field []byte, decimal byte) (float64, bool) {
	var room [48]byte
	if len(field) == 0 || len(field) > len(room) {
		return 0, false
	}
	text := room[:0]
	digits := false
	for _, b := range field {
		switch {
		case b >= '0' && b <= '9':
			digits = true
		case b == decimal:
			b = '.'
		case b == 'd' || b == 'D' || b == 'e' || b == 'E': // Fortran writes 1.5D-3
			b = 'e'
		case b != '+' && b != '-':
			return 0, false
		}
		text = append(text, b)
	}
	if !digits {
		return 0, false
	}
	v, err := strconv.ParseFloat(string(text), 64)
	if err != nil && !math.IsInf(v, 0) { // past the range of float64 is infinite
		return 0, false
	}
	return v, true
}

// parseComplex reads a real and an imaginary part, the latter with i or j behind.
func parseComplex(field []byte, decimal byte) (re, im float64, ok bool) {
	if n := len(field); n > 2 && field[0] == '(' && field[n-1] == ')' {
		field = field[1 : n-1]
	}
	n := len(field)
	if n < 2 || field[n-1] != 'i' && field[n-1] != 'j' {
		return 0, 0, false
	}
	field = bytes.ReplaceAll(field[:n-1], []byte(" "), nil)
	// The sign that parts the two is the last one that stands behind no exponent.
	at := len(field) - 1
	for at > 0 && (field[at] != '+' && field[at] != '-' || bytes.IndexByte([]byte("eEdD"), field[at-1]) >= 0) {
		at--
	}
	if at <= 0 {
		im, ok = parseReal(field, decimal)
		return 0, im, ok
	}
	re, left := part(field[:at], decimal)
	im, right := part(field[at:], decimal)
	return re, im, left && right
}

// part reads one part of a complex number, which may be a word for none. numpy writes "+-2j" for negative parts.
func part(field []byte, decimal byte) (float64, bool) {
	if n := len(field); n > 1 && field[n-1] == '+' {
		field = field[:n-1]
	}
	if v, ok := parseReal(field, decimal); ok {
		return v, true
	}
	if v, ok := parseWord(field); ok && len(field) > 0 {
		return v, true
	}
	return parseWord(bytes.TrimLeft(field, "+"))
}
