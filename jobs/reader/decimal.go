package reader

import (
	"math"
	"strconv"
	"unsafe"
)

// decimal is the number m·10^exp (negative when neg), read from text without
// rounding. When the digits do not fit m, long is true and m is not valid.
type decimal struct {
	m    uint64
	exp  int
	neg  bool
	long bool
}

// maxDigits is how many decimal digits always fit a uint64.
const maxDigits = 19

// parseDecimal reads [+-]digits[.digits][e[+-]digits], with point as the decimal
// point. It reports false for any other text.
func parseDecimal(text []byte, point byte) (d decimal, ok bool) {
	i := 0
	if i < len(text) && (text[i] == '-' || text[i] == '+') {
		d.neg = text[i] == '-'
		i++
	}
	digits, significant := 0, 0
	seenPoint := false
	for ; i < len(text); i++ {
		c := text[i]
		if c == point && !seenPoint {
			seenPoint = true
			continue
		}
		if c-'0' > 9 {
			break
		}
		digits++
		if significant > 0 || c != '0' {
			significant++
		}
		d.m = d.m*10 + uint64(c-'0')
		if seenPoint {
			d.exp--
		}
	}
	d.long = significant > maxDigits
	if digits == 0 {
		return decimal{}, false
	}
	if i == len(text) {
		return d, true
	}
	if text[i]|0x20 != 'e' {
		return decimal{}, false
	}
	e, ok := parseExponent(text[i+1:])
	d.exp += e
	return d, ok
}

// parseExponent reads [+-]digits, at most 4 of them.
func parseExponent(text []byte) (e int, ok bool) {
	neg := len(text) > 0 && text[0] == '-'
	if len(text) > 0 && (text[0] == '-' || text[0] == '+') {
		text = text[1:]
	}
	if len(text) == 0 || len(text) > 4 {
		return 0, false
	}
	for _, c := range text {
		if c-'0' > 9 {
			return 0, false
		}
		e = e*10 + int(c-'0')
	}
	if neg {
		e = -e
	}
	return e, true
}

// parseFloat is the float64 nearest to text that parseDecimal accepted; infinite
// when it is out of range. point is '.', or it is replaced in text by one.
func parseFloat(text []byte, point byte) float64 {
	if point != '.' {
		for i, c := range text {
			if c == point {
				text[i] = '.'
			}
		}
	}
	// The string shares the bytes of the field: ParseFloat keeps only a copy, in
	// its error, and a column of 17-digit numbers must not allocate per row.
	v, err := strconv.ParseFloat(unsafe.String(unsafe.SliceData(text), len(text)), 64)
	if err != nil && !math.IsInf(v, 0) {
		return math.NaN()
	}
	return v
}

// mulPow10 is m·10^n, and whether it stays within 32 bits signed.
func mulPow10(m uint64, n int) (uint64, bool) {
	if m == 0 {
		return 0, true
	}
	for ; n > 0; n-- {
		if m > math.MaxInt32 {
			return 0, false
		}
		m *= 10
	}
	return m, m <= math.MaxInt32
}
