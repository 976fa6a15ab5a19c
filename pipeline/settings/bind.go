package settings

import (
	"errors"
	"fmt"
	"math"
	"reflect"
	"slices"
	"strconv"
	"strings"
	"time"

	"pkvigil/pipeline/naming"
)

// binder carries values of a decoded file into the structs, strictly, and
// collects what does not fit.
type binder struct {
	file  string
	lines lineIndex
	set   map[string]bool   // paths that the file states
	names map[string]string // names of list elements
	errs  []*Error
	bad   map[string]bool // paths whose value could not be bound; no check has a say about them
	bound bool            // binding is over, checks go on
}

// fault notes what is wrong at a path such as "folder[0].settle".
func (b *binder) fault(path, found, expected, example string) {
	if !b.bound {
		b.bad[path] = true
	} else {
		for p := range b.bad {
			if p == path || strings.HasPrefix(p, path+"[") {
				return
			}
		}
	}
	b.errs = append(b.errs, &Error{File: b.file, Line: b.lines.of(path), Key: b.readable(path), Found: found, Expected: expected, Example: example})
}

// readable turns "folder[0].settle" into `folder "U1".settle`.
func (b *binder) readable(path string) string {
	head, rest, _ := strings.Cut(path, ".")
	if n, ok := b.names[head]; ok {
		head = fmt.Sprintf("%s %q", stripIndex(head), n)
	} else if i := strings.Index(head, "["); i >= 0 {
		n, _ := strconv.Atoi(strings.Trim(head[i:], "[]"))
		head = fmt.Sprintf("%s number %d", head[:i], n+1)
	}
	return join(head, rest)
}

// joined gives all faults in the order of their lines.
func (b *binder) joined() error {
	slices.SortStableFunc(b.errs, func(x, y *Error) int { return x.Line - y.Line })
	out := make([]error, len(b.errs))
	for i, e := range b.errs {
		out[i] = e
	}
	return errors.Join(out...)
}

// fresh gives the value that a new element of a list starts from.
func fresh(t reflect.Type) reflect.Value {
	switch t {
	case reflect.TypeFor[Folder]():
		return reflect.ValueOf(DefaultFolder())
	case reflect.TypeFor[Compound]():
		return reflect.ValueOf(DefaultCompound())
	case reflect.TypeFor[Instrument]():
		return reflect.ValueOf(DefaultInstrument())
	case reflect.TypeFor[Person]():
		return reflect.ValueOf(DefaultPerson())
	}
	return reflect.Zero(t)
}

// keysOf lists the keys of a struct with the index of each field.
func keysOf(t reflect.Type) (names []string, index map[string]int) {
	index = map[string]int{}
	for i := range t.NumField() {
		if k := t.Field(i).Tag.Get("toml"); k != "" && k != "-" {
			names = append(names, k)
			index[k] = i
		}
	}
	return names, index
}

// table binds a table to a struct.
func (b *binder) table(dst reflect.Value, m map[string]any, path string) {
	names, index := keysOf(dst.Type())
	for _, k := range sortedKeys(m) {
		at := join(path, k)
		i, ok := index[k]
		if !ok {
			b.unknown(at, path, k, names)
			continue
		}
		b.set[at] = true
		b.value(dst.Field(i), m[k], at)
	}
}

func sortedKeys(m map[string]any) []string {
	out := make([]string, 0, len(m))
	for k := range m {
		out = append(out, k)
	}
	slices.Sort(out)
	return out
}

// unknown answers a key that is none: with the way to give a secret, with the
// nearest right word, or with the table it belongs to.
func (b *binder) unknown(at, path, k string, names []string) {
	if instead := secretKeys(k, names); instead != nil {
		b.fault(at, "a secret written into the settings", strings.Join(instead, " (the name of an environment variable) or ")+" (a file only the service can read)",
			instead[0]+` = "PKVIGIL_`+strings.ToUpper(strings.TrimSuffix(instead[0], "_env"))+`"`)
		return
	}
	near := naming.ClosestWord(k, names)
	if near != "" && naming.Distance(k, near) <= max(2, len(near)/3) {
		b.fault(at, fmt.Sprintf("the unknown key %q", k), fmt.Sprintf("%q", near), exampleLine(path, near))
		return
	}
	where := "at the top of the file"
	if path != "" {
		where = "in [" + stripIndex(path) + "]"
	}
	expected := fmt.Sprintf("%s one of %s", where, strings.Join(names, ", "))
	if other := tableOf(k); other != "" && other != stripIndex(path) {
		expected = fmt.Sprintf("it in [%s], where this key belongs; %s", other, expected)
	}
	b.fault(at, fmt.Sprintf("the unknown key %q", k), expected, "")
}

// secretKeys gives the keys to use in place of one that would hold a secret.
func secretKeys(k string, names []string) []string {
	k = strings.ToLower(k)
	var out []string
	for _, n := range names {
		stem := strings.TrimSuffix(strings.TrimSuffix(n, "_env"), "_file")
		if stem == n {
			continue
		}
		same := k == stem
		for _, word := range []string{"pass", "secret", "token", "api_key", "apikey", "key", "dsn", "database_url", "url"} {
			if strings.Contains(k, word) && (stem == "password" || stem == "secret" || stem == "database_url") {
				same = true
			}
		}
		if same && !slices.Contains(names, k) {
			out = append(out, n)
		}
	}
	slices.SortFunc(out, func(a, b string) int { return strings.Compare(a, b) })
	return out
}

// tableOf finds the table whose keys include k; "" when none or several do.
func tableOf(k string) string {
	found := ""
	t := reflect.TypeFor[Settings]()
	for i := range t.NumField() {
		name := t.Field(i).Tag.Get("toml")
		e := t.Field(i).Type
		if e.Kind() == reflect.Slice {
			e = e.Elem()
		}
		if name == "" || e.Kind() != reflect.Struct {
			continue
		}
		if _, index := keysOf(e); slices.Contains(keysIn(index), k) {
			if found != "" {
				return ""
			}
			found = name
		}
	}
	return found
}

func keysIn(m map[string]int) []string {
	out := make([]string, 0, len(m))
	for k := range m {
		out = append(out, k)
	}
	return out
}

func stripIndex(path string) string {
	var b strings.Builder
	depth := 0
	for _, r := range path {
		switch {
		case r == '[':
			depth++
		case r == ']':
			depth--
		case depth == 0:
			b.WriteRune(r)
		}
	}
	return b.String()
}

// value binds one value.
func (b *binder) value(dst reflect.Value, v any, at string) {
	if dst.Type() == reflect.TypeFor[time.Duration]() {
		b.duration(dst, v, at)
		return
	}
	switch dst.Kind() {
	case reflect.String:
		if s, ok := asString(v); ok {
			dst.SetString(s)
			return
		}
		b.wrongType(at, v, "text in quotes")
	case reflect.Bool:
		if x, ok := v.(bool); ok {
			dst.SetBool(x)
			return
		}
		b.wrongType(at, v, "true or false")
	case reflect.Int, reflect.Int64:
		if x, ok := v.(int64); ok {
			dst.SetInt(x)
			return
		}
		b.wrongType(at, v, "a whole number")
	case reflect.Float64:
		if x, ok := asFloat(v); ok {
			dst.SetFloat(x)
			return
		}
		b.wrongType(at, v, "a number")
	case reflect.Struct:
		if m, ok := v.(map[string]any); ok {
			b.table(dst, m, at)
			return
		}
		b.wrongType(at, v, "a table: ["+stripIndex(at)+"]")
	case reflect.Map:
		b.words(dst, v, at)
	case reflect.Slice:
		b.list(dst, v, at)
	}
}

// list binds an array; a list that is stated replaces its default.
func (b *binder) list(dst reflect.Value, v any, at string) {
	elem := dst.Type().Elem()
	var items []any
	switch x := v.(type) {
	case []any:
		items = x
	case []map[string]any:
		for _, m := range x {
			items = append(items, m)
		}
	default:
		switch {
		case elem.Kind() == reflect.Struct:
			b.wrongType(at, v, "a list of tables, each begun with [["+stripIndex(at)+"]]")
		case elem.Kind() == reflect.Float64:
			b.wrongType(at, v, "a list of numbers in brackets")
		default:
			b.wrongType(at, v, "a list of texts in brackets")
		}
		return
	}
	out := reflect.MakeSlice(dst.Type(), 0, len(items))
	for i, item := range items {
		e := reflect.New(elem).Elem()
		e.Set(fresh(elem))
		b.value(e, item, fmt.Sprintf("%s[%d]", at, i))
		out = reflect.Append(out, e)
	}
	dst.Set(out)
}

// words binds a table of free words to texts.
func (b *binder) words(dst reflect.Value, v any, at string) {
	m, ok := v.(map[string]any)
	if !ok {
		b.wrongType(at, v, `a table of words, { blk = "blank" }`)
		return
	}
	out := reflect.MakeMap(dst.Type())
	for _, k := range sortedKeys(m) {
		s, ok := asString(m[k])
		if !ok {
			b.wrongType(join(at, k), m[k], "text in quotes")
			continue
		}
		out.SetMapIndex(reflect.ValueOf(k), reflect.ValueOf(s))
	}
	dst.Set(out)
}

func (b *binder) duration(dst reflect.Value, v any, at string) {
	s, ok := v.(string)
	if !ok {
		b.wrongType(at, v, `a length of time in quotes with its unit: ms, s, m, h or d`)
		return
	}
	d, err := ParseDuration(s)
	slow := last(at) == "clock_ahead" // a clock may be behind as well; nothing else lasts less than nothing
	if err != nil || (d < 0 && !slow) {
		b.wrongType(at, v, `a length of time with its unit: ms, s, m, h or d, as "90s", "20m" or "3d"`)
		return
	}
	dst.SetInt(int64(d))
}

// ParseDuration reads a length of time as Go writes it, with days ("3d",
// "1d12h") besides.
func ParseDuration(s string) (time.Duration, error) {
	days, rest, ok := strings.Cut(s, "d")
	if !ok {
		return time.ParseDuration(s)
	}
	n, err := strconv.ParseFloat(days, 64)
	if err != nil || math.Abs(n) > 36500 {
		return 0, fmt.Errorf("settings: %q is no length of time", s)
	}
	d := time.Duration(n * 24 * float64(time.Hour))
	if rest == "" {
		return d, nil
	}
	more, err := time.ParseDuration(rest)
	return d + more, err
}

// wrongType answers a value of the wrong kind, without printing what may be a secret.
func (b *binder) wrongType(at string, v any, expected string) {
	b.fault(at, shown(v), expected, exampleLine(parent(at), last(at)))
}

func shown(v any) string {
	switch x := v.(type) {
	case string:
		return fmt.Sprintf("the text %q", clip(x))
	case int64, float64, bool:
		return fmt.Sprintf("%v", x)
	case time.Time:
		return "the date " + x.Format(time.RFC3339)
	case []any, []map[string]any:
		return "a list"
	case map[string]any:
		return "a table"
	}
	return fmt.Sprintf("%v", v)
}

func clip(s string) string {
	if r := []rune(s); len(r) > 60 {
		return string(r[:60]) + "..."
	}
	return s
}

func parent(at string) string {
	if i := strings.LastIndex(at, "."); i >= 0 {
		return at[:i]
	}
	return ""
}

func last(at string) string { return stripIndex(at[strings.LastIndex(at, ".")+1:]) }

// asString takes text; a date or time of day without quotes is the same thing to a person.
func asString(v any) (string, bool) {
	switch x := v.(type) {
	case string:
		return x, true
	case time.Time:
		switch x.Location().String() {
		case "date-local":
			return x.Format(time.DateOnly), true
		case "time-local":
			return x.Format("15:04"), true
		}
	}
	return "", false
}

func asFloat(v any) (float64, bool) {
	switch x := v.(type) {
	case int64:
		return float64(x), true
	case float64:
		return x, !math.IsNaN(x) && !math.IsInf(x, 0)
	}
	return 0, false
}
