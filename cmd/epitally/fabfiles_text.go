package main

import (
	"fmt"
	"strconv"
	"time"

	"epitally/analytics/simfab"
)

// appendReading writes a reading as Epitally's own die readings CSV.
func appendReading(b []byte, m *simfab.Reading) []byte {
	w := m.Wafer
	b = fmt.Appendf(b, "# epitally: die readings\n# wafer: %s\n# lot: %s\n# kind: %s\n# station: %s\n# measured at: %s\n",
		w.Name, w.Lot, m.Kind, m.Station, m.MeasuredAt.Format(time.RFC3339))
	if m.DriveCurrentMA > 0 {
		b = fmt.Appendf(b, "# drive current: %g mA\n", m.DriveCurrentMA)
	}
	b = fmt.Appendf(b, "# pitch: %g x %g mm\n", m.Layout.DiePitchXMM, m.Layout.DiePitchYMM)
	b = append(b, "x,y"...)
	for _, c := range m.Columns {
		b = append(append(b, ','), c.Quantity...)
	}
	b = append(b, '\n')
	for i := range m.X {
		b = strconv.AppendInt(b, int64(m.X[i]), 10)
		b = strconv.AppendInt(append(b, ','), int64(m.Y[i]), 10)
		for c := range m.Columns {
			col := &m.Columns[c]
			b = append(b, ',')
			if k := col.K[i]; k != simfab.NoValue {
				b = appendDecimal(b, k, col.Decimals, '.')
			}
		}
		b = append(b, '\n')
	}
	return b
}

// appendDecimal writes k·10^−decimals.
func appendDecimal(b []byte, k int32, decimals int, point byte) []byte {
	n := uint32(k)
	if k < 0 {
		b, n = append(b, '-'), uint32(-k)
	}
	var text [12]byte
	at := len(text)
	for i := 0; n > 0 || i <= decimals; i++ {
		if i == decimals && decimals > 0 {
			at--
			text[at] = point
		}
		at--
		text[at] = byte('0' + n%10)
		n /= 10
	}
	return append(b, text[at:]...)
}

// otherStation writes a format of its own, which the reading profile explains:
// semicolons, decimal commas, columns and rows swapped against ours, millivolts,
// nanoamperes and microwatts, dies in the order the prober stepped them.
const otherStation = "prober-3"

func otherName(m *simfab.Reading) string {
	return fmt.Sprintf("P3_%s_%s.txt", m.Wafer.Name, m.MeasuredAt.Format("20060102-1504"))
}

func appendOtherReading(b []byte, m *simfab.Reading) []byte {
	w := m.Wafer
	b = fmt.Appendf(b, "PROBE LIST P3\nWAFER;%s\nLOT;%s\nSTARTED;%s\nCURRENT;%g mA\nDIES;%d\n\n",
		w.Name, w.Lot, m.MeasuredAt.Format("2006-01-02 15:04"), m.DriveCurrentMA, len(m.X))
	b = append(b, "ROW;COL;VF (mV);VFL (mV);IR (nA);PO (uW);WLD (nm)\n"...)
	for first := 0; first < len(m.X); {
		last := first
		for last+1 < len(m.X) && m.Y[last+1] == m.Y[first] {
			last++
		}
		for k := first; k <= last; k++ {
			i := k
			if m.Y[first]%2 != 0 { // every other row is stepped backwards
				i = first + last - k
			}
			b = appendOtherRow(b, m, i)
		}
		first = last + 1
	}
	return b
}

// appendOtherRow writes volts with three decimals as whole millivolts,
// microamperes with three as whole nanoamperes, and milliwatts with two as tens
// of microwatts.
func appendOtherRow(b []byte, m *simfab.Reading, i int) []byte {
	b = strconv.AppendInt(b, int64(m.Y[i]), 10)
	b = strconv.AppendInt(append(b, ';'), int64(m.X[i]), 10)
	for c := range m.Columns {
		k := m.Columns[c].K[i]
		b = append(b, ';')
		switch {
		case k == simfab.NoValue:
			b = append(b, "---"...)
		case c < 3:
			b = strconv.AppendInt(b, int64(k), 10)
		case c == 3:
			b = append(strconv.AppendInt(b, int64(k), 10), '0')
		default:
			b = appendDecimal(b, k, m.Columns[c].Decimals, ',')
		}
	}
	return append(b, '\n')
}
