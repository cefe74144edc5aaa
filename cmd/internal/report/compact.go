package report

import (
	"bytes"
	"encoding/json"
	"fmt"
	"reflect"
	"slices"
	"strconv"
	"strings"
	"sync"
	"unicode/utf8"

	"onebarrier/diagnostics"
)

// AppendJSON appends a document in one line, followed by a newline, as a json.Encoder
// without EscapeHTML writes it, which takes three times as long: a survey writes one for
// each data set. Types that it does not know are left to encoding/json.
func AppendJSON(b []byte, doc any) ([]byte, error) {
	v := reflect.ValueOf(doc)
	if !v.IsValid() {
		return append(b, "null\n"...), nil
	}
	b, err := appenderOf(v.Type())(b, v)
	return append(b, '\n'), err
}

// appender appends a value of one type.
type appender func(b []byte, v reflect.Value) ([]byte, error)

var appenders sync.Map // by reflect.Type

func appenderOf(t reflect.Type) appender {
	if a, ok := appenders.Load(t); ok {
		return a.(appender)
	}
	a := newAppender(t)
	appenders.Store(t, a)
	return a
}

var (
	realType  = reflect.TypeFor[diagnostics.Real]()
	marshaler = reflect.TypeFor[json.Marshaler]()
	texter    = reflect.TypeFor[interface{ MarshalText() ([]byte, error) }]()
)

func newAppender(t reflect.Type) appender {
	if t == realType {
		return func(b []byte, v reflect.Value) ([]byte, error) { return diagnostics.Real(v.Float()).AppendJSON(b), nil }
	}
	for _, own := range []reflect.Type{t, reflect.PointerTo(t)} {
		if t.Kind() != reflect.Pointer && (own.Implements(marshaler) || own.Implements(texter)) {
			return appendOther
		}
	}
	switch t.Kind() {
	case reflect.Bool:
		return func(b []byte, v reflect.Value) ([]byte, error) { return strconv.AppendBool(b, v.Bool()), nil }
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64:
		return func(b []byte, v reflect.Value) ([]byte, error) { return strconv.AppendInt(b, v.Int(), 10), nil }
	case reflect.String:
		return func(b []byte, v reflect.Value) ([]byte, error) { return appendString(b, v.String()), nil }
	case reflect.Pointer:
		return func(b []byte, v reflect.Value) ([]byte, error) {
			if v.IsNil() {
				return append(b, "null"...), nil
			}
			return appenderOf(t.Elem())(b, v.Elem())
		}
	case reflect.Slice, reflect.Array:
		if t.Elem().Kind() == reflect.Uint8 {
			return appendOther
		}
		return appendList
	case reflect.Map:
		if t.Key().Kind() == reflect.String && !t.Key().Implements(texter) {
			return appendMap
		}
	case reflect.Struct:
		if fields, ok := fieldsOf(t, nil); ok {
			return func(b []byte, v reflect.Value) ([]byte, error) { return appendStruct(b, v, fields) }
		}
	}
	return appendOther
}

// appendOther leaves a value to encoding/json.
func appendOther(b []byte, v reflect.Value) ([]byte, error) {
	var out bytes.Buffer
	enc := json.NewEncoder(&out)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(v.Interface()); err != nil {
		return b, err
	}
	return append(b, bytes.TrimSuffix(out.Bytes(), []byte("\n"))...), nil
}

func appendList(b []byte, v reflect.Value) (_ []byte, err error) {
	if v.Kind() == reflect.Slice && v.IsNil() {
		return append(b, "null"...), nil
	}
	element := appenderOf(v.Type().Elem())
	b = append(b, '[')
	for i := range v.Len() {
		if i > 0 {
			b = append(b, ',')
		}
		if b, err = element(b, v.Index(i)); err != nil {
			return b, err
		}
	}
	return append(b, ']'), nil
}

// appendMap orders by key, as encoding/json does.
func appendMap(b []byte, v reflect.Value) (_ []byte, err error) {
	if v.IsNil() {
		return append(b, "null"...), nil
	}
	element := appenderOf(v.Type().Elem())
	keys := v.MapKeys()
	slices.SortFunc(keys, func(x, y reflect.Value) int { return strings.Compare(x.String(), y.String()) })
	b = append(b, '{')
	for i, k := range keys {
		if i > 0 {
			b = append(b, ',')
		}
		b = append(appendString(b, k.String()), ':')
		if b, err = element(b, v.MapIndex(k)); err != nil {
			return b, err
		}
	}
	return append(b, '}'), nil
}

// field is a field of a struct that is written.
type field struct {
	name  string // with quotes and colon
	index []int
	write appender
}

// fieldsOf lists the fields of a struct, those of embedded ones in their place. ok is
// false where a tag or a name needs the rules of encoding/json.
func fieldsOf(t reflect.Type, at []int) (fields []field, ok bool) {
	seen := map[string]bool{}
	for i := range t.NumField() {
		f := t.Field(i)
		tag := f.Tag.Get("json")
		name, option, _ := strings.Cut(tag, ",")
		index := append(slices.Clone(at), i)
		switch {
		case tag == "-":
			continue
		case f.Anonymous && name == "":
			if f.Type.Kind() != reflect.Struct {
				return nil, false
			}
			inner, ok := fieldsOf(f.Type, index)
			if !ok {
				return nil, false
			}
			fields = append(fields, inner...)
			continue
		case !f.IsExported():
			continue
		case name == "":
			name = f.Name
		}
		if option != "" {
			return nil, false
		}
		fields = append(fields, field{string(appendString(nil, name)) + ":", index, lazily(f.Type)})
	}
	for _, f := range fields {
		if seen[f.name] {
			return nil, false
		}
		seen[f.name] = true
	}
	return fields, true
}

// lazily is the appender of a type that may hold itself.
func lazily(t reflect.Type) appender {
	find := sync.OnceValue(func() appender { return appenderOf(t) })
	return func(b []byte, v reflect.Value) ([]byte, error) { return find()(b, v) }
}

func appendStruct(b []byte, v reflect.Value, fields []field) (_ []byte, err error) {
	b = append(b, '{')
	for i := range fields {
		f := &fields[i]
		if i > 0 {
			b = append(b, ',')
		}
		b = append(b, f.name...)
		at := v
		for _, j := range f.index {
			at = at.Field(j)
		}
		if b, err = f.write(b, at); err != nil {
			return b, fmt.Errorf("%s %w", f.name, err)
		}
	}
	return append(b, '}'), nil
}

// appendString appends a string in quotes. What seldom occurs is left to encoding/json.
func appendString(b []byte, s string) []byte {
	start := len(b)
	b = append(b, '"')
	for i := 0; i < len(s); {
		c := s[i]
		switch {
		case c == '"' || c == '\\':
			b = append(b, '\\', c)
			i++
		case c >= 0x20 && c < utf8.RuneSelf:
			b = append(b, c)
			i++
		default:
			r, size := utf8.DecodeRuneInString(s[i:])
			if c < 0x20 || r == utf8.RuneError || r == '\u2028' || r == '\u2029' {
				b, _ = appendOther(b[:start], reflect.ValueOf(s)) // a string has no error
				return b
			}
			b = append(b, s[i:i+size]...)
			i += size
		}
	}
	return append(b, '"')
}
