package pipeline

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"golang.org/x/sync/errgroup"

	"pkvigil/db"
	"pkvigil/parse"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/watcher"
)

// A DryLook is what the rules of the settings make of the folders as they
// stand, without a database and without writing anything.
type DryLook struct {
	At      time.Time    `json:"at"`
	Folders []DryFolder  `json:"folders"`
	Sets    []DrySet     `json:"sets"`   // by key
	Others  []DryOther   `json:"others"` // files that belong to no single set: calibrations, plans, events, sheets, logs
	Parked  []DryParked  `json:"parked"`
	Refused []DryRefused `json:"refused"`
	Twins   []DryTwin    `json:"twins"`
	Waits   []DryWait    `json:"waits"` // files that cannot be read now: empty, locked
	Files   []DryFile    `json:"files"` // every file with its fate, by folder and path
	Counts  DryCounts    `json:"counts"`
}

// DryCounts sums a DryLook up.
type DryCounts struct {
	Files    int `json:"files"`
	Taken    int `json:"taken"`
	Parked   int `json:"parked"`
	Refused  int `json:"refused"`
	Twins    int `json:"twins"`
	Waits    int `json:"waits"`
	Litter   int `json:"litter"`
	Sets     int `json:"sets"`
	Complete int `json:"complete"`
	Waiting  int `json:"waiting"`
	Blind    int `json:"blind_folders"`
}

// A DryFolder is one watched folder.
type DryFolder struct {
	Name       string `json:"name"`
	Path       string `json:"path"`
	Instrument string `json:"instrument,omitempty"`
	Visible    bool   `json:"visible"`
	Why        string `json:"why,omitempty"` // when it is not visible
	Files      int    `json:"files"`
	Litter     int    `json:"litter"`
	Skipped    int    `json:"skipped"` // links, pipes and devices
	Older      int    `json:"older"`   // files before the moment asked for
}

// A DrySet is one set with what it has and what it lacks.
type DrySet struct {
	Key      string       `json:"key"`
	Folder   string       `json:"folder"`
	Set      string       `json:"set"`
	Slot     string       `json:"slot,omitempty"`
	Run      string       `json:"run,omitempty"`
	Series   string       `json:"series,omitempty"`
	Night    string       `json:"night"`
	Compound string       `json:"compound,omitempty"`
	Doubt    string       `json:"doubt,omitempty"` // why the compound is not known
	State    naming.State `json:"state"`           // complete or waiting, as if no more were to come
	Missing  []string     `json:"missing,omitempty"`
	Rungs    []DryRung    `json:"rungs"`
	Roles    []string     `json:"roles"`   // besides scans, sorted
	Pairing  string       `json:"pairing"` // how the pH finds its scan, in words
	Files    []string     `json:"files"`   // paths
	Older    int          `json:"older"`   // members that a later correction replaces
	members  []place
	labels   map[string]bool // rows of its pH tables
	twice    []string        // rungs that several logged readings claim
}

// A DryRung is one solution of a set.
type DryRung struct {
	Rung  string  `json:"rung"` // or position, or number where the names have none
	Path  string  `json:"path"`
	PH    float64 `json:"ph"`      // null: none found
	From  string  `json:"ph_from"` // "name", "file", "table", "sheet", "clock" or ""
	Scans int     `json:"scans"`   // replicates
}

// A DryOther is a taken file that belongs to no single set.
type DryOther struct {
	Folder string `json:"folder"`
	Path   string `json:"path"`
	Role   string `json:"role"`
	Holds  string `json:"holds"`
}

// A DryParked file fits no rule, or several.
type DryParked struct {
	Folder  string `json:"folder"`
	Path    string `json:"path"`
	Why     string `json:"why"`
	Rule    string `json:"nearest_rule,omitempty"`
	Set     string `json:"nearest_set,omitempty"`
	Suggest string `json:"suggestion,omitempty"`
}

// A DryRefused file cannot be read as what its name says.
type DryRefused struct {
	Folder   string `json:"folder"`
	Path     string `json:"path"`
	Line     int    `json:"line,omitempty"`
	Field    string `json:"field,omitempty"`
	Found    string `json:"found,omitempty"`
	Expected string `json:"expected,omitempty"`
	Remedy   string `json:"remedy,omitempty"`
	Sentence string `json:"sentence"`
}

// A DryTwin holds the same bytes as another file.
type DryTwin struct {
	Folder string `json:"folder"`
	Path   string `json:"path"`
	Of     string `json:"of"`
}

// A DryWait cannot be read now.
type DryWait struct {
	Folder string `json:"folder"`
	Path   string `json:"path"`
	Why    string `json:"why"`
}

// A DryFile is the fate of one file.
type DryFile struct {
	Folder string   `json:"folder"`
	Path   string   `json:"path"`
	State  string   `json:"state"`          // taken, twin, parked, refused
	Rule   string   `json:"rule,omitempty"` // that it fits
	Places []string `json:"places"`         // set, role and rung of each thing it holds
}

// dryFile is what is kept of a file once it has been read.
type dryFile struct {
	watcher.File
	sum      [32]byte
	match    naming.Match
	matchErr error
	parseErr error
	again    error
	rule     naming.Rule
	traces   []dryTrace
	readings []dryReading
	sheet    []parse.Row
	holds    string
	fate     *DryFile
}

type dryTrace struct {
	match    naming.Match
	place    place
	ph       float64
	from     string
	measured time.Time
}

type dryReading struct {
	label string
	ph    float64
	at    time.Time
}

// drySuggestions bounds how many parked files are held against every known set.
const drySuggestions = 200

// LookDry walks the folders of the settings once, read only, and says what the
// rules make of every file whose time of writing is not before since, as if no
// further file were to come. Nothing is stored. The error is that of ctx.
func LookDry(ctx context.Context, set *settings.Settings, now, since time.Time) (*DryLook, error) {
	d := &dryRun{s: &Service{clock: MachineClock{}}, set: set, sets: map[string]*DrySet{}}
	d.s.adopt(set)
	d.out = &DryLook{At: now}
	files, err := d.walk(ctx, now, since)
	if err != nil {
		return nil, err
	}
	if err := d.readFiles(ctx, files); err != nil {
		return nil, err
	}
	d.states()
	d.resolve()
	d.gather()
	d.judge(now)
	d.park()
	d.finish()
	return d.out, nil
}

// dryRun is one LookDry on its way. It uses the same readers and the same
// sorting as take-in, on a service without a store.
type dryRun struct {
	s     *Service
	set   *settings.Settings
	files []*dryFile
	sets  map[string]*DrySet
	open  []db.OpenSet
	out   *DryLook
}

// walk lists the files of all folders.
func (d *dryRun) walk(ctx context.Context, now, since time.Time) ([]watcher.File, error) {
	var roots []watcher.Root
	var longest time.Duration
	for _, f := range d.set.Folders {
		abs, err := filepath.Abs(f.Path)
		if err != nil {
			return nil, fmt.Errorf("folder %s: %w", f.Name, err)
		}
		roots = append(roots, watcher.Root{Name: f.Name, Path: abs, MarkerFile: f.MarkerFile, Settle: f.Settle, Ignore: f.Ignore})
		longest = max(longest, f.Settle)
	}
	w := watcher.New(roots, watcher.Options{MaxFiles: math.MaxInt32})
	if _, err := w.Look(ctx, now); err != nil {
		return nil, err
	}
	// The second look is dated late enough for everything to count as settled: files are taken as they stand.
	rep, err := w.Look(ctx, now.Add(longest+10*time.Minute))
	if err != nil {
		return nil, err
	}
	older := map[string]int{}
	files := slices.DeleteFunc(rep.Files, func(f watcher.File) bool {
		old := f.ModTime.Before(since)
		if old {
			older[f.Root]++
		}
		return old
	})
	for i, st := range rep.States {
		f := d.set.Folders[i]
		d.out.Folders = append(d.out.Folders, DryFolder{Name: f.Name, Path: f.Path, Instrument: f.Instrument,
			Visible: st.Visible, Why: st.Why, Files: st.Files, Litter: st.Litter, Skipped: st.Skipped, Older: older[f.Name]})
	}
	for _, x := range rep.Waits {
		d.out.Waits = append(d.out.Waits, DryWait{x.Root, x.Path, x.Why})
	}
	slices.SortFunc(files, func(a, b watcher.File) int {
		return cmp.Or(a.ModTime.Compare(b.ModTime), cmp.Compare(a.Root, b.Root), cmp.Compare(a.Path, b.Path))
	})
	return files, nil
}

// readFiles reads every file on all cores and keeps what sorting needs.
func (d *dryRun) readFiles(ctx context.Context, files []watcher.File) error {
	d.files = make([]*dryFile, len(files))
	g, ctx := errgroup.WithContext(ctx)
	g.SetLimit(d.s.workers())
	for i, f := range files {
		g.Go(func() error {
			if err := ctx.Err(); err != nil {
				return err
			}
			d.files[i] = d.keep(d.s.readOne(ctx, f))
			return nil
		})
	}
	return g.Wait()
}

// keep takes from an item what sorting needs; the spectra may go.
func (d *dryRun) keep(it *item) *dryFile {
	f := &dryFile{File: it.file, sum: it.sum, match: it.match, matchErr: it.matchErr, parseErr: it.parseErr, again: it.again}
	if it.matchErr != nil || it.parseErr != nil || it.content == nil || it.again != nil {
		return f
	}
	rules := d.set.Naming()
	f.rule, _ = rules.Rule(it.match.Rule)
	c := it.content
	f.sheet = c.Sheet
	f.holds = dryHolds(c)
	for _, r := range c.Readings {
		f.readings = append(f.readings, dryReading{r.Label, r.PH, r.Measured})
	}
	if it.match.Role != naming.RoleScan && it.match.Role != naming.RoleBlank {
		return f
	}
	it.taken = &db.Taken{}
	for i := range c.Scans {
		m, err := traceMatch(rules, f.rule, it, i)
		if err != nil {
			f.matchErr = err // one label that fits no column pattern parks the file
			continue
		}
		t := dryTrace{match: m, measured: c.Scans[i].Measured, ph: math.NaN()}
		if ph, ok := ownPH(m, c.Scans[i]); ok {
			t.ph, t.from = ph, "file"
			if m.HasPH {
				t.from = "name"
			}
		}
		t.place = d.s.placeOf(it, m, t.measured)
		f.traces = append(f.traces, t)
	}
	return f
}

// dryHolds tells in a few words what a file holds.
func dryHolds(c *parse.Content) string {
	var out []string
	for _, x := range []struct {
		n    int
		what string
	}{{len(c.Scans), "scan"}, {len(c.Readings), "pH reading"}, {len(c.Calibrations), "calibration"}, {len(c.Sheet), "sheet row"}, {len(c.Events), "event"}, {len(c.Plan), "planned set"}} {
		if x.n > 0 {
			out = append(out, dryCount(x.n, x.what))
		}
	}
	return strings.Join(out, ", ")
}

func dryCount(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

// states decides between taken, twin, parked and refused, oldest file first.
func (d *dryRun) states() {
	seen := map[[32]byte]*dryFile{}
	for _, f := range d.files {
		f.fate = &DryFile{Folder: f.Root, Path: f.Path, State: db.FileTaken, Rule: f.match.Rule}
		first := seen[f.sum]
		name := func(x *dryFile) string { return x.Root + "/" + x.Path }
		switch {
		case f.again != nil:
			f.fate.State = "waits"
			d.out.Waits = append(d.out.Waits, DryWait{f.Root, f.Path, sentence(f.again.Error())})
		case first != nil && (f.matchErr != nil || f.match.Copy || sameItem(first.match, f.match)):
			f.fate.State = db.FileTwin
			d.out.Twins = append(d.out.Twins, DryTwin{f.Root, f.Path, name(first)})
		case f.matchErr != nil:
			f.fate.State = db.FileParked
		case f.parseErr != nil:
			f.fate.State = db.FileRefused
			d.refuse(f, reasonOf(f.parseErr))
		case first != nil && f.match.Role == naming.RoleScan:
			f.fate.State = db.FileRefused
			d.refuse(f, &db.Reason{Found: "the same numbers as " + name(first), Expected: "a scan of its own",
				Remedy: "export the scan again; if the first name was wrong, place this one with pkvigil adopt", Sentence: "holds the same numbers as " + name(first) + ", byte for byte."})
		default:
			seen[f.sum] = f
		}
	}
}

func (d *dryRun) refuse(f *dryFile, r *db.Reason) {
	d.out.Refused = append(d.out.Refused, DryRefused{Folder: f.Root, Path: f.Path, Line: r.Line, Field: r.Field, Found: r.Found, Expected: r.Expected, Remedy: r.Remedy, Sentence: r.Sentence})
}

// taken are the files that count.
func (d *dryRun) taken() []*dryFile {
	var out []*dryFile
	for _, f := range d.files {
		if f.fate.State == db.FileTaken {
			out = append(out, f)
		}
	}
	return out
}

// park names the nearest rule and set for every parked file.
func (d *dryRun) park() {
	var known []naming.KnownSet
	for _, s := range d.sets {
		k := naming.KnownSet{Folder: s.Folder, Set: s.Set, Roles: s.Roles}
		for _, r := range s.Rungs {
			k.Rungs = append(k.Rungs, r.Rung)
		}
		for l := range s.labels {
			k.Ladder = append(k.Ladder, l)
		}
		known = append(known, k)
	}
	slices.SortFunc(known, func(a, b naming.KnownSet) int { return cmp.Compare(a.Set, b.Set) })
	for _, f := range d.files {
		if f.fate.State != db.FileParked {
			continue
		}
		p := DryParked{Folder: f.Root, Path: f.Path, Why: sentence(f.matchErr.Error())}
		if len(d.out.Parked) < drySuggestions {
			g := naming.Nearest(f.Root, f.Path, d.set.Naming(), known)
			p.Rule, p.Set, p.Suggest = g.Rule, g.Set, g.Sentence
		}
		d.out.Parked = append(d.out.Parked, p)
	}
}

// finish sorts and counts.
func (d *dryRun) finish() {
	o := d.out
	for _, s := range d.sets {
		o.Sets = append(o.Sets, *s)
		if s.State == naming.Complete {
			o.Counts.Complete++
		} else {
			o.Counts.Waiting++
		}
	}
	slices.SortFunc(o.Sets, func(a, b DrySet) int { return cmp.Compare(a.Key, b.Key) })
	for _, f := range d.files {
		o.Files = append(o.Files, *f.fate)
		if f.fate.State == db.FileTaken {
			o.Counts.Taken++
		}
	}
	slices.SortFunc(o.Files, func(a, b DryFile) int {
		return cmp.Or(cmp.Compare(a.Folder, b.Folder), cmp.Compare(a.Path, b.Path))
	})
	c := &o.Counts
	c.Files, c.Parked, c.Refused, c.Twins, c.Waits, c.Sets = len(o.Files), len(o.Parked), len(o.Refused), len(o.Twins), len(o.Waits), len(o.Sets)
	for _, f := range o.Folders {
		c.Litter += f.Litter
		if !f.Visible {
			c.Blind++
		}
	}
}

// Attention says whether a person has something to do.
func (l *DryLook) Attention() bool {
	c := l.Counts
	return c.Parked+c.Refused+c.Waiting+c.Waits+c.Blind > 0
}
