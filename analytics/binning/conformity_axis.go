package binning

import (
	"math"

	"epitally/analytics/wafermap"
)

// axisChance works out in which cells of an axis a die may truly be. A plane of
// scaled integers has few different values, whose cells are worked out once.
type axisChance struct {
	column int
	edges  []float64
	stride int
	u      float64 // 0 = exact

	plane *wafermap.Plane
	low   int32   // integer of the first list
	first []int32 // per integer from low on, where its cells begin; one more at the end
	cells []cellChance
	own   []cellChance // of a die whose plane has no lists
}

// mostValues is how many different integers lists are made for.
const mostValues = 1 << 17

func (a *axisChance) take(planes []*wafermap.Plane) {
	a.plane, a.first, a.cells = planes[a.column], nil, nil
	low, high := int32(math.MaxInt32), int32(math.MinInt32)
	switch a.plane.Encoding {
	case wafermap.Int16:
		for _, k := range a.plane.K16 {
			if k != wafermap.Missing16 {
				low, high = min(low, int32(k)), max(high, int32(k))
			}
		}
	case wafermap.Int32:
		for _, k := range a.plane.K32 {
			if k != wafermap.Missing32 {
				low, high = min(low, k), max(high, k)
			}
		}
	default:
		return
	}
	if int64(high)-int64(low) >= mostValues || high < low {
		return
	}
	a.low = low
	for k := low; k <= high; k++ {
		a.first = append(a.first, int32(len(a.cells)))
		a.cells = a.list(a.cells, wafermap.Scaled(a.plane.BaseK+int64(k), a.plane.Exponent))
	}
	a.first = append(a.first, int32(len(a.cells)))
}

func (a *axisChance) at(i int) []cellChance {
	var k int32
	switch {
	case a.first == nil:
		a.own = a.list(a.own[:0], a.plane.Value(i))
		return a.own
	case a.plane.Encoding == wafermap.Int16:
		if a.plane.K16[i] == wafermap.Missing16 {
			return nil
		}
		k = int32(a.plane.K16[i])
	default:
		if k = a.plane.K32[i]; k == wafermap.Missing32 {
			return nil
		}
	}
	return a.cells[a.first[k-a.low]:a.first[k-a.low+1]]
}

// list appends the cells that a reading may truly be in.
func (a *axisChance) list(to []cellChance, v float64) []cellChance {
	last := len(a.edges) - 2
	for i := range a.edges[:len(a.edges)-1] {
		low, high := a.edges[i], a.edges[i+1]
		switch {
		case a.u == 0:
			if v >= low && (v < high || i == last && v == high) {
				to = append(to, cellChance{i * a.stride, 1})
			}
		case v >= low+farU*a.u && v <= high-farU*a.u:
			to = append(to, cellChance{i * a.stride, 1})
		case v > low-farU*a.u && v < high+farU*a.u:
			if p := phi((high-v)/a.u) - phi((low-v)/a.u); p > negligible {
				to = append(to, cellChance{i * a.stride, p})
			}
		}
	}
	return to
}
