package pipeline

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"pkvigil/db"
	"pkvigil/parse"
	"pkvigil/pipeline/naming"
)

// dryRunKey names the run of a match within its folder.
func dryRunKey(f *dryFile, m naming.Match) string { return f.Root + "\x00" + m.Run }

// resolve lets the sheets of runs say which set stands at which position.
func (d *dryRun) resolve() {
	sheets := map[string][]parse.Row{}
	for _, f := range d.taken() {
		if f.match.Role == naming.RoleSheet && len(f.sheet) > 0 {
			k := dryRunKey(f, f.match)
			sheets[k] = append(sheets[k], f.sheet...)
		}
	}
	for _, f := range d.taken() {
		var placed []dryTrace
		waits := ""
		for _, t := range f.traces {
			if t.match.Set != "" || t.match.Run == "" {
				placed = append(placed, t)
				continue
			}
			rows := sheets[dryRunKey(f, t.match)]
			i := slices.IndexFunc(rows, func(r parse.Row) bool { return naming.RungKey(r.Position) == naming.RungKey(t.match.Pos) })
			switch {
			case len(rows) == 0:
				waits = (&sheetError{run: t.match.Run}).Error()
			case i >= 0:
				placed = append(placed, d.fromSheet(f, t, rows[i], rows)...)
			case len(f.traces) == 1:
				waits = (&sheetError{run: t.match.Run, pos: t.match.Pos}).Error()
			}
		}
		f.traces = placed
		if len(placed) == 0 && waits != "" {
			f.fate.State, f.matchErr = db.FileParked, errors.New(waits)
		}
	}
}

// fromSheet places a trace where a row of a sheet says; a blank without a set
// serves all sets of the sheet.
func (d *dryRun) fromSheet(f *dryFile, t dryTrace, row parse.Row, rows []parse.Row) []dryTrace {
	if row.Rung != "" {
		t.match.Rung = row.Rung
	}
	if role, ok := naming.RoleOf(row.Role); ok {
		t.match.Role = role
	}
	if math.IsNaN(t.ph) && !math.IsNaN(row.PH) {
		t.ph, t.from = row.PH, "sheet"
	}
	sets := []string{row.Set}
	if row.Set == "" {
		sets = nil
		for _, r := range rows {
			if t.match.Role == naming.RoleBlank && r.Set != "" && !slices.Contains(sets, r.Set) {
				sets = append(sets, r.Set)
			}
		}
	}
	var out []dryTrace
	for _, set := range sets {
		t.match.Set = set
		it := &item{file: f.File, folder: d.set.FolderByName(f.Root), match: f.match, taken: &db.Taken{}}
		t.place = d.s.placeOf(it, t.match, t.measured)
		out = append(out, t)
	}
	return out
}

// gather sorts traces and tables into sets.
func (d *dryRun) gather() {
	for _, f := range d.taken() {
		switch f.match.Role {
		case naming.RoleIgnore:
			f.fate.Places = []string{"ignored by rule"}
		case naming.RoleScan, naming.RoleBlank:
			for i := range f.traces {
				d.add(f, &f.traces[i])
			}
		case naming.RolePH, naming.RoleEnd:
			if f.match.Set == "" {
				d.other(f)
				continue
			}
			var at time.Time
			if len(f.readings) > 0 {
				at = f.readings[0].at
			}
			it := &item{file: f.File, folder: d.set.FolderByName(f.Root), match: f.match, taken: &db.Taken{}}
			t := dryTrace{match: f.match, measured: at, ph: math.NaN(), place: d.s.placeOf(it, f.match, at)}
			t.place.isPH = f.match.Role == naming.RolePH
			d.add(f, &t)
		default:
			d.other(f)
		}
	}
}

// other keeps a file that belongs to no single set.
func (d *dryRun) other(f *dryFile) {
	f.fate.Places = []string{f.match.Role}
	d.out.Others = append(d.out.Others, DryOther{f.Root, f.Path, f.match.Role, f.holds})
}

// add puts one trace into its set.
func (d *dryRun) add(f *dryFile, t *dryTrace) {
	if t.match.Set == "" {
		f.fate.Places = append(f.fate.Places, "no set: "+t.match.Role)
		if !slices.ContainsFunc(d.out.Others, func(o DryOther) bool { return o.Folder == f.Root && o.Path == f.Path }) {
			d.out.Others = append(d.out.Others, DryOther{f.Root, f.Path, t.match.Role, f.holds + ", and no sheet says of which set"})
		}
		return
	}
	p := t.place
	joinOpen(&p, d.open)
	s := d.sets[p.set.Key]
	if s == nil {
		s = &DrySet{Key: p.set.Key, Folder: f.Root, Set: p.set.Name, Slot: p.set.Slot, Run: p.set.Run, Series: p.set.Series, Night: p.set.Night, Compound: p.set.Compound, labels: map[string]bool{}}
		if _, _, err := d.set.CompoundOf(p.set.Name); err != nil {
			s.Doubt = err.Error()
		}
		d.sets[s.Key] = s
		d.open = append(d.open, db.OpenSet{Set: p.set, Roles: map[string]int{}})
	}
	i := slices.IndexFunc(d.open, func(o db.OpenSet) bool { return o.Key == s.Key })
	if p.member.Role == naming.RoleScan {
		d.open[i].Rungs = append(d.open[i].Rungs, p.member.Rung)
	} else {
		d.open[i].Roles[p.member.Role]++
	}
	s.addMember(p, f, t)
	if f.match.Role == naming.RolePH {
		for _, r := range f.readings {
			if r.label != "" {
				s.labels[r.label] = true
			}
		}
	}
	place := p.set.Name + " " + p.member.Role
	if key := s.keyOf(f, t); key != "" {
		place += " " + key
	}
	f.fate.Places = append(f.fate.Places, place)
	if !slices.Contains(s.Files, f.Path) {
		s.Files = append(s.Files, f.Path)
	}
}

// keyOf is the key a scan is paired by.
func (s *DrySet) keyOf(f *dryFile, t *dryTrace) string {
	if f.rule.PairBy == "pos" || t.match.Rung == "" {
		return t.match.Pos
	}
	return t.match.Rung
}

// addMember keeps the member; of two for one place the later correction counts.
func (s *DrySet) addMember(p place, f *dryFile, t *dryTrace) {
	for i := range s.members {
		o := &s.members[i].member
		if !samePlace(*o, p.member) || o.Rev == p.member.Rev {
			continue
		}
		s.Older++
		if o.Rev > p.member.Rev {
			return
		}
		*o = p.member
		for j := range s.Rungs {
			if p.member.Role == naming.RoleScan && s.Rungs[j].Rung == s.shown(f, t) {
				s.Rungs[j].Path = f.Path
			}
		}
		return
	}
	s.members = append(s.members, p)
	if p.member.Role != naming.RoleScan {
		if !slices.Contains(s.Roles, p.member.Role) {
			s.Roles = append(s.Roles, p.member.Role)
			slices.Sort(s.Roles)
		}
		return
	}
	name := s.shown(f, t)
	for j := range s.Rungs {
		if naming.RungKey(s.Rungs[j].Rung) == naming.RungKey(name) {
			s.Rungs[j].Scans++
			return
		}
	}
	s.Rungs = append(s.Rungs, DryRung{Rung: name, Path: f.Path, PH: t.ph, From: t.from, Scans: 1})
}

// shown is the rung as people see it: its key, or its pH where names have no key.
func (s *DrySet) shown(f *dryFile, t *dryTrace) string {
	if k := s.keyOf(f, t); k != "" {
		return k
	}
	if !math.IsNaN(t.ph) {
		return fmt.Sprintf("pH %g", t.ph)
	}
	return fmt.Sprintf("#%d", len(s.Rungs)+1)
}

// judge pairs pH values and says what each set is doing.
func (d *dryRun) judge(now time.Time) {
	tables := map[string][]dryReading{} // runs with a pH table of their own
	logs := map[string][]dryReading{}   // logs of a folder, by the right time
	for _, f := range d.taken() {
		switch {
		case f.match.Role != naming.RolePH:
		case f.match.Set != "":
			for _, s := range d.sets {
				if slices.Contains(s.Files, f.Path) && s.Folder == f.Root {
					s.fill(f.readings, "table")
				}
			}
		case f.match.Run != "":
			tables[dryRunKey(f, f.match)] = append(tables[dryRunKey(f, f.match)], f.readings...)
		default:
			for _, r := range f.readings {
				r.at = r.at.Add(-d.ahead(f.Root))
				logs[f.Root] = append(logs[f.Root], r)
			}
		}
	}
	ended := map[string]bool{}
	for _, s := range d.sets {
		for _, m := range s.members {
			ended[s.Key] = ended[s.Key] || m.member.Role == naming.RoleEnd
		}
		if s.Run != "" {
			s.fill(tables[s.Folder+"\x00"+s.Run], "table")
		}
		var log []dryReading
		for root, rows := range logs {
			if folder := d.set.FolderByName(root); folder == nil || folder.Instrument == "" || folder.Instrument == d.instrument(s) {
				log = append(log, rows...)
			}
		}
		d.byClock(s, log)
		d.judgeSet(s, now)
	}
}

// fill gives rungs the pH of the rows that name them.
func (s *DrySet) fill(rows []dryReading, from string) {
	for i := range s.Rungs {
		r := &s.Rungs[i]
		for _, x := range rows {
			if naming.RungKey(x.label) == naming.RungKey(r.Rung) && math.IsNaN(r.PH) {
				r.PH, r.From = x.ph, from
			}
		}
	}
}

func (d *dryRun) ahead(folder string) time.Duration {
	if f := d.set.FolderByName(folder); f != nil {
		return f.ClockAhead
	}
	return 0
}

// instrument is the first part of a set's key.
func (d *dryRun) instrument(s *DrySet) string {
	name, _, _ := strings.Cut(s.Key, "/")
	return name
}

// byClock gives rungs the one reading taken when they were measured; two that
// claim one scan are said and neither is taken.
func (d *dryRun) byClock(s *DrySet, log []dryReading) {
	for i := range s.Rungs {
		r := &s.Rungs[i]
		at := d.measured(s, r.Path)
		if at.IsZero() || !math.IsNaN(r.PH) {
			continue
		}
		at = at.Add(-d.ahead(s.Folder))
		var hits []dryReading
		for _, x := range log {
			if !x.at.IsZero() && inWindow(x.at, at) {
				hits = append(hits, x)
			}
		}
		switch len(hits) {
		case 0:
		case 1:
			r.PH, r.From = hits[0].ph, "clock"
		default:
			s.twice = append(s.twice, r.Rung)
		}
	}
}

// measured is when a scan was made, as its file or its name says, where its rule pairs by clock.
func (d *dryRun) measured(s *DrySet, path string) time.Time {
	for _, f := range d.files {
		if f.Root != s.Folder || f.Path != path || f.rule.Pair != "clock" || len(f.traces) == 0 {
			continue
		}
		if t := f.traces[0].measured; !t.IsZero() {
			return t
		}
		if t, err := time.ParseInLocation("2006-01-02T15:04:05", f.match.Stamp, d.set.ZoneOf(f.Root)); err == nil {
			return t
		}
	}
	return time.Time{}
}

func (d *dryRun) judgeSet(s *DrySet, now time.Time) {
	exp := expectation(d.set, db.Set{Name: s.Set})
	exp.Silence, exp.Deadline = 0, 0
	p := naming.Progress{LastSeen: now}
	paired := map[string]int{}
	for _, r := range s.Rungs {
		p.Members = append(p.Members, naming.MemberSummary{Role: naming.RoleScan, Rung: r.Rung, HasPH: r.From != "" && r.From != "table"})
		paired[r.From]++
	}
	for _, role := range s.Roles {
		m := naming.MemberSummary{Role: role}
		if role == naming.RolePH {
			for l := range s.labels {
				m.Keys = append(m.Keys, l)
			}
			slices.Sort(m.Keys)
		}
		p.Members = append(p.Members, m)
	}
	if s.Run != "" && paired["table"] > 0 && !slices.Contains(s.Roles, naming.RolePH) {
		s.Roles = append(s.Roles, naming.RolePH)
		m := naming.MemberSummary{Role: naming.RolePH}
		for _, r := range s.Rungs {
			if r.From == "table" {
				m.Keys = append(m.Keys, r.Rung)
			}
		}
		p.Members = append(p.Members, m)
	}
	s.State, s.Missing = naming.Completeness(exp, p, now)
	if len(s.twice) > 0 {
		s.State = naming.Waiting
		s.Missing = append(s.Missing, "one pH reading instead of several around "+strings.Join(s.twice, ", "))
	}
	s.Pairing = dryPairing(paired, len(s.Rungs))
	slices.SortFunc(s.Rungs, func(a, b DryRung) int {
		if math.IsNaN(a.PH) || math.IsNaN(b.PH) || a.PH == b.PH {
			return cmp.Compare(a.Rung, b.Rung)
		}
		return cmp.Compare(a.PH, b.PH)
	})
	slices.Sort(s.Files)
}

// dryPairing says in words where the pH values come from.
func dryPairing(from map[string]int, all int) string {
	var parts []string
	for _, x := range []struct{ key, words string }{{"name", "from the name"}, {"file", "inside the file"}, {"table", "by key from a table"}, {"sheet", "from the sheet"}, {"clock", "by clock"}} {
		if n := from[x.key]; n > 0 {
			parts = append(parts, fmt.Sprintf("%d %s", n, x.words))
		}
	}
	if n := from[""]; n > 0 {
		parts = append(parts, fmt.Sprintf("%d without", n))
	}
	if len(parts) == 1 && from[""] == 0 {
		_, words, _ := strings.Cut(parts[0], " ")
		return words
	}
	if all > 0 && from[""] == all {
		return "none"
	}
	return strings.Join(parts, ", ")
}

// A DryChange is one file or set that two settings sort differently.
type DryChange struct {
	What   string `json:"what"` // "file" or "set"
	Name   string `json:"name"`
	Before string `json:"before"`
	After  string `json:"after"`
}

// Compare lists what other settings sort differently: files whose state or
// place changes, then sets whose state changes.
func (l *DryLook) Compare(other *DryLook) []DryChange {
	fates := func(x *DryLook) map[string]string {
		m := map[string]string{}
		for _, f := range x.Files {
			m["file\x00"+f.Folder+"/"+f.Path] = strings.TrimRight(f.State+": "+strings.Join(f.Places, "; "), ": ")
		}
		for _, s := range x.Sets {
			m["set\x00"+s.Key] = strings.TrimRight(string(s.State)+": "+strings.Join(s.Missing, ", "), ": ")
		}
		return m
	}
	a, b := fates(l), fates(other)
	var out []DryChange
	for k := range b {
		if _, ok := a[k]; !ok {
			a[k] = "not there"
		}
	}
	for k, before := range a {
		after, ok := b[k]
		if !ok {
			after = "not there"
		}
		if before != after {
			what, name, _ := strings.Cut(k, "\x00")
			out = append(out, DryChange{what, name, before, after})
		}
	}
	slices.SortFunc(out, func(x, y DryChange) int { return cmp.Or(cmp.Compare(x.What, y.What), cmp.Compare(x.Name, y.Name)) })
	return out
}
