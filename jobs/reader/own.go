package reader

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"strings"
	"unicode/utf8"

	"epitally/analytics"
)

// ownMark is the first line of Epitally's own CSV.
const ownMark = "# epitally: die readings"

// maxColumns bounds the columns of a table.
const maxColumns = 1024

// ownReader reads Epitally's own CSV: blocks of `# key: value` lines, a header
// row and die rows.
type ownReader struct {
	*job
	lines *lines
	table *table
	base  about // of the file's first block
	now   about
	based bool // base is set
	rows  bool // rows are being read, not `#` lines
	head  int64
	seen  seen
}

func (j *job) readOwn(ctx context.Context) error {
	j.res.Format = "epitally-csv"
	return j.ahead(ctx, nil, func(f *feed) error {
		o := &ownReader{job: j, lines: newLines(f), seen: seen{}}
		return o.read()
	})
}

func (o *ownReader) read() error {
	o.table = &table{grammar: grammar{delimiter: ',', point: '.', comments: true, quotes: true}, src: o.lines}
	o.table.next = o.otherWafer
	for {
		chunk, err := o.lines.next()
		if err == io.EOF {
			return o.end()
		}
		if err != nil {
			return err
		}
		if err := o.take(chunk); err != nil {
			return err
		}
	}
}

func (o *ownReader) take(chunk []byte) error {
	for len(chunk) > 0 {
		if !o.rows {
			line, rest, _ := bytes.Cut(chunk, []byte("\n"))
			o.lines.line++
			if err := o.headLine(line); err != nil {
				return located(err, o.lines.line)
			}
			chunk = rest
			continue
		}
		used, err := o.table.rows(chunk)
		if err != nil {
			return err
		}
		if chunk = chunk[used:]; len(chunk) > 0 { // a `#` line: the next block
			if err := o.flush(); err != nil {
				return err
			}
			o.rows, o.now = false, o.base.inherit()
		}
	}
	return nil
}

// headLine reads a `# key: value` line or the header row.
func (o *ownReader) headLine(line []byte) error {
	text := strings.TrimRight(string(line), " \t\r")
	switch {
	case text == "" || text == "#":
		return nil
	case !utf8.ValidString(text):
		return &analytics.Fault{Offset: -1, Column: 1, Problem: "the line is not UTF-8 text", Remedy: "save the file as UTF-8"}
	case text[0] != '#':
		return o.columns(line)
	}
	key, value, found := strings.Cut(text[1:], ":")
	key, value = strings.TrimSpace(key), strings.TrimSpace(value)
	if !found || key == "" {
		return &analytics.Fault{Offset: -1, Column: 1, Problem: fmt.Sprintf("%s is not `# key: value`", shown(line)), Remedy: "write `# note: …` for a remark"}
	}
	if key == "epitally" {
		if text != ownMark {
			return &analytics.Fault{Offset: -1, Column: 1, Problem: fmt.Sprintf("%s stands among die readings", shown(line)), Remedy: "put it into a file of its own"}
		}
		o.now, o.based = about{}, false // files put one after another
		return nil
	}
	if value == "" {
		return nil // stated as not known
	}
	err := o.now.state(key, value)
	return columned(err, strings.Index(text, ":")+2, key)
}

// columns reads the header row and checks that the block is complete.
func (o *ownReader) columns(line []byte) error {
	o.head = o.lines.line
	names, err := splitHeader(line, &o.table.grammar)
	if err != nil {
		return err
	}
	b := &tableBuilder{}
	for _, h := range names {
		var err error
		switch h.text {
		case "x":
			err = b.add(h.text, useX)
		case "y":
			err = b.add(h.text, useY)
		case "wafer":
			err = b.add(h.text, useWafer)
		default:
			q, ok := o.now.lookup(h.text)
			if !ok {
				return &analytics.Fault{Column: h.column, Offset: -1, Key: h.text, Problem: fmt.Sprintf("the quantity %s is not known", shown([]byte(h.text))),
					Remedy: fmt.Sprintf("declare it with `# quantity: %s; label; unit; resolution` above, or use one of %s", h.text, builtinNames())}
			}
			err = b.value(h.text, newColumn(q))
		}
		if err != nil {
			return columned(err, h.column, h.text)
		}
	}
	if err := b.complete(); err != nil {
		return columned(err, 1, "")
	}
	o.table.fields, o.table.cols, o.table.named = b.fields, b.cols, b.has(useWafer)
	if err := o.complete(); err != nil {
		return err
	}
	o.table.wafer = o.table.wafer[:0]
	o.table.reset(firstRows)
	o.rows = true
	if !o.based {
		o.base, o.based = o.now.inherit(), true
	}
	return nil
}

// complete says what the block above a header row lacks.
func (o *ownReader) complete() error {
	missing := func(key, example string) error {
		return &analytics.Fault{Column: 1, Offset: -1, Key: key, Problem: fmt.Sprintf("no `# %s:` line stands above the header row", key),
			Remedy: fmt.Sprintf("add `# %s: %s`", key, example)}
	}
	switch {
	case o.now.kind == "":
		return missing("kind", "probe")
	case o.now.measuredAt.IsZero():
		return missing("measured at", "2026-11-05T06:00:00Z")
	case !o.table.named && o.now.wafer == "":
		return missing("wafer", "W-0001")
	case o.table.named && o.now.waferHere:
		return &analytics.Fault{Column: 1, Offset: -1, Key: "wafer", Problem: "the wafer is stated both above the header row and in a column", Remedy: "keep one of them"}
	}
	return nil
}

// otherWafer hands the wafer at hand over and begins the named one.
func (o *ownReader) otherWafer(name []byte) error {
	if err := checkName("wafer", string(name)); err != nil {
		return err
	}
	if o.table.n > 0 {
		if err := o.flush(); err != nil {
			return err
		}
	}
	o.now.wafer = string(name)
	return o.seen.begin(&o.now, o.lines.line)
}

// flush hands over the wafer at hand.
func (o *ownReader) flush() error {
	if o.table.n == 0 {
		return &analytics.Fault{Line: lineNumber(o.head), Offset: -1, Problem: "no die rows follow the header row", Remedy: "write one row per die below it"}
	}
	if !o.table.named {
		if err := o.seen.begin(&o.now, o.head); err != nil {
			return located(err, o.head)
		}
	}
	m, err := o.table.measurement(&o.now)
	if err != nil {
		return err
	}
	o.table.reset(o.table.n)
	return o.give(m)
}

func (o *ownReader) end() error {
	if !o.rows {
		f := &analytics.Fault{Line: lineNumber(o.lines.line), Offset: -1, Problem: "the file ends before a header row", Remedy: "write `x,y` and the quantities' names, then one row per die"}
		if o.lines.cut {
			f.Problem = "the file ends in the middle of its head"
		}
		return f
	}
	if o.lines.cut {
		o.notice("the last line has no line end: check that the file is whole")
	}
	return o.flush()
}

// seen remembers which measurements of a file have begun on which line.
type seen map[string]int64

// begin refuses a measurement that began before.
func (s seen) begin(a *about, line int64) error {
	key := fmt.Sprintf("%s\x00%s\x00%d", a.wafer, a.kind, a.measuredAt.UnixNano())
	if first, ok := s[key]; ok {
		return &analytics.Fault{Offset: -1, Key: "wafer", Problem: fmt.Sprintf("wafer %s begins a second time, first on line %d, with the same kind and time", a.wafer, first),
			Remedy: "keep the rows of one wafer together, or state another `# measured at:`"}
	}
	s[key] = line
	return nil
}
