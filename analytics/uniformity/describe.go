package uniformity

import (
	"math"
	"slices"
	"sort"
)

// madFactor turns the median absolute deviation of a normal sample into its
// standard deviation: 1/Φ⁻¹(3/4), known by its rounding 1.4826 (Rousseeuw and
// Croux, J. Am. Stat. Assoc. 88 (1993) 1273).
const madFactor = 1.482602218505602

// Describe summarises any values; NaN and infinities count as missing. target is
// NaN when there is none. Excluded and Implausible are 0 and Radial is empty.
// The values are not changed.
//
// The mean is a compensated sum corrected by a second pass, the standard
// deviation (divisor n − 1) the corrected two-pass form of Chan, Golub and
// LeVeque (Am. Stat. 37 (1983) 242).
func Describe(values []float64, target float64) Summary {
	finite := make([]float64, 0, len(values))
	for _, v := range values {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			finite = append(finite, v)
		}
	}
	s := summariseFloats(finite, make([]uint64, 0, 2*len(finite)), floatFacts{target: target, slack: 1e-12})
	s.Missing = len(values) - len(finite)
	s.Radial = []RadialBin{}
	return s
}

// floatFacts is what a float sample's summary needs besides its values.
type floatFacts struct {
	target     float64
	resolution float64 // 0 = not on a decimal lattice
	slack      float64 // relative error of a decimal held in the values' width: a value written on a border is within
}

// summariseFloats fills everything that follows from the values alone. It sorts
// v, which is finite throughout; keys is space for the sort.
func summariseFloats(v []float64, keys []uint64, f floatFacts) Summary {
	s := Summary{N: len(v)}
	s.Mean, s.SD = meanSD(v)
	sortFloats(v, keys)
	at := func(rank int) float64 { return v[rank] }
	fillQuantiles(&s, at)
	s.RobustSD = madFactor * sortedMAD(v, s.Median)
	fillShares(&s, f.target, func(low, high float64) int {
		slack := f.slack * max(math.Abs(low), math.Abs(high))
		from := sort.SearchFloat64s(v, low-slack)
		return sort.Search(len(v)-from, func(i int) bool { return v[from+i] > high+slack })
	})
	s.Histogram = sortedHistogram(v, f.resolution)
	return s
}

// meanSD gives NaN for what n values do not define.
func meanSD(v []float64) (mean, sd float64) {
	if len(v) == 0 {
		return math.NaN(), math.NaN()
	}
	n := float64(len(v))
	mean = compensatedSum(v, 0) / n
	mean += compensatedSum(v, mean) / n
	if len(v) < 2 {
		return mean, math.NaN()
	}
	var sum, squares float64
	for _, x := range v {
		d := x - mean
		sum += d
		squares += d * d
	}
	return mean, math.Sqrt(max(0, squares-sum*sum/n) / (n - 1))
}

// compensatedSum is Neumaier's sum of v[i] − shift (Z. angew. Math. Mech. 54
// (1974) 39).
func compensatedSum(v []float64, shift float64) float64 {
	var sum, lost float64
	for _, x := range v {
		x -= shift
		t := sum + x
		if math.Abs(sum) >= math.Abs(x) {
			lost += (sum - t) + x
		} else {
			lost += (x - t) + sum
		}
		sum = t
	}
	return sum + lost
}

// fillQuantiles takes the order statistics of s.N values from at (rank from 0).
func fillQuantiles(s *Summary, at func(rank int) float64) {
	s.Min, s.Max = math.NaN(), math.NaN()
	if s.N > 0 {
		s.Min, s.Max = at(0), at(s.N-1)
	}
	for _, q := range []struct {
		to *float64
		p  float64
	}{{&s.Q01, 0.01}, {&s.Q05, 0.05}, {&s.Q25, 0.25}, {&s.Median, 0.5}, {&s.Q75, 0.75}, {&s.Q95, 0.95}, {&s.Q99, 0.99}} {
		*q.to = quantile(s.N, q.p, at)
	}
}

// Quantile is the p-quantile of ascending values by Hyndman and Fan's type 7
// (Am. Stat. 50 (1996) 361): at the fractional rank (n − 1)·p counted from 0,
// between its neighbours linearly. NaN without values or for p outside [0, 1].
func Quantile(ascending []float64, p float64) float64 {
	return quantile(len(ascending), p, func(rank int) float64 { return ascending[rank] })
}

func quantile(n int, p float64, at func(rank int) float64) float64 {
	if n == 0 || !(p >= 0 && p <= 1) {
		return math.NaN()
	}
	h := float64(n-1) * p
	rank := int(h)
	low := at(rank)
	if rank+1 >= n || h == float64(rank) {
		return low
	}
	return low + (h-float64(rank))*(at(rank+1)-low)
}

// sortedMAD is the median of |v − median| of ascending v, found by walking
// outward from the median.
func sortedMAD(v []float64, median float64) float64 {
	if len(v) == 0 {
		return math.NaN()
	}
	right := sort.SearchFloat64s(v, median)
	left := right - 1
	var previous, d float64
	for range len(v)/2 + 1 {
		previous = d
		if right >= len(v) || (left >= 0 && median-v[left] <= v[right]-median) {
			d = median - v[left]
			left--
		} else {
			d = v[right] - median
			right++
		}
	}
	if len(v)%2 == 0 {
		return (previous + d) / 2
	}
	return d
}

// fillShares sets Target and the shares near it; within counts the values in a
// closed interval.
func fillShares(s *Summary, target float64, within func(low, high float64) int) {
	s.Target = target
	for _, w := range []struct {
		to    *float64
		width float64
	}{{&s.Within1, 1}, {&s.Within2, 2}, {&s.Within5, 5}} {
		*w.to = math.NaN()
		if s.N > 0 && !math.IsNaN(target) {
			*w.to = float64(within(target-w.width, target+w.width)) / float64(s.N)
		}
	}
}

// sortFloats sorts finite values. From a few hundred on, a radix sort over the
// digits that differ is several times faster than comparing.
func sortFloats(v []float64, keys []uint64) {
	if len(v) < 512 {
		slices.Sort(v)
		return
	}
	const bits, passes = 11, 6
	keys = slices.Grow(keys[:0], 2*len(v))[:2*len(v)]
	from, to := keys[:len(v)], keys[len(v):]
	var counts [passes][1 << bits]uint32
	for i, x := range v {
		k := math.Float64bits(x)
		k ^= uint64(int64(k)>>63) | 1<<63 // ascending as unsigned integers
		from[i] = k
		for p := range counts {
			counts[p][k>>(bits*p)&(1<<bits-1)]++
		}
	}
	for p := range counts {
		c := &counts[p]
		shift := bits * p
		if c[from[0]>>shift&(1<<bits-1)] == uint32(len(v)) {
			continue // every value has the same digit
		}
		var sum uint32
		for d, n := range c {
			c[d], sum = sum, sum+n
		}
		for _, k := range from {
			d := k >> shift & (1<<bits - 1)
			to[c[d]] = k
			c[d]++
		}
		from, to = to, from
	}
	for i, k := range from {
		v[i] = math.Float64frombits(k ^ (uint64(int64(^k)>>63) | 1<<63))
	}
}

// Lag1Autocorrelation is Σ(xᵢ − m)(xᵢ₊₁ − m) / Σ(xᵢ − m)² with m the mean of all
// values (NIST StRD's definition); NaN for fewer than two values, values that
// are all alike, and values that are not all finite.
func Lag1Autocorrelation(v []float64) float64 {
	mean, _ := meanSD(v)
	var cross, squares float64
	for i, x := range v {
		d := x - mean
		squares += d * d
		if i > 0 {
			cross += d * (v[i-1] - mean)
		}
	}
	if len(v) < 2 || squares == 0 {
		return math.NaN()
	}
	return cross / squares
}
