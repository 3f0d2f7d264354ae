package reader

import (
	"bytes"
	"fmt"
	"io"

	"epitally/analytics"
)

// maxLine is the longest line read, in bytes.
const maxLine = 1 << 20

// lines cuts a feed into chunks of whole lines without copying more than the
// line that crosses two blocks.
type lines struct {
	feed    *feed
	line    int64  // number of the line last consumed; kept by the parser
	carry   []byte // start of a line whose end has not come yet
	pending []byte // rest of the block in hand
	nul     int    // column of a NUL byte in the next line; 0 = none
	cut     bool   // the chunk just given had no line end: it is the file's last line
	started bool
}

func newLines(f *feed) *lines { return &lines{feed: f} }

// next gives one or more whole lines, the last ending in '\n' (added where the
// file ends without one). They are valid until the next call. At the end: io.EOF.
func (l *lines) next() ([]byte, error) {
	if l.nul > 0 {
		return nil, l.nulFault()
	}
	chunk, err := l.chunk()
	if err != nil {
		return nil, err
	}
	if !l.started {
		l.started = true
		chunk = bytes.TrimPrefix(chunk, utf8BOM)
	}
	zero := bytes.IndexByte(chunk, 0)
	if zero < 0 {
		return chunk, nil
	}
	// Lines before the NUL are still good; its own line number is known once
	// they are consumed.
	start := bytes.LastIndexByte(chunk[:zero], '\n') + 1
	if l.nul = zero - start + 1; start == 0 {
		return nil, l.nulFault()
	}
	return chunk[:start], nil
}

func (l *lines) chunk() ([]byte, error) {
	for {
		if len(l.pending) == 0 {
			b, err := l.feed.next()
			if err == io.EOF {
				return l.last()
			}
			if err != nil {
				return nil, err
			}
			l.pending = b
		}
		b := l.pending
		if len(l.carry) > 0 {
			end := bytes.IndexByte(b, '\n')
			if end < 0 {
				end = len(b) - 1
			}
			l.carry, l.pending = append(l.carry, b[:end+1]...), b[end+1:]
			if len(l.carry) > maxLine {
				return nil, l.tooLong()
			}
			if len(l.carry) > 0 && l.carry[len(l.carry)-1] == '\n' {
				out := l.carry
				l.carry = l.carry[:0]
				return out, nil
			}
			continue
		}
		l.pending = nil
		end := bytes.LastIndexByte(b, '\n') + 1
		l.carry = append(l.carry, b[end:]...)
		if end > 0 {
			return b[:end], nil
		}
	}
}

// last gives the line that the file ends in without a line end.
func (l *lines) last() ([]byte, error) {
	if len(l.carry) == 0 {
		return nil, io.EOF
	}
	out := append(l.carry, '\n')
	l.carry, l.cut = nil, true
	return out, nil
}

func (l *lines) tooLong() error {
	return &analytics.Fault{Line: lineNumber(l.line + 1), Offset: -1, Kind: analytics.ErrTooLarge,
		Problem: fmt.Sprintf("the line is over %d bytes", maxLine), Remedy: "check that this is a text file with one die a line"}
}

func (l *lines) nulFault() error {
	return &analytics.Fault{Line: lineNumber(l.line + 1), Column: l.nul, Offset: -1, Problem: "a NUL byte stands in the text",
		Remedy: "export the file again as plain text, or state its encoding in a reading profile"}
}

// lineNumber caps a line number at what a Fault and a Measurement hold.
func lineNumber(n int64) int { return int(min(n, 1<<31-1)) }
