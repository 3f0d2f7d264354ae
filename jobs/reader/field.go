package reader

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"strings"

	"epitally/analytics"
)

// errOtherWafer says that the line belongs to the next wafer, and that the wafer
// before has been handed over.
var errOtherWafer = errors.New("another wafer begins")

// slowField parses field f of the line at start, which begins at b[at:], and
// gives the start of the next field or line.
func (t *table) slowField(b []byte, start, at, f int) (int, error) {
	fd := &t.fields[f]
	text, next, err := t.cutField(b, start, at, fd)
	if err != nil {
		return 0, err
	}
	end := b[next] == '\n'
	switch lastField := f == len(t.fields)-1; {
	case end && !lastField:
		return 0, t.tooFew(start, next, f+1)
	case !end && lastField:
		if next, err = t.afterLast(b, start, next); err != nil {
			return 0, err
		}
	}
	next++
	switch fd.use {
	case useSkip:
	case useWafer:
		if !bytes.Equal(text, t.wafer) {
			if err := t.next(text); err != nil {
				return 0, t.at(start, at, fd, err)
			}
			t.wafer = append(t.wafer[:0], text...)
			return 0, errOtherWafer
		}
	case useValue:
		err = t.value(start, at, fd, text)
	default:
		err = t.coordinate(start, at, fd, text)
	}
	return next, err
}

// at gives an error without a place the place of a field.
func (t *table) at(start, at int, fd *field, err error) error {
	var f *analytics.Fault
	if errors.As(err, &f) && f.Line == 0 && f.Offset < 0 {
		f.Line, f.Column = lineNumber(t.src.line), at-start+1
		if f.Key == "" {
			f.Key = fd.name
		}
	}
	return err
}

// cutField finds the text of the field and the index of the delimiter or line
// end after it.
func (t *table) cutField(b []byte, start, at int, fd *field) (text []byte, next int, err error) {
	if t.spread {
		for b[at] == ' ' || b[at] == '\t' || b[at] == '\r' {
			at++
		}
	}
	if t.quotes && b[at] == '"' {
		return t.cutQuoted(b, start, at, fd)
	}
	next = at
	for b[next] != '\n' && b[next] != t.delimiter && !(t.spread && b[next] == '\t') {
		if b[next] == '"' && t.quotes {
			return nil, 0, t.fault(start, next, fd, "a stray quote", `quote the whole field, and write "" for a quote inside it`)
		}
		next++
	}
	text = bytes.Trim(b[at:next], " \t\r")
	if t.spread {
		for b[next] != '\n' && (b[next+1] == ' ' || b[next+1] == '\t' || b[next+1] == '\r' || b[next+1] == '\n') {
			next++
		}
	}
	return text, next, nil
}

// cutQuoted reads a quoted field, which must end on its line.
func (t *table) cutQuoted(b []byte, start, at int, fd *field) (text []byte, next int, err error) {
	doubled := false
	for next = at + 1; ; next++ {
		switch b[next] {
		case '\n':
			return nil, 0, t.fault(start, at, fd, "the quote is not closed on its line", `close it, and write "" for a quote inside the field`)
		case '"':
			if b[next+1] == '"' {
				doubled = true
				next++
				continue
			}
		default:
			continue
		}
		break
	}
	text = b[at+1 : next]
	if doubled {
		text = bytes.ReplaceAll(text, []byte(`""`), []byte(`"`))
	}
	next++
	for b[next] == '\r' || (b[next] == ' ' && t.delimiter != ' ') {
		next++
	}
	if b[next] != '\n' && b[next] != t.delimiter {
		return nil, 0, t.fault(start, next, fd, "text stands after the closing quote", `write "" for a quote inside the field`)
	}
	return bytes.TrimSpace(text), next, nil
}

func (t *table) tooFew(start, at, have int) error {
	f := &analytics.Fault{Line: lineNumber(t.src.line), Column: at - start + 1, Offset: -1,
		Problem: fmt.Sprintf("the line has %d of %d fields", have, len(t.fields)), Remedy: "write one field per column of the header; empty means no value"}
	if t.src.cut {
		f.Problem = fmt.Sprintf("the file ends in the middle of the line, after %d of %d fields", have, len(t.fields))
		f.Remedy = "copy the file again from where it was made"
	}
	return f
}

// afterLast passes over what stands after the last known field, when it may.
func (t *table) afterLast(b []byte, start, next int) (int, error) {
	rest := b[next:]
	rest = rest[:bytes.IndexByte(rest, '\n')]
	if !t.loose && len(bytes.Trim(rest, string(t.delimiter)+" \t\r")) > 0 {
		return 0, &analytics.Fault{Line: lineNumber(t.src.line), Column: next - start + 2, Offset: -1,
			Problem: fmt.Sprintf("the line has %d fields where the header has %d", len(t.fields)+bytes.Count(rest, []byte{t.delimiter}), len(t.fields)),
			Remedy:  "check the delimiter and the decimal point"}
	}
	return next + len(rest), nil
}

func (t *table) value(start, at int, fd *field, text []byte) error {
	c := &t.cols[fd.col]
	if len(text) == 0 {
		c.missing(t.n)
		return nil
	}
	if len(t.missing) > 0 && t.isMissing(text) {
		c.missing(t.n)
		return nil
	}
	d, ok := parseDecimal(text, t.point)
	if ok {
		if !c.put(t.n, d, text, t.point) {
			return t.fault(start, at, fd, fmt.Sprintf("%s is out of range", shown(text)), "leave the field empty when there is no value")
		}
		return nil
	}
	if isNonFinite(string(text)) {
		return t.fault(start, at, fd, fmt.Sprintf("%s is not a finite number", shown(text)), "leave the field empty when there is no value")
	}
	return t.fault(start, at, fd, fmt.Sprintf("%s is not a number", shown(text)), "write a decimal number, or leave the field empty when there is no value")
}

func (t *table) isMissing(text []byte) bool {
	for _, m := range t.missing {
		if string(text) == m {
			return true
		}
	}
	return false
}

func isNonFinite(s string) bool {
	switch strings.ToLower(strings.TrimLeft(s, "+-")) {
	case "nan", "inf", "infinity", "1.#inf", "1.#ind", "1.#qnan":
		return true
	}
	return false
}

// coordinate takes a whole number; "3.0" is one.
func (t *table) coordinate(start, at int, fd *field, text []byte) error {
	d, ok := parseDecimal(text, t.point)
	if !ok || d.long || d.exp > 9 || d.exp < -maxDigits {
		return t.badCoordinate(start, at, fd, text)
	}
	for ; d.exp < 0 && d.m%10 == 0; d.exp++ {
		d.m /= 10
	}
	m, ok := mulPow10(d.m, d.exp)
	v := int64(m)
	if d.neg {
		v = -v
	}
	if !ok || d.exp < 0 || v < math.MinInt16 || v > math.MaxInt16 {
		return t.badCoordinate(start, at, fd, text)
	}
	if fd.use == useX {
		t.x[t.n] = int16(v)
	} else {
		t.y[t.n] = int16(v)
	}
	return nil
}
