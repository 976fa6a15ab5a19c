package drift

import (
	"slices"
	"strings"
)

type useKey struct {
	res  Resource
	role string
	cell int
}

// A scope is a resource with the cells and nights it acts on, for one trait.
type scope struct {
	trait  int
	res    Resource
	cells  []int
	nights [][]bool // parallel to cells: used in that night
	reset  []bool   // per night: an event put readings right before this night's measurements
	ended  []bool   // per night: an event may have removed the cause
	logged []bool   // per night: an event within one night raises the odds
	fixed  int      // only possible onset (a lot's first use), -1: any
}

// indexUses spreads the uses over nights.
func (l *look) indexUses() {
	l.uses = map[useKey][]bool{}
	for _, u := range l.h.Uses {
		i, ok := l.m.byKey[u.Cell]
		if !ok {
			continue
		}
		k := useKey{u.Resource, u.Role, i}
		if l.uses[k] == nil {
			l.uses[k] = make([]bool, l.nights)
		}
		for n := max(u.From, l.h.First); n <= min(u.Until, l.h.Last); n++ {
			l.uses[k][n-l.h.First] = true
		}
	}
}

// usedBy reports whether cell i used r in night n. Resources that nobody
// declared are implied: the instrument, the stock of a reference, the laboratory.
func (l *look) usedBy(r Resource, role string, i, n int) bool {
	if u, ok := l.uses[useKey{r, role, i}]; ok {
		return u[n]
	}
	return l.implied(r, i)
}

// usedNights gives the nights on which cell i was observed and used r.
func (l *look) usedNights(r Resource, role string, i int) (used []bool, any bool) {
	u, ok := l.uses[useKey{r, role, i}]
	if !ok && !l.implied(r, i) {
		return nil, false
	}
	used = make([]bool, l.nights)
	for _, o := range l.cells[i].obs {
		if !ok || u[o.night] {
			used[o.night], any = true, true
		}
	}
	return used, any
}

func (l *look) implied(r Resource, i int) bool {
	c := &l.m.cells[i]
	switch r.Kind {
	case KindLaboratory:
		return true
	case KindInstrument:
		return c.Instrument != "" && c.Instrument == r.Name
	case KindStock:
		return c.Reference != "" && c.Reference == r.Name && !l.declared(KindStock, "")
	}
	return false
}

func (l *look) declared(k Kind, role string) bool {
	for u := range l.uses {
		if u.res.Kind == k && u.role == role {
			return true
		}
	}
	return false
}

// resources lists what a trait can act through in this look.
func (l *look) resources(t Trait) []Resource {
	key := string(t.Kinds[0]) + t.Role
	if r, ok := l.named[key]; ok {
		return r
	}
	r := l.findResources(t)
	l.named[key] = r
	return r
}

func (l *look) findResources(t Trait) []Resource {
	for _, kind := range t.Kinds {
		set := map[Resource]bool{}
		for u := range l.uses {
			if u.res.Kind == kind && u.role == t.Role {
				set[u.res] = true
			}
		}
		if len(set) == 0 {
			for i := range l.m.cells {
				c := &l.m.cells[i]
				switch {
				case kind == KindInstrument && c.Instrument != "":
					set[Resource{kind, c.Instrument}] = true
				case kind == KindStock && c.Reference != "":
					set[Resource{kind, c.Reference}] = true
				case kind == KindLaboratory:
					set[Resource{Kind: kind}] = true
				}
			}
		}
		if len(set) > 0 {
			out := make([]Resource, 0, len(set))
			for r := range set {
				out = append(out, r)
			}
			slices.SortFunc(out, func(a, b Resource) int { return strings.Compare(a.Name, b.Name) })
			return out
		}
	}
	if t.Kinds[len(t.Kinds)-1] != KindBuffer && t.Kinds[len(t.Kinds)-1] != KindStock {
		return []Resource{{Kind: KindLaboratory}}
	}
	return nil
}

// findScopes lists every trait with every resource that some observed cell used.
func (l *look) findScopes() {
	for t, tr := range l.m.traits {
		for _, r := range l.resources(tr) {
			s := scope{trait: t, res: r, fixed: -1}
			for i := range l.cells {
				if l.cells[i].c.cols[t] == nil || len(l.cells[i].obs) == 0 {
					continue
				}
				if used, any := l.usedNights(r, tr.Role, i); any {
					s.cells = append(s.cells, i)
					s.nights = append(s.nights, used)
				}
			}
			if len(s.cells) > 0 {
				l.events(&s)
				l.scopes = append(l.scopes, s)
			}
		}
	}
}

// events marks the nights on which something was done to a scope.
func (l *look) events(s *scope) {
	tr := l.m.traits[s.trait]
	s.reset, s.ended, s.logged = make([]bool, l.nights), make([]bool, l.nights), make([]bool, l.nights)
	near := func(n int) {
		for k := max(0, n-1); k <= min(l.nights-1, n+1); k++ {
			s.logged[k] = true
		}
	}
	for _, e := range l.h.Events {
		n := int(e.Night - l.h.First)
		if n < -1 || n > l.nights || !l.concerns(e, s) {
			continue
		}
		inside := n >= 0 && n < l.nights
		if tr.Reset != "" && e.Kind == tr.Reset && inside {
			s.reset[n] = true
		}
		if slices.Contains(tr.Events, e.Kind) {
			if inside {
				s.ended[n] = true
			}
			if e.Kind != EventCalibration || tr.Role != "" {
				near(n)
			}
		}
	}
	if tr.Role != "" || tr.Cause == ReferenceLot {
		s.fixed = l.nights
		for _, used := range s.nights {
			if k := slices.Index(used, true); k >= 0 && k < s.fixed {
				s.fixed = k
			}
		}
		if s.fixed > 0 {
			near(s.fixed)
		}
	}
}

// concerns reports whether an event was done to the resource or to an instrument of the scope.
func (l *look) concerns(e Event, s *scope) bool {
	if e.Resource != "" && e.Resource == s.res.Name {
		return true
	}
	for _, i := range s.cells {
		c := l.cells[i].c
		if e.Instrument != "" && (e.Instrument == c.Instrument || e.Instrument == s.res.Name) {
			return true
		}
		if e.Resource != "" && (string(e.Kind) == string(KindElectrode) || e.Kind == EventCalibration) &&
			l.uses[useKey{Resource{KindElectrode, e.Resource}, "", i}] != nil && l.m.traits[s.trait].Kinds[0] != KindElectrode {
			return true
		}
	}
	return false
}
