package web

import (
	"encoding/csv"
	"io"
	"math"
	"strconv"
)

// cell is a value as a person and as a program reads it.
type cell struct{ shown, raw string }

func textCell(s string) cell { return cell{s, s} }
func countCell(n int) cell   { return cell{Count(n), strconv.Itoa(n)} }

// numberCell has no raw text where there is no value.
func numberCell(v float64, decimals int) cell {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return cell{noValue, ""}
	}
	return cell{Number(v, decimals), strconv.FormatFloat(v, 'f', decimals, 64)}
}

// shareCell is raw a ratio between 0 and 1.
func shareCell(part, whole int) cell {
	if whole == 0 {
		return cell{noValue, ""}
	}
	return cell{Percent(part, whole), strconv.FormatFloat(float64(part)/float64(whole), 'f', 6, 64)}
}

func (t *Table) add(cells ...cell) {
	shown, raw := make([]string, len(cells)), make([]string, len(cells))
	for i, c := range cells {
		shown[i], raw[i] = c.shown, c.raw
	}
	t.Rows, t.Raw = append(t.Rows, shown), append(t.Raw, raw)
}

// WriteCSV writes the table as CSV (RFC 4180) with its head.
func (t *Table) WriteCSV(w io.Writer) error {
	out := csv.NewWriter(w)
	if err := out.Write(t.Head); err != nil {
		return err
	}
	return out.WriteAll(t.Raw)
}
