package pipeline

import (
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"
	"golang.org/x/sync/errgroup"

	"pkvigil/db"
	"pkvigil/parse"
	"pkvigil/parse/export"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/watcher"
)

// batchFiles is how many files share a transaction: two hundred reach seven
// tenths of the speed of a bare COPY, and a crash costs no more than reading
// them again.
const batchFiles = 200

// An item is one settled file on its way in.
type item struct {
	file     watcher.File
	folder   *settings.Folder
	raw      []byte
	sum      [32]byte
	match    naming.Match
	matchErr error
	content  *parse.Content
	parseErr error
	again    error // cannot be read now; it is offered again
	touched  bool  // same path, same bytes: nothing to store
	taken    *db.Taken
	sheet    *runSheet // of its run, where the name gives no set
}

// TakenIn counts what a take-in did.
type TakenIn struct {
	Taken, Twin, Parked, Refused, Touched, Later int
	Sets                                         []int64 // sets that changed
}

func (t *TakenIn) add(o TakenIn) {
	t.Taken += o.Taken
	t.Twin += o.Twin
	t.Parked += o.Parked
	t.Refused += o.Refused
	t.Touched += o.Touched
	t.Later += o.Later
	t.Sets = append(t.Sets, o.Sets...)
}

// TakeIn reads, recognises and stores settled files. What is committed is
// acknowledged to the watcher; what is not is offered again. An error means
// trouble with the database: nothing of the failing batch was taken.
func (s *Service) TakeIn(ctx context.Context, files []watcher.File) (TakenIn, error) {
	var sum TakenIn
	for batch := range slices.Chunk(files, batchFiles) {
		items, err := s.readAll(ctx, batch)
		if err != nil {
			return sum, err
		}
		got, err := s.takeBatch(ctx, items)
		if err != nil {
			return sum, err
		}
		sum.add(got)
		for _, it := range items {
			if it.again == nil {
				s.acknowledge(it.file)
			}
		}
	}
	return sum, nil
}

// readAll reads and parses a batch on all cores.
func (s *Service) readAll(ctx context.Context, files []watcher.File) ([]*item, error) {
	items := make([]*item, len(files))
	g, ctx := errgroup.WithContext(ctx)
	g.SetLimit(s.workers())
	for i, f := range files {
		g.Go(func() error {
			if err := ctx.Err(); err != nil {
				return err
			}
			items[i] = s.readOne(ctx, f)
			return nil
		})
	}
	return items, g.Wait()
}

// readOne reads one file, says what its name means and what it holds. A panic
// while reading one file is a refusal of that file, not the end of the night.
func (s *Service) readOne(ctx context.Context, f watcher.File) (it *item) {
	set, rules, _ := s.current()
	it = &item{file: f, folder: set.FolderByName(f.Root)}
	defer func() {
		if r := recover(); r != nil {
			it.content, it.parseErr = nil, &parse.Error{File: f.Path, Found: fmt.Sprintf("a file that stopped the reader (%v)", r), Expected: "a readable export", Remedy: "please keep the file and report it"}
		}
	}()
	it.match, it.matchErr = rules.Match(f.Root, f.Path)
	limit := set.Storage.MaxFileMiB << 20
	raw, err := watcher.Read(ctx, f, limit)
	if err != nil {
		if errors.Is(err, watcher.ErrTooLarge) {
			it.parseErr = &parse.Error{File: f.Path, Found: fmt.Sprintf("%d bytes", f.Size), Expected: fmt.Sprintf("at most %d", limit), Remedy: "raise storage.max_file_mib if such files are meant to be read"}
			it.sum = sha256.Sum256([]byte(fmt.Sprintf("%s %d %d", f.Path, f.Size, f.ModTime.UnixNano())))
			return it
		}
		it.again = err
		return it
	}
	it.raw, it.sum = raw, sha256.Sum256(raw)
	if it.matchErr == nil && it.match.Role != naming.RoleIgnore {
		it.content, it.parseErr = export.Read(f.Path, raw, s.options(set, f.Root, it.match.Role))
		s.check(it)
		if f.Early && (it.parseErr != nil || !it.content.Complete) {
			it.again = errNotEnded
		}
	}
	return it
}

// errNotEnded says that a file offered at first sight has no end record yet.
var errNotEnded = errors.New("no end record yet")

// options are the reader's options for a folder and role.
func (s *Service) options(set *settings.Settings, folder, role string) parse.Options {
	return parse.Options{Layouts: set.Layouts, Zone: s.zone(folder), Role: role, MaxBytes: set.Storage.MaxFileMiB << 20}
}

// takeBatch stores a batch in one transaction. If one file spoils it, each
// file gets a transaction of its own, so that a bad file fails alone.
func (s *Service) takeBatch(ctx context.Context, items []*item) (TakenIn, error) {
	var got TakenIn
	err := s.store.InTx(ctx, func(tx pgx.Tx) error {
		var err error
		got, err = s.takeInTx(ctx, tx, items, true)
		return err
	})
	if err == nil && len(items) > 0 {
		beat() // a backlog keeps a look busy for long
	}
	if err == nil || db.Away(err) || ctx.Err() != nil || len(items) == 0 {
		return got, err
	}
	s.log.Warn().Err(err).Int("files", len(items)).Msg("a batch could not be stored as one; storing file by file")
	var sum TakenIn
	for _, it := range items {
		it.taken, it.touched = nil, false
		err := s.store.InTx(ctx, func(tx pgx.Tx) error {
			var err error
			got, err = s.takeInTx(ctx, tx, []*item{it}, false)
			return err
		})
		if err != nil {
			if db.Away(err) || ctx.Err() != nil {
				return sum, err
			}
			if got, err = s.refuseUnstorable(ctx, it, err); err != nil {
				return sum, err
			}
		}
		sum.add(got)
	}
	return sum, nil
}

// refuseUnstorable keeps a file that the database would not have as refused.
func (s *Service) refuseUnstorable(ctx context.Context, it *item, cause error) (TakenIn, error) {
	it.taken, it.content = nil, nil
	it.parseErr = &parse.Error{File: it.file.Path, Found: "content the database does not accept", Expected: "plain numbers and text", Remedy: "please keep the file and report it", Err: cause}
	var got TakenIn
	err := s.store.InTx(ctx, func(tx pgx.Tx) error {
		var err error
		got, err = s.takeInTx(ctx, tx, []*item{it}, false)
		return err
	})
	return got, err
}

// takeInTx decides the state of each file, stores it, and puts it in its place.
func (s *Service) takeInTx(ctx context.Context, tx pgx.Tx, items []*item, batch bool) (TakenIn, error) {
	var got TakenIn
	now := s.clock.Now()
	todo, err := s.decide(ctx, tx, items, now, &got)
	if err != nil || len(todo) == 0 {
		return got, err
	}
	rows := make([]*db.Taken, len(todo))
	for i, it := range todo {
		rows[i] = it.taken
	}
	if batch {
		err = s.store.TakeBatch(ctx, tx, rows)
	} else {
		for _, r := range rows {
			if err = s.store.TakeFile(ctx, tx, r); err != nil {
				break
			}
		}
	}
	if err != nil {
		return got, fmt.Errorf("storing files: %w", err)
	}
	touched, err := s.place(ctx, tx, todo, now)
	if err != nil {
		return got, err
	}
	placed, err := s.releaseParked(ctx, tx, todo, now)
	if err != nil {
		return got, err
	}
	touched = append(touched, placed...)
	got.Sets = touched
	return got, s.assemble(ctx, tx, touched, now)
}

// decide gives every readable item its state and its row.
func (s *Service) decide(ctx context.Context, tx pgx.Tx, items []*item, now time.Time, got *TakenIn) ([]*item, error) {
	byHash, byPath, err := s.lookUp(ctx, tx, items)
	if err != nil {
		return nil, err
	}
	inBatch := map[[32]byte]*item{}
	var todo []*item
	var known []naming.KnownSet
	// An original counts before its copy, whatever order they were found in.
	slices.SortStableFunc(items, func(a, b *item) int { return copyRank(a) - copyRank(b) })
	for _, it := range items {
		if it.again != nil {
			got.Later++
			if !errors.Is(it.again, errNotEnded) {
				s.once.note(s.log, "reading "+it.file.Root+"/"+it.file.Path, it.again)
			}
			continue
		}
		last := byPath[it.file.Root][db.PathKey(it.file.Path)]
		if last != nil && last.SHA256 == it.sum {
			it.touched = true
			got.Touched++
			continue
		}
		row := s.row(it, now)
		if err := s.findSheet(ctx, tx, it); err != nil {
			return nil, err
		}
		s.judgeFile(it, row, byHash[it.sum], inBatch[it.sum])
		if row.File.State == db.FileTaken {
			if inBatch[it.sum] == nil {
				inBatch[it.sum] = it
			}
			if last != nil {
				row.File.Replaces = &last.ID
			}
		} else {
			row.Content = nil
		}
		if row.File.State == db.FileParked && !waitsForSheet(it, &row.File) {
			if known == nil {
				if known, err = s.knownSets(ctx, tx, items); err != nil {
					return nil, err
				}
			}
			s.suggest(it, &row.File, known)
		}
		it.taken = row
		todo = append(todo, it)
		switch row.File.State {
		case db.FileTaken:
			got.Taken++
		case db.FileTwin:
			got.Twin++
		case db.FileParked:
			got.Parked++
		case db.FileRefused:
			got.Refused++
		}
	}
	return todo, nil
}

// lookUp asks what is known of the hashes and paths of a batch.
func (s *Service) lookUp(ctx context.Context, tx pgx.Tx, items []*item) (map[[32]byte]*db.File, map[string]map[string]*db.File, error) {
	var sums [][32]byte
	paths := map[string][]string{}
	for _, it := range items {
		if it.again == nil {
			sums = append(sums, it.sum)
			paths[it.file.Root] = append(paths[it.file.Root], it.file.Path)
		}
	}
	byHash, err := s.store.FilesByHash(ctx, tx, sums)
	if err != nil {
		return nil, nil, err
	}
	byPath := map[string]map[string]*db.File{}
	for root, p := range paths {
		if byPath[root], err = s.store.LatestByPaths(ctx, tx, root, p); err != nil {
			return nil, nil, err
		}
	}
	return byHash, byPath, nil
}

// row is the row of an item before its state is known.
func (s *Service) row(it *item, now time.Time) *db.Taken {
	_, _, id := s.current()
	f := db.File{
		Root: it.file.Root, Path: it.file.Path, Size: it.file.Size, ModTime: it.file.ModTime,
		Seen: it.file.Seen, Taken: now, SHA256: it.sum, Distance: -1, SettingsID: id,
	}
	if it.matchErr == nil {
		m := it.match
		f.Match = &m
	}
	if c := it.content; c != nil {
		f.Format, f.Encoding, f.Layout, f.Remarks = c.Format, c.Encoding, c.Layout, c.Remarks
	}
	return &db.Taken{File: f, Raw: it.raw, Content: it.content, Instruments: s.instrumentsOf}
}

// instrumentsOf says which instruments an event concerns: the one it names,
// or all that share the resource it names.
func (s *Service) instrumentsOf(e parse.Event) []string {
	if e.Instrument != "" {
		return []string{e.Instrument}
	}
	set, _, _ := s.current()
	for _, r := range set.Resources {
		if r.Name == e.Resource {
			return r.SharedBy
		}
	}
	for _, i := range set.Instruments {
		if i.Name == e.Resource {
			return []string{i.Name}
		}
	}
	return nil
}

// judgeFile decides between taken, twin, parked and refused.
func (s *Service) judgeFile(it *item, row *db.Taken, known *db.File, sibling *item) {
	var twinOf *int64
	var twin *naming.Match
	var twinPath string
	switch {
	case known != nil && known.Root == row.File.Root && known.Path == db.PathKey(row.File.Path):
		// The bytes of an earlier revision of the same file are back: what stands in the folder counts.
	case known != nil:
		twinOf, twin, twinPath = &known.ID, known.Match, known.Root+"/"+known.Path
	case sibling != nil:
		twin, twinPath = &sibling.match, sibling.file.Root+"/"+sibling.file.Path
	}
	f := &row.File
	switch {
	case twin != nil && (it.matchErr != nil || it.match.Copy || sameItem(*twin, it.match)):
		f.State, f.TwinOf = db.FileTwin, twinOf
		if twinOf == nil {
			row.Twin = sibling.taken
		}
		f.Reason = &db.Reason{Sentence: fmt.Sprintf("%s is byte-identical to %s; counted once.", it.file.Path, twinPath)}
	case it.matchErr != nil:
		f.State = db.FileParked
	case it.match.Role == naming.RoleIgnore:
		f.State = db.FileTaken
		f.Format = "ignored by rule"
	case it.parseErr != nil:
		f.State, f.Reason = db.FileRefused, reasonOf(it.parseErr)
	case twin != nil && it.match.Role == naming.RoleScan:
		f.State = db.FileRefused
		f.Reason = &db.Reason{Found: "the same numbers as " + twinPath, Expected: "a scan of its own",
			Remedy:   "export the scan again; if the first name was wrong, place this one with pkvigil adopt",
			Sentence: fmt.Sprintf("%s holds the same numbers as %s, byte for byte. Not used.", it.file.Path, twinPath)}
	default:
		f.State = db.FileTaken
	}
}

// copyRank orders originals before copies and names that no rule knows.
func copyRank(it *item) int {
	switch {
	case it.matchErr != nil:
		return 2
	case it.match.Copy:
		return 1
	}
	return 0
}

// sameItem says whether two names mean the same thing.
func sameItem(a, b naming.Match) bool {
	return a.Role == b.Role && a.Set == b.Set && a.Run == b.Run && a.Slot == b.Slot && a.Inst == b.Inst &&
		naming.RungKey(a.Rung) == naming.RungKey(b.Rung) && a.Rep == b.Rep && a.Pos == b.Pos
}

// reasonOf keeps what a reader said.
func reasonOf(err error) *db.Reason {
	r := &db.Reason{Sentence: sentence(err.Error())}
	if pe, ok := errors.AsType[*parse.Error](err); ok {
		r.Line, r.Field, r.Found, r.Expected, r.Remedy = pe.Line, pe.Field, pe.Found, pe.Expected, pe.Remedy
	}
	return r
}

// sentence begins with a capital or a file name and ends with a full stop.
func sentence(s string) string {
	s = strings.TrimSpace(s)
	if s == "" || strings.HasSuffix(s, ".") {
		return s
	}
	return s + "."
}

// suggest names the nearest rule and set for a parked file.
func (s *Service) suggest(it *item, f *db.File, known []naming.KnownSet) {
	f.Reason = &db.Reason{Sentence: sentence(it.matchErr.Error())}
	_, rules, _ := s.current()
	g := naming.Nearest(it.file.Root, it.file.Path, rules, known)
	f.NearestRule, f.NearestSet, f.Distance = g.Rule, g.Set, g.Distance
	if g.Sentence != "" {
		f.Reason.Remedy = g.Sentence
		f.Reason.Sentence += " " + sentence(g.Sentence)
	}
}
