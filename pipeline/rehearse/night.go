package rehearse

import (
	"fmt"
	"slices"
	"time"
)

// nightMaker collects what happens in one night and what is true about it.
type nightMaker struct {
	story    *Story
	night    int
	quiet    bool // only the truth is wanted: sets are not measured unless their files must be named
	deposits []Deposit
	truth    []Truth
}

// Deposits is everything that happens from 17:00 of the day a night begins to
// 17:00 of the next, in order of time: calibrations, plans and events of the
// evening, exports of both instruments with whatever befalls them, outages,
// and the signatures of the morning after.
func (s *Story) Deposits(night int) []Deposit {
	return s.play(night, false).deposits
}

// play goes through one night.
func (s *Story) play(night int, quiet bool) *nightMaker {
	m := &nightMaker{story: s, night: night, quiet: quiet}
	if night < 1 || night > storyNights {
		return m
	}
	m.evening()
	plan := s.Bookings(night)
	first := map[string]bool{}
	for _, b := range plan {
		if night == nightSilent && b.Instrument == instOne {
			continue
		}
		isFirst := !b.Reference && !first[b.Instrument]
		if !b.Reference {
			first[b.Instrument] = true
		}
		m.set(b, isFirst)
	}
	m.outages()
	m.script()
	m.episodes()
	slices.SortStableFunc(m.deposits, func(a, b Deposit) int { return a.At.Compare(b.At) })
	return m
}

func (m *nightMaker) add(d Deposit) {
	if d.ModTime.IsZero() {
		d.ModTime = d.At
	}
	m.deposits = append(m.deposits, d)
}

func (m *nightMaker) write(at time.Time, folder, path string, data []byte, note string) {
	m.add(Deposit{At: at, Act: Write, Folder: folder, Path: path, Bytes: data, Note: note})
}

func (m *nightMaker) tell(t Truth) {
	t.Night = m.night
	m.truth = append(m.truth, t)
}

// evening writes calibrations, the log and the plan.
func (m *nightMaker) evening() {
	s, date := m.story, m.story.Date(m.night)
	for _, inst := range []string{instOne, instTwo} {
		if s.calibrates(inst, m.night) {
			_, c := s.electrodeAt(inst, m.night)
			m.write(c.At.Add(2*time.Minute), "METERS", fmt.Sprintf("%s_%s.csv", c.Electrode, date), CalibrationCSV(c, s.zone), "calibration")
		}
	}
	if events := s.Events(m.night); len(events) > 0 {
		m.write(s.at(m.night, 17, 33), "LOG", "events_"+date+".csv", EventsCSV(events, s.zone), "log")
	}
	var rows []Planned
	for _, b := range s.Bookings(m.night) {
		rows = append(rows, Planned{b.Instrument, b.Set, b.Compound, b.Slot})
	}
	m.write(s.at(m.night, 17, 40), "LOG", "plan_"+date+".csv", PlanCSV(date, rows), "plan")
}

// set measures a booking, lets its trouble strike and writes its files.
func (m *nightMaker) set(b Booking, first bool) {
	s := m.story
	t := s.troubleOf(b, first)
	if m.quiet && t.key == "" {
		m.tellSet(b, nil, t)
		return
	}
	set := s.Set(b)
	rng := dice(s.seed, "strike", m.night, b.Key())
	switch t.key {
	case "scan.bubble", "name.swap2", "name.shift1", "name.missing":
		if err := Spoil(set, Fault{Key: t.key, Rung: t.rung, Size: t.size}, rng); err != nil {
			panic(err) // the keys above are in the table and rungs are drawn within the ladder
		}
	case "name.blankwrong":
		wrongBlank(set)
	}
	m.deliver(set, t)
	m.tellSet(b, set, t)
}

// wrongBlank adds what another buffer absorbs to the blank.
func wrongBlank(set *Set) {
	x := set.Blank.WavelengthNM
	for i, nm := range x {
		z := (x[len(x)-1] - nm) / (x[len(x)-1] - x[0])
		set.Blank.Absorbance[i] += 0.012 + 0.012*z*z
	}
}

// deliver writes the files of a set, with what befalls files on the way.
func (m *nightMaker) deliver(set *Set, t trouble) {
	files := m.story.exportsOf(set)
	strike := struckFile(files, t)
	for i, f := range files {
		if i == strike {
			m.struck(set, f, t)
			continue
		}
		m.ordinary(set, f)
	}
	if t.key == "name.missing" {
		m.missing(set, t)
	}
}

// ordinary writes one undisturbed file. The changer's compound files come in
// two ways: some are renamed into place, others grow before our eyes.
func (m *nightMaker) ordinary(set *Set, f File) {
	compound := set.Instrument == instTwo && set.Reference && f.Role == "scan"
	switch {
	case compound && set.Slot == "close":
		m.write(f.At.Add(-8*time.Second), set.Instrument, f.Path+".part", f.Bytes, "written under another name")
		m.add(Deposit{At: f.At, Act: Rename, Folder: set.Instrument, Path: f.Path, From: f.Path + ".part", Note: "renamed into place"})
	case compound && m.night%2 == 1:
		m.add(Deposit{At: f.At.Add(-40 * time.Second), Act: WritePart, Folder: set.Instrument, Path: f.Path, Bytes: f.Bytes[:len(f.Bytes)/2], Note: "slow writer"})
		m.write(f.At, set.Instrument, f.Path, f.Bytes, "slow writer, finished")
	default:
		m.write(f.At, set.Instrument, f.Path, f.Bytes, f.Role)
	}
}

// struckFile is the index of the file a trouble befalls, -1 for none.
func struckFile(files []File, t trouble) int {
	switch t.key {
	case "name.phlate":
		return len(files) - 1
	case "file.copy", "file.reexport", "name.typo", "file.comma", "file.cut":
		for i, f := range files {
			if f.Role == "scan" && (f.Rung == "" || f.Rung == rungKey(t.rung+1)) {
				return i
			}
		}
	}
	return -1
}

// struck writes one file with its trouble.
func (m *nightMaker) struck(set *Set, f File, t trouble) {
	inst, morning := set.Instrument, m.story.at(m.night, 7, 20+t.rung)
	switch t.key {
	case "name.phlate":
		f.At = delayed(f.At, t.size)
		m.ordinary(set, f)
	case "file.copy":
		m.ordinary(set, f)
		m.write(f.At.Add(11*time.Minute), inst, copyName(f.Path), f.Bytes, "exact copy")
	case "file.reexport":
		m.ordinary(set, f)
		m.write(morning, inst, f.Path, m.stronger(set, f, t), "exported again with other numbers")
	case "name.typo":
		wrong := typo(f.Path, t.coin)
		m.write(f.At, inst, wrong, f.Bytes, "mistyped name")
		if t.rung%2 == 0 {
			m.sign(morning, Signature{Verb: "adopt", Object: set.Key(), File: inst + "/" + wrong, Rung: f.Rung, As: analyst, Because: "file name mistyped at the instrument"})
		}
	case "file.comma":
		if inst == instTwo {
			m.ordinary(set, f) // this format knows no locale
			return
		}
		m.write(f.At, inst, f.Path, commas(f.Bytes, t.coin), "decimal comma")
		if t.coin {
			m.write(morning, inst, f.Path, f.Bytes, "exported again with decimal points")
		}
	case "file.cut":
		m.write(f.At, inst, f.Path, cut(f.Bytes, t.size), "cut short")
		if t.coin {
			m.write(morning, inst, f.Path, f.Bytes, "exported again, whole")
		}
	}
}

// stronger renders a file again with one spectrum times 1.02.
func (m *nightMaker) stronger(set *Set, f File, t trouble) []byte {
	again := *set
	again.Rungs = slices.Clone(set.Rungs)
	r := &again.Rungs[t.rung]
	y := slices.Clone(r.Scan.Absorbance)
	for i := range y {
		y[i] *= 1 + t.size
	}
	r.Scan.Absorbance = y
	for _, g := range m.story.exportsOf(&again) {
		if g.Path == f.Path {
			return g.Bytes
		}
	}
	return f.Bytes
}

// missing lets the rung be measured in the morning, or never.
func (m *nightMaker) missing(set *Set, t trouble) {
	if !t.coin || (set.Instrument == instTwo && set.Reference) {
		return
	}
	whole := *set
	whole.Rungs = slices.Clone(set.Rungs)
	r := &whole.Rungs[t.rung]
	r.NoScan = false
	r.Scan.Measured = m.story.at(m.night, 7, 40+t.rung)
	for _, f := range m.story.exportsOf(&whole) {
		if f.Role == "scan" && f.Rung == r.Key {
			m.write(r.Scan.Measured.Add(6*time.Second), set.Instrument, f.Path, f.Bytes, "measured in the morning")
		}
	}
}

func (m *nightMaker) sign(at time.Time, s Signature) {
	m.add(Deposit{At: at, Act: Sign, Sign: &s, Note: s.Verb + " " + s.Object})
}
