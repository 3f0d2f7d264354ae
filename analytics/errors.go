package analytics

import (
	"errors"
	"fmt"
	"strings"
)

// The kinds of error that cross a layer. Each layer wraps one of them with its
// own detail; only package api turns them into HTTP status codes, in one table.
var (
	// ErrNotFound: the thing named does not exist.
	ErrNotFound = errors.New("not found")
	// ErrInvalid: the input breaks a rule; the message says where and what to do.
	ErrInvalid = errors.New("invalid input")
	// ErrConflict: the input is well formed but collides with what is stored.
	ErrConflict = errors.New("conflict")
	// ErrDuplicate: the very same bytes were stored before.
	ErrDuplicate = errors.New("stored before")
	// ErrTooLarge: the input is over a stated limit.
	ErrTooLarge = errors.New("too large")
	// ErrUnavailable: a service that is needed does not answer; try again.
	ErrUnavailable = errors.New("unavailable")
)

// Fault is bad input with its place: what was wrong, where, and what to do.
// It unwraps to Kind, or to ErrInvalid when Kind is nil.
type Fault struct {
	Source  string // file name or document; "" when the caller adds it
	Line    int    // 1-based line of text input; 0 = not known
	Column  int    // 1-based column (bytes) in the line; 0 = not known
	Offset  int64  // byte offset in the decompressed input; -1 = not known
	Key     string // key path of a YAML document, or column name; "" = none
	Problem string // what was wrong, lower case, no full stop
	Remedy  string // what to do now; "" = obvious from Problem
	Kind    error
}

// Error writes "source:line:column: key: problem; remedy", leaving out what is
// not known. A place known only as an offset is written "at byte N".
func (f *Fault) Error() string {
	var b strings.Builder
	b.WriteString(f.Source)
	if f.Line > 0 {
		sep(&b, ":")
		fmt.Fprintf(&b, "line %d", f.Line)
		if f.Column > 0 {
			fmt.Fprintf(&b, ", column %d", f.Column)
		}
	} else if f.Offset > 0 {
		sep(&b, ":")
		fmt.Fprintf(&b, "at byte %d", f.Offset)
	}
	if f.Key != "" {
		sep(&b, ":")
		b.WriteString(f.Key)
	}
	sep(&b, ":")
	b.WriteString(f.Problem)
	if f.Remedy != "" {
		b.WriteString("; ")
		b.WriteString(f.Remedy)
	}
	return b.String()
}

func sep(b *strings.Builder, s string) {
	if b.Len() > 0 {
		b.WriteString(s)
		b.WriteByte(' ')
	}
}

// Unwrap gives the error kind.
func (f *Fault) Unwrap() error {
	if f.Kind != nil {
		return f.Kind
	}
	return ErrInvalid
}

// WithSource returns err with the Fault inside it, if any, naming source where
// it named none.
func WithSource(err error, source string) error {
	var f *Fault
	if errors.As(err, &f) && f.Source == "" {
		g := *f
		g.Source = source
		return &g
	}
	return err
}
