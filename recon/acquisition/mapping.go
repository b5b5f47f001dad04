package acquisition

import (
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"reflect"
	"slices"
	"strings"

	"torrloom/recon/fault"
)

// Mapping says how the arrays of one layout of files become an acquisition. It is part of the recipe, so that the next
// file of that layout opens at once; what was guessed stays marked in it.
type Mapping struct {
	Signature string        `json:"signature"`       // of the layout it was made for
	Signal    SignalSource  `json:"signal"`          // where the traces or projections are
	Fields    []FieldSource `json:"fields"`          // where every other field of the dictionary is
	Notes     []string      `json:"notes,omitempty"` // what the reader of the file guessed or doubted
}

// SignalSource says where the signal is and what its axes are.
type SignalSource struct {
	Array     string `json:"array"`
	Imaginary string `json:"imaginary,omitempty"` // the array of imaginary parts, when they stand apart
	Conjugate bool   `json:"conjugate,omitempty"` // the imaginary part counts the other way round

	// Axes says for every axis of Array what it counts: "delay", "shot", "sample", "part" (real, imaginary), or "one" for
	// an axis of length 1. An axis that holds several, slowest first, is written with spaces: "delay shot".
	Axes    []string `json:"axes"`
	Reason  string   `json:"reason,omitempty"`
	Guessed bool     `json:"guessed,omitempty"`
}

// FieldSource says where one field of the dictionary comes from: from arrays, or typed in as numbers or text. With none of
// them the field is absent.
type FieldSource struct {
	Field   string    `json:"field"`
	Arrays  []string  `json:"arrays,omitempty"` // one; for gradients also the lists of x, y and z components
	Take    Take      `json:"take,omitempty"`
	Unit    string    `json:"unit,omitempty"`   // a name from Units, for the values as they are; MHz and the like give an interval
	Factor  float64   `json:"factor,omitempty"` // the values times this are in Unit; 0 counts as 1
	Numbers []float64 `json:"numbers,omitempty"`
	Text    string    `json:"text,omitempty"`
	Reason  string    `json:"reason,omitempty"`
	Guessed bool      `json:"guessed,omitempty"`
}

// Take says what of an array is taken.
type Take string

const (
	Values Take = ""     // its values
	Step   Take = "step" // of an axis in even steps, the step
	Zero   Take = "zero" // of an axis in even steps, the index at which it is zero
	Rows   Take = "rows" // of a table of gradients, whose rows are the x, y and z components
)

// Takes lists every Take.
var Takes = []Take{Values, Step, Zero, Rows}

// absent tells whether a field comes from nowhere.
func (s FieldSource) absent() bool { return len(s.Arrays) == 0 && len(s.Numbers) == 0 && s.Text == "" }

// Guesses returns a sentence for everything that was guessed and that a person should confirm.
func (m Mapping) Guesses() []string {
	out := slices.Clone(m.Notes)
	if m.Signal.Guessed {
		out = append(out, "signal: "+m.Signal.Reason)
	}
	for _, f := range m.Fields {
		if f.Guessed {
			out = append(out, f.Field+": "+f.Reason)
		}
	}
	return out
}

// Lacking returns the fields that the dictionary needs and the mapping has no source for.
func (m Mapping) Lacking() []string {
	present := map[string]Array{}
	domain := Time
	if m.Signal.Array != "" {
		present["signal"] = Array{}
	}
	for _, f := range m.Fields {
		if !f.absent() {
			present[f.Field] = Array{}
		}
		if f.Field == "domain" && f.Text != "" {
			domain = Domain(f.Text)
		}
	}
	return lacking(domain, present)
}

// field returns the source of a field; an absent one when it has none.
func (m Mapping) field(name string) FieldSource {
	for _, f := range m.Fields {
		if f.Field == name {
			return f
		}
	}
	return FieldSource{Field: name}
}

// Labels returns the names by which a mapping calls arrays: their own, or "*" for the only array that is called after its
// file, so that the next file may have another name.
func Labels(arrays []Array) []string {
	afterFile := 0
	labels := make([]string, len(arrays))
	for i, a := range arrays {
		labels[i] = a.Name
		afterFile += count(a.AfterFile)
	}
	for i, a := range arrays {
		if a.AfterFile && afterFile == 1 {
			labels[i] = "*"
		}
	}
	return labels
}

// Signature returns a mark of the layout of arrays: their labels, kinds, numbers of axes and units, in any order, but not
// their lengths. Files with one signature open with one mapping.
func Signature(arrays []Array) string {
	labels := Labels(arrays)
	lines := make([]string, len(arrays))
	for i, a := range arrays {
		kind := "number"
		switch {
		case a.isComplex():
			kind = "complex"
		case a.isText():
			kind = "text"
		}
		lines[i] = fmt.Sprintf("%q %s %d %q", labels[i], kind, len(a.Shape), a.Unit)
	}
	slices.Sort(lines)
	sum := sha256.Sum256([]byte(strings.Join(lines, "\n")))
	return fmt.Sprintf("%x", sum[:8])
}

// ParseMapping reads a mapping from JSON and checks it.
//
// Errors: bad-setting for text that is no JSON, an unknown key or a value that cannot be, naming it.
func ParseMapping(text []byte) (Mapping, error) {
	var tree any
	if err := json.Unmarshal(text, &tree); err != nil {
		return Mapping{}, fault.New(fault.BadSetting, "mapping", "no JSON: %v", err)
	}
	if err := knownKeys(tree, reflect.TypeFor[Mapping](), "mapping"); err != nil {
		return Mapping{}, err
	}
	var m Mapping
	if err := json.Unmarshal(text, &m); err != nil {
		var wrong *json.UnmarshalTypeError
		if errors.As(err, &wrong) {
			return Mapping{}, fault.New(fault.BadSetting, "mapping "+wrong.Field, "a JSON %s found, %s wanted",
				wrong.Value, wrong.Type)
		}
		return Mapping{}, fault.New(fault.BadSetting, "mapping", "%v", err)
	}
	return m, m.Check()
}

// knownKeys refuses keys that no field has, in these very letters; encoding/json would take any case.
func knownKeys(tree any, t reflect.Type, where string) error {
	switch value := tree.(type) {
	case []any:
		for i, element := range value {
			if t.Kind() != reflect.Slice {
				return nil // a wrong type is named by the decoder
			}
			if err := knownKeys(element, t.Elem(), fmt.Sprintf("%s[%d]", where, i)); err != nil {
				return err
			}
		}
	case map[string]any:
		if t.Kind() != reflect.Struct {
			return nil
		}
		fields := map[string]reflect.Type{}
		var names []string
		for i := range t.NumField() {
			name, _, _ := strings.Cut(t.Field(i).Tag.Get("json"), ",")
			fields[name] = t.Field(i).Type
			names = append(names, name)
		}
		for key, element := range value {
			field, known := fields[key]
			if !known {
				return fault.New(fault.BadSetting, where, "key %q is not known; known here: %s", key,
					strings.Join(names, ", "))
			}
			if err := knownKeys(element, field, where+"."+key); err != nil {
				return err
			}
		}
	}
	return nil
}

// fieldNamed returns a row of the dictionary.
func fieldNamed(name string) Field {
	return Dictionary[slices.IndexFunc(Dictionary, func(f Field) bool { return f.Name == name })]
}

// axisWords are what an axis of the signal may count.
var axisWords = []string{"delay", "shot", "sample", "part", "one"}

// Check returns a bad-setting fault for the first thing that no file could satisfy.
func (m Mapping) Check() error {
	seen := map[string]bool{}
	for _, axis := range m.Signal.Axes {
		for word := range strings.FieldsSeq(axis) {
			if !slices.Contains(axisWords, word) {
				return fault.New(fault.BadSetting, "mapping signal.axes", "%q is no axis; use %s", word,
					strings.Join(axisWords, ", "))
			}
			if seen[word] && word != "one" {
				return fault.New(fault.BadSetting, "mapping signal.axes", "%q stands twice", word)
			}
			seen[word] = true
		}
		if strings.TrimSpace(axis) == "" {
			return fault.New(fault.BadSetting, "mapping signal.axes", "an axis without a word; use %s",
				strings.Join(axisWords, ", "))
		}
	}
	if seen["part"] && m.Signal.Imaginary != "" {
		return fault.New(fault.BadSetting, "mapping signal", "imaginary parts both along an axis and in %s; choose one",
			quoted(m.Signal.Imaginary))
	}
	named := map[string]bool{"signal": true}
	for _, f := range m.Fields {
		if named[f.Field] {
			return fault.New(fault.BadSetting, "mapping fields",
				"%q stands twice, or is the signal, which has a place of its own", f.Field)
		}
		named[f.Field] = true
		if err := f.check(); err != nil {
			return err
		}
	}
	return nil
}

// check looks at one field alone.
func (s FieldSource) check() error {
	where := "mapping " + s.Field
	at := slices.IndexFunc(Dictionary, func(f Field) bool { return f.Name == s.Field })
	if at < 0 {
		return fault.New(fault.BadSetting, "mapping fields", "%s is no field of the dictionary%s", quoted(s.Field),
			suggestion(s.Field))
	}
	field := Dictionary[at]
	ways := count(len(s.Arrays) > 0) + count(len(s.Numbers) > 0) + count(s.Text != "")
	switch {
	case ways > 1:
		return fault.New(fault.BadSetting, where, "arrays, numbers or text; choose one")
	case !slices.Contains(Takes, s.Take):
		return fault.New(fault.BadSetting, where, "take %q is not known; use step, zero, rows or leave it out", s.Take)
	case len(s.Arrays) > 1 && (s.Field != "gradient_mT_per_m" || len(s.Arrays) > 3):
		return fault.New(fault.BadSetting, where, "%d arrays; one is wanted (gradients may come as two or three lists)",
			len(s.Arrays))
	case s.Factor-s.Factor != 0:
		return fault.New(fault.BadSetting, where, "factor %g; a finite number is wanted", s.Factor)
	}
	if s.Unit == "" || ways == 0 {
		return nil
	}
	if _, known := s.unit(field); !known {
		return fault.New(fault.BadSetting, where, "unit %s; use %s", quoted(s.Unit), strings.Join(field.units(), ", "))
	}
	return nil
}

// units returns the units a field can be given in.
func (f Field) units() []string {
	if f.Name == "time_zero_sample" {
		return append(unitsFor("points"), "ns", "us", "ms", "s")
	}
	return unitsFor(f.Unit)
}

// unit returns the row of Units that the source's unit means for its field. The unit of a time zero may be points or a
// time, which is then in ns.
func (s FieldSource) unit(f Field) (Unit, bool) {
	if f.Name == "time_zero_sample" {
		if u, ok := UnitFor(s.Unit, "points"); ok {
			return u, true
		}
		u, ok := UnitFor(s.Unit, "ns")
		return u, ok && !u.Interval
	}
	return UnitFor(s.Unit, f.Unit)
}
