package reports

import (
	"bytes"
	"encoding/json"
	"io"
	"reflect"
)

// WriteJSON writes the report as JSON under the contract of schema.json: one
// line a value, keys in the order of the Go types, lists and maps never null.
// It renders first and writes once, so that a failed write leaves no half report
// that parses.
func (r *Report) WriteJSON(w io.Writer) error {
	r.FillLists()
	var buf bytes.Buffer
	enc := json.NewEncoder(&buf)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", " ")
	if err := enc.Encode(r); err != nil {
		return err
	}
	_, err := w.Write(buf.Bytes())
	return err
}

// FillLists turns every nil list and map of the report into an empty one, which
// JSON then shows as [] and {}: a program that reads a report need not ask
// whether a list is there.
func (r *Report) FillLists() { fill(reflect.ValueOf(r).Elem()) }

func fill(v reflect.Value) {
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			if v.Type().Field(i).Tag.Get("json") != "-" {
				fill(v.Field(i))
			}
		}
	case reflect.Pointer:
		if !v.IsNil() {
			fill(v.Elem())
		}
	case reflect.Slice:
		if v.IsNil() {
			v.Set(reflect.MakeSlice(v.Type(), 0, 0))
		}
		switch v.Type().Elem().Kind() {
		case reflect.Struct, reflect.Pointer, reflect.Slice, reflect.Map:
			for i := range v.Len() {
				fill(v.Index(i))
			}
		}
	case reflect.Map:
		if v.IsNil() {
			v.Set(reflect.MakeMap(v.Type()))
		}
	}
}
