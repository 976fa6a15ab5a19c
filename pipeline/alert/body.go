package alert

import (
	"fmt"
	"html/template"
	"math"
	"strings"
	"time"
)

// text is the plain part: one statement, then what a person needs to act.
func (c Content) text(subject string) string {
	var b strings.Builder
	line := func(format string, args ...any) { fmt.Fprintf(&b, format+"\n", args...) }
	list := func(head string, items []string) {
		if len(items) == 0 {
			return
		}
		line("\n%s:", head)
		for _, s := range items {
			line("  - %s", s)
		}
	}
	line("%s", subject)
	if c.Since != "" {
		line("Since: %s", c.Since)
	}
	if c.Finding != "" {
		line("%s", c.Finding)
	}
	if len(c.Candidates) > 0 {
		line("\nPossible causes:")
	}
	for _, k := range c.Candidates {
		line("  %s: %s%s%s", percent(k.Probability), k.Title, in(k.Resource), after(k.Size))
		for _, s := range k.For {
			line("      for: %s", s)
		}
		for _, s := range k.Against {
			line("      against: %s", s)
		}
	}
	list("Cannot be told apart", c.Alike)
	if c.ResultsAll > 0 {
		var rows []string
		for _, r := range c.Results {
			rows = append(rows, r.words())
		}
		if more := c.ResultsAll - len(c.Results); more > 0 {
			rows = append(rows, fmt.Sprintf("and %d more", more))
		}
		list(count(c.ResultsAll, "result")+" touched", rows)
	}
	list("Stopped automatically", c.Stopped)
	list("Notes", c.Notes)
	if c.NextCheck != "" {
		line("\nNext best check: %s", c.NextCheck)
	}
	if c.Responsible != "" {
		line("Responsible: %s", c.Responsible)
	}
	if s := c.Chart.text(); s != "" {
		line("\n%s", s)
	}
	list("Files", c.Links)
	list("To answer, run", c.Answer)
	line("\n%s%s", c.Laboratory, after(stamp(c.At)))
	line("Reason for this message: %s", c.Why)
	return b.String()
}

func in(s string) string {
	if s == "" {
		return ""
	}
	return " (" + s + ")"
}

func after(s string) string {
	if s == "" {
		return ""
	}
	return ", " + s
}

func stamp(t time.Time) string {
	if t.IsZero() {
		return ""
	}
	return t.Format("2 Jan 2006 15:04 MST")
}

type view struct {
	Content
	Subject string
	SVG     template.HTML // drawn here from numbers and escaped text
}

func page() *template.Template {
	return template.Must(template.New("mail").Funcs(template.FuncMap{
		"percent": percent, "stamp": stamp, "words": ResultLine.words, "count": count,
		"less": func(a, b int) int { return a - b },
	}).Parse(markup))
}

const markup = `<!DOCTYPE html>
<html lang="en"><head><meta charset="utf-8"><title>{{.Subject}}</title></head>
<body style="font-family:sans-serif;font-size:14px;color:#222;max-width:44em">
<h2 style="font-size:17px;margin:0 0 .4em">{{.Subject}}</h2>
{{with .Since}}<p>Since: {{.}}</p>{{end}}
{{with .Finding}}<p>{{.}}</p>{{end}}
{{.SVG}}
{{with .Candidates}}<h3 style="font-size:14px">Possible causes</h3><ul>{{range .}}
<li><b>{{percent .Probability}}</b> {{.Title}}{{with .Resource}} ({{.}}){{end}}{{with .Size}}, {{.}}{{end}}
{{with .For}}<br>for: {{range $i, $s := .}}{{if $i}}; {{end}}{{$s}}{{end}}{{end}}
{{with .Against}}<br>against: {{range $i, $s := .}}{{if $i}}; {{end}}{{$s}}{{end}}{{end}}</li>{{end}}</ul>{{end}}
{{with .Alike}}<h3 style="font-size:14px">Cannot be told apart</h3><ul>{{range .}}<li>{{.}}</li>{{end}}</ul>{{end}}
{{if .ResultsAll}}<h3 style="font-size:14px">{{count .ResultsAll "result"}} touched</h3><ul>{{range .Results}}<li>{{words .}}</li>{{end}}
{{with less .ResultsAll (len .Results)}}<li>and {{.}} more</li>{{end}}</ul>{{end}}
{{with .Stopped}}<h3 style="font-size:14px">Stopped automatically</h3><ul>{{range .}}<li>{{.}}</li>{{end}}</ul>{{end}}
{{with .Notes}}<h3 style="font-size:14px">Notes</h3><ul>{{range .}}<li>{{.}}</li>{{end}}</ul>{{end}}
{{with .NextCheck}}<p><b>Next best check:</b> {{.}}</p>{{end}}
{{with .Responsible}}<p>Responsible: {{.}}</p>{{end}}
{{with .Links}}<p>Files:</p><ul>{{range .}}<li>{{.}}</li>{{end}}</ul>{{end}}
{{with .Answer}}<p>To answer, run:</p>{{range .}}<pre style="background:#f3f3f3;padding:.5em">{{.}}</pre>{{end}}{{end}}
<p style="color:#666;font-size:12px">{{.Laboratory}}{{with stamp .At}}, {{.}}{{end}}<br>Reason for this message: {{.Why}}</p>
</body></html>
`

// text gives the last values of a chart for readers without pictures.
func (c *Chart) text() string {
	if c == nil || len(c.Values) == 0 {
		return ""
	}
	var b strings.Builder
	fmt.Fprintf(&b, "%s%s, limits %.5g to %.5g:", c.Title, in(c.Unit), c.Low, c.High)
	for i := max(0, len(c.Values)-8); i < len(c.Values); i++ {
		label := ""
		if i < len(c.Labels) {
			label = c.Labels[i] + " "
		}
		if math.IsNaN(c.Values[i]) {
			fmt.Fprintf(&b, "\n  %s-", label)
		} else {
			fmt.Fprintf(&b, "\n  %s%.5g", label, c.Values[i])
		}
	}
	return b.String()
}

// svg draws values, centre and limits, 360 by 130.
func (c *Chart) svg() string {
	if c == nil || len(c.Values) == 0 {
		return ""
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, v := range append([]float64{c.Low, c.High, c.Centre}, c.Values...) {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			lo, hi = math.Min(lo, v), math.Max(hi, v)
		}
	}
	if !(hi > lo) {
		return ""
	}
	const w, h, top, left = 344.0, 92.0, 22.0, 8.0
	y := func(v float64) float64 { return top + h*(hi-v)/(hi-lo) }
	x := func(i int) float64 { return left + w*float64(i)/math.Max(1, float64(len(c.Values)-1)) }
	var b strings.Builder
	b.WriteString(`<svg xmlns="http://www.w3.org/2000/svg" width="360" height="130" viewBox="0 0 360 130" role="img">`)
	title := template.HTMLEscapeString(c.Title + in(c.Unit))
	fmt.Fprintf(&b, `<title>%s</title><rect width="360" height="130" fill="#fff"/><text x="8" y="14" font-size="12" font-family="sans-serif" fill="#222">%s</text>`, title, title)
	for _, l := range []struct {
		v    float64
		dash string
	}{{c.Low, "4 3"}, {c.High, "4 3"}, {c.Centre, "none"}} {
		if !math.IsNaN(l.v) && !math.IsInf(l.v, 0) {
			fmt.Fprintf(&b, `<line x1="8" x2="352" y1="%.1f" y2="%.1f" stroke="#999" stroke-dasharray="%s"/>`, y(l.v), y(l.v), l.dash)
		}
	}
	pen := "M"
	var path strings.Builder
	for i, v := range c.Values {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			pen = "M"
			continue
		}
		fmt.Fprintf(&path, "%s%.1f %.1f", pen, x(i), y(v))
		pen = "L"
		fill := "#1f4e79"
		if v < c.Low || v > c.High {
			fill = "#b02a2a"
		}
		fmt.Fprintf(&b, `<circle cx="%.1f" cy="%.1f" r="2.5" fill="%s"/>`, x(i), y(v), fill)
	}
	fmt.Fprintf(&b, `<path d="%s" fill="none" stroke="#1f4e79"/>`, path.String())
	if n := len(c.Labels); n > 1 {
		fmt.Fprintf(&b, `<text x="8" y="127" font-size="10" font-family="sans-serif" fill="#666">%s</text><text x="352" y="127" font-size="10" text-anchor="end" font-family="sans-serif" fill="#666">%s</text>`,
			template.HTMLEscapeString(c.Labels[0]), template.HTMLEscapeString(c.Labels[n-1]))
	}
	b.WriteString(`</svg>`)
	return b.String()
}
