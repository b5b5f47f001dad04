package importer

import (
	"bytes"
	"fmt"
	"math"

	"torrloom/recon/fault"
)

// asdf decodes the ordinates of a JCAMP-DX table (X++(Y..Y)). Plain numbers stand between blanks; packed ones begin with a
// sign (PAC), with a letter that stands for sign and first digit of the value (SQZ) or of its difference to the one before
// (DIF), and a letter may say how often a number stands in a row (DUP). Behind a line that ends in differences, the
// first ordinate of the next line repeats the last one and is a check, not a value.
// Source: R. S. McDonald and P. A. Wilks, JCAMP-DX: a standard form for exchange of infrared spectra in computer readable
// form, Applied Spectroscopy 42 (1988) 151-162, section on ASDF.
type asdf struct {
	packed bool // some line of the table holds SQZ, DIF or DUP letters
	most   int  // values that the file's bytes justify

	values []float64
	starts []abscissa
	last   asdfForm
	step   float64 // the last difference
}

// abscissa is the x at the head of a line and the index of the value it stands for.
type abscissa struct {
	x    float64
	at   int
	line int
}

type asdfForm byte

const (
	plainForm asdfForm = iota
	differenceForm
)

// Letters by the digit they stand for, from 0 or 1 on.
const (
	sqzPlus  = "@ABCDEFGHI"
	sqzMinus = "abcdefghi"
	difPlus  = "%JKLMNOPQR"
	difMinus = "jklmnopqr"
	dupTimes = "STUVWXYZs"
)

// decodeASDF returns the ordinates of the lines of one table and the abscissae at their heads. Values that are marked as
// unknown by a question mark are NaN. At most the given number of values is made.
func decodeASDF(lines []textLine, most int) ([]float64, []abscissa, error) {
	a := &asdf{most: most}
	for _, line := range lines {
		a.packed = a.packed || bytes.ContainsAny(line.text, "@%ABCDFGHIJKLMNOPQRSTUVWXYZabcdfghijklmnopqrs")
	}
	for _, line := range lines {
		if err := a.line(line); err != nil {
			return nil, nil, fault.Within(fmt.Sprintf("line %d", line.number), err)
		}
	}
	return a.values, a.starts, nil
}

// line decodes one line: an abscissa, then ordinates.
func (a *asdf) line(line textLine) error {
	rest := bytes.TrimSpace(line.text)
	check := a.last == differenceForm
	x, rest, err := a.number(rest)
	if err != nil {
		return err
	}
	at := len(a.values)
	if check {
		at--
	}
	a.starts = append(a.starts, abscissa{x, at, line.number})
	a.last = plainForm
	for rest = skipBlanks(rest); len(rest) > 0; rest = skipBlanks(rest) {
		if rest, err = a.ordinate(rest, check); err != nil {
			return err
		}
		check = false
	}
	return nil
}

func skipBlanks(rest []byte) []byte { return bytes.TrimLeft(rest, " \t,;") }

// ordinate decodes one item and returns what follows it.
func (a *asdf) ordinate(rest []byte, check bool) ([]byte, error) {
	c := rest[0]
	if k := bytes.IndexByte([]byte(dupTimes), c); k >= 0 && a.packed {
		digits, left := a.digits(k+1, rest[1:])
		return left, a.repeat(digits, check)
	}
	if v, left, ok := a.difference(rest); ok && a.packed {
		if check {
			return nil, fault.New(fault.BadFile, "", "a difference where the value that checks the last line is wanted")
		}
		if len(a.values) == 0 {
			return nil, fault.New(fault.BadFile, "", "a difference before any value")
		}
		a.last, a.step = differenceForm, v
		return left, a.add(a.values[len(a.values)-1] + v)
	}
	if c == '?' {
		a.last = plainForm
		return rest[1:], a.add(math.NaN())
	}
	v, left, err := a.number(rest)
	if err != nil {
		return nil, err
	}
	a.last = plainForm
	if check {
		return left, a.compare(v)
	}
	return left, a.add(v)
}

// compare is the check at the head of a line.
func (a *asdf) compare(v float64) error {
	// Ordinates are whole numbers or short decimals; their sums in float64 differ by less than this.
	const rounding = 1e-9
	if want := a.values[len(a.values)-1]; !(math.Abs(v-want) <= rounding*math.Max(1, math.Abs(want))) {
		return fault.New(fault.BadFile, "",
			"the value that checks the line before is %g, its differences add up to %g; the file is damaged or was edited", v, want)
	}
	return nil
}

func (a *asdf) add(v float64) error {
	if len(a.values) >= a.most {
		return fault.New(fault.TooLarge, "", "more than %d values in a table of this many bytes", a.most)
	}
	a.values = append(a.values, v)
	return nil
}

// repeat makes the last item stand n times in all. A repeated difference is added again and again.
func (a *asdf) repeat(n float64, check bool) error {
	if len(a.values) == 0 || check {
		return fault.New(fault.BadFile, "", "a count of repetitions before any value")
	}
	for range int(math.Min(n, float64(a.most)+1)) - 1 {
		v := a.values[len(a.values)-1]
		if a.last == differenceForm {
			v += a.step
		}
		if err := a.add(v); err != nil {
			return err
		}
	}
	return nil
}

// difference reads an item in DIF form.
func (a *asdf) difference(rest []byte) (float64, []byte, bool) {
	if k := bytes.IndexByte([]byte(difPlus), rest[0]); k >= 0 {
		v, left := a.digits(k, rest[1:])
		return v, left, true
	}
	if k := bytes.IndexByte([]byte(difMinus), rest[0]); k >= 0 {
		v, left := a.digits(k+1, rest[1:])
		return -v, left, true
	}
	return 0, nil, false
}

// digits appends the digits and decimals at the head of rest to a first digit.
func (a *asdf) digits(first int, rest []byte) (float64, []byte) {
	end := 0
	for end < len(rest) && (rest[end] >= '0' && rest[end] <= '9' || rest[end] == '.') {
		end++
	}
	v, ok := parseReal(append([]byte{'0' + byte(first)}, rest[:end]...), '.')
	if !ok {
		v = math.NaN()
	}
	return v, rest[end:]
}

// number reads a value in AFFN, PAC or SQZ form.
func (a *asdf) number(rest []byte) (float64, []byte, error) {
	if len(rest) == 0 {
		return 0, nil, fault.New(fault.BadFile, "", "a number wanted")
	}
	if a.packed {
		if k := bytes.IndexByte([]byte(sqzPlus), rest[0]); k >= 0 {
			v, left := a.digits(k, rest[1:])
			return v, left, nil
		}
		if k := bytes.IndexByte([]byte(sqzMinus), rest[0]); k >= 0 {
			v, left := a.digits(k+1, rest[1:])
			return -v, left, nil
		}
	}
	end := a.plainEnd(rest)
	v, ok := parseReal(rest[:end], '.')
	if !ok || end == 0 {
		return 0, nil, fault.New(fault.BadFile, "", "%q is no number of a JCAMP-DX table", rest[:min(len(rest), 20)])
	}
	return v, rest[end:], nil
}

// plainEnd returns the length of the plain number at the head of rest. In a packed table E is an exponent only before a
// sign, else it is the SQZ letter for 5.
func (a *asdf) plainEnd(rest []byte) int {
	for i, b := range rest {
		switch {
		case b >= '0' && b <= '9' || b == '.':
		case b == '+' || b == '-':
			if i > 0 && rest[i-1]|0x20 != 'e' {
				return i
			}
		case b|0x20 == 'e' && i > 0:
			if a.packed && (i+1 >= len(rest) || rest[i+1] != '+' && rest[i+1] != '-') {
				return i
			}
		default:
			return i
		}
	}
	return len(rest)
}
