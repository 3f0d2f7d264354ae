package uniformity

import (
	"math"
	"sort"

	"epitally/analytics/wafermap"
)

// maxCells bounds a histogram. Cell widths step by at most 2.5, so that a
// histogram that its resolution does not coarsen has 24 to 61 cells over the
// 0.1st to 99.9th percentile.
const maxCells = 60

// niceWidth is the smallest of 1, 2, 5 × 10ⁿ that is at least w, as mantissa and
// power of ten.
func niceWidth(w float64) (mantissa int64, power int) {
	power = int(math.Floor(math.Log10(w)))
	for ; ; power++ {
		for _, m := range [...]int64{1, 2, 5} {
			if wafermap.Scaled(m, power) >= w*(1-1e-12) {
				return m, power
			}
		}
	}
}

func emptyHistogram() Histogram {
	return Histogram{Low: math.NaN(), Width: math.NaN(), Counts: []int{}}
}

// sortedHistogram is the histogram of ascending finite values. resolution 0
// means that the values are not on a decimal lattice.
func sortedHistogram(v []float64, resolution float64) Histogram {
	if len(v) == 0 {
		return emptyHistogram()
	}
	low, high := Quantile(v, 0.001), Quantile(v, 0.999)
	least := max(resolution, 1e-12*max(math.Abs(low), math.Abs(high)), 1e-300)
	width := (high - low) / maxCells
	if !(width >= least) {
		width = least
		if high == low && resolution == 0 && low != 0 {
			width = math.Abs(low) / 1000
		}
	}
	if width > 1e307 { // cells would end beyond the largest float64
		return emptyHistogram()
	}
	mantissa, power := niceWidth(width)
	width = wafermap.Scaled(mantissa, power)
	first := math.Floor(low / width)
	edge := func(i int) float64 { // mantissa·(first + i)·10^power as one decimal
		return scaledFloat(float64(mantissa)*(first+float64(i)), power)
	}
	cells := max(1, min(maxCells+2, int(math.Floor(high/width)-first)+1))
	h := Histogram{Low: edge(0), Width: width, Counts: make([]int, cells)}
	from := sort.SearchFloat64s(v, h.Low)
	h.Below = from
	for i := range h.Counts {
		end := sort.SearchFloat64s(v, edge(i+1))
		if i == cells-1 {
			end = sort.Search(len(v), func(j int) bool { return v[j] > edge(cells) })
		}
		end = max(end, from)
		h.Counts[i], from = end-from, end
	}
	h.Above = len(v) - from
	return h
}

func scaledFloat(k float64, power int) float64 {
	if power < 0 {
		return k / wafermap.Pow10(-power)
	}
	return k * wafermap.Pow10(power)
}

// histogram is the histogram of counted values: cells are a whole number of
// resolutions wide and start on a multiple of their width.
func (c *counted) histogram() Histogram {
	if c.n == 0 {
		return emptyHistogram()
	}
	rank := func(p float64) int64 { return c.at(int(math.Round(float64(c.n-1) * p))) }
	low, high := rank(0.001), rank(0.999)
	mantissa, power := niceWidth(max(1, float64(high-low)/maxCells))
	width := mantissa * int64(wafermap.Pow10(power))
	first := floorDiv(low, width)
	cells := int(floorDiv(high, width)-first) + 1
	h := Histogram{
		Low:    wafermap.Scaled(first*width, c.exponent),
		Width:  wafermap.Scaled(mantissa, power+c.exponent),
		Counts: make([]int, cells),
		Below:  c.below(first * width),
	}
	from := h.Below
	for i := range h.Counts {
		edge := (first + int64(i) + 1) * width
		if i == cells-1 {
			edge++ // the last cell is closed
		}
		end := c.below(edge)
		h.Counts[i], from = end-from, end
	}
	h.Above = c.n - from
	return h
}

func floorDiv(a, b int64) int64 {
	q := a / b
	if a%b < 0 {
		q--
	}
	return q
}
