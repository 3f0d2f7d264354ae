package reader

import (
	"bytes"
	"errors"
	"fmt"
	"strings"

	"epitally/analytics"
)

// tableBuilder collects the columns of a table in file order.
type tableBuilder struct {
	fields []field
	cols   []column
}

func (b *tableBuilder) has(u use) bool {
	for _, f := range b.fields {
		if f.use == u {
			return true
		}
	}
	return false
}

func (b *tableBuilder) add(name string, u use) error {
	if u != useSkip && b.has(u) {
		return &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the column %s stands twice", shown([]byte(name)))}
	}
	b.fields = append(b.fields, field{use: u, name: name})
	return nil
}

func (b *tableBuilder) value(name string, c column) error {
	for _, have := range b.cols {
		if have.quantity.Name == c.quantity.Name {
			return &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the quantity %s stands in two columns", have.quantity.Name)}
		}
	}
	b.fields = append(b.fields, field{use: useValue, col: len(b.cols), name: name})
	b.cols = append(b.cols, c)
	return nil
}

func (b *tableBuilder) complete() error {
	switch {
	case !b.has(useX) || !b.has(useY):
		return &analytics.Fault{Offset: -1, Problem: "the header row has no columns x and y", Remedy: "name the columns of the die coordinates x and y"}
	case len(b.cols) == 0:
		return &analytics.Fault{Offset: -1, Problem: "the header row names no quantity", Remedy: "add a column for each measured quantity"}
	}
	return nil
}

// headerName is one field of a header row.
type headerName struct {
	text   string
	column int
}

// splitHeader splits a header row, which has no '\n'.
func splitHeader(line []byte, g *grammar) ([]headerName, error) {
	t := &table{grammar: *g, src: &lines{}, fields: []field{{}}}
	b := append(append([]byte(nil), line...), '\n')
	var names []headerName
	for at := 0; ; {
		text, next, err := t.cutField(b, 0, at, &t.fields[0])
		if err != nil {
			return nil, err
		}
		names = append(names, headerName{strings.ToValidUTF8(string(text), "\ufffd"), at + 1})
		if b[next] == '\n' {
			break
		}
		if at = next + 1; len(names) >= maxColumns {
			return nil, &analytics.Fault{Offset: -1, Column: at, Problem: fmt.Sprintf("over %d columns", maxColumns), Kind: analytics.ErrTooLarge}
		}
	}
	for len(names) > 1 && names[len(names)-1].text == "" && !bytes.Contains(line, []byte(`""`)) { // delimiters at the end of the row
		names = names[:len(names)-1]
	}
	return names, nil
}

// located gives a fault without a line the line.
func located(err error, line int64) error {
	var f *analytics.Fault
	if errors.As(err, &f) && f.Line == 0 {
		f.Line = lineNumber(line)
	}
	return err
}

// columned gives a fault without a column the column and the key.
func columned(err error, column int, key string) error {
	var f *analytics.Fault
	if errors.As(err, &f) && f.Column == 0 {
		f.Column = column
		if f.Key == "" {
			f.Key = key
		}
	}
	return err
}
