package web

import (
	"math"
	"strconv"
	"strings"
)

// Characters that numbers are set with: a real minus, and the narrow no-break
// space that stands before a unit.
const (
	minusSign = "−"
	thinSpace = "\u202f"
	noValue   = "–"
)

// Number writes v with the given decimals, thousands separated, with a real
// minus; "–" for NaN and infinities. A value that rounds to zero has no sign.
func Number(v float64, decimals int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return noValue
	}
	s := strconv.FormatFloat(math.Abs(v), 'f', decimals, 64)
	whole, part, _ := strings.Cut(s, ".")
	s = group(whole)
	if part != "" {
		s += "." + part
	}
	if v < 0 && strings.Trim(s, "0.,") != "" {
		return minusSign + s
	}
	return s
}

func group(digits string) string {
	var b strings.Builder
	for i, d := range digits {
		if i > 0 && (len(digits)-i)%3 == 0 {
			b.WriteByte(',')
		}
		b.WriteRune(d)
	}
	return b.String()
}

// Signed is Number with a plus before positive values.
func Signed(v float64, decimals int) string {
	s := Number(v, decimals)
	if v > 0 && strings.Trim(s, "0.,") != "" {
		return "+" + s
	}
	return s
}

// Count writes a whole number with its thousands separated.
func Count[T int | int64](n T) string { return Number(float64(n), 0) }

// With writes v and its unit, a thin space between; a ratio has no unit.
func With(v float64, decimals int, unit string) string {
	s := Number(v, decimals)
	if unit == "" || s == noValue {
		return s
	}
	return s + thinSpace + unit
}

// SignedWith is With with a plus before positive values.
func SignedWith(v float64, decimals int, unit string) string {
	s := With(v, decimals, unit)
	if strings.HasPrefix(Signed(v, decimals), "+") {
		return "+" + s
	}
	return s
}

// Percent writes part of whole in whole per cent, as few digits as do not lie:
// one decimal below 10 % and above 99 %, and never 0 % or 100 % unless it is
// so. "–" when whole is 0.
func Percent(part, whole int) string {
	if whole == 0 {
		return noValue
	}
	return PercentOf(float64(part) / float64(whole))
}

// PercentOf writes a share between 0 and 1 as Percent does.
func PercentOf(share float64) string {
	p := 100 * share
	switch {
	case math.IsNaN(p):
		return noValue
	case p > 0 && p < 0.05:
		return "under 0.1" + thinSpace + "%"
	case p < 100 && p >= 99.95:
		return "over 99.9" + thinSpace + "%"
	case p == 0 || p == 100 || (p >= 9.95 && p < 99):
		return Number(p, 0) + thinSpace + "%"
	default:
		return Number(p, 1) + thinSpace + "%"
	}
}

// Decimals is how many decimal places show a resolution: 2 for 0.01; 3 when
// the resolution is unknown.
func Decimals(resolution float64) int {
	if !(resolution > 0) {
		return 3
	}
	return min(max(int(math.Ceil(-math.Log10(resolution)-1e-9)), 0), 9)
}

// Bytes writes a size in bytes, kB, MB or GB (powers of 1000).
func Bytes(n int64) string {
	v, unit := float64(n), "bytes"
	for _, u := range []string{"kB", "MB", "GB"} {
		if v < 1000 {
			break
		}
		v, unit = v/1000, u
	}
	if unit == "bytes" || v >= 100 {
		return With(v, 0, unit)
	}
	return With(v, 1, unit)
}
