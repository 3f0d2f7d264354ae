package uniformity

import (
	"math"
	"math/bits"
	"sort"

	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// counted is a sample of scaled integers as counts per integer, from which every
// statistic follows exactly. Integers here are the plane's base + k; the value
// is integer·10^exponent.
type counted struct {
	low      int64    // integer of before[0]
	before   []uint32 // before[i] = values below low + i; its last entry is n
	exponent int
	n        int
	mean, sd float64
}

// newCounted turns counts (per integer from low) into a counted sample. The
// slice must have one spare entry at its end, 0; it is reused for the sums.
func newCounted(counts []uint32, low int64, exponent int) counted {
	c := counted{low: low, exponent: exponent}
	var n, sum, squares uint64
	for i, v := range counts {
		counts[i] = uint32(n)
		n += uint64(v)
		sum += uint64(i) * uint64(v)
		squares += uint64(i) * uint64(i) * uint64(v)
	}
	c.before, c.n = counts, int(n)
	c.mean, c.sd = c.moments(n, sum, squares)
	return c
}

// moments gives mean and standard deviation from Σi and Σi² over n values low + i.
// With i < 2^20 and n ≤ 4 million nothing overflows, and n·Σi² − (Σi)² is exact
// in 128 bits.
func (c *counted) moments(n, sum, squares uint64) (mean, sd float64) {
	if n == 0 {
		return math.NaN(), math.NaN()
	}
	switch {
	case max(c.low, -c.low) >= 1<<31: // n·low may not fit: the last bits of base + k no longer matter
		mean = scaledFloat(float64(c.low)+float64(sum)/float64(n), c.exponent)
	case c.exponent < 0:
		mean = float64(int64(n)*c.low+int64(sum)) / (float64(n) * wafermap.Pow10(-c.exponent))
	default:
		mean = float64(int64(n)*c.low+int64(sum)) / float64(n) * wafermap.Pow10(c.exponent)
	}
	if n < 2 {
		return mean, math.NaN()
	}
	h1, l1 := bits.Mul64(n, squares)
	h2, l2 := bits.Mul64(sum, sum)
	l, borrow := bits.Sub64(l1, l2, 0)
	h, _ := bits.Sub64(h1, h2, borrow)
	variance := (float64(h)*(1<<64) + float64(l)) / (float64(n) * float64(n-1))
	return mean, scaledFloat(math.Sqrt(variance), c.exponent)
}

// at is the integer of the given rank, from 0.
func (c *counted) at(rank int) int64 {
	i := sort.Search(len(c.before), func(i int) bool { return int(c.before[i]) > rank })
	return c.low + int64(i) - 1
}

// below counts the values under integer k.
func (c *counted) below(k int64) int {
	i := k - c.low
	switch {
	case i <= 0:
		return 0
	case i >= int64(len(c.before)):
		return c.n
	}
	return int(c.before[i])
}

// mad is the median of |value − median|. Deviations are counted in half
// integers, since the median of an even count may lie between two.
func (c *counted) mad() float64 {
	if c.n == 0 {
		return math.NaN()
	}
	twiceMedian := c.at((c.n-1)/2) + c.at(c.n/2)
	within := func(d int64) int { // values with |2k − twiceMedian| ≤ d
		return c.below(floorDiv(twiceMedian+d, 2)+1) - c.below(-floorDiv(d-twiceMedian, 2))
	}
	widest := 2 * int(len(c.before))
	at := func(rank int) int64 {
		return int64(sort.Search(widest, func(d int) bool { return within(int64(d)) > rank }))
	}
	quarters := at((c.n-1)/2) + at(c.n/2)
	return scaledFloat(float64(quarters)/4, c.exponent)
}

// between counts the values in the closed interval [low, high]. A border that is
// an integer to within 1e-6 of the resolution is that integer: 455.00 − 1.00
// must not miss 454.00 by the last bit of a float.
func (c *counted) between(low, high float64) int {
	from, to := c.toInteger(low), c.toInteger(high)
	return c.below(clampInt(math.Floor(to+1e-6))+1) - c.below(clampInt(math.Ceil(from-1e-6)))
}

func (c *counted) toInteger(v float64) float64 { return scaledFloat(v, -c.exponent) }

func clampInt(v float64) int64 { return int64(max(-1<<53, min(1<<53, v))) }

// summary gives all that follows from the values alone.
func (c *counted) summary(q quantity.Quantity, target float64) Summary {
	s := Summary{N: c.n, Mean: c.mean, SD: c.sd}
	fillQuantiles(&s, func(rank int) float64 { return wafermap.Scaled(c.at(rank), c.exponent) })
	s.RobustSD = madFactor * c.mad()
	fillShares(&s, target, c.between)
	if q.Low < q.High {
		s.Implausible = c.n - c.between(q.Low, q.High)
	}
	s.Histogram = c.histogram()
	return s
}
