package naming

import (
	"errors"
	"fmt"
	"maps"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"golang.org/x/text/unicode/norm"
)

// RevCorrected is the Rev of a name that says it is a correction: it counts
// before every numbered version.
const RevCorrected = 1_000_000

// Rules are the compiled rules of one settings file. They are read-only and
// safe for concurrent use.
type Rules struct {
	rules []compiled
}

// compiled is a rule with its patterns and templates made ready.
type compiled struct {
	Rule
	path, column     *regexp.Regexp
	set, series, run template
	roles            map[string]string // lower-case word -> role
}

// List returns the rules as given to Compile.
func (r *Rules) List() []Rule {
	out := make([]Rule, len(r.rules))
	for i := range r.rules {
		out[i] = r.rules[i].Rule
	}
	return out
}

// Rule returns the rule of a name.
func (r *Rules) Rule(name string) (Rule, bool) {
	for i := range r.rules {
		if r.rules[i].Name == name {
			return r.rules[i].Rule, true
		}
	}
	return Rule{}, false
}

// Match finds the one rule a path fits and reads its groups. folder is the
// name of the folder, path is relative to it. The error is a *NoRuleError, a
// *TwoRulesError or, when a group holds something impossible, a *ValueError;
// with each of them the file is parked.
func (r *Rules) Match(folder, path string) (Match, error) {
	path = Normal(path)
	var hit *compiled
	var names []string
	var groups map[string]string
	for i := range r.rules {
		c := &r.rules[i]
		if !c.appliesTo(folder) {
			continue
		}
		g := capture(c.path, path)
		if g == nil {
			continue
		}
		names = append(names, c.Name)
		if hit == nil {
			hit, groups = c, g
		}
	}
	switch len(names) {
	case 0:
		return Match{}, &NoRuleError{Folder: folder, Path: path}
	case 1:
	default:
		return Match{}, &TwoRulesError{Folder: folder, Path: path, Rules: names}
	}
	m, err := hit.read(groups)
	if err != nil {
		err.Folder, err.Path, err.Rule = folder, path, hit.Name
		return Match{}, err
	}
	m.Columns = hit.column != nil && m.Role == RoleScan
	return m, nil
}

// MatchColumn sorts one trace of a file whose rule has a column pattern: m is
// what Match said of the file, label the trace's label. Groups of the file's
// name stay in force where the label has none of that name. The error is a
// *NoRuleError with the label as its Path when the label does not fit, or a
// *ValueError.
func (r *Rules) MatchColumn(m Match, label string) (Match, error) {
	for i := range r.rules {
		c := &r.rules[i]
		if c.Name != m.Rule {
			continue
		}
		if c.column == nil {
			return m, nil
		}
		label = Normal(label)
		g := capture(c.column, label)
		if g == nil {
			return Match{}, &NoRuleError{Folder: "columns of rule " + m.Rule, Path: label}
		}
		all := maps.Clone(m.Groups)
		if all == nil {
			all = map[string]string{}
		}
		for k, v := range g {
			if v != "" || all[k] == "" {
				all[k] = v
			}
		}
		out, err := c.read(all)
		if err != nil {
			err.Folder, err.Path, err.Rule = "columns", label, c.Name
			return Match{}, err
		}
		return out, nil
	}
	return Match{}, fmt.Errorf("naming: no rule named %q", m.Rule)
}

// Normal brings a path into the one form that patterns see: Unicode NFC,
// every kind of no-break space a space, slashes forward, no empty or "."
// element, no leading slash.
func Normal(path string) string {
	path = norm.NFC.String(path)
	path = strings.NewReplacer("\u00a0", " ", "\u202f", " ", "\u2007", " ", `\`, "/").Replace(path)
	if !strings.Contains(path, "//") && !strings.HasPrefix(path, "/") && !strings.HasPrefix(path, "./") && !strings.Contains(path, "/./") {
		return path
	}
	var keep []string
	for e := range strings.SplitSeq(path, "/") {
		if e != "" && e != "." {
			keep = append(keep, e)
		}
	}
	return strings.Join(keep, "/")
}

// Fold is Normal without regard to case: two paths that fold alike name the
// same file on a share that does not tell capitals from small letters.
func Fold(path string) string {
	// Upper first, so that letters with two small forms meet; rune by rune, as file systems do it.
	return norm.NFC.String(strings.ToLower(strings.ToUpper(Normal(path))))
}

// RungKey is a rung, position or row label as it is compared: trimmed, folded,
// without a leading "r" or "rung" before digits, and without leading zeros,
// so that "r07", "R7" and "007" are one rung.
func RungKey(s string) string {
	s = strings.TrimSpace(Fold(s))
	for _, p := range []string{"rung", "r"} {
		if rest, ok := strings.CutPrefix(s, p); ok {
			rest = strings.TrimLeft(rest, " _-")
			if rest != "" && allDigits(rest) {
				s = rest
				break
			}
		}
	}
	// Zeros before a digit go, in every run of digits: A05 and A5 are one tray position.
	var b strings.Builder
	inNumber := false
	for i := 0; i < len(s); i++ {
		c := s[i]
		digit := c >= '0' && c <= '9'
		if digit && !inNumber && c == '0' && i+1 < len(s) && s[i+1] >= '0' && s[i+1] <= '9' {
			continue
		}
		// After a decimal sign zeros carry meaning.
		inNumber = digit || (inNumber && (c == '.' || c == ','))
		b.WriteByte(c)
	}
	return b.String()
}

func allDigits(s string) bool {
	return strings.IndexFunc(s, func(r rune) bool { return r < '0' || r > '9' }) < 0
}

func (c *compiled) appliesTo(folder string) bool {
	return len(c.Folders) == 0 || slices.Contains(c.Folders, folder)
}

// capture gives the named groups of a match, nil when there is none. A group
// that took no part is the empty string.
func capture(re *regexp.Regexp, s string) map[string]string {
	sub := re.FindStringSubmatch(s)
	if sub == nil {
		return nil
	}
	g := make(map[string]string, len(sub))
	for i, n := range re.SubexpNames() {
		if n != "" && (sub[i] != "" || g[n] == "") {
			g[n] = sub[i]
		}
	}
	return g
}

// read turns captured groups into a Match.
func (c *compiled) read(g map[string]string) (Match, *ValueError) {
	m := Match{
		Rule: c.Name, Role: c.Rule.Role, Groups: g,
		Rung: g["rung"], Rep: g["rep"], Pos: first(g["pos"], g["seq"]),
		Slot: first(g["slot"], c.Slot), Inst: g["inst"], Night: g["night"],
		Copy: g["copy"] != "",
	}
	if m.Role == "" {
		m.Role = RoleScan
	}
	if w := g["role"]; w != "" {
		role, ok := c.roles[strings.ToLower(w)]
		if !ok {
			return m, &ValueError{Group: "role", Found: w, Expected: "a word whose role is known",
				Remedy: fmt.Sprintf("say in the rule what it is, for example roles = { %q = %q }", w, RoleBlank)}
		}
		m.Role = role
	}
	for _, step := range []func(map[string]string, *Match) *ValueError{c.readTime, c.readNumbers, c.readRevision, c.readCheckDigit} {
		if err := step(g, &m); err != nil {
			return m, err
		}
	}
	// Templates see the normalised date, so that 260311 and 2026-03-11 name one set.
	m.Set = c.set.fill(g, &m)
	m.Series = c.series.fill(g, &m)
	m.Run = c.run.fill(g, &m)
	return m, nil
}

func (c *compiled) readTime(g map[string]string, m *Match) *ValueError {
	if s := g["date"]; s != "" {
		layouts := []string{"20060102", "2006-01-02", "060102"}
		if c.DateFormat != "" {
			layouts = []string{c.DateFormat}
		}
		t, ok := parseTime(s, layouts)
		if !ok {
			return &ValueError{Group: "date", Found: s, Expected: "a date written " + strings.Join(layouts, " or "),
				Remedy: "another order of day, month and year is declared with date_format"}
		}
		m.Date = t.Format(time.DateOnly)
	}
	if s := g["stamp"]; s != "" {
		t, ok := parseTime(s, stampLayouts())
		if !ok {
			return &ValueError{Group: "stamp", Found: s, Expected: "a date with time of day such as 20260311T214533 or 2026-03-11_21-45-33"}
		}
		m.Stamp = t.Format("2006-01-02T15:04:05")
		if m.Date == "" {
			m.Date = t.Format(time.DateOnly)
		}
	}
	return nil
}

// stampLayouts are the ways a file name writes date and time together.
func stampLayouts() []string {
	return []string{
		"20060102T150405", "20060102-150405", "20060102_150405", "20060102150405", "20060102 150405",
		"2006-01-02T15:04:05", "2006-01-02T15-04-05", "2006-01-02_15-04-05", "2006-01-02 15-04-05", "2006-01-02T150405",
		"2006-01-02_150405", "2006-01-02 15.04.05", "20060102T1504", "20060102-1504", "20060102_1504",
		"060102-150405", "060102_150405", "060102T150405",
	}
}

func parseTime(s string, layouts []string) (time.Time, bool) {
	for _, l := range layouts {
		if t, err := time.Parse(l, s); err == nil {
			return t, true
		}
	}
	return time.Time{}, false
}

func (c *compiled) readNumbers(g map[string]string, m *Match) *ValueError {
	if s := g["ph"]; s != "" {
		v, ok := number(s, c.PHPoint)
		if !ok || v < -2 || v > 16 {
			e := &ValueError{Group: "ph", Found: s, Expected: "a pH between -2 and 16"}
			if !ok && c.PHPoint == "" {
				e.Remedy = `another sign for the decimal point is declared with ph_point, for example ph_point = "p"`
			}
			return e
		}
		m.PH, m.HasPH = v, true
	}
	if s := g["celsius"]; s != "" {
		v, ok := number(s, c.PHPoint)
		if !ok || v < -50 || v > 200 {
			return &ValueError{Group: "celsius", Found: s, Expected: "a temperature in degrees Celsius"}
		}
		m.Celsius, m.HasCelsius = v, true
	}
	if s := g["percent"]; s != "" {
		v, ok := number(s, c.PHPoint)
		if !ok || v < 0 || v > 100 {
			return &ValueError{Group: "percent", Found: s, Expected: "a percentage from 0 to 100"}
		}
		m.Percent, m.HasPercent = v, true
	}
	return nil
}

// number reads a decimal whose point may be ".", "," or the declared sign.
func number(s, point string) (float64, bool) {
	if point != "" {
		s = strings.Replace(s, point, ".", 1)
	}
	s = strings.Replace(s, ",", ".", 1)
	v, err := strconv.ParseFloat(s, 64)
	return v, err == nil && v == v
}

// readRevision orders versions of one file: a correction before every
// numbered version, a higher number before a lower, a number before none.
func (c *compiled) readRevision(g map[string]string, m *Match) *ValueError {
	if s := g["rev"]; s != "" {
		n, err := strconv.Atoi(s)
		if err != nil || n < 0 || n >= RevCorrected {
			return &ValueError{Group: "rev", Found: s, Expected: "a version number"}
		}
		m.Rev = n
	}
	if g["fix"] != "" {
		m.Rev += RevCorrected
	}
	return nil
}

func first(a, b string) string {
	if a != "" {
		return a
	}
	return b
}

// IsParked reports whether an error of Match or MatchColumn means that the
// file is to be parked, as opposed to a fault of the program.
func IsParked(err error) bool {
	var a *NoRuleError
	var b *TwoRulesError
	var c *ValueError
	return errors.As(err, &a) || errors.As(err, &b) || errors.As(err, &c)
}
