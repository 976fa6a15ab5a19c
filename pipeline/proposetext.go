package pipeline

import (
	"fmt"
	"path"
	"regexp"
	"strings"

	"pkvigil/parse"
	"pkvigil/pipeline/settings"
)

// text writes the settings file and collects its doubts.
func (p *proposal) text() []byte {
	p.said = nil
	var b strings.Builder
	fmt.Fprintf(&b, `# Settings of pkvigil, proposed from the names and files of %s.
# Lines that begin with "# DOUBT:" say what could not be decided; look at each.
# See what these settings make of the folders, without a database:
#
#     pkvigil look --settings THIS-FILE
#
# Every key with its default: pkvigil help settings

`, dryCount(len(p.folders), "folder"))
	for _, d := range p.overall {
		p.doubt(&b, d)
	}
	p.writeHead(&b)
	for _, f := range p.folders {
		p.writeFolder(&b, f)
	}
	for _, r := range p.rules {
		p.writeRule(&b, r)
	}
	p.writeLeft(&b)
	p.writeCompounds(&b)
	p.writeInstruments(&b)
	return []byte(b.String())
}

// doubt writes a doubt in lines of readable length.
func (p *proposal) doubt(b *strings.Builder, text string) {
	p.said = append(p.said, text)
	comment(b, "# DOUBT: ", "#        ", text)
}

func comment(b *strings.Builder, first, rest, text string) {
	line := first
	for i, w := range strings.Fields(text) {
		if i > 0 && len([]rune(line))+1+len([]rune(w)) > 100 {
			b.WriteString(line + "\n")
			line = rest + w
			continue
		}
		if i > 0 {
			line += " "
		}
		line += w
	}
	b.WriteString(line + "\n")
}

func (p *proposal) writeHead(b *strings.Builder) {
	b.WriteString("[laboratory]\nname = \"My laboratory\"\n")
	zone := p.opt.Zone
	if zone == "" {
		zone = settings.DefaultZone
		p.doubt(b, "This machine does not say in which zone it stands. Nights are counted in this zone.")
	}
	fmt.Fprintf(b, "zone = %s\n", tomlText(zone))
	b.WriteString("\n[storage]\n# The private database, briefs and records lie here.\n")
	fmt.Fprintf(b, "data_dir = %s\n\n", tomlText(p.opt.DataDir))
}

func (p *proposal) writeFolder(b *strings.Builder, f proposedFolder) {
	b.WriteString("[[folder]]\n")
	fmt.Fprintf(b, "name = %s\npath = %s\n", tomlText(f.name), tomlText(f.path))
	for _, d := range f.doubts {
		p.doubt(b, d)
	}
	if f.instrument != "" {
		fmt.Fprintf(b, "instrument = %s\n", tomlText(f.instrument))
	} else {
		b.WriteString("# No instrument here: the path says which it is (group inst of the rule).\n")
	}
	b.WriteString("# On a network share, put a file there that is always visible, so that an unmounted share is\n# not taken for an empty folder:\n#marker_file = \".export-share\"\n\n")
}

func (p *proposal) writeRule(b *strings.Builder, r proposedRule) {
	fmt.Fprintf(b, "# %s, for example %s\n", dryCount(len(r.paths), "name"), parse.Show(r.paths[0]))
	for _, d := range r.doubts {
		p.doubt(b, d)
	}
	b.WriteString("[[rule]]\n")
	word := func(key, v string) {
		if v != "" {
			fmt.Fprintf(b, "%s = %s\n", key, tomlText(v))
		}
	}
	list := func(key string, v []string) {
		if len(v) > 0 {
			q := make([]string, len(v))
			for i := range v {
				q[i] = tomlText(v[i])
			}
			fmt.Fprintf(b, "%s = [%s]\n", key, strings.Join(q, ", "))
		}
	}
	word("name", r.Name)
	word("pattern", r.Pattern)
	word("column", r.Column)
	if len(p.folders) > len(r.Folders) {
		list("folders", r.Folders)
	}
	word("role", r.Role)
	word("set", r.Set)
	word("series", r.Series)
	word("run", r.Run)
	word("slot", r.Slot)
	word("ph_point", r.PHPoint)
	word("pair", r.Pair)
	word("pair_by", r.PairBy)
	if r.First != 0 {
		fmt.Fprintf(b, "first = %d\n", r.First)
	}
	word("date_format", r.DateFormat)
	list("example", r.Example)
	list("column_example", r.ColumnEx)
	b.WriteString("\n")
	p.writeLayout(b, r)
}

// writeLayout adds, as a comment, a layout that nails down how files are read,
// or what to declare where they are not.
func (p *proposal) writeLayout(b *strings.Builder, r proposedRule) {
	if r.refused != "" {
		p.doubt(b, "A file of this rule cannot be read: "+r.refused+" If the file is right, declare its layout; pkvigil look --explain FILE shows how it was read. For example:")
		b.WriteString(commented("[[layout]]\nname = " + tomlText(r.Name) + "\nfiles = " + tomlText(extensionPattern(r.paths[0])) + "\nabscissa = \"nm\"\nordinate = \"absorbance\"\n"))
		b.WriteString("\n")
		return
	}
	if r.layout == nil {
		return
	}
	l := *r.layout
	l.Name, l.Files, l.HeaderLine, l.FirstLine, l.Columns = r.Name, extensionPattern(r.paths[0]), 0, 0, nil
	b.WriteString("# The scans of this rule are read by themselves, as follows. Remove the # to refuse any other form.\n")
	b.WriteString(commented(declaredLayout(l)))
	b.WriteString("\n")
}

func extensionPattern(name string) string { return regexp.QuoteMeta(path.Ext(name)) + "$" }

func commented(block string) string {
	var b strings.Builder
	for line := range strings.Lines(block) {
		b.WriteString("#" + line)
	}
	return b.String()
}

func (p *proposal) writeLeft(b *strings.Builder) {
	if len(p.left) == 0 {
		return
	}
	verb := "fits"
	if len(p.left) > 1 {
		verb = "fit"
	}
	p.doubt(b, fmt.Sprintf("%s %s no rule and would be parked. Write a [[rule]] for what is wanted; under a folder, ignore = [\"*.pdf\"] passes over what is not.", dryCount(len(p.left), "file"), verb))
	for i, l := range p.left {
		if i == 10 {
			fmt.Fprintf(b, "#     and %d more\n", len(p.left)-i)
			break
		}
		fmt.Fprintf(b, "#     %s\n", parse.Clean(l))
	}
	b.WriteString("\n")
}

// writeCompounds names what the sets seem to be made of. No chemistry can be
// seen in a name, so all of it is commented.
func (p *proposal) writeCompounds(b *strings.Builder) {
	if len(p.compounds) == 0 {
		return
	}
	p.doubt(b, "Which compounds these are, no file says. Without a [[compound]] a set is computed with one step, without an expected pKa and without a correction for activity. Fill in the charge of the acid form and the expected pKa, and remove the # signs.")
	for i, c := range p.compounds {
		if i == 20 {
			fmt.Fprintf(b, "# and %d more codes\n", len(p.compounds)-i)
			break
		}
		shown := c.sets[:min(len(c.sets), 3)]
		comment(b, "# ", "#   ", fmt.Sprintf("%s, for example %s", dryCount(len(c.sets), "set"), parse.Clean(strings.Join(shown, ", "))))
		fmt.Fprintf(b, "#[[compound]]\n#name = %s\n#sets = %s\n#charge = -1            # DOUBT: of the acid form\n#pka = [7.0]            # DOUBT: expected, one per step\n#ionic_strength = 0.1   # DOUBT: mol/L in the ladder\n\n",
			tomlText(parse.Clean(c.code)), tomlText("^"+regexp.QuoteMeta(parse.Clean(c.code))))
	}
}

func (p *proposal) writeInstruments(b *strings.Builder) {
	seen := map[string]bool{}
	for _, f := range p.folders {
		if f.instrument == "" || seen[f.instrument] {
			continue
		}
		seen[f.instrument] = true
		fmt.Fprintf(b, "[[instrument]]\nname = %s\n", tomlText(f.instrument))
		if f.waves[1] > 0 {
			fmt.Fprintf(b, "# Its files reach from %g to %g nm. State the part that can be trusted:\n#range = [%g, %g]\n", f.waves[0], f.waves[1], f.waves[0], f.waves[1])
		}
		b.WriteString("# Name what belongs to it, so that a drift can be traced to it:\n#electrode = \"\"\n#lamp = \"\"\n#cell = \"\"\n\n")
	}
}

// tomlText writes a TOML string: literal where that is possible, so that
// patterns stay readable.
func tomlText(s string) string {
	plain := true
	for _, r := range s {
		plain = plain && r != '\'' && r >= 0x20 && r != 0x7f
	}
	if plain && strings.ContainsAny(s, `\"`) {
		return "'" + s + "'"
	}
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r < 0x20 || r == 0x7f:
			fmt.Fprintf(&b, "\\u%04X", r)
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}
