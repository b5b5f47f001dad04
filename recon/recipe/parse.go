package recipe

import (
	"bytes"
	"encoding/json"
	"errors"
	"math"
	"reflect"
	"slices"
	"sort"
	"strings"

	"torrloom/recon/fault"
)

// Parse returns base with the settings of a recipe text laid over it, checked. Keys that the text lacks keep the value
// of base; a calibration of null removes it.
//
// Errors: bad-setting naming the key, for an unknown key, a value of the wrong type or one out of range.
func Parse(text []byte, base Recipe) (Recipe, error) {
	var tree any
	decoder := json.NewDecoder(bytes.NewReader(text))
	if err := decoder.Decode(&tree); err != nil {
		return Recipe{}, syntaxFault(text, err)
	}
	if decoder.More() {
		return Recipe{}, fault.New(fault.BadSetting, "recipe", "text goes on after the closing brace; a recipe is one JSON object")
	}
	if err := checkKeys(tree, reflect.TypeFor[Recipe](), ""); err != nil {
		return Recipe{}, err
	}
	out := base.clone()
	if err := json.Unmarshal(text, &out); err != nil {
		return Recipe{}, typeFault(err)
	}
	return out, out.Check()
}

// clone returns a copy that shares no memory with r.
func (r Recipe) clone() Recipe {
	r.Conditioning.ExcludeShots = slices.Clone(r.Conditioning.ExcludeShots)
	r.Conditioning.ExcludeDelays = slices.Clone(r.Conditioning.ExcludeDelays)
	if r.Calibration != nil {
		c := *r.Calibration
		r.Calibration = &c
	}
	return r
}

func syntaxFault(text []byte, err error) error {
	var syntax *json.SyntaxError
	if errors.As(err, &syntax) {
		line := 1 + bytes.Count(text[:min(int(syntax.Offset), len(text))], []byte("\n"))
		return fault.New(fault.BadSetting, "recipe", "line %d is not JSON: %s", line, strings.TrimPrefix(err.Error(), "json: "))
	}
	return fault.New(fault.BadSetting, "recipe", "the text ends too early; a recipe is one JSON object")
}

func typeFault(err error) error {
	var wrong *json.UnmarshalTypeError
	if errors.As(err, &wrong) {
		return fault.New(fault.BadSetting, "recipe "+wrong.Field, "a JSON %s was found; %s is wanted", wrong.Value, plainType(wrong.Type))
	}
	return fault.New(fault.BadSetting, "recipe", "%v", err)
}

func plainType(t reflect.Type) string {
	switch t.Kind() {
	case reflect.Int:
		return "a whole number"
	case reflect.Float64:
		return "a number"
	case reflect.String:
		return "a text in quotes"
	case reflect.Slice:
		return "a list in brackets"
	}
	return "an object in braces"
}

// checkKeys refuses keys that have no field, and keys written in other letters than the field's.
func checkKeys(tree any, t reflect.Type, path string) error {
	for t.Kind() == reflect.Pointer {
		t = t.Elem()
	}
	object, isObject := tree.(map[string]any)
	if t.Kind() != reflect.Struct || !isObject {
		return nil // a wrong type is named by the decoder
	}
	fields := fieldsOf(t)
	keys := make([]string, 0, len(object))
	for key := range object {
		keys = append(keys, key)
	}
	sort.Strings(keys)
	for _, key := range keys {
		field, known := fields[key]
		if !known {
			return fault.New(fault.BadSetting, "recipe "+path+key, "key %q is not known; known here: %s", key, strings.Join(namesOf(t), ", "))
		}
		if err := checkKeys(object[key], field, path+key+"."); err != nil {
			return err
		}
	}
	return nil
}

func fieldsOf(t reflect.Type) map[string]reflect.Type {
	out := map[string]reflect.Type{}
	for i, name := range namesOf(t) {
		out[name] = t.Field(i).Type
	}
	return out
}

func namesOf(t reflect.Type) []string {
	var out []string
	for i := range t.NumField() {
		name, _, _ := strings.Cut(t.Field(i).Tag.Get("json"), ",")
		out = append(out, name)
	}
	return out
}

// Check returns a bad-setting fault for the first setting that is not a row of its choices or lies outside its range.
func (r Recipe) Check() error {
	if r.Recipe != Version {
		return fault.New(fault.BadSetting, "recipe recipe", "format %d; this version reads format %d", r.Recipe, Version)
	}
	for _, s := range Catalogue() {
		value, present := r.Value(s.Path)
		if !present {
			continue
		}
		if err := s.check(value); err != nil {
			return err
		}
	}
	if r.Calibration != nil {
		if err := r.Calibration.Check(); err != nil {
			return fault.Within("recipe", err)
		}
	}
	if err := r.Sample.Check(); err != nil {
		return fault.Within("recipe", err)
	}
	if r.Rates.MaxPerUS != 0 && r.Rates.MaxPerUS <= r.Rates.MinPerUS {
		return fault.New(fault.BadSetting, "recipe rates.maxPerUS", "%g is not above the slowest rate %g", r.Rates.MaxPerUS, r.Rates.MinPerUS)
	}
	return nil
}

// Value returns the setting at a path of the catalogue: a string, int or float64, and whether it is there (a
// calibration may be absent).
func (r Recipe) Value(path string) (any, bool) {
	v := reflect.ValueOf(r)
	for _, name := range strings.Split(path, ".") {
		if v.Kind() == reflect.Pointer {
			if v.IsNil() {
				return nil, false
			}
			v = v.Elem()
		}
		at := -1
		for i, known := range namesOf(v.Type()) {
			if known == name {
				at = i
			}
		}
		if at < 0 {
			return nil, false
		}
		v = v.Field(at)
	}
	return v.Interface(), true
}

func (s Setting) check(value any) error {
	number := 0.0
	switch v := value.(type) {
	case string:
		return s.checkChoice(v)
	case []int:
		return s.checkList(v)
	case int:
		number = float64(v)
	case float64:
		number = v
	}
	if !(number >= s.Min && number <= s.Max) || math.IsInf(number, 0) {
		return fault.New(fault.BadSetting, "recipe "+s.Path, "%g %s; use %g to %g", number, s.Unit, s.Min, s.Max)
	}
	return nil
}

func (s Setting) checkList(values []int) error {
	for _, v := range values {
		if float64(v) < s.Min || float64(v) > s.Max {
			return fault.New(fault.BadSetting, "recipe "+s.Path, "%d; use %g to %g", v, s.Min, s.Max)
		}
	}
	return nil
}

func (s Setting) checkChoice(value string) error {
	var known []string
	for _, c := range s.Choices {
		if c.Value == value {
			return nil
		}
		known = append(known, c.Value)
	}
	name := s.Path[strings.LastIndex(s.Path, ".")+1:]
	return fault.New(fault.BadSetting, "recipe "+s.Path, "%s %q is not known; use %s", name, value, alternatives(known))
}

// alternatives writes "a, b or c".
func alternatives(words []string) string {
	if len(words) < 2 {
		return strings.Join(words, "")
	}
	return strings.Join(words[:len(words)-1], ", ") + " or " + words[len(words)-1]
}
