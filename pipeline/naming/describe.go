package naming

import (
	"fmt"
	"slices"
	"strings"
)

// describe fills the other keys of a rule and says what is in doubt.
func describe(r *Rule, fam []form, doubts *[]string, column bool) {
	has := map[string]bool{}
	kinds := map[kind]bool{}
	sets := map[string]bool{}
	zero := false
	for _, f := range fam {
		for _, p := range f.parts {
			has[p.group] = has[p.group] || p.group != ""
		}
		for i, k := range f.c.kinds {
			kinds[k] = true
			if k == kPH && slices.ContainsFunc(f.c.column(i), func(s string) bool { return strings.Contains(s, "p") }) {
				r.PHPoint = "p"
			}
			if k == kRung && slices.ContainsFunc(f.c.column(i), func(s string) bool { return strings.Trim(s, "0") == "" }) {
				zero = true
			}
		}
		for _, row := range f.c.rows {
			sets[f.c.name(row)] = true
		}
	}
	doubt := func(format string, args ...any) { *doubts = append(*doubts, fmt.Sprintf(format, args...)) }
	setTemplate(r, has)
	scans := slices.ContainsFunc(fam, func(f form) bool { return !slices.Contains(f.c.kinds, kRole) })
	pairing(r, fam, has, scans)
	switch {
	case !scans:
	case has["set"]:
		if len(sets) == 1 {
			doubt("Only one set was seen (%s), so which part of the name varies is a guess.", anyOf(sets))
		}
		if has["rung"] && zero {
			doubt("Rungs are counted from 0 in the names; make sure that the rows of the pH table are too, or say first = 1.")
		}
		if !has["rung"] && !has["ph"] && !column {
			doubt("No rung was recognised in the names; each file is taken to hold the whole set.")
		}
	case has["run"] || has["pos"]:
		doubt("The names say where a solution stood and not which set it belongs to; a sheet of the run (role sheet) must say it.")
		if !has["run"] && has["pos"] {
			r.Run = joinGroups(has, "inst", "date")
		}
	default:
		doubt("The names hold no set; it must come from the labels inside the file (key column) or from a sheet.")
	}
	if kinds[kDate] && sixDigits(fam) {
		doubt("Six digits were read as a date, year first.")
	}
}

func anyOf(m map[string]bool) string {
	for k := range m {
		return k
	}
	return ""
}

func sixDigits(fam []form) bool {
	for _, f := range fam {
		for i, k := range f.c.kinds {
			if k == kDate && len(f.c.rows[0].fields[i].text) == 6 {
				return true
			}
		}
	}
	return false
}

func joinGroups(has map[string]bool, names ...string) string {
	var out []string
	for _, n := range names {
		if has[n] {
			out = append(out, "${"+n+"}")
		}
	}
	return strings.Join(out, "-")
}

// setTemplate adds what distinguishes sets of one name: night, slot, temperature.
func setTemplate(r *Rule, has map[string]bool) {
	if !has["set"] {
		return
	}
	t := "${set}"
	if has["night"] {
		t += "-n${night}"
	}
	if has["slot"] {
		t += "-${slot}"
	}
	if has["celsius"] {
		t += "-T${celsius}"
		r.Series = "${set}"
	}
	if t != "${set}" {
		r.Set = t
	}
}

// pairing chooses how a pH finds its scan.
func pairing(r *Rule, fam []form, has map[string]bool, scans bool) {
	_, ext := splitExt(Normal(fam[0].c.rows[0].path))
	switch {
	case !scans:
	case has["ph"]:
		r.Pair = "name"
	case strings.EqualFold(ext, ".jdx") || strings.EqualFold(ext, ".dx") && !has["rung"]:
		r.Pair = "inside"
	case has["pos"]:
		r.Pair, r.PairBy = "key", "pos"
	case has["rung"]:
		r.Pair, r.PairBy = "key", "rung"
	}
}

// pairByClock pairs scans that bear a time with a log of pH that bears none of their names.
func (p *proposer) pairByClock(out []Proposal) {
	log := slices.ContainsFunc(p.clusters, func(c *cluster) bool {
		i := slices.Index(c.kinds, kRole)
		if i < 0 || len(c.set) > 0 {
			return false
		}
		role, _ := RoleOf(c.rows[0].fields[i].text)
		return role == RolePH
	})
	for i := range out {
		if log && strings.Contains(out[i].Rule.Pattern, "<stamp>") && strings.Contains(out[i].Rule.Pattern, "<set>") && out[i].Rule.Pair != "name" {
			out[i].Rule.Pair = "clock"
		}
	}
}

// freeName makes a name for the rule that no other has.
func freeName(r Rule, fam []form, used map[string]bool) string {
	base := "scans"
	if !slices.ContainsFunc(fam, func(f form) bool { return !slices.Contains(f.c.kinds, kRole) }) {
		base = "tables"
	}
	if strings.Contains(r.Pattern, "<slot>") {
		base = "references"
	}
	name := base
	for n := 2; used[name]; n++ {
		name = fmt.Sprintf("%s %d", base, n)
	}
	used[name] = true
	return name
}
