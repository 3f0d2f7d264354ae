package binning

import (
	"math"

	"epitally/analytics/wafermap"
)

// joinRegion joins in what a region says of dies from..to. A die that lacks a
// reading is already untested by that quantity's own verdict.
func (b *Binner) joinRegion(r *regionPlan, from, to int) {
	n := to - from
	x, y := b.block.x[:n], b.block.y[:n]
	b.columns[r.columns[0]].readings(x, from)
	b.columns[r.columns[1]].readings(y, from)
	if r.convert {
		toUV(x, y)
	}
	sum, worst := b.block.sum[:n], b.block.worst[:n]
	for i := range x {
		v := r.verdicts[r.raster.at(r.Region, point{x[i], y[i]})+2]
		sum[i] += v
		worst[i] = max(worst[i], v)
	}
}

// toUV turns CIE 1931 x, y into CIE 1976 u′, v′ in place.
func toUV(x, y []float64) {
	y = y[:len(x)]
	for i, cx := range x {
		d := 1 / (-2*cx + 12*y[i] + 3)
		x[i], y[i] = 4*cx*d, 9*y[i]*d
	}
}

// readings writes the values of dies from from on to dst, NaN for no value.
func (c *column) readings(dst []float64, from int) {
	switch {
	case c.k16 != nil:
		base, scale := c.table.scale()
		for i, k := range c.k16[from : from+len(dst)] {
			dst[i] = (base + float64(k)) / scale
			if k == wafermap.Missing16 {
				dst[i] = math.NaN()
			}
		}
	case c.lo != nil:
		base, scale := c.table.scale()
		lo, hi := c.lo[from:from+len(dst)], c.hi[from:from+len(dst)]
		for i, l := range lo {
			k := int16(pair(l, hi[i]))
			dst[i] = (base + float64(k)) / scale
			if k == wafermap.Missing16 {
				dst[i] = math.NaN()
			}
		}
	default:
		for i := range dst {
			dst[i] = c.wide.plane.Value(from + i)
		}
	}
}

// scale gives a table's values as (base + k) / divisor.
func (t *table) scale() (base, divisor float64) {
	return float64(t.base), math.Pow10(-t.exponent)
}
