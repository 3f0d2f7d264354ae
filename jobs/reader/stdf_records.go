package reader

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"strings"
	"unicode"

	"epitally/analytics"
)

// isSTDF tells an STDF file by its FAR record, which always stands first: two
// bytes long, type 0, subtype 10, in either byte order.
func isSTDF(head []byte) bool {
	return len(head) >= 4 && head[2] == 0 && head[3] == 10 && (head[0] == 2 && head[1] == 0 || head[0] == 0 && head[1] == 2)
}

// records cuts a feed into STDF records. Framing and types are those of the
// Standard Test Data Format Specification, version 4.
type records struct {
	feed    *feed
	order   binary.ByteOrder
	offset  int64  // of the record last given
	at      int64  // of the next byte
	block   []byte // rest of the block in hand
	carry   []byte // a record that crosses blocks
	kindNow recordKind
}

// recordKind is REC_TYP and REC_SUB.
type recordKind [2]byte

var (
	recFAR = recordKind{0, 10}
	recMIR = recordKind{1, 10}
	recMRR = recordKind{1, 20}
	recWIR = recordKind{2, 10}
	recWRR = recordKind{2, 20}
	recWCR = recordKind{2, 30}
	recPIR = recordKind{5, 10}
	recPRR = recordKind{5, 20}
	recPTR = recordKind{15, 10}
	recMPR = recordKind{15, 15}
)

var recordNames = map[recordKind]string{recFAR: "FAR", recMIR: "MIR", recMRR: "MRR", recWIR: "WIR", recWRR: "WRR", recWCR: "WCR",
	recPIR: "PIR", recPRR: "PRR", recPTR: "PTR", recMPR: "MPR"}

func (k recordKind) String() string {
	if name, ok := recordNames[k]; ok {
		return name
	}
	return fmt.Sprintf("%d/%d", k[0], k[1])
}

// take gives the next n bytes in one piece, valid until the call after; fewer
// with io.EOF at the end of the file.
func (r *records) take(n int) ([]byte, error) {
	if len(r.block) >= n {
		b := r.block[:n]
		r.block = r.block[n:]
		r.at += int64(n)
		return b, nil
	}
	r.carry = append(r.carry[:0], r.block...)
	for len(r.carry) < n {
		b, err := r.feed.next()
		if err != nil {
			r.at += int64(len(r.carry))
			r.block = nil
			return r.carry, err
		}
		k := min(n-len(r.carry), len(b))
		r.carry, r.block = append(r.carry, b[:k]...), b[k:]
	}
	r.at += int64(n)
	return r.carry, nil
}

// next gives the next record's fields; io.EOF at a proper end.
func (r *records) next() (fields, error) {
	r.offset = r.at
	head, err := r.take(4)
	if err == io.EOF && len(head) == 0 {
		return fields{}, io.EOF
	}
	if err == nil {
		r.kindNow = recordKind{head[2], head[3]}
		var body []byte
		if body, err = r.take(int(r.order.Uint16(head))); err == nil {
			return fields{b: body, order: r.order}, nil
		}
	}
	if err != io.EOF {
		return fields{}, err
	}
	what := "a record's head"
	if len(head) == 4 || r.at-r.offset > 4 {
		what = fmt.Sprintf("the %v record that begins at byte %d", r.kindNow, r.offset)
	}
	return fields{}, &analytics.Fault{Offset: r.at, Problem: "the file is cut in " + what, Remedy: "copy the file again from where it was made"}
}

// fault is a problem with the record last given.
func (r *records) fault(remedy, problem string, args ...any) *analytics.Fault {
	return &analytics.Fault{Offset: r.offset, Problem: fmt.Sprintf(problem, args...), Remedy: remedy}
}

// fields reads the fields of one record in order. What the record leaves out at
// its end is missing: the getters then give the value that means so.
type fields struct {
	b     []byte
	order binary.ByteOrder
}

func (f *fields) take(n int) []byte {
	if len(f.b) < n {
		f.b = nil
		return nil
	}
	b := f.b[:n]
	f.b = f.b[n:]
	return b
}

func (f *fields) u1(missing uint8) uint8 {
	if b := f.take(1); b != nil {
		return b[0]
	}
	return missing
}

func (f *fields) u2(missing uint16) uint16 {
	if b := f.take(2); b != nil {
		return f.order.Uint16(b)
	}
	return missing
}

func (f *fields) u4(missing uint32) uint32 {
	if b := f.take(4); b != nil {
		return f.order.Uint32(b)
	}
	return missing
}

func (f *fields) i2(missing int16) int16 { return int16(f.u2(uint16(missing))) }

func (f *fields) r4() float32 {
	if b := f.take(4); b != nil {
		return math.Float32frombits(f.order.Uint32(b))
	}
	return float32(math.NaN())
}

// raw gives a C*n field as it stands in the record; nil when it is missing.
func (f *fields) raw() []byte {
	n := f.take(1)
	if n == nil {
		return nil
	}
	return f.take(min(int(n[0]), len(f.b))) // the record may end inside the text
}

// text gives a C*n field. Testers write Latin-1 or ASCII.
func (f *fields) text() string { return latin1(f.raw()) }

// note gives a C*n field that is only shown: what does not print becomes a space.
func (f *fields) note() string { return printable(f.text()) }

func printable(text string) string {
	return strings.TrimSpace(strings.Map(func(c rune) rune {
		if unicode.IsPrint(c) {
			return c
		}
		return ' '
	}, text))
}

func latin1(b []byte) string {
	var s strings.Builder
	for _, c := range b {
		s.WriteRune(rune(c))
	}
	return strings.Trim(s.String(), " \t\r\n\x00")
}
