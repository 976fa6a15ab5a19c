package brief

import (
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"reflect"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// An element is one start tag of a page.
type element struct {
	name  string
	attrs map[string]string
	path  string // names of the open elements
}

// elements reads a page and fails where a tag is not closed in its place.
func elements(t failer, page []byte) (list []element, text string) {
	t.Helper()
	body := strings.Replace(string(page), "<!DOCTYPE html>", "", 1)
	d := xml.NewDecoder(strings.NewReader(body))
	d.Strict, d.Entity = false, xml.HTMLEntity
	void := []string{"meta", "br"}
	var open []string
	var said strings.Builder
	for {
		tok, err := d.RawToken()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatalf("the page does not read at %d: %v", d.InputOffset(), err)
		}
		switch x := tok.(type) {
		case xml.StartElement:
			e := element{name: x.Name.Local, attrs: map[string]string{}, path: strings.Join(open, " ")}
			for _, a := range x.Attr {
				if _, twice := e.attrs[a.Name.Local]; twice {
					t.Fatalf("attribute %s stands twice in <%s>", a.Name.Local, e.name)
				}
				e.attrs[a.Name.Local] = a.Value
			}
			list = append(list, e)
			if !slices.Contains(void, e.name) {
				open = append(open, e.name)
			}
		case xml.EndElement:
			if slices.Contains(void, x.Name.Local) {
				continue // RawToken closes <br/> itself
			}
			if len(open) == 0 || open[len(open)-1] != x.Name.Local {
				t.Fatalf("</%s> closes %v", x.Name.Local, open)
			}
			open = open[:len(open)-1]
		case xml.CharData:
			said.Write(x)
		}
	}
	if len(open) > 0 {
		t.Fatalf("never closed: %v", open)
	}
	return list, said.String()
}

type failer interface {
	Helper()
	Fatalf(string, ...any)
	Errorf(string, ...any)
}

var (
	numbersOnly = regexp.MustCompile(`^[-MLlZHV0-9. ]*$`)
	outside     = regexp.MustCompile(`(?i)url\((?:[^#]|$)|@import|javascript:|expression\(`)
)

// sane checks what holds for every page.
func sane(t failer, page []byte) []element {
	t.Helper()
	list, _ := elements(t, page)
	ids, refs := map[string]bool{}, []string{}
	h1, level := 0, 0
	for i, e := range list {
		if id, ok := e.attrs["id"]; ok {
			if ids[id] || id == "" {
				t.Errorf("id %q is not one of a kind", id)
			}
			ids[id] = true
		}
		if strings.HasPrefix(e.attrs["href"], "#") {
			refs = append(refs, e.attrs["href"][1:])
		}
		refs = append(refs, strings.Fields(e.attrs["aria-labelledby"])...)
		for k, v := range e.attrs {
			if strings.HasPrefix(strings.ToLower(k), "on") || outside.MatchString(v) || k == "src" || k == "srcdoc" || k == "href" && !strings.HasPrefix(v, "#") {
				t.Errorf("<%s %s=%q> acts or reaches outside", e.name, k, v)
			}
		}
		switch e.name {
		case "script", "link", "iframe", "img", "object", "embed", "form", "base", "image", "use", "foreignObject":
			t.Errorf("<%s> has no place in the page", e.name)
		case "h1", "h2", "h3", "h4":
			n := int(e.name[1] - '0')
			if n == 1 {
				h1++
			}
			if n > level+1 {
				t.Errorf("<%s> follows <h%d>", e.name, level)
			}
			level = n
		case "th":
			if s := e.attrs["scope"]; s != "row" && s != "col" {
				t.Errorf("<th> without scope: %v", e.attrs)
			}
		case "svg":
			if e.attrs["aria-hidden"] != "true" && (e.attrs["role"] != "img" || e.attrs["aria-labelledby"] == "" || list[i+1].name != "title" || list[i+2].name != "desc") {
				t.Errorf("picture without words: %v", e.attrs)
			}
		case "table":
			if list[i+1].name != "caption" {
				t.Errorf("table without caption, in %s", e.path)
			}
		}
		for _, k := range []string{"d", "x", "y", "width", "height", "cx", "cy", "r"} {
			if v, ok := e.attrs[k]; ok && !numbersOnly.MatchString(v) {
				t.Errorf("<%s %s=%q> is no drawing", e.name, k, v)
			}
		}
	}
	if h1 != 1 {
		t.Errorf("%d h1, want one", h1)
	}
	for _, r := range refs {
		if !ids[r] {
			t.Errorf("nothing has the id %q that is referred to", r)
		}
	}
	return list
}

func render(t failer, d Data) []byte {
	t.Helper()
	page, err := HTML(d)
	if err != nil {
		t.Fatalf("%v", err)
	}
	return page
}

func TestOrderAndWords(t *testing.T) {
	d := fullNight()
	page := render(t, d)
	list := sane(t, page)
	var sections []string
	for _, e := range list {
		if e.name == "section" {
			sections = append(sections, e.attrs["id"])
		}
	}
	want := []string{"unseen", "control", "cases", "look", "go", "absent", "charts", "files", "said", "changes"}
	if !slices.Equal(sections, want) {
		t.Errorf("order %v, want %v", sections, want)
	}
	_, text := elements(t, page)
	for _, s := range []string{"9 can go, 5 to look at first", "8.200 ± 0.013", "9.41 ± 0.11", "2.13", "mixed", "I\u00a0=\u00a00.100\u00a0mol/L", "93 %", "Rescan r06 if its pH is right", "baseline 92 mAU, bubble likely",
		"isosbestic 50", "Nearest is scan; adopt it", "Addendum", "Cautions.", "settings version 7", "2026-09-15 06:28 +02:00", "cannot be told apart", "Case 3 touches it: estimated effect on pKa +0.038, at most 0.045.", "a 5.400", "in-question"} {
		if !strings.Contains(strings.ToLower(text), strings.ToLower(s)) {
			t.Errorf("the page does not say %q", s)
		}
	}
	pictures := 0
	for _, e := range list {
		if e.name == "svg" && e.attrs["role"] == "img" {
			pictures++
		}
	}
	// 4 to look at and 9 standing sets with 4 pictures each, 3 charts, 1 of references.
	if pictures != 13*4+3+1 {
		t.Errorf("%d pictures, want %d", pictures, 13*4+3+1)
	}
}

func TestEmptyNight(t *testing.T) {
	page := render(t, Data{Night: "2026-09-14"})
	sane(t, page)
	if _, text := elements(t, page); !strings.Contains(text, "No set can go.") || strings.Contains(text, "Addendum") {
		t.Error("an empty night is told wrongly")
	}
}

// fill sets every string of a value, in place.
func fill(v reflect.Value, s string) {
	switch v.Kind() {
	case reflect.String:
		v.SetString(s)
	case reflect.Struct:
		if v.Type() == reflect.TypeFor[time.Time]() {
			return
		}
		for i := range v.NumField() {
			fill(v.Field(i), s)
		}
	case reflect.Slice:
		for i := range v.Len() {
			fill(v.Index(i), s)
		}
	}
}

// TestHostileNames puts markup into every text there is: the page has the same
// elements as with harmless letters.
func TestHostileNames(t *testing.T) {
	for _, evil := range []string{`"><script>alert(1)</script>&<!--`, `'></title></desc></svg><img src=x onerror=y>`, "]]></style>\x00\x1b[2J\u202etxt.exe", `{{.Laboratory}}</textarea>`, "\xff\xfe<b>", `</details><h1>`} {
		shape := func(s string) (out []string, page []byte) {
			d := fullNight()
			fill(reflect.ValueOf(&d).Elem(), s)
			page = render(t, d)
			for _, e := range sane(t, page) {
				out = append(out, e.path+" "+e.name)
			}
			return out, page
		}
		plain, _ := shape(strings.Repeat("x", len([]rune(evil))))
		got, page := shape(evil)
		if !slices.Equal(plain, got) {
			t.Errorf("%q changes the page: %d elements, harmless %d", evil, len(got), len(plain))
		}
		if strings.ContainsAny(string(page), "\x00\x1b\u202e") {
			t.Errorf("%q: letters that hide or turn others are still there", evil)
		}
	}
}

// TestSize holds the page of sixty sets, noisy so that curves do not thin well,
// and of far more, below two million bytes.
func TestSize(t *testing.T) {
	rnd := rand.New(rand.NewPCG(1, 2))
	night := func(sets, rungs int) Data {
		d := fullNight()
		d.Go = nil
		for i := range sets {
			s := oneSet(fmt.Sprintf("U1/2026-09-14/CR-%04d", i), rungs, 8.2)
			for _, y := range s.Family {
				for j := range y {
					y[j] += 0.0006 * rnd.NormFloat64() // noise of absorbance of the demo's instruments
				}
			}
			d.Go = append(d.Go, s)
		}
		return d
	}
	for _, c := range []struct {
		sets, rungs int
		whole       bool
	}{{60, 12, true}, {60, 40, false}, {400, 12, false}} {
		page := render(t, night(c.sets, c.rungs))
		t.Logf("%d sets of %d rungs: %d bytes", c.sets, c.rungs, len(page))
		if len(page) > 2_000_000 {
			t.Errorf("%d sets of %d rungs: %d bytes", c.sets, c.rungs, len(page))
		}
		if said := strings.Contains(string(page), "To keep this page small"); said == c.whole {
			t.Errorf("%d sets of %d rungs: pictures left out and said: %v", c.sets, c.rungs, said)
		}
	}
}

// arbitrary fills a value with anything a broken night could hold.
func arbitrary(t *rapid.T, v reflect.Value) {
	switch v.Kind() {
	case reflect.String:
		v.SetString(rapid.SampledFrom([]string{"", "a", "r01", "2026-09-14", "2026-13-45", "<b>&\"'", "stands", "held", "own", strings.Repeat("long ", 60), "\u202e\x01"}).Draw(t, "s"))
	case reflect.Float64:
		v.SetFloat(rapid.OneOf(rapid.SampledFrom([]float64{math.NaN(), math.Inf(1), math.Inf(-1), 0, 1, -1, 1e300, -1e300, math.MaxFloat64, 5e-324}), rapid.Float64(), rapid.Float64Range(-10, 800)).Draw(t, "f"))
	case reflect.Int, reflect.Int64:
		v.SetInt(rapid.Int64Range(-3, 300).Draw(t, "i"))
	case reflect.Bool:
		v.SetBool(rapid.Bool().Draw(t, "b"))
	case reflect.Slice:
		n := rapid.IntRange(0, 4).Draw(t, "n")
		v.Set(reflect.MakeSlice(v.Type(), n, n))
		for i := range n {
			arbitrary(t, v.Index(i))
		}
	case reflect.Struct:
		if v.Type() == reflect.TypeFor[time.Time]() {
			return
		}
		for i := range v.NumField() {
			arbitrary(t, v.Field(i))
		}
	}
}

func TestAnyNight(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var d Data
		// One part of the night at a time keeps the drawing of values small.
		v := reflect.ValueOf(&d).Elem()
		arbitrary(t, v.Field(rapid.IntRange(0, v.NumField()-1).Draw(t, "part")))
		arbitrary(t, v.Field(rapid.IntRange(0, v.NumField()-1).Draw(t, "part")))
		sane(t, render(t, d))
		if d.Text() == "" {
			t.Errorf("no text")
		}
	})
}

func TestPictures(t *testing.T) {
	gap := driftingChart()
	for i := range gap.Values {
		if i != 7 {
			gap.Values[i], gap.EWMA[i] = math.NaN(), math.NaN()
		}
	}
	one := Chart{Title: "x: pKa", Nights: []string{"2026-09-14"}, Values: []float64{4.66}, EWMA: []float64{4.66}, Centre: math.NaN(), Low: math.NaN(), High: math.NaN(), Assigned: math.NaN()}
	for name, c := range map[string]Chart{"gaps": gap, "one night": one} {
		if p := controlPicture("p", &c); strings.Count(p, "<circle") != 1 {
			t.Errorf("%s: one value is one mark, found %d in %s", name, strings.Count(p, "<circle"), p)
		}
	}
	if controlPicture("p", &Chart{}) != "" || familyPicture("p", &Set{}) != "" || residualPicture("p", &Set{}) != "" || limitPicture("p", &Set{}) != "" || budgetPicture("p", &Set{}) != "" || referencePicture("p", nil) != "" {
		t.Error("nothing to draw gives a picture")
	}
	s := oneSet("k", 12, 7)
	s.Accused = "r04"
	p := familyPicture("p", &s)
	if strings.Count(p, `class="c accused"`) != 1 || strings.Count(p, "ring") != 1 {
		t.Error("accused rung or isosbestic point is not drawn once")
	}
	// Rows of the family follow their keys, not their place.
	slices.Reverse(s.Family)
	slices.Reverse(s.FamilyKeys)
	if q := familyPicture("p", &s); q != p {
		t.Error("the order of the stored spectra changes the picture")
	}
}

// TestBudgetRowsKeepTheSum: a component not drawn as a row of its own is still
// in the root of the sum of squares.
func TestBudgetRowsKeepTheSum(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var list []Component
		want := 0.0
		for i, u := range rapid.SliceOfN(rapid.Float64Range(1e-6, 1), 1, 40).Draw(t, "u") {
			list = append(list, Component{Name: fmt.Sprint(i), UPKa: u})
			want = math.Hypot(want, u)
		}
		got := 0.0
		rows := bars(list)
		for _, r := range rows {
			got = math.Hypot(got, r.u)
		}
		if len(rows) > budgetRows || math.Abs(got-want) > 1e-12*want {
			t.Fatalf("%d rows with a root of %g, want %g", len(rows), got, want)
		}
	})
}
