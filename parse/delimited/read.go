// Package delimited reads exports that are text in lines and fields: scans in
// columns, in pairs of columns, in rows or in long form, pH tables and time
// series, electrode calibrations, sample sheets, event logs and night plans.
//
// Delimiter and decimal sign are decided together, by the only reading that
// gives a strictly monotone wavelength axis and numeric columns; where two
// readings do, the file is refused and both are shown. Units are read from
// heads, header lines or a declared layout, never guessed from values.
//
// The package knows no file system, database, logger or clock.
package delimited

import (
	"fmt"
	"regexp"

	"pkvigil/parse"
)

// reader reads one file once.
type reader struct {
	opt     parse.Options
	lay     parse.Layout // the declared layout, or zero
	src     *source
	enc     string
	remarks []parse.Remark
	found   parse.Layout // how the file was read
	telling bool         // Explain listens
	said    []string
}

// Read turns delimited text into records. Layouts whose files pattern matches
// the name are binding; layouts without a pattern are tried first, and what
// they do not fit is found from the file. Errors are *parse.Error.
func Read(name string, data []byte, opt parse.Options) (*parse.Content, error) {
	c, _, err := read(name, data, opt, false)
	return c, err
}

func read(name string, data []byte, opt parse.Options, telling bool) (*parse.Content, *reader, error) {
	last := &reader{opt: opt, src: &source{name: name}, telling: telling}
	if err := parse.CheckSize(name, data, opt); err != nil {
		return nil, last, err
	}
	var said []string
	for _, lay := range opt.Layouts {
		if !suits(lay.Shape, opt.Role) {
			continue
		}
		bound := lay.Files != ""
		if bound {
			re, err := regexp.Compile(lay.Files)
			if err != nil {
				return nil, last, &parse.Error{File: name, Field: "layout " + parse.Show(lay.Name), Found: parse.Show(lay.Files),
					Expected: "a regular expression", Remedy: "correct the files pattern of the layout", Err: err}
			}
			if !re.MatchString(name) {
				continue
			}
		}
		r := &reader{opt: opt, lay: lay, src: &source{name: name}, telling: telling, said: said}
		r.say(0, "trying the declared layout %s", parse.Show(lay.Name))
		c, err := r.attempt(data)
		if err == nil || bound {
			return c, r, err
		}
		r.say(0, "the layout does not fit: %v", err)
		said = r.said
	}
	r := &reader{opt: opt, src: &source{name: name}, telling: telling, said: said}
	c, err := r.attempt(data)
	return c, r, err
}

// suits tells whether a layout of that shape can serve a file of that role.
func suits(shape, role string) bool {
	kind := ""
	switch shape {
	case "columns", "pairs", "rows", "long":
		kind = "scan"
	case "ph-table", "ph-series":
		kind = "ph"
	default:
		kind = shape
	}
	if role == "blank" {
		role = "scan"
	}
	return shape == "" || role == "" || kind == role
}

// attempt reads the file under r.lay.
func (r *reader) attempt(data []byte) (c *parse.Content, err error) {
	name := r.src.name
	text, enc, err := parse.Decode(name, data, r.lay.Encoding)
	if err != nil {
		return nil, err
	}
	r.enc, r.found.Encoding = enc, enc
	r.say(0, "the text is in %s", enc)
	text, nuls := silence(text)
	if nuls > 0 && 4*nuls > len(text) {
		return nil, r.refuse(0, "", fmt.Sprintf("%d NUL bytes among %d characters", nuls, len(text)), "text",
			"the file was not written completely or is no text; export it again")
	}
	if r.src, err = cut(name, text); err != nil {
		return nil, err
	}
	if nuls > 0 {
		r.remark(0, "%d NUL bytes are read as blanks", nuls)
	}
	c, err = r.dispatch()
	if err != nil {
		return nil, err
	}
	c.Encoding, c.Remarks = enc, r.remarks
	c.Layout = r.lay.Name
	if c.Layout == "" {
		c.Layout = describe(r.found)
	}
	return c, nil
}

// dispatch decides what the file is: the declared shape first, then the role
// its name gave it, then the words at the head of its columns.
func (r *reader) dispatch() (*parse.Content, error) {
	kind := r.lay.Shape
	if kind == "" {
		switch r.opt.Role {
		case "ph", "calibration", "sheet", "events", "plan":
			kind = r.opt.Role
		case "scan", "blank":
			kind = "scan"
		}
	}
	switch kind {
	case "columns", "pairs", "rows", "long", "scan":
		return r.scans()
	}
	t := r.table(kind)
	if kind == "" {
		kind = "scan"
		if t != nil {
			kind = t.class
		}
	}
	if t != nil {
		r.say(t.header+1, "the heads of the columns are those of a file of kind %s", kind)
	}
	switch kind {
	case "scan", "long", "columns", "pairs", "rows":
		return r.scans()
	case "calibration":
		return r.calibration(t)
	case "sheet":
		return r.sheet(t)
	case "events":
		return r.events(t)
	case "plan":
		return r.plan(t)
	}
	return r.ph(t, kind)
}
