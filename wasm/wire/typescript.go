package wire

import (
	"fmt"
	"reflect"
	"sort"
	"strings"
)

// Exchange is one kind of request with an example of its body and of its reply; only their types matter.
type Exchange struct {
	Kind        string
	Body, Reply any
}

// Exchanges lists every request that a page can make.
var Exchanges = []Exchange{
	{"open", OpenRequest{}, Opened{}},
	{"demo", DemoRequest{}, Opened{}},
	{"traces", TracesRequest{}, Traces{}},
	{"plan", PlanRequest{}, Plan{}},
	{"measure", MeasureRequest{}, Measured{}},
	{"reconstruct", ReconstructRequest{}, Reconstructed{}},
	{"fit", FitRequest{}, Fitted{}},
	{"derive", DeriveRequest{}, Derived{}},
	{"examine", ExamineRequest{}, Examined{}},
	{"directions", DirectionsRequest{}, Directions{}},
	{"shot", ShotRequest{}, Shot{}},
	{"export", ExportRequest{}, Exported{}},
}

// spoken are the messages that belong to no single request.
var spoken = []any{Hello{}, Progress{}, Failure{}}

// TypeScript returns the text of site/wire.gen.ts: an interface for every message struct, and Requests, which maps
// each kind of the exchanges to the types of its body and reply. A field with omitempty may be missing, a pointer may
// be null, and a slice is always an array (see Encode). Panics on a field that JSON or TypeScript cannot carry.
func TypeScript(exchanges []Exchange) string {
	s := script{written: map[string]reflect.Type{}, texts: map[string]string{}}
	for _, message := range spoken {
		s.nameOf(reflect.TypeOf(message))
	}
	requests := s.requests(exchanges)
	return "// Generated from wasm/wire by go run ./build site. Do not edit.\n\n" +
		fmt.Sprintf("export const WireVersion = %d;\n\n", Version) + s.interfaces() + requests
}

type script struct {
	written map[string]reflect.Type
	texts   map[string]string
}

func (s *script) requests(exchanges []Exchange) string {
	var text strings.Builder
	text.WriteString("export interface Requests {\n")
	for _, x := range exchanges {
		body, reply := s.nameOf(reflect.TypeOf(x.Body)), s.nameOf(reflect.TypeOf(x.Reply))
		fmt.Fprintf(&text, "  %s: { body: %s; reply: %s };\n", x.Kind, body, reply)
	}
	text.WriteString("}\n")
	return text.String()
}

func (s *script) interfaces() string {
	names := make([]string, 0, len(s.texts))
	for name := range s.texts {
		names = append(names, name)
	}
	sort.Strings(names)
	var text strings.Builder
	for _, name := range names {
		text.WriteString(s.texts[name] + "\n")
	}
	return text.String()
}

// nameOf returns how TypeScript writes a Go type.
func (s *script) nameOf(t reflect.Type) string {
	switch t.Kind() {
	case reflect.Bool:
		return "boolean"
	case reflect.String:
		return "string"
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64,
		reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Float32, reflect.Float64:
		return "number"
	case reflect.Pointer:
		return s.nameOf(t.Elem()) + " | null"
	case reflect.Slice:
		return arrayOf(s.nameOf(t.Elem()))
	case reflect.Array:
		return "[" + strings.TrimSuffix(strings.Repeat(s.nameOf(t.Elem())+", ", t.Len()), ", ") + "]"
	case reflect.Map:
		return "Record<string, " + s.nameOf(t.Elem()) + ">"
	case reflect.Struct:
		return s.structName(t)
	}
	panic(fmt.Sprintf("no TypeScript type for %v", t))
}

func arrayOf(element string) string {
	if strings.Contains(element, "| ") {
		return "(" + element + ")[]"
	}
	return element + "[]"
}

// structName writes the interface of t unless it is written, and returns its name.
func (s *script) structName(t reflect.Type) string {
	name := t.Name()
	if other, ok := s.written[name]; ok {
		if other != t {
			panic(fmt.Sprintf("two message types share the name %s: %v and %v", name, other, t))
		}
		return name
	}
	s.written[name] = t
	var text strings.Builder
	fmt.Fprintf(&text, "export interface %s {\n", name)
	for i := range t.NumField() {
		text.WriteString(s.member(t, t.Field(i)))
	}
	s.texts[name] = text.String() + "}\n"
	return name
}

// member returns the line of one field.
func (s *script) member(owner reflect.Type, field reflect.StructField) string {
	tag, options, _ := strings.Cut(field.Tag.Get("json"), ",")
	if !field.IsExported() || tag == "-" {
		return ""
	}
	if tag == "" || field.Anonymous {
		panic(fmt.Sprintf("%v.%s needs a json name", owner, field.Name))
	}
	optional, name := "", s.nameOf(field.Type)
	if strings.Contains(options, "omitempty") || strings.Contains(options, "omitzero") {
		optional, name = "?", strings.TrimSuffix(name, " | null")
	}
	return fmt.Sprintf("  %s%s: %s;\n", tag, optional, name)
}
