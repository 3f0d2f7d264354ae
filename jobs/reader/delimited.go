package reader

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"path"
	"slices"
	"strings"

	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"
	"golang.org/x/text/transform"

	"epitally/analytics"
)

// delimitedReader reads delimited text as a reading profile explains it: lines
// above the header row, the header row, lines passed over, die rows.
type delimitedReader struct {
	*job
	p     *Profile
	lines *lines
	table *table
	now   about
	above []string // lines above the header row
	head  int64    // line of the header row; 0 = not met
	rows  bool     // die rows are being read
	seen  seen
}

func (j *job) readDelimited(ctx context.Context, p *Profile) error {
	j.res.Format = "delimited"
	return j.ahead(ctx, decoders[p.encoding], func(f *feed) error {
		d := &delimitedReader{job: j, p: p, lines: newLines(f), seen: seen{}}
		d.table = &table{grammar: p.grammar(), place: p.place, src: d.lines, next: d.otherWafer}
		return d.read()
	})
}

// decoders turn an encoding into UTF-8; nil = it is.
var decoders = map[string]func(io.Reader) io.Reader{
	"utf-16": func(r io.Reader) io.Reader {
		return transform.NewReader(r, unicode.UTF16(unicode.LittleEndian, unicode.UseBOM).NewDecoder())
	},
	"latin-1": func(r io.Reader) io.Reader { return transform.NewReader(r, charmap.ISO8859_1.NewDecoder()) },
}

func (p *Profile) grammar() grammar {
	g := grammar{delimiter: p.delimiter, point: p.point, quotes: true, missing: p.missing, loose: p.header.none,
		stop: p.stop, comment: p.comment, spread: p.spread}
	g.slow = p.spread
	for _, m := range p.missing { // a missing word that is a number must not be taken for one
		if _, ok := parseDecimal([]byte(m), p.point); ok {
			g.slow = true
		}
	}
	return g
}

func (d *delimitedReader) read() error {
	for {
		chunk, err := d.lines.next()
		if err == io.EOF {
			return d.end()
		}
		if err != nil {
			return err
		}
		if err := d.take(chunk); err != nil {
			return err
		}
	}
}

func (d *delimitedReader) take(chunk []byte) error {
	for len(chunk) > 0 && !d.table.stopped {
		if d.rows {
			used, err := d.table.rows(chunk)
			if err != nil {
				return err
			}
			chunk = chunk[used:]
			continue
		}
		if d.p.header.none && d.lines.line == int64(d.p.skip) {
			if err := d.begin(nil); err != nil {
				return err
			}
			continue
		}
		line, rest, _ := bytes.Cut(chunk, []byte("\n"))
		chunk = rest
		d.lines.line++
		if err := d.headLine(line); err != nil {
			return located(err, d.lines.line)
		}
	}
	return nil
}

// headLine takes a line above the first row.
func (d *delimitedReader) headLine(line []byte) error {
	if d.head > 0 { // between header row and first row
		d.rows = d.lines.line >= d.head+int64(d.p.skip)
		return nil
	}
	isHeader := d.p.header.row > 0 && d.lines.line == int64(d.p.header.row)
	if len(d.p.header.with) > 0 {
		isHeader = d.holdsAll(line)
	}
	if !isHeader {
		if len(d.above) >= maxHead {
			return &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("no header row in the first %d lines", maxHead), Remedy: d.headerRemedy()}
		}
		d.above = append(d.above, strings.ToValidUTF8(string(line), "\ufffd"))
		return nil
	}
	names, err := splitHeader(line, &d.table.grammar)
	if err != nil {
		return err
	}
	return d.begin(names)
}

func (d *delimitedReader) headerRemedy() string {
	return fmt.Sprintf("check header in reading profile %s", d.p.Name)
}

func (d *delimitedReader) holdsAll(line []byte) bool {
	cells := d.cells(string(line))
	for _, name := range d.p.header.with {
		if !slices.Contains(cells, name) {
			return false
		}
	}
	return true
}

// cells splits a line above the rows, without minding quotes.
func (d *delimitedReader) cells(line string) []string {
	if d.p.spread {
		return strings.Fields(line)
	}
	cells := strings.Split(line, string(rune(d.p.delimiter)))
	for i, c := range cells {
		cells[i] = strings.Trim(c, "\" \t\r")
	}
	return cells
}

// begin prepares the table under the header row (nil = there is none).
func (d *delimitedReader) begin(names []headerName) error {
	d.head = max(1, d.lines.line)
	var err error
	if d.table.fields, d.table.cols, err = d.p.layOut(names); err != nil {
		return err
	}
	d.table.named = d.p.columns.wafer.given()
	if err := d.facts(); err != nil {
		return err
	}
	d.table.reset(firstRows)
	d.rows = d.p.header.none || d.p.skip == 0
	return nil
}

// layOut gives every column of the file its use.
func (p *Profile) layOut(names []headerName) ([]field, []column, error) {
	b := &tableBuilder{}
	width := len(names)
	if names == nil {
		width = max(p.columns.x.number, p.columns.y.number, p.columns.wafer.number)
		for _, v := range p.values {
			width = max(width, v.column.number)
		}
	}
	b.fields = make([]field, width)
	for i := range names {
		b.fields[i].name = names[i].text
	}
	place := func(r columnRef, f field) error {
		at, err := r.find(names, width)
		if err != nil {
			return err
		}
		if b.fields[at].use != useSkip {
			return &analytics.Fault{Offset: -1, Key: f.name, Problem: fmt.Sprintf("column %d is used twice", at+1), Remedy: "check columns and quantities in the reading profile"}
		}
		if f.use != useValue && names != nil {
			f.name = names[at].text
		}
		b.fields[at] = f
		return nil
	}
	for _, c := range []struct {
		ref columnRef
		f   field
	}{{p.columns.x, field{use: useX, name: "x"}}, {p.columns.y, field{use: useY, name: "y"}}, {p.columns.wafer, field{use: useWafer, name: "wafer"}}} {
		if !c.ref.given() {
			continue
		}
		if err := place(c.ref, c.f); err != nil {
			return nil, nil, err
		}
	}
	for _, v := range p.values {
		if err := place(v.column, field{use: useValue, col: len(b.cols), name: v.quantity.Name}); err != nil {
			return nil, nil, err
		}
		c := newColumn(v.quantity)
		c.convert = v.convert
		b.cols = append(b.cols, c)
	}
	return b.fields, b.cols, nil
}

// find gives the index of a column of the file.
func (r columnRef) find(names []headerName, width int) (int, error) {
	if r.number > 0 {
		if r.number > width {
			return 0, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("there is no column %d: the header row has %d", r.number, width), Remedy: "check the column numbers in the reading profile"}
		}
		return r.number - 1, nil
	}
	at := -1
	var all []string
	for i, n := range names {
		all = append(all, fmt.Sprintf("%q", n.text))
		if n.text != r.name {
			continue
		}
		if at >= 0 {
			return 0, &analytics.Fault{Offset: -1, Column: n.column, Problem: fmt.Sprintf("the column %q stands twice in the header row", r.name), Remedy: "give its number in the reading profile instead"}
		}
		at = i
	}
	if at < 0 {
		return 0, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("there is no column %q: the header row has %s", r.name, strings.Join(all, ", ")),
			Remedy: "correct the column's name, the delimiter or the header row in the reading profile"}
	}
	return at, nil
}

// facts gathers what constants, the file's name and the lines above the header
// row state, later ones over earlier ones.
func (d *delimitedReader) facts() error {
	d.now = about{duplicates: d.p.policy}
	if err := d.p.stateOutside(&d.now, path.Base(d.in.Name), d.moment); err != nil {
		return err
	}
	for _, f := range d.p.facts {
		text, line, found := f.find(d)
		if !found {
			return &analytics.Fault{Offset: -1, Key: f.key, Problem: fmt.Sprintf("%s is not found above the header row", f.where()),
				Remedy: fmt.Sprintf("correct facts.%s in reading profile %s", f.key, d.p.Name)}
		}
		if text == "" {
			continue
		}
		if f.key == "drive_current" && f.unit != "" {
			text += " " + f.unit
		}
		if err := d.p.state(&d.now, f.key, text, d.moment); err != nil {
			return columned(located(err, line), 1, f.key)
		}
	}
	missing := func(key string) error {
		return &analytics.Fault{Offset: -1, Key: key, Problem: "the file does not state it", Remedy: fmt.Sprintf("check facts and file_name in reading profile %s", d.p.Name)}
	}
	switch {
	case d.now.wafer == "" && !d.table.named:
		return missing("wafer")
	case d.now.kind == "":
		return missing("kind")
	case d.now.measuredAt.IsZero():
		return missing("measured_at")
	}
	return nil
}

func (f *factRule) where() string {
	if f.label != "" {
		return fmt.Sprintf("the label %q", f.label)
	}
	return fmt.Sprintf("line %d, field %d", f.line, f.field)
}

// find looks a fact up in the lines above the header row.
func (f *factRule) find(d *delimitedReader) (text string, line int64, found bool) {
	if f.label == "" {
		if f.line > len(d.above) {
			return "", 0, false
		}
		cells := d.cells(d.above[f.line-1])
		if f.field > len(cells) {
			return "", 0, false
		}
		return cells[f.field-1], int64(f.line), true
	}
	for i, above := range d.above {
		cells := d.cells(above)
		for k, c := range cells {
			if strings.TrimRight(c, " \t:=") == f.label && k+f.field < len(cells) {
				return cells[k+f.field], int64(i + 1), true
			}
			// label and value in one field: "Wafer: W-12"
			if rest, ok := strings.CutPrefix(c, f.label); ok {
				if value := strings.TrimLeft(rest, " \t"); value != "" && (value[0] == ':' || value[0] == '=') && strings.TrimSpace(value[1:]) != "" {
					return strings.TrimSpace(value[1:]), int64(i + 1), true
				}
			}
		}
	}
	return "", 0, false
}

// otherWafer hands the wafer at hand over and begins the named one.
func (d *delimitedReader) otherWafer(name []byte) error {
	if err := checkName("wafer", string(name)); err != nil {
		return err
	}
	if d.table.n > 0 {
		if err := d.flush(); err != nil {
			return err
		}
	}
	d.now.wafer = string(name)
	return d.seen.begin(&d.now, d.lines.line)
}

func (d *delimitedReader) flush() error {
	if d.table.n == 0 {
		return &analytics.Fault{Line: lineNumber(d.head), Offset: -1, Problem: "no die rows follow the header row", Remedy: "check header, skip and stop in reading profile " + d.p.Name}
	}
	m, err := d.table.measurement(&d.now)
	if err != nil {
		return err
	}
	d.table.reset(d.table.n)
	return d.give(m)
}

func (d *delimitedReader) end() error {
	if d.head == 0 {
		return &analytics.Fault{Line: lineNumber(d.lines.line), Offset: -1, Problem: "the file ends before a header row", Remedy: d.headerRemedy()}
	}
	if d.lines.cut && !d.table.stopped {
		d.notice("the last line has no line end: check that the file is whole")
	}
	return d.flush()
}
