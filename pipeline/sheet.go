package pipeline

import (
	"context"
	"fmt"
	"math"
	"path"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/parse/export"
	"pkvigil/pipeline/naming"
	"pkvigil/watcher"
)

// A runSheet says which set stands at which position of a run.
type runSheet struct {
	run  string
	rows []db.SheetRow
}

// row finds a position; positions compare like rungs ("A05", "a5").
func (r *runSheet) row(pos string) *db.SheetRow {
	for i := range r.rows {
		if naming.RungKey(r.rows[i].Position) == naming.RungKey(pos) {
			return &r.rows[i]
		}
	}
	return nil
}

// sets lists the sets of a sheet in its order.
func (r *runSheet) sets() []string {
	var out []string
	for _, x := range r.rows {
		if x.Set != "" && !slices.Contains(out, x.Set) {
			out = append(out, x.Set)
		}
	}
	return out
}

// needsSheet says whether a name gives a run and leaves the set to its sheet.
func needsSheet(m naming.Match) bool {
	switch m.Role {
	case naming.RoleScan, naming.RoleBlank, naming.RolePH:
		return m.Set == "" && m.Run != "" && len(m.Groups) > 0
	}
	return false
}

// A sheetError says what of its sheet a file waits for.
type sheetError struct{ run, pos string }

func (e *sheetError) Error() string {
	if e.pos == "" {
		return fmt.Sprintf("the sample sheet of run %s has not come yet; the file is placed by itself when it does", e.run)
	}
	return fmt.Sprintf("the sample sheet of run %s has no row for position %s; the file is placed by itself when a corrected sheet comes", e.run, e.pos)
}

// sheetOf reads the sheet of a run that lies in the same folder as a file, nil
// when it has not come. Of several files of one run the newest counts.
func (s *Service) sheetOf(ctx context.Context, q db.Querier, root, file, run string) (*runSheet, error) {
	dir := path.Dir(db.PathKey(file))
	if dir == "." {
		dir = ""
	}
	rows, err := s.store.SheetRowsOfFolder(ctx, q, root, dir)
	if err != nil {
		return nil, err
	}
	runOf := map[int64]string{}
	newest := int64(0)
	for _, r := range rows {
		if _, ok := runOf[r.FileID]; !ok {
			f, err := s.store.FileByID(ctx, q, r.FileID)
			if err != nil {
				return nil, err
			}
			runOf[r.FileID] = ""
			if f.Match != nil && f.State == db.FileTaken {
				runOf[r.FileID] = f.Match.Run
			}
		}
		if runOf[r.FileID] == run {
			newest = max(newest, r.FileID)
		}
	}
	if newest == 0 {
		return nil, nil
	}
	return &runSheet{run, slices.DeleteFunc(rows, func(r db.SheetRow) bool { return r.FileID != newest })}, nil
}

// findSheet looks up the sheet of a file whose name gives a run but no set.
// Without the sheet, or without a row in it, the file waits parked.
func (s *Service) findSheet(ctx context.Context, q db.Querier, it *item) error {
	if it.matchErr != nil || it.parseErr != nil || !needsSheet(it.match) {
		return nil
	}
	var err error
	if it.sheet, err = s.sheetOf(ctx, q, it.file.Root, it.file.Path, it.match.Run); err != nil {
		return err
	}
	switch {
	case it.sheet == nil:
		it.matchErr = &sheetError{run: it.match.Run}
	case it.match.Role != naming.RolePH && it.match.Pos != "" && it.sheet.row(it.match.Pos) == nil:
		it.matchErr = &sheetError{it.match.Run, it.match.Pos}
	}
	return nil
}

// waitsForSheet gives a parked file its reason when all it waits for is a sheet.
func waitsForSheet(it *item, f *db.File) bool {
	e, ok := it.matchErr.(*sheetError)
	if ok {
		f.Reason = &db.Reason{Expected: "the sample sheet of run " + e.run, Sentence: sentence(it.file.Path + ": " + e.Error())}
	}
	return ok
}

// bySheet fills set, role and rung of a position in from its row. The position
// is the rung, since tables of a run name positions; a rule that pairs by rung
// takes the rung the sheet names.
func bySheet(m naming.Match, r *db.SheetRow, pairBy string) naming.Match {
	m.Set, m.Rung = r.Set, m.Pos
	if pairBy == "rung" && r.Rung != "" {
		m.Rung = r.Rung
	}
	if role, ok := naming.RoleOf(r.Role); ok {
		m.Role = role
	}
	if m.Role == naming.RoleBlank {
		m.Rung = ""
	}
	return m
}

// placesBySheet says where each trace of a file stands by the sheet of its
// run. A pH table belongs to every set of the run, and so does a blank whose
// row names no set.
func (s *Service) placesBySheet(it *item) []place {
	var out []place
	if it.match.Role == naming.RolePH {
		var at time.Time
		if len(it.content.Readings) > 0 {
			at = it.content.Readings[0].Measured
		}
		for _, set := range it.sheet.sets() {
			m := it.match
			m.Set = set
			p := s.placeOf(it, m, at)
			p.isPH = true
			out = append(out, p)
		}
		return out
	}
	_, rules, _ := s.current()
	rule, _ := rules.Rule(it.match.Rule)
	for i := range it.content.Scans {
		m, err := traceMatch(rules, rule, it, i)
		if err != nil {
			continue
		}
		r := it.sheet.row(m.Pos)
		if r == nil {
			continue // a position the sheet does not use
		}
		m = bySheet(m, r, rule.PairBy)
		sets := []string{m.Set}
		if m.Set == "" {
			if m.Role != naming.RoleBlank {
				continue
			}
			sets = it.sheet.sets()
		}
		for _, set := range sets {
			m.Set = set
			out = append(out, s.scanPlace(it, m, i, r.PH))
		}
	}
	return out
}

// scanPlace is the place of one trace.
func (s *Service) scanPlace(it *item, m naming.Match, i int, ph float64) place {
	sc := &it.content.Scans[i]
	p := s.placeOf(it, m, sc.Measured)
	id := it.taken.Stored.Scans[i]
	p.member.ScanID, p.scanAt = &id, sc.Measured
	if own, ok := ownPH(m, *sc); ok {
		p.member.PH = &own
	} else if !math.IsNaN(ph) && m.Role == naming.RoleScan {
		p.member.PH = &ph
	}
	return p
}

// releaseParked places the files that waited for the sheets in a batch.
func (s *Service) releaseParked(ctx context.Context, tx pgx.Tx, items []*item, now time.Time) ([]int64, error) {
	var again []*item
	for _, sheet := range items {
		if sheet.match.Role != naming.RoleSheet || sheet.match.Run == "" || sheet.taken.File.State != db.FileTaken {
			continue
		}
		files, err := s.store.ParkedOfRun(ctx, tx, sheet.file.Root, sheet.match.Run)
		if err != nil {
			return nil, err
		}
		for i := range files {
			it, err := s.unpark(ctx, tx, &files[i], now)
			if err != nil {
				return nil, err
			}
			if it != nil {
				again = append(again, it)
			}
		}
	}
	if len(again) == 0 {
		return nil, nil
	}
	return s.place(ctx, tx, again, now)
}

// unpark takes one parked file whose sheet has come; nil where it still waits.
func (s *Service) unpark(ctx context.Context, tx pgx.Tx, f *db.File, now time.Time) (*item, error) {
	cfg, _, _ := s.current()
	it := &item{file: watcher.File{Root: f.Root, Path: f.Path, Size: f.Size, ModTime: f.ModTime, Seen: f.Seen}, folder: cfg.FolderByName(f.Root), sum: f.SHA256, match: *f.Match}
	if err := s.findSheet(ctx, tx, it); err != nil || it.matchErr != nil || it.sheet == nil {
		return nil, err
	}
	var err error
	if it.raw, err = s.store.Bytes(ctx, tx, f.SHA256); err != nil {
		return nil, err
	}
	if it.content, err = export.Read(f.Path, it.raw, s.options(cfg, f.Root, it.match.Role)); err != nil {
		return nil, nil // it stays parked, and a person sees it in the brief
	}
	it.taken = &db.Taken{File: *f, Raw: it.raw, Content: it.content}
	if it.taken.Stored, err = s.store.PutContent(ctx, tx, f.ID, it.content, s.instrumentsOf); err != nil {
		return nil, err
	}
	it.taken.File.State = db.FileTaken
	return it, s.store.SetFileState(ctx, tx, f.ID, db.FileTaken, now, "pkvigil", "the sample sheet of run "+it.match.Run+" has come")
}

// planned tells completeness what the sheet of a run announces for a set, and
// that rows of a shared pH table which belong to other sets do not concern it.
func (s *Service) planned(ctx context.Context, tx pgx.Tx, o db.OpenSet, members []db.Member, p *naming.Progress) error {
	i := slices.IndexFunc(members, func(m db.Member) bool { return m.Active && m.Role == naming.RoleScan })
	if i < 0 || o.Run == "" {
		return nil
	}
	f, err := s.store.FileByID(ctx, tx, members[i].FileID)
	if err != nil || f.Match == nil || f.Match.Set != "" {
		return err
	}
	sheet, err := s.sheetOf(ctx, tx, f.Root, f.Path, o.Run)
	if err != nil || sheet == nil {
		return err
	}
	_, rules, _ := s.current()
	rule, _ := rules.Rule(members[i].Rule)
	p.Planned = sheet.rungs(o.Name, rule.PairBy)
	mine := map[string]bool{}
	for _, k := range p.Planned {
		mine[naming.RungKey(k)] = true
	}
	for j := range p.Members {
		if p.Members[j].Role == naming.RolePH {
			p.Members[j].Keys = slices.DeleteFunc(p.Members[j].Keys, func(k string) bool { return !mine[naming.RungKey(k)] })
		}
	}
	return nil
}

// rungs lists what the sheet announces as rungs of a set.
func (r *runSheet) rungs(set, pairBy string) []string {
	var out []string
	for i := range r.rows {
		x := &r.rows[i]
		m := bySheet(naming.Match{Role: naming.RoleScan, Pos: x.Position}, x, pairBy)
		if x.Set == set && m.Role == naming.RoleScan {
			out = append(out, m.Rung)
		}
	}
	return out
}
