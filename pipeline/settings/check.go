package settings

import (
	"errors"
	"fmt"
	"path"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"pkvigil/pipeline/naming"
)

// checker holds the values against each other once they are bound.
type checker struct {
	*binder
	s *Settings
}

// all runs every check. whole says that everything had its right type; then
// things that refer to each other are compared too.
func (c *checker) all(whole bool) {
	c.laboratory()
	c.storage()
	c.folders()
	c.rules(whole)
	c.layouts()
	c.compounds()
	c.instruments()
	c.resources()
	c.complete()
	c.method()
	c.limits()
	c.people()
	c.sinks()
}

// at gives the path of a key of a list element.
func at(list string, i int, key string) string { return fmt.Sprintf("%s[%d].%s", list, i, key) }

func (c *checker) wrong(path, found, expected string) {
	c.fault(path, found, expected, exampleLine(parent(path), last(path)))
}

func (c *checker) word(path, found string, allowed ...string) {
	if slices.Contains(allowed, found) {
		return
	}
	allowed = slices.DeleteFunc(allowed, func(s string) bool { return s == "" })
	example := fmt.Sprintf("%s = %q", last(path), naming.ClosestWord(found, allowed))
	if strings.Contains(exampleLine(parent(path), last(path)), "= [") {
		example = fmt.Sprintf("%s = [%q]", last(path), naming.ClosestWord(found, allowed))
	}
	c.fault(path, fmt.Sprintf("%q", found), "one of "+strings.Join(allowed, ", "), example)
}

// between demands lo <= v <= hi.
func (c *checker) between(path string, v, lo, hi float64, unit string) {
	if v < lo || v > hi {
		c.wrong(path, strconv.FormatFloat(v, 'g', -1, 64), strings.TrimSpace(fmt.Sprintf("%g to %g %s", lo, hi, unit)))
	}
}

func (c *checker) span(path string, v, lo, hi time.Duration) {
	if v < lo || v > hi {
		c.wrong(path, v.String(), fmt.Sprintf("%s to %s", lo, hi))
	}
}

// named demands that every element of a list has a name of its own.
func (c *checker) named(list string, names []string) {
	seen := map[string]int{}
	for i, n := range names {
		p := at(list, i, "name")
		if strings.TrimSpace(n) == "" {
			c.wrong(p, "no name", "a name by which other parts of the file can refer to it")
			continue
		}
		if j, ok := seen[n]; ok {
			c.wrong(p, fmt.Sprintf("%q, which number %d of this list is called too (line %d)", n, j+1, c.lines.of(at(list, j, "name"))), "a name of its own")
			continue
		}
		seen[n] = i
	}
}

func (c *checker) clock(path, v string, empty bool) {
	if v == "" && empty {
		return
	}
	if _, err := time.Parse("15:04", v); err != nil {
		c.wrong(path, fmt.Sprintf("%q", v), "a time of day as HH:MM")
	}
}

func (c *checker) date(path, v string) {
	if v == "" {
		return
	}
	if _, err := time.Parse(time.DateOnly, v); err != nil {
		c.wrong(path, fmt.Sprintf("%q", v), "a date as YYYY-MM-DD")
	}
}

func (c *checker) zone(path, v string, empty bool) {
	if v == "" && empty {
		return
	}
	if _, err := time.LoadLocation(v); err != nil || v == "" || v == "Local" {
		c.fault(path, fmt.Sprintf("%q", v), "a zone of the IANA list", last(path)+` = "Europe/Vienna"`)
	}
}

func (c *checker) laboratory() {
	l := c.s.Laboratory
	c.zone("laboratory.zone", l.Zone, false)
	c.clock("laboratory.night_begins", l.NightBegins, false)
	c.clock("laboratory.night_ends", l.NightEnds, false)
	c.clock("laboratory.brief_at", l.BriefAt, true)
}

func (c *checker) storage() {
	s := c.s.Storage
	c.between("storage.max_file_mib", float64(s.MaxFileMiB), 1, 1024, "MiB")
	c.between("storage.workers", float64(s.Workers), 0, 256, "")
	c.span("storage.job_timeout", s.JobTimeout, 10*time.Second, 24*time.Hour)
	if s.DataDir == "" {
		c.wrong("storage.data_dir", "nothing", "a folder for the program's own data")
	}
	c.oneOf("storage.database_url_file", s.DatabaseURLEnv, s.DatabaseURLFile, "database_url_env")
	c.envName("storage.database_url_env", s.DatabaseURLEnv)
}

// oneOf refuses a secret that is declared in two places.
func (c *checker) oneOf(path, env, file, other string) {
	if env != "" && file != "" {
		c.fault(path, "both "+other+" and "+last(path), "one of the two", "")
	}
}

// envName refuses the secret itself where the name of a variable belongs. The value is not repeated.
func (c *checker) envName(path, v string) {
	if v != "" && !envPattern().MatchString(v) {
		c.wrong(path, "something that is no name of an environment variable", "capital letters, digits and underscores")
	}
}

func envPattern() *regexp.Regexp { return regexp.MustCompile(`^[A-Za-z_][A-Za-z0-9_]*$`) }

func (c *checker) folders() {
	var names []string
	for i, f := range c.s.Folders {
		names = append(names, f.Name)
		c.folder(i, f)
		for j := range i {
			c.apart(i, j)
		}
	}
	c.named("folder", names)
}

func (c *checker) folder(i int, f Folder) {
	p := func(k string) string { return at("folder", i, k) }
	if !strings.HasPrefix(f.Path, "/") && !regexp.MustCompile(`^[A-Za-z]:[\\/]`).MatchString(f.Path) {
		c.wrong(p("path"), fmt.Sprintf("%q", f.Path), "an absolute path")
	}
	if f.MarkerFile != "" && (strings.HasPrefix(f.MarkerFile, "/") || slices.Contains(strings.Split(f.MarkerFile, "/"), "..")) {
		c.wrong(p("marker_file"), fmt.Sprintf("%q", f.MarkerFile), "a path inside the folder")
	}
	c.span(p("settle"), f.Settle, 0, time.Hour)
	c.span(p("sweep"), f.Sweep, 100*time.Millisecond, time.Hour)
	c.span(p("silence_deadline"), f.Silence, time.Minute, 7*24*time.Hour)
	c.span(p("clock_ahead"), f.ClockAhead, -366*24*time.Hour, 366*24*time.Hour)
	c.zone(p("zone"), f.Zone, true)
	c.clock(p("expect_first"), f.ExpectFrom, true)
	for _, g := range f.Ignore {
		if _, err := path.Match(g, "x"); err != nil {
			c.wrong(p("ignore"), fmt.Sprintf("%q", g), "a pattern with * and ? for file names")
		}
	}
	if f.Instrument != "" && len(c.s.Instruments) > 0 && c.s.InstrumentByName(f.Instrument) == nil {
		c.refer(p("instrument"), f.Instrument, "instrument", c.instrumentNames())
	}
}

// apart refuses two folders of which one lies in the other: each file would be offered twice.
func (c *checker) apart(i, j int) {
	a, b := c.s.Folders[i], c.s.Folders[j]
	pa, pb := path.Clean(a.Path)+"/", path.Clean(b.Path)+"/"
	if a.Path == "" || b.Path == "" || (!strings.HasPrefix(pa, pb) && !strings.HasPrefix(pb, pa)) {
		return
	}
	c.fault(at("folder", i, "path"), fmt.Sprintf("%q, which overlaps the path of folder %q (%q)", a.Path, b.Name, b.Path),
		"folders that do not contain each other, because each file would be taken in twice", "")
}

// refer answers a name that nothing in the file bears.
func (c *checker) refer(path, found, kind string, names []string) {
	e := fmt.Sprintf("the name of a [[%s]]; there is none in this file", kind)
	example := ""
	if len(names) > 0 {
		e = fmt.Sprintf("the name of a [[%s]]: %s", kind, strings.Join(names, ", "))
		example = fmt.Sprintf("%s = %q", last(path), naming.ClosestWord(found, names))
	}
	c.fault(path, fmt.Sprintf("%q", found), e, example)
}

func (c *checker) instrumentNames() []string {
	var out []string
	for _, x := range c.s.Instruments {
		out = append(out, x.Name)
	}
	return out
}

func (c *checker) folderNames() []string {
	var out []string
	for _, x := range c.s.Folders {
		out = append(out, x.Name)
	}
	return out
}

// rules compiles the naming rules; their faults get the line of their key.
func (c *checker) rules(whole bool) {
	for i, r := range c.s.Rules {
		for _, f := range r.Folders {
			if c.s.FolderByName(f) == nil {
				c.refer(at("rule", i, "folders"), f, "folder", c.folderNames())
			}
		}
	}
	rs, err := naming.Compile(c.s.Rules)
	if err == nil {
		c.s.naming = rs
		return
	}
	if !whole {
		return // a value of the wrong type has been reported; its emptiness is no second fault
	}
	many, ok := err.(interface{ Unwrap() []error })
	if !ok {
		c.fault("rule", err.Error(), "naming rules that can be used", "")
		return
	}
	for _, e := range many.Unwrap() {
		var r *naming.RuleError
		if !errors.As(e, &r) {
			continue
		}
		found := fmt.Sprintf("%q", r.Found)
		if r.Err != nil {
			found += fmt.Sprintf(" (%v)", r.Err)
		}
		c.fault(at("rule", r.Index, r.Key), found, r.Expected, r.Example)
	}
}

func (c *checker) complete() {
	k := c.s.Complete
	for _, r := range k.Roles {
		c.word("complete.roles", r, naming.Roles()...)
	}
	c.between("complete.rungs_min", float64(k.Rungs), 1, 1000, "rungs")
	c.span("complete.silence", k.Silence, 0, 7*24*time.Hour)
	c.span("complete.deadline", k.Deadline, 0, 30*24*time.Hour)
}

// Expectation is what makes a set of a compound whole. A set of the
// three-solution profile is whole with three.
func (s *Settings) Expectation(c *Compound) naming.Expectation {
	e := naming.Expectation{Roles: s.Complete.Roles, Rungs: s.Complete.Rungs, Silence: s.Complete.Silence, Every: s.Complete.Every, Deadline: s.Complete.Deadline}
	if c != nil && c.Profile == "three-solution" {
		e.Rungs = min(e.Rungs, DefaultThreeSolution)
	}
	return e
}
