package naming

import (
	"fmt"
	"slices"
	"strings"
	"time"
)

// Noon is the usual boundary between two nights.
const Noon = 12 * time.Hour

// NightOf gives the local date, YYYY-MM-DD, on which the night of t began.
// A night runs from boundary to boundary of the local wall clock (Noon by
// default when boundary is 0), so that a scan of 02:10 belongs to the evening
// before. zone nil means UTC. The wall clock decides and not a count of hours,
// so nights of 23 and 25 hours are right.
func NightOf(t time.Time, zone *time.Location, boundary time.Duration) string {
	if zone == nil {
		zone = time.UTC
	}
	if boundary == 0 {
		boundary = Noon
	}
	t = t.In(zone)
	h, m, s := t.Clock()
	clock := time.Duration(h)*time.Hour + time.Duration(m)*time.Minute + time.Duration(s)*time.Second
	y, mo, d := t.Date()
	if clock < boundary {
		d--
	}
	return time.Date(y, mo, d, 0, 0, 0, 0, time.UTC).Format(time.DateOnly)
}

// A State is what a set is doing.
type State string

// States of a set, before it is computed.
const (
	Gathering State = "gathering" // files may still come
	Waiting   State = "waiting"   // something named is missing and its time is up
	Complete  State = "complete"  // may be computed
)

// An Expectation says when a set is whole. The zero value asks for nothing
// but a scan.
type Expectation struct {
	Roles    []string      // roles that must be there besides scans: RoleBlank, RolePH
	Rungs    int           // least number of different rungs
	Silence  time.Duration // quiet time after which a set that lacks nothing counts as whole
	Every    bool          // every pH row has its scan and every scan its pH
	Deadline time.Duration // after the last arrival; then a set that lacks something is waiting
}

// A MemberSummary is what completeness needs to know of one file or trace of
// the set that counts (no copies, no older revisions).
type MemberSummary struct {
	Role  string // RoleScan, RoleBlank, RolePH, ...
	Rung  string // of a scan; "" when unnumbered
	HasPH bool   // the scan carries its pH: in its name or inside the file
	// Keys of a pH file: the rungs its rows name. Nil for a single reading that is paired by clock.
	Keys []string
}

// A Progress is the present state of one set.
type Progress struct {
	Members    []MemberSummary
	LastSeen   time.Time // when the newest member arrived, by our clock
	EndSeen    bool      // an end marker file came, or the format's own end record
	Planned    []string  // rungs that a sheet or plan announces; nil: nothing announced
	PlannedEnd time.Time // when a plan says that the set is over; zero: unknown
}

// Completeness says what a set is doing at a moment, and what it lacks in
// words fit for a sentence ("the blank", "2 more rungs (5 of 7)"). A set is
// complete when it lacks nothing and one of these says that no more is coming:
// an end mark, every planned rung present, the planned end passed, or the
// silence time. A set that lacks something is gathering until its deadline
// after the last arrival, then waiting; after an end mark it is waiting at once.
func Completeness(e Expectation, p Progress, now time.Time) (State, []string) {
	missing := lacks(e, p)
	quiet := now.Sub(p.LastSeen)
	if len(missing) > 0 {
		if p.EndSeen || quiet >= e.Deadline {
			return Waiting, missing
		}
		return Gathering, missing
	}
	switch {
	case p.EndSeen,
		len(p.Planned) > 0,
		!p.PlannedEnd.IsZero() && !now.Before(p.PlannedEnd),
		quiet >= e.Silence:
		return Complete, nil
	}
	return Gathering, nil
}

// LookAgain gives the moment at which Completeness may change by the passing
// of time alone, or the zero time when only an arrival can change it.
func LookAgain(e Expectation, p Progress, now time.Time) time.Time {
	state, missing := Completeness(e, p, now)
	if state != Gathering {
		return time.Time{}
	}
	if len(missing) > 0 {
		return p.LastSeen.Add(e.Deadline)
	}
	at := p.LastSeen.Add(e.Silence)
	if !p.PlannedEnd.IsZero() && p.PlannedEnd.Before(at) {
		at = p.PlannedEnd
	}
	return at
}

// lacks lists what is missing, roles first.
func lacks(e Expectation, p Progress) []string {
	rungs := map[string]string{} // key -> as written
	withPH := map[string]bool{}
	keys := map[string]string{}
	roles := map[string]bool{}
	scans, scansPH, tables := 0, 0, 0
	for _, m := range p.Members {
		roles[m.Role] = true
		switch m.Role {
		case RoleScan:
			scans++
			k := RungKey(m.Rung)
			if m.Rung == "" {
				k = fmt.Sprintf("#%d", scans)
			}
			rungs[k] = m.Rung
			if m.HasPH {
				scansPH++
				withPH[k] = true
			}
		case RolePH:
			tables++
			for _, k := range m.Keys {
				keys[RungKey(k)] = k
			}
		}
	}
	var out []string
	if scans == 0 {
		out = append(out, "the scans")
	}
	for _, r := range e.Roles {
		if r == RolePH && scans > 0 && scansPH == scans {
			continue // every scan brings its own
		}
		if r != RoleScan && !roles[r] {
			out = append(out, roleName(r))
		}
	}
	if n := len(rungs); n > 0 && n < e.Rungs {
		out = append(out, fmt.Sprintf("%s (%d of %d)", count(e.Rungs-n, "more rung"), n, e.Rungs))
	}
	for _, want := range p.Planned {
		if _, ok := rungs[RungKey(want)]; !ok {
			out = append(out, "the scan of planned rung "+want)
		}
	}
	if e.Every {
		out = append(out, unpaired(rungs, withPH, keys, tables)...)
	}
	return out
}

// unpaired lists pH rows without a scan and scans without a pH.
func unpaired(rungs map[string]string, withPH map[string]bool, keys map[string]string, tables int) []string {
	var noScan, noPH []string
	for k, as := range keys {
		if _, ok := rungs[k]; !ok {
			noScan = append(noScan, as)
		}
	}
	if tables > 0 && len(keys) > 0 {
		for k, as := range rungs {
			if _, ok := keys[k]; !ok && !withPH[k] && as != "" {
				noPH = append(noPH, as)
			}
		}
	}
	var out []string
	if len(noScan) > 0 {
		slices.Sort(noScan)
		out = append(out, "the scan of rung "+strings.Join(noScan, ", ")+" (it has a pH)")
	}
	if len(noPH) > 0 {
		slices.Sort(noPH)
		out = append(out, "the pH of rung "+strings.Join(noPH, ", "))
	}
	return out
}

func roleName(r string) string {
	switch r {
	case RoleBlank:
		return "the blank"
	case RolePH:
		return "the pH table"
	case RoleSheet:
		return "the sample sheet"
	case RoleCalibration:
		return "the electrode calibration"
	}
	return "the " + r + " file"
}

func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}
