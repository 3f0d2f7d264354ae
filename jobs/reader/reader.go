package reader

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"path"
	"strings"
	"time"

	"epitally/analytics"
)

// Input is one source to read.
type Input struct {
	Name        string         // base name or relative path, for messages and for the match of profiles
	R           io.Reader      // the bytes as they lie on disk, compressed or not
	Profiles    []Profile      // reading profiles that may apply
	ProfileName string         // force one of them; "" = the one whose match fits Name
	Zone        *time.Location // for times that a source writes without a zone; nil = UTC
	MaxBytes    int64          // decompressed size limit; 0 = DefaultMaxBytes
}

// DefaultMaxBytes is the decompressed size of a source that is still read.
const DefaultMaxBytes = 4 << 30

// Sink takes what a source holds, in the order of the source. An error of a
// function ends the reading and comes back from Read. What is handed over
// belongs to the sink. A nil function drops what it would take.
type Sink struct {
	Measurement func(*Measurement) error
	RunSheet    func([]RunSheetRow) error
	Document    func(kind, name, text string) error // kind: catalogue, specification or profile
}

// Result says what was read, filled as far as known when Read fails.
type Result struct {
	Format  string // epitally-csv, delimited, stdf, run-sheet, catalogue, specification, profile; "" = not known
	SHA256  string // hex, of the decompressed bytes; "" when not all of them were read
	Bytes   int64  // decompressed
	Profile string // name of the reading profile used; "" = none
	Wafers  int    // measurements handed over
	Dies    int64
	Notices []string
}

// job is one call of Read.
type job struct {
	in   Input
	sink Sink
	res  *Result
	src  *source
}

// Read reads one source and calls sink for every measurement as soon as it is
// whole, so that memory is bounded by one wafer. Formats are told apart by
// content, then by the match of a reading profile.
//
// Bad input is an *analytics.Fault with line and column, or with the byte
// offset in the decompressed bytes. A source over MaxBytes is
// analytics.ErrTooLarge, a failing R analytics.ErrUnavailable; a cancelled ctx
// gives its own error. Read leaves no goroutine behind.
func Read(ctx context.Context, in Input, sink Sink) (Result, error) {
	var res Result
	if in.MaxBytes <= 0 {
		in.MaxBytes = DefaultMaxBytes
	}
	if in.Zone == nil {
		in.Zone = time.UTC
	}
	src, err := openSource(in.R, in.MaxBytes)
	defer src.close()
	if err == nil {
		err = (&job{in: in, sink: sink, res: &res, src: src}).read(ctx)
	}
	if err != nil && ctx.Err() == nil {
		src.drain(ctx) // a refused source is known by its hash, too
	}
	res.Bytes, res.SHA256 = src.sum()
	return res, err
}

// sniffBytes is how much of a source is looked at to tell its format.
const sniffBytes = 4096

func (j *job) read(ctx context.Context) error {
	head, err := j.src.peek(sniffBytes)
	if err != nil && !errors.Is(err, io.EOF) {
		return err
	}
	switch first := firstLine(head); {
	case len(head) == 0:
		return &analytics.Fault{Offset: -1, Problem: "the file is empty", Remedy: "export it again"}
	case isSTDF(head):
		return j.readSTDF(ctx)
	case strings.HasPrefix(first, ownMark):
		return j.readOwn(ctx)
	case strings.HasPrefix(first, runSheetMark):
		return j.readRunSheet(ctx)
	case strings.HasPrefix(first, "# epitally:"):
		return &analytics.Fault{Line: 1, Column: 1, Offset: -1, Problem: fmt.Sprintf("%q is not a kind of file that is read", first),
			Remedy: fmt.Sprintf("begin with %q or %q", ownMark, runSheetMark)}
	}
	if kind := documentKind(head); kind != "" {
		return j.readDocument(ctx, kind)
	}
	p, err := j.profileFor(formatDelimited)
	if err != nil {
		return err
	}
	return j.readDelimited(ctx, p)
}

// ahead runs parse over a feed that reads the source in a goroutine of its own.
// decode, when not nil, turns its text into UTF-8.
func (j *job) ahead(ctx context.Context, decode func(io.Reader) io.Reader, parse func(*feed) error) error {
	var r io.Reader = j.src
	if decode != nil {
		r = decode(r)
	}
	f := newFeed(ctx, r)
	defer f.close()
	return parse(f)
}

// firstLine is the first line without byte order mark and line end.
func firstLine(head []byte) string {
	line, _, _ := bytes.Cut(bytes.TrimPrefix(head, utf8BOM), []byte("\n"))
	return strings.TrimRight(string(line), " \t\r")
}

var utf8BOM = []byte("\xef\xbb\xbf")

// profileFor finds the profile that applies: the forced one, else the only one
// of the format whose match fits the name. For STDF none is needed: nil.
func (j *job) profileFor(format string) (*Profile, error) {
	var fit []*Profile
	var names []string
	for i := range j.in.Profiles {
		p := &j.in.Profiles[i]
		names = append(names, p.Name)
		if j.in.ProfileName != "" {
			if p.Name == j.in.ProfileName {
				fit = append(fit, p)
			}
		} else if p.format == format && p.matches(j.in.Name) {
			fit = append(fit, p)
		}
	}
	fault := &analytics.Fault{Offset: -1}
	switch {
	case len(fit) == 0 && j.in.ProfileName != "":
		fault.Problem = fmt.Sprintf("there is no reading profile named %q", j.in.ProfileName)
		fault.Remedy = "load the profile first, or choose one of " + listOr(names, "(none is stored)")
	case len(fit) == 0 && format == formatSTDF:
		return nil, nil
	case len(fit) == 0:
		fault.Problem = fmt.Sprintf("the format is not known: no line %q, no STDF, no catalogue, specification or profile, and the match of no reading profile fits %q (%s)",
			ownMark, path.Base(j.in.Name), listOr(names, "none is stored"))
		fault.Remedy = "write a reading profile for this format whose match fits the file name"
	case len(fit) > 1:
		fault.Problem = fmt.Sprintf("reading profiles %q and %q both match %q", fit[0].Name, fit[1].Name, path.Base(j.in.Name))
		fault.Remedy = "narrow the match of one of them, or name the profile"
		fault.Kind = analytics.ErrConflict
	case fit[0].format != format && format == formatSTDF: // forced for text while the file is STDF
		return nil, nil
	case fit[0].format != format:
		fault.Problem = fmt.Sprintf("reading profile %q is for STDF, but the file does not begin with an STDF FAR record", fit[0].Name)
		fault.Remedy = "choose a profile whose format is delimited"
	default:
		j.res.Profile = fit[0].Name
		return fit[0], nil
	}
	return nil, fault
}

func listOr(names []string, none string) string {
	if len(names) == 0 {
		return none
	}
	return strings.Join(names, ", ")
}

// give hands a measurement over and counts it.
func (j *job) give(m *Measurement) error {
	if j.sink.Measurement != nil {
		if err := j.sink.Measurement(m); err != nil {
			return err
		}
	}
	j.res.Wafers++
	j.res.Dies += int64(m.Grid.Len())
	return nil
}

// notice records something a person should know, once.
func (j *job) notice(format string, args ...any) {
	text := fmt.Sprintf(format, args...)
	for _, n := range j.res.Notices {
		if n == text {
			return
		}
	}
	j.res.Notices = append(j.res.Notices, text)
}
