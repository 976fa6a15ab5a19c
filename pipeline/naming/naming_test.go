package naming

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

func TestCompileTellsAllFaults(t *testing.T) {
	_, err := Compile([]Rule{
		{Name: "a", Pattern: `(?P<set>[A-Z+)`},
		{Name: "a", Pattern: `(?P<sett>[A-Z]+)`, Set: "${set}"},
		{Pattern: `(?P<set>x)`, Role: "scans", Pair: "order"},
		{Name: "d", Pattern: `(?P<set>x)`, Roles: map[string]string{"leer": "blanc"}, First: 2, CheckDigit: "luhn"},
	})
	if err == nil {
		t.Fatal("accepted")
	}
	var keys []string
	for _, e := range err.(interface{ Unwrap() []error }).Unwrap() {
		var r *RuleError
		if !errors.As(e, &r) {
			t.Fatalf("%T is no *RuleError", e)
		}
		keys = append(keys, r.Key)
	}
	if got := strings.Join(keys, " "); got != "pattern name set name role pair roles.leer check_digit first" &&
		got != "pattern name set name role pair roles.leer first check_digit" {
		t.Errorf("faults at %s\n%v", got, err)
	}
}

func TestExamplesAreHeldAgainstAllRules(t *testing.T) {
	for name, rules := range map[string][]Rule{
		"does not fit its own":       {{Name: "a", Pattern: `(?P<set>[A-Z]+)\.csv`, Example: []string{"x.csv"}}},
		"fits another rule":          {{Name: "a", Pattern: `(?P<set>[A-Z]+)\.csv`, Example: []string{"X.csv"}}, {Name: "b", Pattern: `(?P<set>X)\.csv`}},
		"has an impossible date":     {{Name: "a", Pattern: `(?P<date>\d{8})\.csv`, Example: []string{"20261301.csv"}}},
		"a label fits not":           {{Name: "a", Pattern: `n\.csv`, Column: `(?P<rung>\d+)`, ColumnEx: []string{"r1"}}},
		"role word without meaning":  {{Name: "a", Pattern: `(?P<role>leer)\.csv`, Example: []string{"leer.csv"}}},
		"column example, no columns": {{Name: "a", Pattern: `n\.csv`, ColumnEx: []string{"r1"}}},
	} {
		if _, err := Compile(rules); err == nil {
			t.Errorf("%s: accepted", name)
		}
	}
	if _, err := Compile([]Rule{
		{Name: "a", Pattern: `(?P<set>[A-Z]+)\.csv`, Example: []string{"X.csv"}, Folders: []string{"u1"}},
		{Name: "b", Pattern: `(?P<set>X)\.csv`, Folders: []string{"u2"}},
	}); err != nil {
		t.Errorf("rules of different folders cannot disturb each other: %v", err)
	}
}

func TestPatternsCoverTheWholePath(t *testing.T) {
	rs, err := Compile([]Rule{{Name: "a", Pattern: `(?i)a\.csv|b\.csv`}})
	if err != nil {
		t.Fatal(err)
	}
	for p, want := range map[string]bool{"A.csv": true, "b.CSV": true, "xa.csv": false, "a.csvx": false, "b.csv.part": false} {
		if _, err := rs.Match("u1", p); (err == nil) != want {
			t.Errorf("%s: %v", p, err)
		}
	}
}

func TestRungKey(t *testing.T) {
	for _, same := range [][]string{
		{"7", "07", "007", "r7", "R07", "rung 7", " r07 ", "r-07"},
		{"A5", "a05", "A005"},
		{"0", "00", "r0"},
		{"7.05", "07.05"},
		{"ref", "REF"},
	} {
		for _, s := range same {
			if RungKey(s) != RungKey(same[0]) {
				t.Errorf("%q and %q are one rung, keys %q and %q", same[0], s, RungKey(same[0]), RungKey(s))
			}
		}
	}
	for _, pair := range [][2]string{{"7", "70"}, {"A05", "B05"}, {"7.05", "7.5"}, {"1", "11"}, {"r", ""}} {
		if RungKey(pair[0]) == RungKey(pair[1]) {
			t.Errorf("%q and %q are different, both have key %q", pair[0], pair[1], RungKey(pair[0]))
		}
	}
}

func TestRungKeyIsItsOwnKey(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := rapid.StringMatching(`[rR]?[ -]?[0-9A-Ha-h.,]{0,6}`).Draw(t, "label")
		if k := RungKey(s); RungKey(k) != k {
			t.Fatalf("key of %q is %q, key of that %q", s, k, RungKey(k))
		}
	})
}

func TestNormalIsStable(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := rapid.String().Draw(t, "path")
		if n := Normal(p); Normal(n) != n {
			t.Fatalf("normal form of %q is %q, and of that %q", p, n, Normal(n))
		}
		if f := Fold(p); Fold(f) != f {
			t.Fatalf("fold of %q is %q, and of that %q", p, f, Fold(f))
		}
	})
}

// Worked examples: 7992739871 with 3 is the one most often printed for ISO/IEC
// 7812-1; the article number 400638133393 with 1 and the book number 0306406152
// likewise (all three from memory). Q26-00417-3 is the requirements' example.
func TestCheckDigits(t *testing.T) {
	for _, c := range []struct{ way, digits, want string }{
		{"luhn", "7992739871", "3"},
		{"mod10", "400638133393", "1"},
		{"mod11", "030640615", "2"},
		{"mod11", "0-8044-2957", "X"},
		{"mod11-remainder", "Q26-00417", "3"},
		{"luhn", "none", ""},
	} {
		if got := CheckDigit(c.way, c.digits); got != c.want {
			t.Errorf("%s of %s = %q, want %q", c.way, c.digits, got, c.want)
		}
	}
}

// Every single wrong digit is noticed by each way; that is what they are for.
func TestCheckDigitsNoticeOneWrongDigit(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		way := rapid.SampledFrom(CheckDigits()).Draw(t, "way")
		s := []byte(rapid.StringMatching(`[0-9]{4,9}`).Draw(t, "digits"))
		i := rapid.IntRange(0, len(s)-1).Draw(t, "place")
		was := CheckDigit(way, string(s))
		s[i] = '0' + (s[i]-'0'+byte(rapid.IntRange(1, 9).Draw(t, "by")))%10
		if CheckDigit(way, string(s)) == was {
			t.Fatalf("%s takes %s for right", way, s)
		}
	})
}

func TestDistance(t *testing.T) {
	for _, c := range []struct {
		a, b string
		want int
	}{{"CRR-104", "CRR-l04", 1}, {"CRR-104", "CRR-0104", 1}, {"CRR-104", "CRR104", 1}, {"CRR-104", "CRR-140", 1}, {"", "abc", 3}, {"TB", "TB", 0}, {"ca", "abc", 3}} {
		if got := Distance(c.a, c.b); got != c.want {
			t.Errorf("%s to %s: %d, want %d", c.a, c.b, got, c.want)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		a, b := rapid.StringN(0, 8, -1).Draw(t, "a"), rapid.StringN(0, 8, -1).Draw(t, "b")
		if Distance(a, b) != Distance(b, a) || (Distance(a, b) == 0) != (string([]rune(a)) == string([]rune(b))) {
			t.Fatalf("%q %q: %d %d", a, b, Distance(a, b), Distance(b, a))
		}
	})
}

func TestNearest(t *testing.T) {
	rs, err := Compile([]Rule{{Name: "qc", Pattern: `(?P<set>[A-Z]{3}-\d{3,4})_(?:r(?P<rung>\d{2})|(?P<role>blank|ph))\.csv`, Example: []string{"CRR-104_r01.csv"}}})
	if err != nil {
		t.Fatal(err)
	}
	known := []KnownSet{
		{Set: "CRR-104", Rungs: []string{"01", "02", "03", "04", "05", "06", "08", "09"}, Roles: []string{RoleBlank}},
		{Set: "CRR-109", Rungs: []string{"01", "02", "03", "04", "05", "06", "07", "08"}, Roles: []string{RoleBlank, RolePH}},
	}
	for _, c := range []struct {
		path, set, rung, role string
		distance              int
	}{
		{"CRR-l04_r07.csv", "CRR-104", "07", RoleScan, 1},
		{"CRR-1O4_r07.csv", "CRR-104", "07", RoleScan, 1},
		{"CRR-lO4_r07.csv", "CRR-104", "07", RoleScan, 2},
		{"CRR104_r07.csv", "CRR-104", "07", RoleScan, 1},
		{"CRR-0104_r07.csv", "CRR-104", "07", RoleScan, 1}, // fits the rule, but no such set
		{"CRR-104-r07.csv", "CRR-104", "07", RoleScan, 1},
		{"CRR-104_r7.csv", "CRR-104", "07", RoleScan, 1},
		{"CRR-104_R07.csv", "CRR-104", "07", RoleScan, 1},
		{"CRX-104_r07.csv", "CRR-104", "07", RoleScan, 1},
		{"CRR-104_hp.csv", "CRR-104", "", RolePH, 1},
	} {
		g := Nearest("u1", c.path, rs, known)
		if g.Set != c.set || g.Rung != c.rung || g.Role != c.role || g.Distance != c.distance {
			t.Errorf("%s: %+v", c.path, g)
		}
		if m, err := rs.Match("u1", g.Path); err != nil || m.Set != c.set {
			t.Errorf("%s: the suggested path %q reads %+v, %v", c.path, g.Path, m, err)
		}
	}
	// Nobody lacks r03; the file may not be given to a set that has it.
	for _, p := range []string{"CRR-l04_r03.csv", "XYZ-777_r07.csv", "holiday.jpg"} {
		if g := Nearest("u1", p, rs, known); g.Set != "" || g.Sentence == "" {
			t.Errorf("%s: %+v", p, g)
		}
	}
	if g := Nearest("u1", "CRR_104_r003.csv", rs, nil); g.Rule != "qc" {
		t.Errorf("nearest rule: %+v", g)
	}
	if g := Nearest("u1", "some/where/holiday in the mountains.jpg", rs, known); g.Rule != "" {
		t.Errorf("resembles nothing: %+v", g)
	}
	ladder := []KnownSet{{Set: "CRR-104", Rungs: []string{"1", "2"}, Ladder: []string{"1", "2", "3"}}}
	if g := Nearest("u1", "CRR-l04_r09.csv", rs, ladder); g.Set != "" {
		t.Errorf("rung 9 is not in the ladder: %+v", g)
	}
}

// A lot renamed by one or two characters anywhere must find its way back, among
// thousands of other sets.
func TestNearestAmongThousands(t *testing.T) {
	rs, err := Compile([]Rule{{Name: "qc", Pattern: `(?P<set>\p{L}{2,6}-\d{4})_r(?P<rung>\d{2})\.csv`}})
	if err != nil {
		t.Fatal(err)
	}
	known := []KnownSet{{Set: "Grün-7777", Rungs: []string{"01"}}}
	for i := range 3000 {
		known = append(known, KnownSet{Set: fmt.Sprintf("%s-%04d", []string{"TB", "CRR", "PHR"}[i%3], 3*i%9973), Rungs: []string{"01", "02", "03"}})
	}
	for path, set := range map[string]string{"Griin-7777_r05.csv": "Grün-7777", "Grun-7777_r05.csv": "Grün-7777", "Grün7777_r05.csv": "Grün-7777"} {
		if g := Nearest("u1", path, rs, known); g.Set != set {
			t.Errorf("%s: %+v", path, g)
		}
	}
	if g := Nearest("u1", "TB-3OO0_r04.csv", rs, append(known, KnownSet{Set: "TB-3000", Rungs: []string{"01"}})); g.Set != "TB-3000" || g.Distance != 2 {
		t.Errorf("%+v", g)
	}
}

func TestNightOf(t *testing.T) {
	berlin, err := time.LoadLocation("Europe/Berlin")
	if err != nil {
		t.Skip("no zone data on this machine")
	}
	for _, c := range []struct{ utc, want string }{
		{"2026-03-11T20:45:00Z", "2026-03-11"},
		{"2026-03-12T01:10:00Z", "2026-03-11"},
		{"2026-03-12T10:59:00Z", "2026-03-11"}, // 11:59
		{"2026-03-12T11:00:00Z", "2026-03-12"}, // noon
		{"2026-03-28T23:30:00Z", "2026-03-28"}, // clocks go forward in this night
		{"2026-03-29T09:59:59Z", "2026-03-28"}, // 11:59:59 summer time
		{"2026-03-29T10:00:00Z", "2026-03-29"},
		{"2026-10-25T00:30:00Z", "2026-10-24"}, // the repeated hour, first
		{"2026-10-25T01:30:00Z", "2026-10-24"}, // and second time
		{"2026-01-01T02:00:00Z", "2025-12-31"},
	} {
		at, err := time.Parse(time.RFC3339, c.utc)
		if err != nil {
			t.Fatal(err)
		}
		if got := NightOf(at, berlin, Noon); got != c.want {
			t.Errorf("%s: night %s, want %s", c.utc, got, c.want)
		}
	}
}

func TestCompleteness(t *testing.T) {
	e := Expectation{Roles: []string{RoleBlank, RolePH}, Rungs: 3, Silence: 20 * time.Minute, Every: true, Deadline: 2 * time.Hour}
	scan := func(r string) MemberSummary { return MemberSummary{Role: RoleScan, Rung: r} }
	full := []MemberSummary{scan("01"), scan("02"), scan("03"), {Role: RoleBlank}, {Role: RolePH, Keys: []string{"1", "2", "3"}}}
	at := time.Date(2026, 3, 11, 22, 0, 0, 0, time.UTC)
	for _, c := range []struct {
		name    string
		p       Progress
		after   time.Duration
		state   State
		missing string
	}{
		{"all there, still warm", Progress{Members: full}, 19 * time.Minute, Gathering, ""},
		{"all there and quiet", Progress{Members: full}, 20 * time.Minute, Complete, ""},
		{"end mark", Progress{Members: full, EndSeen: true}, 0, Complete, ""},
		{"planned rungs are there", Progress{Members: full, Planned: []string{"1", "2", "3"}}, 0, Complete, ""},
		{"planned end", Progress{Members: full, PlannedEnd: at.Add(time.Minute)}, time.Minute, Complete, ""},
		{"a planned rung is not", Progress{Members: full, Planned: []string{"1", "2", "3", "4"}}, time.Hour, Gathering, "the scan of planned rung 4"},
		{"no blank yet", Progress{Members: full[:3]}, time.Minute, Gathering, "the blank; the pH table"},
		{"no pH table in the morning", Progress{Members: full[:4]}, 2 * time.Hour, Waiting, "the pH table"},
		{"end mark but no blank", Progress{Members: full[:3], EndSeen: true}, 0, Waiting, "the blank; the pH table"},
		{"too few", Progress{Members: []MemberSummary{scan("1"), full[3], {Role: RolePH, Keys: []string{"1"}}}}, 3 * time.Hour, Waiting, "2 more rungs (1 of 3)"},
		{"a row without scan", Progress{Members: append([]MemberSummary{{Role: RolePH, Keys: []string{"04"}}}, full...)}, 3 * time.Hour, Waiting, "the scan of rung 04 (it has a pH)"},
		{"a scan without row", Progress{Members: append([]MemberSummary{scan("05")}, full...)}, 3 * time.Hour, Waiting, "the pH of rung 05"},
		{"nothing but a table", Progress{Members: full[4:]}, 3 * time.Hour, Waiting, "the scans; the blank; the scan of rung 1, 2, 3 (it has a pH)"},
		{"replicates are one rung", Progress{Members: []MemberSummary{scan("1"), scan("01"), scan("r1"), full[3], full[4]}}, 3 * time.Hour, Waiting, "2 more rungs (1 of 3); the scan of rung 2, 3 (it has a pH)"},
	} {
		c.p.LastSeen = at
		state, missing := Completeness(e, c.p, at.Add(c.after))
		if state != c.state || strings.Join(missing, "; ") != c.missing {
			t.Errorf("%s: %s, lacks %q; want %s, %q", c.name, state, strings.Join(missing, "; "), c.state, c.missing)
		}
	}
	inName := []MemberSummary{{Role: RoleScan, Rung: "1", HasPH: true}, {Role: RoleScan, Rung: "2", HasPH: true}, {Role: RoleScan, Rung: "3", HasPH: true}, {Role: RoleBlank}}
	if state, missing := Completeness(e, Progress{Members: inName, LastSeen: at}, at.Add(time.Hour)); state != Complete {
		t.Errorf("pH in the names: %s, lacks %v", state, missing)
	}
}

// LookAgain promises that nothing changes before its moment and that something does at it.
func TestLookAgainIsTheNextChange(t *testing.T) {
	at := time.Date(2026, 3, 11, 22, 0, 0, 0, time.UTC)
	rapid.Check(t, func(t *rapid.T) {
		minutes := func(name string) time.Duration {
			return time.Duration(rapid.IntRange(0, 200).Draw(t, name)) * time.Minute
		}
		e := Expectation{Rungs: rapid.IntRange(0, 3).Draw(t, "rungs"), Silence: minutes("silence"), Deadline: minutes("deadline")}
		p := Progress{LastSeen: at}
		for i := range rapid.IntRange(0, 3).Draw(t, "scans") {
			p.Members = append(p.Members, MemberSummary{Role: RoleScan, Rung: string(rune('1' + i))})
		}
		if rapid.Bool().Draw(t, "planned end") {
			p.PlannedEnd = at.Add(minutes("end"))
		}
		now := at.Add(minutes("now"))
		state, _ := Completeness(e, p, now)
		next := LookAgain(e, p, now)
		if next.IsZero() {
			if later, _ := Completeness(e, p, now.Add(10000*time.Hour)); later != state {
				t.Fatalf("%s becomes %s although nothing was to be expected", state, later)
			}
			return
		}
		if before, _ := Completeness(e, p, next.Add(-time.Second)); next.After(now) && before != state {
			t.Fatalf("changed before its time: %s to %s", state, before)
		}
		if then, _ := Completeness(e, p, next); then == state {
			t.Fatalf("still %s at %v", state, next)
		}
	})
}

func FuzzMatch(f *testing.F) {
	var all []Rule
	for i, s := range situations() {
		for _, r := range s.rules {
			r.Name = s.name + "/" + r.Name
			r.Folders = []string{string(rune('a' + i))}
			all = append(all, r)
		}
		for _, w := range s.fits {
			f.Add(string(rune('a'+i)), w.path)
		}
	}
	rs, err := Compile(all)
	if err != nil {
		f.Fatal(err)
	}
	f.Fuzz(func(t *testing.T, folder, p string) {
		m, err := rs.Match(folder, p)
		if err != nil {
			if !IsParked(err) || err.Error() == "" {
				t.Fatalf("%v is not an answer to a path", err)
			}
			return
		}
		again, err := rs.Match(folder, Normal(p))
		if err != nil || comparable(m) != comparable(again) {
			t.Fatalf("%q and its normal form differ: %+v, %+v, %v", p, m, again, err)
		}
		if m.HasPH && (m.PH < -2 || m.PH > 16) {
			t.Fatalf("pH %g", m.PH)
		}
	})
}
