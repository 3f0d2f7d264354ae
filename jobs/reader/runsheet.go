package reader

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"time"

	"epitally/analytics"
)

// runSheetMark is the first line of a run sheet.
const runSheetMark = "# epitally: run sheet"

// maxRunSheetRows bounds a run sheet: a large fab's wafers of several years.
const maxRunSheetRows = 500_000

// runSheetColumns are the columns of a run sheet, and how each is taken. Only
// wafer must be there.
var runSheetColumns = map[string]func(r *runSheetReader, row *RunSheetRow, text string) error{
	"wafer": func(r *runSheetReader, row *RunSheetRow, text string) error {
		row.Wafer = text
		return checkName("wafer", text)
	},
	"run":      (*runSheetReader).run,
	"grown_at": (*runSheetReader).grownAt,
	"lot":      nameColumn("lot", func(row *RunSheetRow) *string { return &row.Lot }),
	"reactor":  nameColumn("reactor", func(row *RunSheetRow) *string { return &row.Reactor }),
	"carrier":  nameColumn("carrier", func(row *RunSheetRow) *string { return &row.Carrier }),
	"ring":     nameColumn("ring", func(row *RunSheetRow) *string { return &row.Ring }),
	"pocket":   nameColumn("pocket", func(row *RunSheetRow) *string { return &row.Pocket }),
	"recipe":   nameColumn("recipe", func(row *RunSheetRow) *string { return &row.Recipe }),
	"product":  nameColumn("product", func(row *RunSheetRow) *string { return &row.Product }),
}

const runSheetNames = "wafer, lot, reactor, run, grown_at, carrier, ring, pocket, recipe, product"

func nameColumn(what string, of func(*RunSheetRow) *string) func(*runSheetReader, *RunSheetRow, string) error {
	return func(_ *runSheetReader, row *RunSheetRow, text string) error {
		if text == "" {
			return nil
		}
		*of(row) = text
		return checkName(what, text)
	}
}

type runSheetReader struct {
	lines  *lines
	table  table // cuts fields; holds no rows
	zone   *time.Location
	header []string // nil until it was read
	rows   []RunSheetRow
	seen   map[string]int // wafer → line
}

func (j *job) readRunSheet(ctx context.Context) error {
	j.res.Format = "run-sheet"
	r := &runSheetReader{zone: j.in.Zone, seen: map[string]int{}}
	err := j.ahead(ctx, nil, func(f *feed) error {
		r.lines = newLines(f)
		r.table = table{grammar: grammar{delimiter: ',', point: '.', quotes: true}, src: r.lines}
		return r.read()
	})
	if err != nil || j.sink.RunSheet == nil {
		return err
	}
	return j.sink.RunSheet(r.rows)
}

func (r *runSheetReader) read() error {
	for {
		chunk, err := r.lines.next()
		if err == io.EOF {
			return r.end()
		}
		if err != nil {
			return err
		}
		for len(chunk) > 0 {
			n := bytes.IndexByte(chunk, '\n') + 1
			r.lines.line++
			if err := r.take(chunk[:n]); err != nil {
				return located(err, r.lines.line)
			}
			chunk = chunk[n:]
		}
	}
}

func (r *runSheetReader) end() error {
	if len(r.rows) == 0 {
		return &analytics.Fault{Line: lineNumber(r.lines.line), Offset: -1, Problem: "the run sheet names no wafer",
			Remedy: "write a header row with the column wafer, then one row per wafer"}
	}
	return nil
}

// take reads one line, which ends in '\n'.
func (r *runSheetReader) take(line []byte) error {
	text := bytes.TrimSpace(line)
	switch {
	case len(text) == 0:
		return nil
	case text[0] == '#':
		key, value, _ := strings.Cut(string(text[1:]), ":")
		if strings.TrimSpace(key) != "epitally" {
			return nil // a remark
		}
		if strings.TrimSpace(value) != "run sheet" {
			return &analytics.Fault{Column: 1, Offset: -1, Problem: fmt.Sprintf("%s stands in a run sheet", shown(text)), Remedy: "put it into a file of its own"}
		}
		r.header = nil // files put one after another
		return nil
	}
	cells, err := r.cells(line)
	if err != nil {
		return err
	}
	if r.header == nil {
		return r.readHeader(cells)
	}
	return r.row(cells)
}

// cells cuts a line into its fields; empty ones past the header's are dropped.
func (r *runSheetReader) cells(line []byte) ([]headerName, error) {
	var cells []headerName
	for at := 0; ; {
		text, next, err := r.table.cutField(line, 0, at, &field{})
		if err != nil {
			return nil, err
		}
		if len(cells) > maxColumns {
			return nil, &analytics.Fault{Offset: -1, Column: at + 1, Problem: fmt.Sprintf("over %d columns", maxColumns), Kind: analytics.ErrTooLarge}
		}
		cells = append(cells, headerName{string(text), at + 1})
		if line[next] == '\n' {
			break
		}
		at = next + 1
	}
	for len(cells) > max(1, len(r.header)) && cells[len(cells)-1].text == "" {
		cells = cells[:len(cells)-1]
	}
	return cells, nil
}

func (r *runSheetReader) readHeader(cells []headerName) error {
	var names []string
	for i, c := range cells {
		if runSheetColumns[c.text] == nil {
			return &analytics.Fault{Offset: -1, Column: c.column, Problem: fmt.Sprintf("%s is not a column of a run sheet", shown([]byte(c.text))), Remedy: "use " + runSheetNames}
		}
		for _, other := range cells[:i] {
			if other.text == c.text {
				return &analytics.Fault{Offset: -1, Column: c.column, Key: c.text, Problem: "the column stands twice", Remedy: "remove one of them"}
			}
		}
		names = append(names, c.text)
	}
	for _, name := range names {
		if name == "wafer" {
			r.header = names
			return nil
		}
	}
	return &analytics.Fault{Offset: -1, Column: 1, Key: "wafer", Problem: "the header row has no such column", Remedy: "add it: every row says which wafer it is about"}
}

func (r *runSheetReader) row(cells []headerName) error {
	if len(cells) != len(r.header) {
		f := &analytics.Fault{Offset: -1, Column: cells[len(cells)-1].column, Problem: fmt.Sprintf("the line has %d fields where the header has %d", len(cells), len(r.header)),
			Remedy: "write one field per column; empty means not known"}
		if r.lines.cut && len(cells) < len(r.header) {
			f.Problem = fmt.Sprintf("the file ends in the middle of the line, after %d of %d fields", len(cells), len(r.header))
			f.Remedy = "copy the file again from where it was made"
		}
		return f
	}
	if len(r.rows) >= maxRunSheetRows {
		return &analytics.Fault{Offset: -1, Kind: analytics.ErrTooLarge, Problem: fmt.Sprintf("over %d rows", maxRunSheetRows), Remedy: "split the run sheet"}
	}
	row := RunSheetRow{Line: lineNumber(r.lines.line)}
	for i, c := range cells {
		if err := runSheetColumns[r.header[i]](r, &row, c.text); err != nil {
			return columned(err, c.column, r.header[i])
		}
	}
	return r.add(row, cells)
}

// add holds a whole row to the rules between its fields.
func (r *runSheetReader) add(row RunSheetRow, cells []headerName) error {
	at := func(name string) (column int) {
		for i, h := range r.header {
			if h == name {
				column = cells[i].column
			}
		}
		return column
	}
	if first, twice := r.seen[row.Wafer]; twice {
		return &analytics.Fault{Offset: -1, Column: at("wafer"), Key: "wafer", Problem: fmt.Sprintf("wafer %s stands a second time, first on line %d", row.Wafer, first),
			Remedy: "keep one row per wafer"}
	}
	if (row.Run != 0) != (row.Reactor != "") {
		f := &analytics.Fault{Offset: -1, Column: max(at("run"), 1), Key: "run", Problem: "the reactor is stated without the number of its run", Remedy: "state both or neither"}
		if row.Run != 0 {
			f.Column, f.Key, f.Problem = max(at("reactor"), 1), "reactor", "the run is stated without its reactor"
		}
		return f
	}
	r.seen[row.Wafer] = row.Line
	r.rows = append(r.rows, row)
	return nil
}

func (r *runSheetReader) run(row *RunSheetRow, text string) error {
	if text == "" {
		return nil
	}
	n, err := strconv.ParseInt(text, 10, 64)
	if err != nil || n < 1 || n > math.MaxInt32 {
		return &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("%s is not the number of a run", shown([]byte(text))),
			Remedy: fmt.Sprintf("write a whole number from 1 to %d", math.MaxInt32)}
	}
	row.Run = int(n)
	return nil
}

func (r *runSheetReader) grownAt(row *RunSheetRow, text string) error {
	if text == "" {
		return nil
	}
	t, err := parseMomentIn(text, r.zone)
	row.GrownAt = &t
	return err
}

// parseMomentIn reads an ISO 8601 time; one without a zone, or a date alone
// (its midnight), is taken to be in the given zone.
func parseMomentIn(text string, zone *time.Location) (time.Time, error) {
	iso := strings.Replace(text, " ", "T", 1)
	for _, layout := range []string{"2006-01-02T15:04:05", "2006-01-02T15:04", "2006-01-02"} {
		if t, err := time.ParseInLocation(layout, iso, zone); err == nil {
			return t.UTC(), checkYear(t, text)
		}
	}
	t, err := parseMoment(text)
	var f *analytics.Fault
	if errors.As(err, &f) {
		return time.Time{}, err
	}
	return t.UTC(), nil
}
