package delimited

import (
	"fmt"
	"strings"

	"pkvigil/parse"
)

// Explain reads the file as Read does and reports how: one line of text per
// decision in the order they were made, the outcome, and a layout declaration
// ready for the settings. The layout is empty where the file was refused
// before its form was clear.
func Explain(name string, data []byte, opt parse.Options) (report []string, layout parse.Layout) {
	c, r, err := read(name, data, opt, true)
	report = r.said
	if err != nil {
		return append(report, "refused: "+err.Error()), parse.Layout{}
	}
	report = append(report, Summary(c)...)
	if c.Format != "delimited" {
		r.found.Shape = shapeOf(c.Format)
	}
	layout = r.found
	layout.Name = "as-found"
	if r.lay.Name != "" {
		layout.Name = r.lay.Name
	}
	if layout.Delimiter == "comma" {
		layout.Delimiter = ","
	} else if layout.Delimiter == "semicolon" {
		layout.Delimiter = ";"
	}
	layout.Overflow, layout.TimeFormat, layout.Files = r.lay.Overflow, r.lay.TimeFormat, r.lay.Files
	report = append(report, "a layout that reads such files the same way:")
	report = append(report, strings.Split(strings.TrimRight(Declaration(layout), "\n"), "\n")...)
	return report, layout
}

func shapeOf(format string) string {
	switch format {
	case "ph-single":
		return ""
	}
	return format
}

// Summary tells in lines what a file was found to hold.
func Summary(c *parse.Content) []string {
	var held []string
	for _, h := range [...]struct {
		n    int
		what string
	}{
		{len(c.Scans), "scans"}, {len(c.Readings), "pH readings"}, {len(c.Calibrations), "calibrations"},
		{len(c.Sheet), "rows of a sheet"}, {len(c.Events), "events"}, {len(c.Plan), "planned sets"},
	} {
		if h.n > 0 {
			held = append(held, fmt.Sprintf("%d %s", h.n, h.what))
		}
	}
	out := []string{fmt.Sprintf("read as %s: %s", c.Format, strings.Join(held, ", "))}
	for i, s := range c.Scans {
		if i == 20 {
			out = append(out, fmt.Sprintf("and %d further scans", len(c.Scans)-i))
			break
		}
		n := len(s.WavelengthNM)
		if n == 0 {
			continue
		}
		line := fmt.Sprintf("scan %s: %d points from %g to %g nm, %s as the file holds it", parse.Show(s.Label), n, s.WavelengthNM[0], s.WavelengthNM[n-1], s.Scale)
		if !s.Measured.IsZero() {
			line += ", measured " + s.Measured.Format("2006-01-02 15:04:05 -0700")
		}
		if s.PathMM > 0 {
			line += fmt.Sprintf(", path %g mm", s.PathMM)
		}
		out = append(out, line)
	}
	for _, m := range c.Remarks {
		text := "remark: " + m.Text
		if m.Line > 0 {
			text = fmt.Sprintf("remark, line %d: %s", m.Line, m.Text)
		}
		out = append(out, text)
	}
	return out
}

// describe gives the layout that was found in a few words.
func describe(l parse.Layout) string {
	var parts []string
	for _, p := range [...]struct{ name, value string }{
		{"", l.Shape}, {"delimiter", l.Delimiter}, {"decimal", l.Decimal}, {"abscissa", l.Abscissa}, {"ordinate", l.Ordinate},
	} {
		switch {
		case p.value == "":
		case p.name == "":
			parts = append(parts, p.value)
		default:
			parts = append(parts, p.name+" "+p.value)
		}
	}
	return strings.Join(parts, ", ")
}

// Declaration writes a layout as a block for the settings file.
func Declaration(l parse.Layout) string {
	var b strings.Builder
	b.WriteString("[[layout]]\n")
	word := func(key, value string) {
		if value != "" {
			fmt.Fprintf(&b, "%s = %s\n", key, quoteTOML(value))
		}
	}
	list := func(key string, values []string) {
		if len(values) == 0 {
			return
		}
		q := make([]string, len(values))
		for i, v := range values {
			q[i] = quoteTOML(v)
		}
		fmt.Fprintf(&b, "%s = [%s]\n", key, strings.Join(q, ", "))
	}
	number := func(key string, n int) {
		if n > 0 {
			fmt.Fprintf(&b, "%s = %d\n", key, n)
		}
	}
	word("name", l.Name)
	word("files", l.Files)
	word("encoding", l.Encoding)
	word("delimiter", l.Delimiter)
	word("decimal", l.Decimal)
	word("thousands", l.Thousands)
	word("shape", l.Shape)
	number("header_line", l.HeaderLine)
	number("first_line", l.FirstLine)
	word("abscissa", l.Abscissa)
	word("ordinate", l.Ordinate)
	list("columns", l.Columns)
	word("time_format", l.TimeFormat)
	list("overflow", l.Overflow)
	return b.String()
}

// quoteTOML writes a basic string; control characters become escapes.
func quoteTOML(s string) string {
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
