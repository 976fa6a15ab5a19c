package settings

import (
	"fmt"
	"os"
	"path/filepath"
	"reflect"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/BurntSushi/toml"
)

// keyDoc is what the example file says of one key.
type keyDoc struct {
	line   int
	text   string // comment above it
	stated string // after "Default:", "" if that is missing
}

// documented reads the example file as a person does: comments, then a key,
// perhaps behind a "#". Only the first place of each key counts.
func documented() map[string]keyDoc {
	out := map[string]keyDoc{}
	table := ""
	var comment []string
	n := 0
	for line := range strings.Lines(Example()) {
		n++
		line = strings.TrimRight(line, "\n")
		if strings.HasPrefix(line, "[") {
			table, comment = strings.Trim(line, "[]"), nil
			continue
		}
		key, _, isKey := strings.Cut(strings.TrimPrefix(line, "#"), " = ")
		if isKey && key != "" && strings.Trim(key, "abcdefghijklmnopqrstuvwxyz_0123456789") == "" {
			d := keyDoc{line: n, text: strings.Join(comment, " ")}
			if _, after, ok := strings.Cut(d.text, "Default: "); ok {
				d.stated = after
			}
			if _, seen := out[table+"."+key]; !seen {
				out[table+"."+key] = d
			}
			comment = nil
			continue
		}
		if strings.HasPrefix(line, "# ") {
			comment = append(comment, strings.TrimPrefix(line, "# "))
		} else {
			comment = nil
		}
	}
	return out
}

// eachKey visits every key of the structs with the value it has when nothing is stated.
func eachKey(visit func(table, key string, def reflect.Value)) {
	s := reflect.ValueOf(Defaults()).Elem()
	for i := range s.NumField() {
		table := s.Type().Field(i).Tag.Get("toml")
		if table == "" {
			continue
		}
		v := s.Field(i)
		if v.Kind() == reflect.Slice {
			v = fresh(v.Type().Elem())
		}
		for k := range v.NumField() {
			if key := v.Type().Field(k).Tag.Get("toml"); key != "" {
				visit(table, key, v.Field(k))
			}
		}
	}
}

// inWords writes a default as the example file does.
func inWords(v reflect.Value) string {
	if d, ok := v.Interface().(time.Duration); ok {
		switch {
		case d >= 24*time.Hour && d%(24*time.Hour) == 0:
			return fmt.Sprintf("%q", fmt.Sprintf("%dd", d/(24*time.Hour)))
		case d == 0:
			return `"0s"`
		}
		s := d.String()
		if strings.HasSuffix(s, "m0s") {
			s = s[:len(s)-2]
		}
		if strings.HasSuffix(s, "h0m") {
			s = s[:len(s)-2]
		}
		return strconv.Quote(s)
	}
	switch v.Kind() {
	case reflect.String:
		return strconv.Quote(v.String())
	case reflect.Map:
		return "{}"
	case reflect.Slice:
		var out []string
		for i := range v.Len() {
			out = append(out, inWords(v.Index(i)))
		}
		return "[" + strings.Join(out, ", ") + "]"
	case reflect.Float64:
		return strconv.FormatFloat(v.Float(), 'g', -1, 64)
	}
	return fmt.Sprint(v.Interface())
}

// required keys have no default; the example says so. Two rules have a default
// that is not the zero value although the field is empty.
func exceptions() map[string]string {
	none := "none, must be stated"
	return map[string]string{
		"folder.name": none, "folder.path": none, "rule.name": none, "rule.pattern": none, "layout.name": none,
		"compound.name": none, "compound.charge": none, "instrument.name": none, "resource.name": none, "resource.kind": none,
		"check.check": none, "person.name": none, "webhook.name": none, "webhook.url": none,
		"rule.role": `"scan"`, "rule.set": `"${set}"`, "rule.run": `"${run}"`, "rule.pair": `"key"`, "rule.pair_by": `"rung"`,
	}
}

func TestEveryKeyIsDocumentedWithItsDefault(t *testing.T) {
	docs := documented()
	seen := map[string]bool{}
	eachKey(func(table, key string, def reflect.Value) {
		name := table + "." + key
		seen[name] = true
		d, ok := docs[name]
		if !ok {
			t.Errorf("%s is not in the example file", name)
			return
		}
		want := inWords(def)
		if x, ok := exceptions()[name]; ok {
			want = x
		}
		if d.stated != want {
			t.Errorf("line %d: %s states the default %q, the program has %q", d.line, name, d.stated, want)
		}
		if before, _, _ := strings.Cut(d.text, "Default:"); len(strings.Fields(before)) < 2 {
			t.Errorf("line %d: %s is not explained", d.line, name)
		}
	})
	for name := range docs {
		if !seen[name] {
			t.Errorf("the example file explains %s, which is no key", name)
		}
	}
	if len(seen) < 120 {
		t.Errorf("only %d keys were visited", len(seen))
	}
}

// Keys that the example shows behind a # must be as right as the others.
func TestExampleReadsWithEveryKeyInForce(t *testing.T) {
	var b strings.Builder
	for line := range strings.Lines(Example()) {
		if k, _, ok := strings.Cut(strings.TrimPrefix(line, "#"), " = "); ok && strings.HasPrefix(line, "#") && !strings.Contains(k, " ") {
			switch k {
			// One of two may be stated, or the rule would be another.
			case "database_url_file", "password_file", "secret_file", "column", "column_example", "check_digit", "series", "run", "date_format", "roles", "ph_point", "slot":
			default:
				line = strings.TrimPrefix(line, "#")
			}
		}
		b.WriteString(line)
	}
	s, err := Read([]byte(b.String()), "everything.toml")
	if err != nil {
		t.Fatal(err)
	}
	if s.Folders[0].ClockAhead != 7*time.Minute || len(s.Folders[0].Ignore) != 2 || s.Compounds[0].Molar != 2.1e-5 {
		t.Errorf("%+v", s.Folders[0])
	}
}

func TestDeployedExampleIsTheSame(t *testing.T) {
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(filepath.Join(dir, "..", "..", "deploy", "pkvigil.example.toml"))
	if err != nil {
		t.Fatal(err)
	}
	if string(data) != Example() {
		t.Error("deploy/pkvigil.example.toml differs from pipeline/settings/example.toml; copy the latter over the former")
	}
}

// A default that cannot be read back, or that the checks refuse, is no default.
func TestDefaultsPassTheirOwnChecks(t *testing.T) {
	s, err := Read(nil, "empty.toml")
	if err != nil {
		t.Fatal(err)
	}
	d := Defaults()
	d.naming = s.naming
	if !reflect.DeepEqual(s, d) {
		t.Errorf("an empty file reads as\n%+v\ndefaults are\n%+v", s, d)
	}
	minimal := `[[folder]]
name = "u1"
path = "/x"
[[instrument]]
name = "U1"
[[compound]]
name = "A"
charge = 0
[[person]]
name = "P"
`
	s, err = Read([]byte(minimal), "minimal.toml")
	if err != nil {
		t.Fatal(err)
	}
	f := DefaultFolder()
	f.Name, f.Path = "u1", "/x"
	if !reflect.DeepEqual(s.Folders[0], f) || s.Instruments[0].SigmaPH != DefaultSigmaPH || s.Compounds[0].Target != DefaultTarget || len(s.People[0].Tells) != 3 {
		t.Errorf("%+v", s)
	}
}

// The lines that errors name are counted apart from the TOML library, so they
// are held against it: a wrong type put at any key must be reported on the
// line where the key stands, under the key's name.
func TestWrongTypeAtAnyKeyIsFound(t *testing.T) {
	lines := strings.Split(Example(), "\n")
	table := ""
	tried := 0
	for i, line := range lines {
		if strings.HasPrefix(line, "[") {
			table = strings.Trim(line, "[]")
		}
		key, _, ok := strings.Cut(line, " = ")
		if !ok || strings.HasPrefix(line, "#") {
			continue
		}
		changed := append([]string{}, lines...)
		changed[i] = key + " = { odd = 1979-05-27T07:32:00Z }"
		text := strings.Join(changed, "\n")
		if _, err := toml.Decode(text, &map[string]any{}); err != nil {
			t.Fatalf("the changed text is no TOML: %v", err)
		}
		_, err := Read([]byte(text), "x.toml")
		found := false
		for _, e := range Errors(err) {
			found = found || (e.Line == i+1 && strings.HasPrefix(e.Key, table) && strings.HasSuffix(e.Key, "."+key) && e.Found != "" && e.Expected != "")
		}
		if !found {
			t.Errorf("line %d, %s.%s: %v", i+1, table, key, err)
		}
		tried++
	}
	if tried < 130 {
		t.Errorf("only %d keys tried", tried)
	}
}
