package reader

import (
	"bytes"
	"context"
	"fmt"
	"regexp"
	"unicode/utf8"

	"epitally/analytics"
	"epitally/analytics/yamldoc"
)

// documentMark is the first key of a document, which says what it is.
var documentMark = regexp.MustCompile(`^(catalogue|specification|profile)[ \t]*:([ \t]|$)`)

// documentKind tells a document by its first key; "" = it is none. Remarks and
// the marks of YAML itself may stand before.
func documentKind(head []byte) string {
	head = bytes.TrimPrefix(head, utf8BOM)
	for len(head) > 0 {
		line, rest, _ := bytes.Cut(head, []byte("\n"))
		head = rest
		line = bytes.TrimRight(line, " \t\r")
		switch {
		case len(line) == 0 || line[0] == '#' || line[0] == '%' || bytes.Equal(line, []byte("---")):
			continue
		}
		if m := documentMark.FindSubmatch(line); m != nil {
			return string(m[1])
		}
		return ""
	}
	return ""
}

// readDocument hands over a catalogue, specification or profile as text, with
// its name. What a catalogue or profile says is checked here; a specification
// is checked by package binning, which knows its rules.
func (j *job) readDocument(ctx context.Context, kind string) error {
	j.res.Format = kind
	return j.ahead(ctx, nil, func(f *feed) error {
		text, whole, err := f.all(yamldoc.MaxBytes)
		switch {
		case err != nil:
			return err
		case !whole:
			return &analytics.Fault{Offset: -1, Kind: analytics.ErrTooLarge, Problem: fmt.Sprintf("the %s is over %d bytes", kind, yamldoc.MaxBytes),
				Remedy: "split it into several"}
		}
		text = bytes.TrimPrefix(text, utf8BOM)
		if err := checkText(text); err != nil {
			return err
		}
		name, err := nameInDocument(kind, text)
		if err != nil || j.sink.Document == nil {
			return err
		}
		return j.sink.Document(kind, name, string(text))
	})
}

// parseDocument parses a document that came as a file.
func parseDocument(document []byte) (yamldoc.Node, error) {
	return yamldoc.Parse(document, yamldoc.Form{Remedy: "put each into a file of its own"})
}

func nameInDocument(kind string, text []byte) (string, error) {
	switch kind {
	case "catalogue":
		c, err := ParseCatalogue(text)
		return c.Name, err
	case "profile":
		p, err := ParseProfile(text)
		return p.Name, err
	}
	root, err := parseDocument(text)
	if err != nil {
		return "", err
	}
	name, err := root.Value(kind)
	if err != nil {
		return "", err
	}
	return nameIn(name)
}

// checkText refuses bytes that are no UTF-8 text, at their line.
func checkText(text []byte) error {
	at := bytes.IndexByte(text, 0)
	problem := "a NUL byte stands in the text"
	if at < 0 {
		if utf8.Valid(text) {
			return nil
		}
		problem = "the text is not UTF-8"
		for at = 0; ; {
			r, n := utf8.DecodeRune(text[at:])
			if r == utf8.RuneError && n == 1 {
				break
			}
			at += n
		}
	}
	line := 1 + bytes.Count(text[:at], []byte{'\n'})
	return &analytics.Fault{Line: line, Column: at - bytes.LastIndexByte(text[:at], '\n'), Offset: -1, Problem: problem, Remedy: "save the file as UTF-8 text"}
}
