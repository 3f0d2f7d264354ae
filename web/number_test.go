package web

import (
	"math"
	"testing"
)

func TestNumber(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		v        float64
		decimals int
		want     string
	}{
		{14516, 0, "14,516"}, {-0.84, 1, "−0.8"}, {-0.04, 1, "0.0"}, {0, 0, "0"}, {999999.5, 0, "1,000,000"},
		{math.NaN(), 2, "–"}, {math.Inf(1), 2, "–"}, {1234.567, 2, "1,234.57"}, {100, 0, "100"}, {-1000, 0, "−1,000"},
	} {
		if got := Number(c.v, c.decimals); got != c.want {
			t.Errorf("Number(%g, %d) = %q, want %q", c.v, c.decimals, got, c.want)
		}
	}
	if got := Signed(0.84, 1); got != "+0.8" {
		t.Errorf("Signed = %q", got)
	}
}

func TestPercentNeverRoundsToNoneOrAll(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		part, whole int
		want        string
	}{
		{0, 10, "0\u202f%"}, {10, 10, "100\u202f%"}, {1, 10000, "under 0.1\u202f%"}, {9999, 10000, "over 99.9\u202f%"},
		{71, 100, "71\u202f%"}, {25, 1000, "2.5\u202f%"}, {995, 1000, "99.5\u202f%"}, {0, 0, "–"},
	} {
		if got := Percent(c.part, c.whole); got != c.want {
			t.Errorf("Percent(%d, %d) = %q, want %q", c.part, c.whole, got, c.want)
		}
	}
}

func TestDecimals(t *testing.T) {
	t.Parallel()
	for r, want := range map[float64]int{0.01: 2, 0.001: 3, 1: 0, 10: 0, 0: 3, 0.05: 2} {
		if got := Decimals(r); got != want {
			t.Errorf("Decimals(%g) = %d, want %d", r, got, want)
		}
	}
}

func TestBytes(t *testing.T) {
	t.Parallel()
	for n, want := range map[int64]string{0: "0\u202fbytes", 1500: "1.5\u202fkB", 123_400_000: "123\u202fMB"} {
		if got := Bytes(n); got != want {
			t.Errorf("Bytes(%d) = %q, want %q", n, got, want)
		}
	}
}
