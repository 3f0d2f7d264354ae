package reader

import (
	"encoding/binary"
	"fmt"
	"math"
	"strings"
	"testing"
)

// stdfWriter writes STDF records in either byte order.
type stdfWriter struct {
	order binary.AppendByteOrder
	b     []byte
}

// rec appends a record. Go types stand for STDF's: uint8 U*1, uint16 U*2, uint32
// U*4, int16 I*2, float32 R*4, string C*n.
func (w *stdfWriter) rec(kind recordKind, values ...any) *stdfWriter {
	var body []byte
	for _, v := range values {
		switch v := v.(type) {
		case uint8:
			body = append(body, v)
		case uint16:
			body = w.order.AppendUint16(body, v)
		case int16:
			body = w.order.AppendUint16(body, uint16(v))
		case uint32:
			body = w.order.AppendUint32(body, v)
		case float32:
			body = w.order.AppendUint32(body, math.Float32bits(v))
		case string:
			body = append(append(body, byte(len(v))), v...)
		default:
			panic(fmt.Sprintf("no STDF type for %T", v))
		}
	}
	w.b = append(w.order.AppendUint16(w.b, uint16(len(body))), kind[0], kind[1])
	w.b = append(w.b, body...)
	return w
}

const noon = uint32(1_000_036_800) // 2001-09-09 12:00:00

func newSTDFText(order binary.AppendByteOrder) *stdfWriter {
	return (&stdfWriter{order: order}).rec(recFAR, uint8(2), uint8(4))
}

func (w *stdfWriter) mir(start uint32, lot, part, node string, more ...any) *stdfWriter {
	values := []any{start, start, uint8(1), uint8('P'), uint8(' '), uint8(' '), uint16(65535), uint8(' '), lot, part, node, "T-type", "job-1"}
	return w.rec(recMIR, append(values, more...)...)
}

func (w *stdfWriter) wir(head uint8, start uint32, id string) *stdfWriter {
	return w.rec(recWIR, head, uint8(255), start, id)
}

func (w *stdfWriter) wrr(head uint8, parts uint32, id string) *stdfWriter {
	return w.rec(recWRR, head, uint8(255), noon+60, parts, uint32(0), uint32(0), uint32(0), uint32(0), id)
}

func (w *stdfWriter) pir(head, site uint8) *stdfWriter { return w.rec(recPIR, head, site) }

func (w *stdfWriter) ptr(test uint32, head, site uint8, v float32, more ...any) *stdfWriter {
	return w.flagged(test, head, site, 0, 0, v, more...)
}

func (w *stdfWriter) flagged(test uint32, head, site, testFlag, parmFlag uint8, v float32, more ...any) *stdfWriter {
	return w.rec(recPTR, append([]any{test, head, site, testFlag, parmFlag, v}, more...)...)
}

// defaults is what the first PTR of a test adds: text, alarm, OPT_FLAG, scales,
// limits, unit.
func defaults(text, unit string) []any {
	return []any{text, "", uint8(0), uint8(3), uint8(0), uint8(0), float32(0), float32(5), unit, "%9.3f"}
}

func (w *stdfWriter) prr(head, site, flag uint8, hard, soft uint16, x, y int16, ms uint32) *stdfWriter {
	return w.rec(recPRR, head, site, flag, uint16(1), hard, soft, x, y, ms, "1")
}

func (w *stdfWriter) mrr() *stdfWriter { return w.rec(recMRR, noon+90, uint8(' ')) }

// die is a whole part on head 1, site 1 with one result of test 7.
func (w *stdfWriter) die(x, y int16, v float32) *stdfWriter {
	return w.pir(1, 1).ptr(7, 1, 1, v, defaults("Vf", "V")...).prr(1, 1, 0, 1, 1, x, y, 5)
}

// twoSites is a log with two interleaved sites, a retest, unusable results,
// defaults that later records inherit, and records that are not known.
func twoSites(order binary.AppendByteOrder) *stdfWriter {
	w := newSTDFText(order).mir(noon, "L7", "P-9", "node-3", "rev B", "", "anna").
		rec(recordKind{180, 7}, "unknown").rec(recordKind{15, 99}).
		wir(1, noon, "by WIR")
	w.pir(1, 1).pir(1, 2)
	w.ptr(7, 1, 1, 3.125, defaults("Vf @ 20 mA", "V")...)
	w.ptr(7, 1, 2, 3.25) // inherits text and unit
	w.ptr(8, 1, 2, 1e-6, defaults("Ir", "A")...).flagged(8, 1, 1, 1<<1, 0, 9)
	w.ptr(9, 1, 1, 7, defaults("never", "V")...).flagged(9, 1, 1, 0, 1<<2, 9) // the usable one stands
	w.flagged(10, 1, 1, 1<<5, 0, 9, defaults("aborted", "V")...)
	w.prr(1, 2, 0, 1, 65535, -4, 5, 0).prr(1, 1, partFailed, 3, 30, -5, 5, 12)
	w.rec(recordKind{50, 10}, uint16(2), uint8(200)) // a GDR that makes no sense
	w.pir(1, 1).ptr(7, 1, 1, 3.5, "Vf @ 20 mA").prr(1, 1, partNoVerdict, 1, 10, -5, 4, 11)
	w.pir(1, 2).ptr(7, 1, 2, 3.75, "", "").prr(1, 2, 0, 1, 10, -5, 5, 10) // retest of (-5, 5)
	return w.wrr(1, 4, "W-1").mrr()
}

var byteOrders = map[string]binary.AppendByteOrder{"little": binary.LittleEndian, "big": binary.BigEndian}

func readText(t testing.TB, w *stdfWriter, in Input) (held, error) {
	t.Helper()
	in.Name, in.R = "a.stdf", strings.NewReader(string(w.b))
	return readHeld(t.Context(), in)
}
