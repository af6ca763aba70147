package main

import (
	"bytes"
	"encoding/json"
	"io"
	"reflect"
	"strings"
)

// printLarge prints what printJSON prints, byte for byte, a piece at a time: a course of ten
// years is more than ten megabytes, which the encoder would hold three times over. It goes into the
// fields of a structure and the elements of its lists, each of which is encoded whole.
func (e *env) printLarge(v any) error { return writePieces(e.out, v) }

func writePieces(w io.Writer, v any) error {
	top := reflect.ValueOf(v)
	if top.Kind() != reflect.Struct {
		return writePiece(w, v, "", "\n")
	}
	open := "{\n"
	for i := range top.NumField() {
		field := top.Type().Field(i)
		name, more, _ := strings.Cut(field.Tag.Get("json"), ",")
		if !field.IsExported() || name == "-" || more != "" && top.Field(i).IsZero() {
			continue
		}
		if _, err := io.WriteString(w, open+`  "`+name+`": `); err != nil {
			return err
		}
		open = ",\n"
		f := top.Field(i)
		if f.Kind() != reflect.Slice || f.Len() == 0 {
			if err := writePiece(w, f.Interface(), "  ", ""); err != nil {
				return err
			}
			continue
		}
		begin := "[\n    "
		for k := range f.Len() {
			if _, err := io.WriteString(w, begin); err != nil {
				return err
			}
			begin = ",\n    "
			if err := writePiece(w, f.Index(k).Interface(), "    ", ""); err != nil {
				return err
			}
		}
		if _, err := io.WriteString(w, "\n  ]"); err != nil {
			return err
		}
	}
	_, err := io.WriteString(w, "\n}\n")
	return err
}

// writePiece encodes one value, its further lines behind prefix.
func writePiece(w io.Writer, v any, prefix, end string) error {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	enc.SetIndent(prefix, "  ")
	if err := enc.Encode(v); err != nil {
		return err
	}
	_, err := w.Write(append(bytes.TrimSuffix(b.Bytes(), []byte("\n")), end...))
	return err
}
