package reader

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"math/bits"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// use is what a column of a table is for.
type use uint8

const (
	useSkip  use = iota
	useWafer     // the wafer's name: rows of one wafer follow one another
	useX
	useY
	useValue
)

type field struct {
	use  use
	col  int    // index in table.cols of a useValue field
	name string // as the header writes it
}

// grammar says how the rows of a table are written.
type grammar struct {
	delimiter byte
	point     byte     // decimal point
	comments  bool     // a line that begins with # ends the rows
	quotes    bool     // fields may be quoted
	missing   []string // words that mean "no value", besides an empty field
	loose     bool     // fields after the last known one are passed over
	stop      string   // a line that begins so ends the table; "" = none
	comment   string   // lines that begin so are passed over; "" = none
	spread    bool     // any number of spaces and tabs is one delimiter
	slow      bool     // every field needs slowField: spread, or a missing word is a number
}

// maxValues bounds the values of one wafer that are held at a time.
const maxValues = 64 << 20

// table parses rows into the columns of one wafer, in file order.
type table struct {
	grammar
	fields []field
	cols   []column
	place  placement
	src    *lines

	n     int // rows of the wafer at hand
	x, y  []int16
	line  []int32
	wafer []byte // the wafer at hand, when a column names it
	named bool   // a column names the wafer

	// next is called with the name of another wafer before its first row is
	// stored; it hands the wafer at hand over and resets the table.
	next    func(wafer []byte) error
	stopped bool // the stop line was met
}

// reset begins a wafer with room for rows rows.
func (t *table) reset(rows int) {
	t.n = 0
	t.x, t.y, t.line = make([]int16, rows), make([]int16, rows), make([]int32, rows)
	for i := range t.cols {
		t.cols[i].reset(rows)
	}
}

// firstRows is the room made when nothing is known of the wafer's size.
const firstRows = 4096

func (t *table) grow() error {
	most := wafermap.MaxDies
	if len(t.cols) > 0 {
		most = min(most, maxValues/len(t.cols))
	}
	if t.n >= most {
		return &analytics.Fault{Line: lineNumber(t.src.line), Offset: -1, Kind: analytics.ErrTooLarge,
			Problem: fmt.Sprintf("over %d rows for one wafer with %d quantities", most, len(t.cols)),
			Remedy:  "check that the file holds one row per die and names its wafers"}
	}
	rows := min(most, max(firstRows, t.n+t.n/2))
	grown := func(old []int16) []int16 { return append(make([]int16, 0, rows), old[:t.n]...)[:rows] }
	t.x, t.y = grown(t.x), grown(t.y)
	t.line = append(make([]int32, 0, rows), t.line[:t.n]...)[:rows]
	for i := range t.cols {
		t.cols[i].resize(t.n, rows)
	}
	return nil
}

// rows parses whole lines and reports how many bytes it took: fewer than all
// when a line ends the rows.
func (t *table) rows(b []byte) (int, error) {
	for i := 0; i < len(b); {
		switch {
		case b[i] == '\n' || (b[i] == '\r' && i+1 < len(b) && b[i+1] == '\n'):
			i += bytes.IndexByte(b[i:], '\n') + 1
			t.src.line++
			continue
		case b[i] == '#' && t.comments:
			return i, nil
		case t.comment != "" && bytes.HasPrefix(b[i:], []byte(t.comment)):
			i += bytes.IndexByte(b[i:], '\n') + 1
			t.src.line++
			continue
		case t.stop != "" && bytes.HasPrefix(b[i:], []byte(t.stop)):
			t.stopped = true
			return i, nil
		}
		if t.n == len(t.x) {
			if err := t.grow(); err != nil {
				return i, err
			}
		}
		t.src.line++
		end, err := t.row(b, i)
		switch err {
		case nil:
			t.line[t.n] = int32(lineNumber(t.src.line))
			t.n++
		case errOtherWafer: // the same line again, now as the first of its wafer
			t.src.line--
			end = i
		default:
			return i, err
		}
		i = end
	}
	return len(b), nil
}

const (
	zeros = 0x3030303030303030
	highs = 0x8080808080808080
)

// row parses the line at b[start:] into row t.n and gives the start of the next.
//
// A field of at most seven digits and a point is read as one 8-byte word: the
// bytes that are no digits are found at once, the point is closed up, and three
// multiplications turn the digits into their number. Any other field goes
// through slowField.
func (t *table) row(b []byte, start int) (int, error) {
	i, n := start, t.n
	last := len(t.fields) - 1
	delimiter, point := t.delimiter, t.point
	for f := range t.fields {
		fd := &t.fields[f]
		after := delimiter
		if f == last {
			after = '\n'
		}
		if fd.use == useWafer && !t.slow { // nearly always the same wafer
			if e := i + len(t.wafer); len(t.wafer) > 0 && e < len(b) && b[e] == after && string(b[i:e]) == string(t.wafer) {
				i = e + 1
				continue
			}
		}
		j := i
		neg := b[j] == '-'
		if neg {
			j++
		}
		if fd.use < useX || t.slow || j+8 >= len(b) {
			next, err := t.slowField(b, start, i, f)
			if err != nil {
				return 0, err
			}
			i = next
			continue
		}
		word := binary.LittleEndian.Uint64(b[j:])
		digits := word ^ zeros
		// The high bit of every byte that is not a digit.
		stops := ((digits&^highs + 0x7676767676767676) | digits) & highs
		p := bits.TrailingZeros64(stops) &^ 7 // bits before the first of them; 64 = none
		size, frac := p, 0                    // bits of digits, digits after the point
		if byte(word>>(p&63)) == point {
			q := bits.TrailingZeros64(stops&(stops-1)) &^ 7
			whole := uint64(1)<<p - 1
			digits = digits&whole | digits>>8&^whole
			frac, size, p = (q-p)>>3-1, q-8, q
		}
		end, width := byte(word>>(p&63)), p>>3+1
		if end == '\r' && f == last && b[j+width] == '\n' {
			end, width = '\n', width+1
		}
		if p == 64 || size == 0 || end != after {
			next, err := t.slowField(b, start, i, f)
			if err != nil {
				return 0, err
			}
			i = next
			continue
		}
		digits <<= (64 - size) & 63
		digits = digits * (10<<8 + 1) >> 8 & 0x00ff00ff00ff00ff
		digits = digits * (100<<16 + 1) >> 16 & 0x0000ffff0000ffff
		digits = digits * (10000<<32 + 1) >> 32
		v := int32(digits)
		if neg {
			v = -v
		}
		if fd.use == useValue {
			if c := &t.cols[fd.col]; frac == c.frac {
				c.k[n] = v
			} else {
				c.put(n, decimal{m: digits, exp: -frac, neg: neg}, nil, point)
			}
		} else if !t.setCoordinate(fd.use, v, frac) {
			return 0, t.badCoordinate(start, i, fd, b[i:j+p>>3])
		}
		i = j + width
	}
	return i, nil
}

func (t *table) setCoordinate(u use, v int32, frac int) bool {
	switch {
	case frac != 0 || v != int32(int16(v)):
		return false
	case u == useX:
		t.x[t.n] = int16(v)
	default:
		t.y[t.n] = int16(v)
	}
	return true
}

func (t *table) fault(start, at int, fd *field, problem, remedy string) *analytics.Fault {
	return &analytics.Fault{Line: lineNumber(t.src.line), Column: at - start + 1, Offset: -1, Key: fd.name, Problem: problem, Remedy: remedy}
}

func (t *table) badCoordinate(start, at int, fd *field, text []byte) error {
	return t.fault(start, at, fd, fmt.Sprintf("%s is not a die coordinate", shown(text)),
		fmt.Sprintf("a coordinate is a whole number from %d to %d", math.MinInt16, math.MaxInt16))
}

// shown quotes text of a file for a message, shortened.
func shown(text []byte) string {
	if len(text) > 60 {
		return fmt.Sprintf("%q…", text[:60])
	}
	return fmt.Sprintf("%q", text)
}
