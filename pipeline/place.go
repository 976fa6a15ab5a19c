package pipeline

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/db/job"
	"pkvigil/parse"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

// joinNights is how far a file whose own night is doubtful may be from the
// night of an open set of the same name and still belong to it.
const joinNights = 1

// A place is where one trace or file belongs.
type place struct {
	set    db.Set
	member db.Member
	sure   bool // the night comes from the file or its name, not from its date of writing
	scanAt time.Time
	isPH   bool
}

// place puts stored files into their sets and gives the sets that changed.
func (s *Service) place(ctx context.Context, tx pgx.Tx, items []*item, now time.Time) ([]int64, error) {
	touched := map[int64]bool{}
	bySet := map[string][]place{}
	var open []db.OpenSet
	for _, it := range items {
		f := it.taken.File
		if f.State != db.FileTaken {
			continue
		}
		if f.Replaces != nil {
			ids, err := s.store.RetireFile(ctx, tx, *f.Replaces, now, "exported again as revision "+fmt.Sprint(f.Revision))
			if err != nil {
				return nil, err
			}
			for _, id := range ids {
				touched[id] = true
			}
		}
		places, err := s.placesOf(it)
		if err != nil {
			return nil, err
		}
		for _, p := range places {
			if open == nil {
				if open, err = s.store.OpenSets(ctx, tx); err != nil {
					return nil, err
				}
			}
			joinOpen(&p, open)
			bySet[p.set.Key] = append(bySet[p.set.Key], p)
		}
		if loggedPH(it.match) {
			if open == nil {
				if open, err = s.store.OpenSets(ctx, tx); err != nil {
					return nil, err
				}
			}
			for _, id := range waitingForClock(it, open) {
				touched[id] = true
			}
		}
		if err := s.calibrated(ctx, tx, it, now); err != nil {
			return nil, err
		}
	}
	// One order for everybody, so that two sweepers cannot lock each other out.
	for _, key := range slices.Sorted(maps.Keys(bySet)) {
		id, changed, err := s.fill(ctx, tx, bySet[key], now)
		if err != nil {
			return nil, fmt.Errorf("set %s: %w", key, err)
		}
		if changed {
			touched[id] = true
		}
	}
	ids := slices.Sorted(maps.Keys(touched))
	for _, id := range ids {
		if _, err := s.store.TouchSet(ctx, tx, id, now); err != nil {
			return nil, err
		}
	}
	return ids, nil
}

// fill makes the set if need be and adds its new members; of two members for
// one place the later correction counts, and the other stays with the reason.
func (s *Service) fill(ctx context.Context, tx pgx.Tx, places []place, now time.Time) (id int64, changed bool, err error) {
	set := places[0].set
	set.FirstSeen, set.LastSeen = now, now
	if _, err := s.store.EnsureSet(ctx, tx, &set); err != nil {
		return 0, false, err
	}
	have, err := s.store.Members(ctx, tx, set.ID)
	if err != nil {
		return 0, false, err
	}
	var lastScan, ph time.Time
	for i := range places {
		m := &places[i].member
		m.SetID, m.Active, m.At = set.ID, true, now
		for j := range have {
			if have[j].Active && samePlace(have[j], *m) && have[j].FileID != m.FileID && have[j].Rev != m.Rev {
				if have[j].Rev > m.Rev {
					m.Active, m.LeftOutWhy = false, "a later correction of the same place is there"
					continue
				}
				if err := s.store.RetireMember(ctx, tx, have[j].ID, now, "corrected by a later file"); err != nil {
					return 0, false, err
				}
				have[j].Active = false
			}
		}
		added, err := s.store.AddMember(ctx, tx, m)
		if err != nil {
			return 0, false, err
		}
		changed = changed || added
		have = append(have, *m)
		if places[i].scanAt.After(lastScan) {
			lastScan = places[i].scanAt
		}
		if places[i].isPH {
			ph = now
		}
	}
	return set.ID, changed, s.store.SetTimes(ctx, tx, set.ID, lastScan, ph)
}

func samePlace(a, b db.Member) bool {
	return a.Role == b.Role && naming.RungKey(a.Rung) == naming.RungKey(b.Rung) && a.Rep == b.Rep && a.Pos == b.Pos
}

// placesOf says where each trace of a file belongs.
func (s *Service) placesOf(it *item) ([]place, error) {
	switch it.match.Role {
	case naming.RoleIgnore, naming.RoleCalibration, naming.RoleEvents, naming.RolePlan, naming.RoleSheet:
		return nil, nil
	case naming.RoleEnd:
		p := s.placeOf(it, it.match, time.Time{})
		return []place{p}, nil
	case naming.RolePH:
		if loggedPH(it.match) {
			return nil, nil // its rows find their scans by clock
		}
		if it.sheet != nil {
			return s.placesBySheet(it), nil
		}
		var at time.Time
		if len(it.content.Readings) > 0 {
			at = it.content.Readings[0].Measured
		}
		p := s.placeOf(it, it.match, at)
		p.isPH = true
		return []place{p}, nil
	}
	if it.sheet != nil {
		return s.placesBySheet(it), nil
	}
	_, rules, _ := s.current()
	rule, _ := rules.Rule(it.match.Rule)
	var out []place
	for i := range it.content.Scans {
		m, err := traceMatch(rules, rule, it, i)
		if err != nil {
			continue // said in check() before the file was taken
		}
		sc := &it.content.Scans[i]
		p := s.placeOf(it, clockRung(m, rule, sc.Measured), sc.Measured)
		id := it.taken.Stored.Scans[i]
		p.member.ScanID = &id
		p.scanAt = sc.Measured
		if ph, ok := ownPH(m, *sc); ok {
			p.member.PH = &ph
		}
		out = append(out, p)
	}
	return out, nil
}

// ownPH is the pH that the name or the trace itself carries.
func ownPH(m naming.Match, sc parse.Scan) (float64, bool) {
	if m.HasPH {
		return m.PH, true
	}
	return sc.PH, sc.PH == sc.PH // not NaN
}

var errUnnamedTraces = errors.New("several traces without names")

// traceMatch says what one trace of a file is.
func traceMatch(rules *naming.Rules, rule naming.Rule, it *item, i int) (naming.Match, error) {
	m := it.match
	label := it.content.Scans[i].Label
	switch {
	case rule.Column != "":
		return rules.MatchColumn(m, label)
	case needsSheet(m) && m.Pos == "" && label != "":
		m.Pos = label // a plate in one file: its columns are positions
		return m, nil
	case len(it.content.Scans) == 1:
		return m, nil
	case rule.Pair == "inside":
		if strings.Contains(strings.ToLower(label), naming.RoleBlank) {
			m.Role, m.Rung = naming.RoleBlank, ""
			return m, nil
		}
		if m.Rung = label; label == "" {
			m.Rung = fmt.Sprintf("%02d", i+1)
		}
		return m, nil
	}
	return m, errUnnamedTraces
}

// placeOf builds set and member of a match.
func (s *Service) placeOf(it *item, m naming.Match, measured time.Time) place {
	set, _, _ := s.current()
	night, sure := s.nightOf(it, m, measured)
	if measured.IsZero() && m.Stamp != "" { // the name says when, where the file does not
		if t, err := time.ParseInLocation("2006-01-02T15:04:05", m.Stamp, s.zone(it.file.Root)); err == nil {
			measured = t
		}
	}
	inst := m.Inst
	if inst == "" && it.folder != nil {
		inst = it.folder.Instrument
	}
	d := db.Set{Instrument: inst, Night: night, Name: m.Set, Slot: m.Slot, Run: m.Run, Series: m.Series, Kind: db.KindSample, State: db.SetGathering}
	if c, lot, err := set.CompoundOf(m.Set); err == nil && c != nil {
		d.Compound, d.Lot = c.Name, lot
		if c.Reference {
			d.Kind = db.KindReference
		}
	}
	d.Key = setKey(d)
	return place{
		set: d, sure: sure,
		member: db.Member{FileID: it.taken.File.ID, Role: m.Role, Rung: m.Rung, Rep: m.Rep, Pos: m.Pos, Rev: m.Rev, Measured: measured, Rule: m.Rule},
	}
}

// setKey names a set for ever.
func setKey(d db.Set) string {
	k := d.Instrument + "/" + d.Night + "/" + d.Name
	for _, part := range []string{d.Slot, d.Run} {
		if part != "" {
			k += "/" + part
		}
	}
	return k
}

// nightOf finds the night a trace belongs to: what the name stamps, what the
// file says, the date in the name, and only then the date of writing.
func (s *Service) nightOf(it *item, m naming.Match, measured time.Time) (night string, sure bool) {
	zone := s.zone(it.file.Root)
	ahead := time.Duration(0)
	if it.folder != nil {
		ahead = it.folder.ClockAhead
	}
	home := s.laboratory()
	switch {
	case m.Date != "" && m.Stamp == "":
		return m.Date, true
	case m.Stamp != "":
		if t, err := time.ParseInLocation("2006-01-02T15:04:05", m.Stamp, zone); err == nil {
			return naming.NightOf(t.Add(-ahead), home, naming.Noon), true
		}
	case !measured.IsZero():
		return naming.NightOf(measured.Add(-ahead), home, naming.Noon), true
	}
	return naming.NightOf(it.file.ModTime.Add(-ahead), home, naming.Noon), false
}

// joinOpen lets a file whose night is doubtful join an open set of the same
// name, and a file of the other side of midnight the set it continues.
func joinOpen(p *place, open []db.OpenSet) {
	best := 1 << 30
	for i := range open {
		o := &open[i].Set
		if o.Instrument != p.set.Instrument || o.Name != p.set.Name || o.Slot != p.set.Slot || o.Run != p.set.Run {
			continue
		}
		d := nightsApart(o.Night, p.set.Night)
		reach := joinNights
		if !p.sure {
			reach = 7
		}
		if d == 0 {
			return
		}
		if d <= reach && d < best && lacksPlace(open[i], p.member) {
			best = d
			p.set.Night, p.set.Key = o.Night, o.Key
		}
	}
}

// lacksPlace says whether an open set has nothing yet where m would stand.
func lacksPlace(o db.OpenSet, m db.Member) bool {
	if m.Role != naming.RoleScan {
		return o.Roles[m.Role] == 0
	}
	for _, r := range o.Rungs {
		if naming.RungKey(r) == naming.RungKey(m.Rung) {
			return false
		}
	}
	return true
}

func nightsApart(a, b string) int {
	x, err1 := time.Parse(time.DateOnly, a)
	y, err2 := time.Parse(time.DateOnly, b)
	if err1 != nil || err2 != nil {
		return 1 << 20
	}
	d := int(x.Sub(y).Hours() / 24)
	return max(d, -d)
}

// check refuses, before it is stored, a file whose traces cannot be assigned.
func (s *Service) check(it *item) {
	if it.matchErr != nil || it.parseErr != nil || it.content == nil {
		return
	}
	_, rules, _ := s.current()
	rule, _ := rules.Rule(it.match.Rule)
	c := it.content
	bad := func(found, expected, remedy string) {
		it.parseErr = &parse.Error{File: it.file.Path, Found: found, Expected: expected, Remedy: remedy}
	}
	switch it.match.Role {
	case naming.RoleScan, naming.RoleBlank:
		if len(c.Scans) == 0 {
			bad("a "+c.Format+" file", "a scan, as its name says", "check the naming rule "+it.match.Rule)
			return
		}
		for i := range c.Scans {
			if _, err := traceMatch(rules, rule, it, i); errors.Is(err, errUnnamedTraces) {
				bad(fmt.Sprintf("%d traces", len(c.Scans)), "one trace, or a rule that says what each is", `give rule "`+rule.Name+`" a column pattern, or pair = "inside"`)
				return
			}
		}
	case naming.RolePH:
		if len(c.Readings) == 0 {
			bad("a "+c.Format+" file", "pH readings, as its name says", "check the naming rule "+it.match.Rule)
		}
	case naming.RoleCalibration:
		if len(c.Calibrations) == 0 {
			bad("a "+c.Format+" file", "an electrode calibration, as its name says", "check the naming rule "+it.match.Rule)
		}
	}
}

// assemble looks at each changed set: a whole one gets a job, in the same
// transaction as the files that made it whole.
func (s *Service) assemble(ctx context.Context, tx pgx.Tx, ids []int64, now time.Time) error {
	if len(ids) == 0 {
		return nil
	}
	open, err := s.store.OpenSetsOf(ctx, tx, ids)
	if err != nil {
		return err
	}
	for _, o := range open {
		if err := s.progress(ctx, tx, o, now); err != nil {
			return fmt.Errorf("set %s: %w", o.Key, err)
		}
	}
	return nil
}

// progress moves one set to the state its members and the time give it.
func (s *Service) progress(ctx context.Context, tx pgx.Tx, o db.OpenSet, now time.Time) error {
	set, _, _ := s.current()
	members, err := s.store.Members(ctx, tx, o.ID)
	if err != nil {
		return err
	}
	exp := expectation(set, o.Set)
	p := naming.Progress{LastSeen: o.LastSeen, EndSeen: o.Ended}
	for _, m := range members {
		if !m.Active {
			continue
		}
		ms := naming.MemberSummary{Role: m.Role, Rung: m.Rung, HasPH: m.PH != nil}
		if m.Role == naming.RolePH {
			ms.Keys = slices.Sorted(maps.Keys(o.RungPH))
		}
		p.Members = append(p.Members, ms)
	}
	if err := s.planned(ctx, tx, o, members, &p); err != nil {
		return err
	}
	if err := s.pairedByClock(ctx, tx, o, members, &p); err != nil {
		return err
	}
	// A set that was whole before and changes is whole at once: somebody waits for the correction.
	if o.State == db.SetFitted || o.State == db.SetComplete {
		p.EndSeen = true
	}
	if s.final.Load() {
		exp.Silence, exp.Deadline = 0, 0
	}
	state, missing := naming.Completeness(exp, p, now)
	s.due.Store(o.ID, dueAt{o.Revision, naming.LookAgain(exp, p, now)})
	switch state {
	case naming.Complete:
		if err := s.store.SetSetState(ctx, tx, o.ID, db.SetComplete, nil, time.Time{}, now); err != nil {
			return err
		}
		return s.enqueueSet(ctx, tx, job.Set{SetID: o.ID, Revision: o.Revision, At: now})
	case naming.Waiting:
		return s.store.SetSetState(ctx, tx, o.ID, db.SetWaiting, lackList(missing), o.LastSeen.Add(exp.Deadline), now)
	}
	return s.store.SetSetState(ctx, tx, o.ID, db.SetGathering, lackList(missing), o.LastSeen.Add(exp.Deadline), now)
}

// dueAt is when the passing of time alone may move a set of a revision on.
type dueAt struct {
	revision int
	at       time.Time // zero: never
}

// mayMove says whether looking at an open set now can change anything: this
// process has not looked at its revision yet, or its moment has come.
func (s *Service) mayMove(o db.OpenSet, now time.Time) bool {
	v, ok := s.due.Load(o.ID)
	if !ok || s.final.Load() {
		return true
	}
	d := v.(dueAt)
	return d.revision != o.Revision || (!d.at.IsZero() && !now.Before(d.at))
}

// expectation is what makes a set whole: the profile and the settings say.
func expectation(set *settings.Settings, d db.Set) naming.Expectation {
	e := naming.Expectation{Roles: set.Complete.Roles, Rungs: set.Complete.Rungs, Silence: set.Complete.Silence, Every: set.Complete.Every, Deadline: set.Complete.Deadline}
	if c, _, err := set.CompoundOf(d.Name); err == nil && c != nil && c.Profile == "three-solution" {
		e.Rungs = min(e.Rungs, 3)
	}
	return e
}

func lackList(missing []string) []db.Missing {
	var out []db.Missing
	for _, m := range missing {
		role := naming.RoleScan
		switch {
		case strings.Contains(m, "pH table"), strings.Contains(m, "pH file"), strings.HasPrefix(m, "the pH"):
			role = naming.RolePH
		case strings.Contains(m, "blank"):
			role = naming.RoleBlank
		}
		out = append(out, db.Missing{Role: role, Text: m})
	}
	return out
}
