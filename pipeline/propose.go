package pipeline

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"maps"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"time"

	"pkvigil/parse"
	"pkvigil/parse/delimited"
	"pkvigil/parse/export"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/watcher"
)

const (
	proposeNames   = 20000 // names looked at per folder, the newest
	proposeSamples = 4     // files read per rule and role
	proposeBytes   = 64 << 20
)

// ProposeOptions is what a proposal cannot see in the folders.
type ProposeOptions struct {
	Zone    string // IANA zone of this machine; "" if it cannot be told
	DataDir string // folder for the program's own data
	Name    string // of the settings, for messages
	Now     time.Time
}

// A ProposedSettings is a settings file made from what folders hold.
type ProposedSettings struct {
	Text   []byte
	Doubts []string // the sentences marked DOUBT in the text
	Look   *DryLook // what the proposal makes of the folders
}

// ProposeSettings looks at folders, read only, and writes a commented settings
// file for them: rules from the names, columns and roles from what the files
// hold, instruments, and compounds as commented doubts. The text is accepted
// by settings.Read. It fails when a folder cannot be read or holds no file.
func ProposeSettings(ctx context.Context, folders []string, opt ProposeOptions) (*ProposedSettings, error) {
	p := &proposal{opt: opt}
	if err := p.walk(ctx, folders); err != nil {
		return nil, err
	}
	p.nameRules()
	if err := p.readSamples(ctx); err != nil {
		return nil, err
	}
	p.nameInstruments()
	p.sharedRuns()
	set, err := settings.Read(p.text(), opt.Name)
	if err != nil {
		return nil, fmt.Errorf("the proposal is not accepted, which is a fault of this program: %w", err)
	}
	look, err := LookDry(ctx, set, opt.Now, time.Time{})
	if err != nil {
		return nil, err
	}
	p.learn(look)
	text := p.text()
	if _, err := settings.Read(text, opt.Name); err != nil {
		return nil, fmt.Errorf("the proposal is not accepted, which is a fault of this program: %w", err)
	}
	return &ProposedSettings{Text: text, Doubts: p.said, Look: look}, nil
}

// proposal is a settings file in the making.
type proposal struct {
	opt       ProposeOptions
	folders   []proposedFolder
	rules     []proposedRule
	left      []string // names no rule covers
	compounds []proposedCompound
	overall   []string // doubts on the whole
	said      []string // all doubts of the last text
}

type proposedFolder struct {
	name, path, instrument string
	doubts                 []string
	files                  []watcher.File
	waves                  [2]float64 // shortest and longest wavelength seen, nm
}

type proposedRule struct {
	naming.Rule
	doubts  []string
	layout  *parse.Layout // that reads its files, as a suggestion
	refused string        // why a sample cannot be read
	paths   []string
	folder  int
}

type proposedCompound struct {
	code string
	sets []string
}

// walk lists the files of the folders.
func (p *proposal) walk(ctx context.Context, folders []string) error {
	used := map[string]bool{}
	for _, f := range folders {
		abs, err := filepath.Abs(f)
		if err != nil {
			return err
		}
		if abs, err = filepath.EvalSymlinks(abs); err != nil {
			return fmt.Errorf("folder %s: %w; name a folder that this machine can see", f, err)
		}
		w := watcher.New([]watcher.Root{{Name: "x", Path: abs}}, watcher.Options{MaxFiles: math.MaxInt32})
		if _, err := w.Look(ctx, p.opt.Now); err != nil {
			return err
		}
		rep, err := w.Look(ctx, p.opt.Now.Add(time.Hour))
		if err != nil {
			return err
		}
		if st := rep.States[0]; !st.Visible {
			return errors.New(strings.Replace(st.Why, "Folder x ", "folder ", 1))
		}
		if len(rep.Files) == 0 {
			return fmt.Errorf("folder %s holds no file that could be read; export a few sets into it first, or name another", f)
		}
		d := proposedFolder{path: abs, files: rep.Files[:min(len(rep.Files), proposeNames)]}
		if n := len(rep.Files) - len(d.files); n > 0 {
			d.doubts = append(d.doubts, fmt.Sprintf("Only the newest %d names were looked at; %d older ones may be named otherwise.", len(d.files), n))
		}
		d.name = folderName(abs, used)
		used[d.name] = true
		p.folders = append(p.folders, d)
	}
	return nil
}

// folderName makes a short name from a path.
func folderName(path string, used map[string]bool) string {
	base := regexp.MustCompile(`[^\pL\pN_-]+`).ReplaceAllString(filepath.Base(path), "-")
	base = strings.Trim(base, "-")
	if base == "" {
		base = "exports"
	}
	name := base
	for n := 2; used[name]; n++ {
		name = fmt.Sprintf("%s-%d", base, n)
	}
	return name
}

// nameRules proposes rules from the names of each folder. Folders whose names
// are alike share them.
func (p *proposal) nameRules() {
	byPattern := map[string]int{}
	names := map[string]bool{}
	for i := range p.folders {
		f := &p.folders[i]
		var paths []string
		for _, x := range f.files {
			paths = append(paths, x.Path)
		}
		slices.Sort(paths)
		inst := false
		for _, prop := range proposeRules(paths) {
			if prop.Rule.Name == "" {
				for _, l := range prop.Paths {
					p.left = append(p.left, f.name+"/"+l)
				}
				continue
			}
			inst = inst || strings.Contains(prop.Rule.Pattern, "(?P<inst>")
			r := proposedRule{Rule: prop.Rule, doubts: prop.Doubts, paths: prop.Paths, folder: i}
			r.Folders = []string{f.name}
			if at, ok := byPattern[r.Pattern]; ok {
				p.rules[at].Folders = append(p.rules[at].Folders, f.name)
				continue
			}
			base := r.Name
			for n := 2; names[r.Name]; n++ {
				r.Name = fmt.Sprintf("%s %d", base, n)
			}
			names[r.Name] = true
			byPattern[r.Pattern] = len(p.rules)
			p.rules = append(p.rules, r)
		}
		if inst {
			continue // the path says which instrument it is
		}
		f.instrument = f.name
	}
}

// nameInstruments takes the folder's name for its instrument where the folder
// holds scans; folders of tables and logs have none of their own.
func (p *proposal) nameInstruments() {
	for i := range p.folders {
		f := &p.folders[i]
		if f.instrument == "" {
			continue
		}
		if f.waves[1] == 0 {
			f.instrument = ""
			continue
		}
		if !regexp.MustCompile(`^\pL{1,4}-?\d{1,3}$`).MatchString(f.name) {
			f.doubts = append(f.doubts, fmt.Sprintf("The instrument is named after the folder (%s); put its own name here and under [[instrument]].", f.name))
		}
	}
}

// readSamples reads a few files of every rule and role: what they hold decides
// on roles, columns and layouts.
func (p *proposal) readSamples(ctx context.Context) error {
	var plain []naming.Rule
	for _, r := range p.rules {
		plain = append(plain, r.Rule)
	}
	rules, err := naming.Compile(plain)
	if err != nil {
		return fmt.Errorf("proposed rules: %w", err)
	}
	for i := range p.rules {
		r := &p.rules[i]
		f := &p.folders[r.folder]
		s := &samples{perRole: map[string]int{}}
		for _, file := range f.files {
			m, err := rules.Match(f.name, file.Path)
			if err != nil || m.Rule != r.Name || s.perRole[m.Role] >= proposeSamples {
				continue
			}
			raw, err := watcher.Read(ctx, file, proposeBytes)
			if ctx.Err() != nil {
				return ctx.Err()
			}
			if err != nil {
				continue
			}
			s.perRole[m.Role]++
			s.read(file.Path, raw, m)
		}
		s.decide(r, f)
	}
	return nil
}

// samples is what the sampled files of one rule hold.
type samples struct {
	perRole map[string]int
	labels  []string // of traces of files with several
	many    int      // files with several traces
	jcamp   bool
	roles   map[string]int // role by content, of files that the name calls scans
	layouts []parse.Layout
	refused string
	waves   [2]float64
}

func (s *samples) read(path string, raw []byte, m naming.Match) {
	opt := parse.Options{Role: m.Role}
	if m.Role == naming.RoleScan {
		opt.Role = "" // the name says nothing: let the content speak
	}
	c, err := export.Read(path, raw, opt)
	if err != nil {
		if s.refused == "" {
			s.refused = sentence(err.Error())
		}
		// What the file holds besides is learnt as if a person had stated the units; that stays a doubt.
		opt.Layouts = []parse.Layout{{Name: "trial", Abscissa: "nm", Ordinate: "absorbance"}}
		if c, err = export.Read(path, raw, opt); err != nil {
			return
		}
	}
	if _, l := export.Explain(path, raw, opt); opt.Layouts == nil && l.Shape != "" && len(c.Scans) > 0 {
		s.layouts = append(s.layouts, l)
	}
	s.jcamp = s.jcamp || c.Format == "jcamp-dx"
	for _, sc := range c.Scans {
		if n := len(sc.WavelengthNM); n > 0 {
			if s.waves[0] == 0 || sc.WavelengthNM[0] < s.waves[0] {
				s.waves[0] = sc.WavelengthNM[0]
			}
			s.waves[1] = max(s.waves[1], sc.WavelengthNM[n-1])
		}
	}
	if m.Role != naming.RoleScan {
		return
	}
	if s.roles == nil {
		s.roles = map[string]int{}
	}
	s.roles[contentRole(c)]++
	if len(c.Scans) > 1 {
		s.many++
		for _, sc := range c.Scans {
			s.labels = append(s.labels, sc.Label)
		}
	}
}

// contentRole is the role that what a file holds suggests.
func contentRole(c *parse.Content) string {
	switch {
	case len(c.Scans) > 0:
		return naming.RoleScan
	case len(c.Calibrations) > 0:
		return naming.RoleCalibration
	case len(c.Sheet) > 0:
		return naming.RoleSheet
	case len(c.Plan) > 0:
		return naming.RolePlan
	case len(c.Events) > 0:
		return naming.RoleEvents
	case len(c.Readings) > 0:
		return naming.RolePH
	}
	return naming.RoleScan
}

// decide lets the content complete the rule.
func (s *samples) decide(r *proposedRule, f *proposedFolder) {
	r.refused = s.refused
	if s.waves[1] > 0 {
		if f.waves[0] == 0 || s.waves[0] < f.waves[0] {
			f.waves[0] = s.waves[0]
		}
		f.waves[1] = max(f.waves[1], s.waves[1])
	}
	if len(s.layouts) > 0 {
		r.layout = &s.layouts[0]
	}
	if len(s.roles) == 1 && s.roles[naming.RoleScan] == 0 && !strings.Contains(r.Pattern, "(?P<role>") {
		for role := range s.roles {
			r.Role = role
			r.doubts = append(r.doubts, fmt.Sprintf("The names do not say what these files are; they hold what a file of role %s holds.", role))
		}
		r.Pair, r.PairBy = "", ""
		return
	}
	if s.many == 0 {
		return
	}
	pattern, doubts := columnPattern(s.labels, strings.Contains(r.Pattern, "(?P<run>"), !s.jcamp)
	if s.jcamp && pattern == "" {
		r.Pair, r.PairBy = "inside", ""
		return
	}
	r.doubts = append(r.doubts, doubts...)
	if pattern == "" {
		return
	}
	r.doubts = slices.DeleteFunc(r.doubts, func(d string) bool {
		return strings.HasPrefix(d, "The names hold no set") || strings.HasPrefix(d, "No rung was recognised")
	})
	r.Column = pattern
	re := regexp.MustCompile(`^(?:` + pattern + `)$`)
	for _, l := range s.labels {
		if n := naming.Normal(l); re.MatchString(n) && len(r.ColumnEx) < 3 && !slices.Contains(r.ColumnEx, l) {
			r.ColumnEx = append(r.ColumnEx, l)
		}
	}
	switch {
	case strings.Contains(pattern, "(?P<ph>"):
		r.Pair, r.PairBy = "name", ""
	case strings.Contains(pattern, "(?P<pos>"):
		r.Pair, r.PairBy = "key", "pos"
	case strings.Contains(pattern, "(?P<rung>"):
		r.Pair, r.PairBy = "key", "rung"
	}
}

// sharedRuns lets a sheet or table that lies beside scans of a run belong to it.
func (p *proposal) sharedRuns() {
	group := func(r naming.Rule, name string) bool { return strings.Contains(r.Pattern, "(?P<"+name+">") }
	for i := range p.rules {
		r := &p.rules[i]
		if r.Run != "" || group(r.Rule, "set") {
			continue
		}
		for _, o := range p.rules {
			if o.Run == "" || !slices.Equal(o.Folders, r.Folders) {
				continue
			}
			try := r.Rule
			if group(try, "run") && !group(try, "inst") && strings.Contains(o.Run, "${inst}") {
				try.Pattern = strings.Replace(try.Pattern, "(?P<run>", "(?P<inst>", 1) // the same directory by its other name
			}
			fits := !group(try, "run")
			for _, g := range regexp.MustCompile(`\$\{(\w+)\}`).FindAllStringSubmatch(o.Run, -1) {
				fits = fits && group(try, g[1])
			}
			if !fits {
				continue
			}
			r.Pattern, r.Run = try.Pattern, o.Run
			r.doubts = slices.DeleteFunc(r.doubts, func(d string) bool { return strings.HasPrefix(d, "The names hold no set") })
			if group(r.Rule, "inst") {
				p.folders[r.folder].instrument = ""
			}
		}
	}
}

// learn draws from a look at the folders what the names alone do not tell.
func (p *proposal) learn(l *DryLook) {
	byCode := map[string][]string{}
	blank, ph, ladders := 0, 0, math.MaxInt
	for _, s := range l.Sets {
		byCode[compoundCode(s.Set)] = append(byCode[compoundCode(s.Set)], s.Set)
		if slices.Contains(s.Roles, naming.RoleBlank) {
			blank++
		}
		if s.Pairing != "none" {
			ph++
		}
		if n := len(s.Rungs); n > 0 {
			ladders = min(ladders, n)
		}
	}
	for _, code := range slices.Sorted(maps.Keys(byCode)) {
		sets := byCode[code]
		slices.Sort(sets)
		p.compounds = append(p.compounds, proposedCompound{code, slices.Compact(sets)})
	}
	slices.SortStableFunc(p.compounds, func(a, b proposedCompound) int { return cmp.Compare(len(b.sets), len(a.sets)) })
	n := len(l.Sets)
	switch {
	case n == 0:
		p.overall = append(p.overall, "No set came about. Say in the rules which part of the names is the set, or give the run a sheet.")
		return
	case blank == 0:
		p.overall = append(p.overall, `No blank was recognised; every set waits for one. If blanks are subtracted by the instrument, write roles = ["ph"].`)
	case blank < n/2:
		p.overall = append(p.overall, fmt.Sprintf("Only %d of %d sets have a blank of their own.", blank, n))
	}
	if ph == 0 {
		p.overall = append(p.overall, "No pH was found for any scan: neither in the names, nor in the files, nor in a table with the same rungs. Without pH nothing can be computed.")
	}
	if ladders < settings.DefaultRungsMin {
		p.overall = append(p.overall, fmt.Sprintf(`The smallest set has %s; sets of fewer than %d wait for more. For sets of an acid form, a base form and one to three between, write profile = "three-solution" under the compound.`, dryCount(ladders, "rung"), settings.DefaultRungsMin))
	}
}

// compoundCode is the part of a set's name that is likely to name the compound:
// what stands before the first digit.
func compoundCode(set string) string {
	code := strings.TrimRight(regexp.MustCompile(`^[^\d]*`).FindString(set), "-_. ")
	if code == "" {
		return set
	}
	return code
}

// declaredLayout is a layout as a commented block.
func declaredLayout(l parse.Layout) string { return delimited.Declaration(l) }

// MachineZone tells the IANA zone of this machine from its environment, "" if
// it cannot be told.
func MachineZone() string {
	if z := os.Getenv("TZ"); z != "" {
		if _, err := time.LoadLocation(z); err == nil {
			return z
		}
	}
	target, err := os.Readlink("/etc/localtime")
	if err != nil {
		return ""
	}
	_, z, ok := strings.Cut(target, "zoneinfo/")
	if _, err := time.LoadLocation(z); err != nil || !ok {
		return ""
	}
	return z
}
