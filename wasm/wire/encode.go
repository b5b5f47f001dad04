package wire

import (
	"encoding/json"
	"reflect"
)

// Encode returns message as JSON in which every slice is an array: a nil slice is written [] and never null, so that
// the generated TypeScript types tell the truth. Errors: what encoding/json cannot write, NaN and infinity among it.
func Encode(message any) ([]byte, error) {
	value := reflect.ValueOf(message)
	if !value.IsValid() {
		return []byte("null"), nil
	}
	filled := reflect.New(value.Type()).Elem()
	filled.Set(value)
	fillNilSlices(filled)
	return json.Marshal(filled.Interface())
}

func fillNilSlices(value reflect.Value) {
	switch value.Kind() {
	case reflect.Struct:
		for i := range value.NumField() {
			if value.Type().Field(i).IsExported() {
				fillNilSlices(value.Field(i))
			}
		}
	case reflect.Pointer:
		fillPointed(value)
	case reflect.Slice:
		fillSlice(value)
	case reflect.Array:
		fillElements(value)
	}
}

// fillPointed fills a copy, so that what the engine keeps is not written to.
func fillPointed(value reflect.Value) {
	if value.IsNil() {
		return
	}
	pointed := reflect.New(value.Type().Elem())
	pointed.Elem().Set(value.Elem())
	fillNilSlices(pointed.Elem())
	value.Set(pointed)
}

func fillSlice(value reflect.Value) {
	if value.IsNil() {
		value.Set(reflect.MakeSlice(value.Type(), 0, 0))
		return
	}
	if !mayHoldSlices(value.Type().Elem()) {
		return
	}
	elements := reflect.MakeSlice(value.Type(), value.Len(), value.Len())
	reflect.Copy(elements, value)
	fillElements(elements)
	value.Set(elements)
}

func fillElements(value reflect.Value) {
	if !mayHoldSlices(value.Type().Elem()) {
		return
	}
	for i := range value.Len() {
		fillNilSlices(value.Index(i))
	}
}

func mayHoldSlices(element reflect.Type) bool {
	switch element.Kind() {
	case reflect.Struct, reflect.Pointer, reflect.Slice, reflect.Array:
		return true
	}
	return false
}
