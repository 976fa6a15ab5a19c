package pipeline

import (
	"encoding/json"
	"fmt"
	"math"
	"reflect"
	"strings"
)

// Encode writes v as JSON as the program's records are, for commands that answer machines.
func Encode(v any) (json.RawMessage, error) { return encode(v) }

// encode writes v as JSON with null where a number is not finite, which JSON
// cannot say. Keys of structs and maps come in a fixed order, so that equal
// values give equal bytes.
func encode(v any) (json.RawMessage, error) {
	b, err := json.Marshal(finite(reflect.ValueOf(v)))
	if err != nil {
		return nil, fmt.Errorf("writing JSON: %w", err)
	}
	return b, nil
}

// finite rebuilds v from maps and slices, with nil for NaN and infinities.
func finite(v reflect.Value) any {
	switch v.Kind() {
	case reflect.Float64, reflect.Float32:
		f := v.Float()
		if math.IsNaN(f) || math.IsInf(f, 0) {
			return nil
		}
		return f
	case reflect.Pointer, reflect.Interface:
		if v.IsNil() {
			return nil
		}
		return finite(v.Elem())
	case reflect.Slice, reflect.Array:
		if v.Kind() == reflect.Slice && v.IsNil() {
			return nil
		}
		if v.Type().Elem().Kind() == reflect.Uint8 {
			return v.Interface()
		}
		out := make([]any, v.Len())
		for i := range out {
			out[i] = finite(v.Index(i))
		}
		return out
	case reflect.Map:
		out := make(map[string]any, v.Len())
		for _, k := range v.MapKeys() {
			out[fmt.Sprint(k.Interface())] = finite(v.MapIndex(k))
		}
		return out
	case reflect.Struct:
		if _, ok := v.Interface().(json.Marshaler); ok {
			return v.Interface()
		}
		out := map[string]any{}
		for i := range v.NumField() {
			f := v.Type().Field(i)
			if !f.IsExported() {
				continue
			}
			name, rest, _ := strings.Cut(f.Tag.Get("json"), ",")
			if name == "-" || (strings.Contains(rest, "omitempty") && v.Field(i).IsZero()) {
				continue
			}
			if name == "" {
				name = f.Name
			}
			out[name] = finite(v.Field(i))
		}
		return out
	}
	return v.Interface()
}
