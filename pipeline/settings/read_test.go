package settings

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"pkvigil/pipeline/naming"
)

func TestExampleReads(t *testing.T) {
	s, err := Read([]byte(Example()), "pkvigil.example.toml")
	if err != nil {
		t.Fatal(err)
	}
	if s.Laboratory.Name != "Quillmere" || len(s.Folders) != 3 || s.Folders[1].Settle != DefaultSettle || s.Complete.Deadline != 2*time.Hour {
		t.Errorf("%+v", s)
	}
	for path, want := range map[string]string{"TB-2219_r04_corr.csv": "TB-2219", "RI-B_n041_open_ph.csv": "RI-B_n041_open"} {
		if m, err := s.Naming().Match("u1", path); err != nil || m.Set != want {
			t.Errorf("%s: %+v, %v", path, m, err)
		}
	}
	if m, err := s.Naming().Match("desk", "plan_2026-03-09.csv"); err != nil || m.Role != naming.RolePlan {
		t.Errorf("%+v, %v", m, err)
	}
}

// TestFaults: each file has one fault; the error must stand on its line, name
// its key, and say what was found and what is right.
func TestFaults(t *testing.T) {
	const folder = "[[folder]]\nname = \"u1\"\npath = \"/x\"\n"
	const compound = "[[compound]]\nname = \"A\"\ncharge = -1\n"
	for _, c := range []struct{ name, text, key, says string }{
		{"mistyped key", folder + "settel = \"5s\" #!", `folder "u1".settel`, `"settle"`},
		{"key of another table", folder + "u_buffer = 0.01 #!", `folder "u1".u_buffer`, "[budget]"},
		{"unknown table", "[folders] #!\nx = 1", "folders", `"folder"`},
		{"unknown top key", "zone = \"UTC\" #!", "zone", "laboratory"},
		{"table instead of list", "[folder] #!\nname = \"u1\"", "folder", "[[folder]]"},
		{"list instead of table", "[[laboratory]] #!\nname = \"u1\"", "laboratory", "[laboratory]"},
		{"number for text", folder + "zone = 5 #!", `folder "u1".zone`, "text in quotes"},
		{"text for number", "[budget]\nu_buffer = \"0.01\" #!", "budget.u_buffer", "a number"},
		{"fraction for whole number", "[complete]\nrungs_min = 5.5 #!", "complete.rungs_min", "a whole number"},
		{"not a number", "[budget]\nu_buffer = nan #!", "budget.u_buffer", "a number"},
		{"duration without unit", folder + "settle = \"5\" #!", `folder "u1".settle`, "with its unit"},
		{"negative duration", folder + "settle = \"-5s\" #!", `folder "u1".settle`, "with its unit"},
		{"text for list", "[complete]\nroles = \"blank\" #!", "complete.roles", "a list of texts"},
		{"number in a list of texts", "[complete]\nroles = [\n  \"blank\",\n  7, #!\n]", "complete.roles[1]", "text in quotes"},
		{"unknown role", "[complete]\nroles = [\"blanc\"] #!", "complete.roles", `"blank"`},
		{"clock in the wrong century", folder + "clock_ahead = \"-9000d\" #!", `folder "u1".clock_ahead`, "h"},
		{"unknown zone", "[laboratory]\nzone = \"Europe/Viena\" #!", "laboratory.zone", "IANA"},
		{"time of day", "[laboratory]\nnight_begins = \"6 pm\" #!", "laboratory.night_begins", "HH:MM"},
		{"relative path", "[[folder]]\nname = \"u1\"\npath = \"exports\" #!", `folder "u1".path`, "absolute"},
		{"marker outside", folder + "marker_file = \"../x\" #!", `folder "u1".marker_file`, "inside"},
		{"bad glob", folder + "ignore = [\"[\"] #!", `folder "u1".ignore`, "pattern"},
		{"two folders of one name", folder + "[[folder]]\nname = \"u1\" #!\npath = \"/y\"", `folder "u1".name`, "a name of its own"},
		{"nested folders", folder + "[[folder]]\nname = \"u2\"\npath = \"/x/sub\" #!", `folder "u2".path`, "twice"},
		{"no name", "[[folder]] #!\npath = \"/x\"", "folder number 1.name", "a name"},
		{"instrument that is none", "[[instrument]]\nname = \"U1\"\n" + folder + "instrument = \"U11\" #!", `folder "u1".instrument`, `"U1"`},
		{"pattern that is none", "[[rule]]\nname = \"a\"\npattern = '(' #!", `rule "a".pattern`, "RE2"},
		{"pattern missing", "[[rule]] #!\nname = \"a\"", `rule "a".pattern`, "regular expression"},
		{"template of an unknown group", "[[rule]]\nname = \"a\"\npattern = '(?P<set>x)'\nset = \"${sett}\" #!", `rule "a".set`, "${set}"},
		{"example that does not fit", "[[rule]]\nname = \"a\"\npattern = 'x'\nexample = [\"y\"] #!", `rule "a".example`, "fits the rule's own pattern"},
		{"role word", "[[rule]]\nname = \"a\"\npattern = 'x'\nroles = { leer = \"blanc\" } #!", `rule "a".roles.leer`, "blank"},
		{"folder that is none", folder + "[[rule]]\nname = \"a\"\npattern = 'x'\nfolders = [\"u2\"] #!", `rule "a".folders`, `"u1"`},
		{"sets pattern", compound + "sets = 'A-(' #!", `compound "A".sets`, "RE2"},
		{"lot template", compound + "sets = 'A-(?P<lot>\\d+)'\nlot = \"${los}\" #!", `compound "A".lot`, "los"},
		{"charge missing", "[[compound]] #!\nname = \"A\"", `compound "A".charge`, "charge of the acid form"},
		{"pKa and steps", compound + "steps = 2\npka = [8.2] #!", `compound "A".pka`, "2"},
		{"pKa descending", compound + "steps = 2\npka = [8.2, 4] #!", `compound "A".pka`, "ascending"},
		{"impossible pKa", compound + "pka = [82] #!", `compound "A".pka`, "-2 to 16"},
		{"reference without u", compound + "assigned = 6.02 #!", `compound "A"`, "uncertainty"},
		{"range turned round", compound + "range = [640, 400] #!", `compound "A".range`, "the shorter first"},
		{"odd clear window", compound + "clear_window = [700] #!", `compound "A".clear_window`, "pairs"},
		{"profile", compound + "profile = \"three\" #!", `compound "A".profile`, "three-solution"},
		{"date", compound + "since = \"12.1.2026\" #!", `compound "A".since`, "YYYY-MM-DD"},
		{"shared by nobody", "[[resource]]\nname = \"CB\"\nkind = \"buffer\"\nshared_by = [\"U9\"] #!", `resource "CB".shared_by`, "none in this file"},
		{"until before from", "[[resource]]\nname = \"CB\"\nkind = \"buffer\"\nfrom = 2026-03-02\nuntil = 2026-03-01 #!", `resource "CB".until`, "later"},
		{"activity model", "[method]\nactivity = \"pitzer\" #!", "method.activity", "davies"},
		{"coverage factor", "[method]\ncoverage_factor = 0 #!", "method.coverage_factor", "1 to 4"},
		{"few draws", "[method]\nmonte_carlo = 10 #!", "method.monte_carlo", "200"},
		{"baseline shorter than young", "[charts]\nyoung_nights = 10\nbaseline_nights = 8 #!", "charts.baseline_nights", "young_nights"},
		{"check without limits", "[[check]]\ncheck = \"x\" #!", "check number 1.check", "hold_when"},
		{"limits turned round", "[[check]]\ncheck = \"x\"\nhold_when = [2, 1] #!", "check number 1.hold_when", "low and a high"},
		{"layout word", "[[layout]]\nname = \"l\"\nordinate = \"extinction\" #!", `layout "l".ordinate`, "absorbance"},
		{"two commas", "[[layout]]\nname = \"l\"\ndecimal = \",\"\ndelimiter = \",\" #!", `layout "l".delimiter`, "another delimiter"},
		{"mail address", "[mail]\nhost = \"h\"\nfrom = \"a b@c\" #!", "mail.from", "address"},
		{"mail in clear", "[mail]\nhost = \"relay.example.org\"\nfrom = \"a@b.c\"\ntls = \"off\" #!", "mail.tls", "starttls"},
		{"what to tell", "[[person]]\nname = \"P\"\ntells = [\"everything\"] #!", `person "P".tells`, "cases"},
		{"header injection", "[mail]\nhost = \"h\"\nfrom = \"a@b.c\\nBcc: x@y.z\" #!", "mail.from", "address"},
		{"webhook in clear", "[[webhook]]\nname = \"w\"\nsecret_env = \"S\"\nurl = \"http://example.org/x\" #!", `webhook "w".url`, "https"},
		{"webhook without secret", "[[webhook]] #!\nname = \"w\"\nurl = \"https://example.org/x\"", `webhook "w".secret_env`, "secret_file"},
		{"listen", "[serve]\nlisten = \"8711\" #!", "serve.listen", "port"},
		{"broken TOML", "[serve]\nlisten = #!", "serve.listen", "TOML"},
	} {
		t.Run(c.name, func(t *testing.T) {
			s, err := Read([]byte(c.text), "lab.toml")
			if err == nil {
				t.Fatalf("accepted: %+v", s)
			}
			line := 1 + strings.Count(c.text[:strings.Index(c.text, "#!")], "\n")
			all := Errors(err)
			if len(all) != 1 {
				t.Fatalf("%d faults reported for one: %v", len(all), err)
			}
			e := all[0]
			if !strings.HasPrefix(e.Key, c.key) || !strings.Contains(e.Error(), c.says) || e.File != "lab.toml" || e.Found == "" || e.Expected == "" {
				t.Errorf("%v", e)
			}
			// A key that is missing is reported where its table begins, or at the table's last key.
			if e.Line != line && !(strings.Contains(e.Found, "nothing") && e.Line > 0) {
				t.Errorf("line %d, the fault is on line %d: %v", e.Line, line, e)
			}
		})
	}
}

func TestAllFaultsAtOnceInOrderOfLines(t *testing.T) {
	text := `[laboratory]
zone = "Europe/Viena"

[[folder]]
name = "u1"
path = "/srv/u1"
settel = "5s"
sweep = 15

[[compound]]
name = "A"
charge = "minus one"
`
	_, err := Read([]byte(text), "lab.toml")
	var lines []int
	for _, e := range Errors(err) {
		lines = append(lines, e.Line)
	}
	if fmt.Sprint(lines) != "[2 7 8 12]" {
		t.Errorf("faults on lines %v\n%v", lines, err)
	}
	var one *Error
	if !errors.As(err, &one) {
		t.Errorf("%T holds no *Error", err)
	}
}

// A secret in the file is refused with the way to do it, and is not repeated
// in the error, which goes to logs and mails.
func TestSecretsAreRefusedAndNotRepeated(t *testing.T) {
	const secret = "hunter2-geheim"
	for _, c := range []struct{ name, text, says string }{
		{"password", "[mail]\npassword = \"" + secret + "\"", "password_env"},
		{"passwd", "[mail]\npasswd = \"" + secret + "\"", "password_file"},
		{"webhook secret", "[[webhook]]\nname = \"w\"\nurl = \"https://x.y/z\"\nsecret_env = \"S\"\nsecret = \"" + secret + "\"", "secret_file"},
		{"token", "[[webhook]]\nname = \"w\"\nurl = \"https://x.y/z\"\nsecret_env = \"S\"\ntoken = \"" + secret + "\"", "secret_env"},
		{"database address", "[storage]\ndatabase_url = \"postgres://u:" + secret + "@h/d\"", "database_url_env"},
		{"url", "[storage]\nurl = \"postgres://u:" + secret + "@h/d\"", "database_url_file"},
		{"value in place of a name", "[mail]\npassword_env = \"" + secret + "\"", "environment variable"},
		{"address in place of a name", "[storage]\ndatabase_url_env = \"postgres://u:" + secret + "@h/d\"", "environment variable"},
		{"user in a webhook", "[[webhook]]\nname = \"w\"\nsecret_env = \"S\"\nurl = \"https://u:" + secret + "@x.y/z\"", "without them"},
		{"token in a webhook", "[[webhook]]\nname = \"w\"\nsecret_env = \"S\"\nurl = \"https://x.y/z?access_token=" + secret + "\"", "without it"},
		{"wrong type", "[mail]\npassword = 5", "password_env"},
		{"broken line", "[mail]\npassword = " + secret, "TOML"},
		{"broken string", "[mail]\npassword = \"" + secret, "TOML"},
	} {
		_, err := Read([]byte(c.text), "lab.toml")
		if err == nil {
			t.Errorf("%s: accepted", c.name)
			continue
		}
		if strings.Contains(err.Error(), secret) || strings.Contains(err.Error(), "hunter2") {
			t.Errorf("%s: the error repeats the secret: %v", c.name, err)
		}
		if !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v", c.name, err)
		}
	}
}

func TestStatedZeroIsNotTheDefault(t *testing.T) {
	s, err := Read([]byte("[complete]\nevery_row = false\nroles = []\n[[instrument]]\nname = \"U1\"\nu_amount = 0\nu_baseline = 0.0\n"), "x.toml")
	if err != nil {
		t.Fatal(err)
	}
	if s.Complete.Every || len(s.Complete.Roles) != 0 || s.Instruments[0].UAmount != 0 || s.Instruments[0].UBaseline != 0 {
		t.Errorf("%+v %+v", s.Complete, s.Instruments[0])
	}
	if s.Instruments[0].SigmaPH != DefaultSigmaPH {
		t.Errorf("what is not stated has its default: %+v", s.Instruments[0])
	}
}

func TestDatesAndTimesWithoutQuotes(t *testing.T) {
	s, err := Read([]byte("[laboratory]\nbrief_at = 07:15:00\n[[compound]]\nname = \"A\"\ncharge = -1\nsince = 2026-01-12\n"), "x.toml")
	if err != nil {
		t.Fatal(err)
	}
	if s.Laboratory.BriefAt != "07:15" || s.Compounds[0].Since != "2026-01-12" {
		t.Errorf("%q %q", s.Laboratory.BriefAt, s.Compounds[0].Since)
	}
}

func TestParseDuration(t *testing.T) {
	for text, want := range map[string]time.Duration{"5s": 5 * time.Second, "3d": 72 * time.Hour, "1d12h": 36 * time.Hour, "0.5d": 12 * time.Hour, "90m": 90 * time.Minute} {
		if d, err := ParseDuration(text); err != nil || d != want {
			t.Errorf("%s = %v, %v", text, d, err)
		}
	}
	for _, text := range []string{"", "d", "5", "3 d", "3d5", "xd", "1e9d"} {
		if d, err := ParseDuration(text); err == nil {
			t.Errorf("%q reads as %v", text, d)
		}
	}
}

func TestCompoundOf(t *testing.T) {
	s, err := Read([]byte(`
[[compound]]
name = "CRR"
charge = -1
sets = '^CRR-(?P<lot>\d+)$'
lot = "C ${lot}"
[[compound]]
name = "TB"
charge = -1
[[compound]]
name = "wide"
charge = -1
sets = '^CRR-9'
`), "x.toml")
	if err != nil {
		t.Fatal(err)
	}
	for set, want := range map[string]string{"CRR-104": "CRR/C 104", "TB-2219": "TB/", "TB": "TB/"} {
		c, lot, err := s.CompoundOf(set)
		if err != nil || c.Name+"/"+lot != want {
			t.Errorf("%s: %v %q %v", set, c, lot, err)
		}
	}
	for set, n := range map[string]int{"CRR-904": 2, "TBX-1": 0, "xCRR-104": 0, "CRR-104x": 0, "": 0} {
		c, _, err := s.CompoundOf(set)
		var ce *CompoundError
		if !errors.As(err, &ce) || len(ce.Names) != n || c != nil {
			t.Errorf("%q: %v %v", set, c, err)
		}
	}
}

func TestLookups(t *testing.T) {
	s, err := Read([]byte(Example()), "x.toml")
	if err != nil {
		t.Fatal(err)
	}
	if s.InstrumentByName("U2").Electrode != "E-34" || s.InstrumentByName("U3") != nil || s.FolderByName("desk") == nil || s.FolderByName("") != nil {
		t.Error("lookups by name")
	}
	s.Folders[0].Zone = "Asia/Tokyo"
	if s.ZoneOf("u1").String() != "Asia/Tokyo" || s.ZoneOf("u2").String() != "Europe/London" || s.ZoneOf("none").String() != "Europe/London" {
		t.Error("zones")
	}
	if Hash([]byte("a")) == Hash([]byte("b")) || len(Hash(nil)) != 64 {
		t.Error("hash")
	}
	three := s.Compounds[0]
	three.Profile = "three-solution"
	if s.Expectation(&three).Rungs != 3 || s.Expectation(&s.Compounds[0]).Rungs != 5 {
		t.Error("a three-solution set is whole with three")
	}
}

// Comments and blank lines above and inside change nothing but the lines that
// errors name.
func TestLinesMoveWithTheText(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		fill := func(name string) string {
			return strings.Join(rapid.SliceOfN(rapid.SampledFrom([]string{"", "# settel = 1", "   ", "# [[folder]]", "#\"\"\"", "# '''"}), 0, 4).Draw(t, name), "\n") + "\n"
		}
		text := fill("a") + "[laboratory]\n" + fill("b") + "name = '''\nsettel = 1\n[[folder]]\n'''\n" + fill("c") +
			"[[folder]]\n" + fill("d") + "name = \"u#1\" # settel\n" + fill("e") + "path = \"/x\"\nignore = [\n  \"a]\", # ]\n  'b\"',\n]\n" + fill("f")
		bad := "settel = \"5s\""
		_, err := Read([]byte(text+bad+"\n"), "x.toml")
		all := Errors(err)
		want := 1 + strings.Count(text, "\n")
		if len(all) != 1 || all[0].Line != want || all[0].Key != `folder "u#1".settel` {
			t.Fatalf("fault on line %d reported as %v", want, err)
		}
	})
}

func FuzzRead(f *testing.F) {
	f.Add(Example())
	f.Add("[[folder]]\nname = \"u1\"\npath=\"/x\"\nsettle = { a = [1, {b=2}] }\n")
	f.Add("a.b.c = 1\n[a.d]\n\"x y\" = '''z'''\n[[rule]]\n[rule.roles]\nx = \"blank\"\n")
	f.Add("rule = [{name=\"a\", pattern='x'}, {name=\"a\"}]")
	f.Fuzz(func(t *testing.T, text string) {
		s, err := Read([]byte(text), "f.toml")
		if (s == nil) == (err == nil) {
			t.Fatalf("settings %v with error %v", s, err)
		}
		if err != nil && len(Errors(err)) == 0 {
			t.Fatalf("an error without a fault: %v", err)
		}
		for _, e := range Errors(err) {
			if e.Line < 0 || e.Line > 1+strings.Count(text, "\n") {
				t.Fatalf("line %d of %d", e.Line, 1+strings.Count(text, "\n"))
			}
		}
	})
}
