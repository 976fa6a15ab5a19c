package settings

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"regexp"
	"strings"
	"time"

	"pkvigil/pipeline/naming"
)

// Hash is the identity of a settings text: the SHA-256 of its bytes in hex.
// Every result names the hash of the settings it was computed under.
func Hash(data []byte) string {
	h := sha256.Sum256(data)
	return hex.EncodeToString(h[:])
}

// Naming gives the compiled rules. It is nil for Settings that Read did not make.
func (s *Settings) Naming() *naming.Rules { return s.naming }

// A CompoundError says that a set name fits no compound or several.
type CompoundError struct {
	Set   string
	Names []string // compounds it fits; empty: none
}

// Error gives one sentence with the remedy.
func (e *CompoundError) Error() string {
	if len(e.Names) == 0 {
		return fmt.Sprintf("set %q fits the sets pattern of no compound; add a [[compound]] or widen the pattern of one", e.Set)
	}
	return fmt.Sprintf("set %q fits the sets patterns of compounds %s; make one of them narrower", e.Set, strings.Join(e.Names, " and "))
}

// CompoundOf finds the one compound whose sets pattern is found in the set
// name, and the lot its template gives ("" if it has none). The pattern counts
// as written: it binds itself with ^ and $. The error is a *CompoundError when
// none or several fit.
func (s *Settings) CompoundOf(set string) (*Compound, string, error) {
	var hit *Compound
	var lot string
	var names []string
	for i := range s.Compounds {
		c := &s.Compounds[i]
		re, err := c.pattern()
		if err != nil {
			return nil, "", err
		}
		m := re.FindStringSubmatchIndex(set)
		if m == nil {
			continue
		}
		names = append(names, c.Name)
		if hit == nil {
			hit, lot = c, string(re.ExpandString(nil, c.Lot, set, m))
		}
	}
	if len(names) != 1 {
		return nil, "", &CompoundError{Set: set, Names: names}
	}
	return hit, lot, nil
}

// pattern gives the compiled sets pattern; Read keeps it, others pay for it each time.
func (c *Compound) pattern() (*regexp.Regexp, error) {
	if c.sets != nil {
		return c.sets, nil
	}
	text := c.Sets
	if text == "" {
		text = `^` + regexp.QuoteMeta(c.Name) + `(?:[^\pL\pN].*)?$`
	}
	re, err := regexp.Compile(text)
	if err != nil {
		return nil, fmt.Errorf("settings: compound %q: sets = %q is no regular expression: %w", c.Name, c.Sets, err)
	}
	return re, nil
}

// CompoundByName returns the compound of a name, nil if there is none.
func (s *Settings) CompoundByName(name string) *Compound {
	for i := range s.Compounds {
		if s.Compounds[i].Name == name {
			return &s.Compounds[i]
		}
	}
	return nil
}

// InstrumentByName returns the instrument of a name, nil if there is none.
func (s *Settings) InstrumentByName(name string) *Instrument {
	for i := range s.Instruments {
		if s.Instruments[i].Name == name {
			return &s.Instruments[i]
		}
	}
	return nil
}

// FolderByName returns the folder of a name, nil if there is none.
func (s *Settings) FolderByName(name string) *Folder {
	for i := range s.Folders {
		if s.Folders[i].Name == name {
			return &s.Folders[i]
		}
	}
	return nil
}

// ZoneOf gives the zone of the clock that stamps the files of a folder: its
// own, else the laboratory's, else UTC. An unknown folder has the laboratory's.
func (s *Settings) ZoneOf(folder string) *time.Location {
	name := s.Laboratory.Zone
	if f := s.FolderByName(folder); f != nil && f.Zone != "" {
		name = f.Zone
	}
	return zone(name)
}

// Zone gives the laboratory's zone.
func (s *Settings) Zone() *time.Location { return zone(s.Laboratory.Zone) }

// zone loads a zone that Read has checked; without the zone's data the name
// stands for UTC.
func zone(name string) *time.Location {
	if name == "" {
		return time.UTC
	}
	l, err := time.LoadLocation(name)
	if err != nil {
		return time.UTC
	}
	return l
}
