package uniformity

import (
	"math"
	"sync"

	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// radialRings is how many rings of equal width the wafer's radius is cut into.
const radialRings = 20

// noRing stands for dies whose centre lies off the wafer.
const noRing = radialRings

// Frame is what the summaries of every plane on one grid under one layout share:
// which dies count, the ring of each, its cell on the small map. It does not
// change after NewFrame and may be used by several goroutines at once.
type Frame struct {
	include     []bool
	excluded    int
	rings       []uint8 // ring per die; nil without a layout
	ringWidthMM float64
	picture     picture
	scratch     sync.Pool // *scratch
}

// scratch is what one summary needs for the time of its making.
type scratch struct {
	counts []uint32
	floats []float64
	keys   []uint64
}

// NewFrame prepares summaries over the grid. Dies count when they lie Inside
// the layout; all count when the layout is nil or Assumed. The slices of g are
// read now and not kept.
func NewFrame(g *wafermap.Grid, l *wafermap.Layout) *Frame {
	f := &Frame{include: make([]bool, g.Len())}
	f.scratch.New = func() any { return new(scratch) }
	place := l
	if l == nil || l.Validate() != nil {
		assumed := wafermap.AssumeLayout(g, nil)
		place, l = &assumed, nil
	}
	if l != nil {
		f.rings = make([]uint8, g.Len())
		f.ringWidthMM = l.WaferDiameterMM / 2 / radialRings
	}
	all := l == nil || l.Assumed
	for from := 0; from < g.Len(); {
		to := from + 1
		for to < g.Len() && g.Y[to] == g.Y[from] {
			to++
		}
		f.includeRow(g, l, from, to, all)
		if l != nil {
			f.ringRow(g, l, from, to)
		}
		from = to
	}
	f.picture = newPicture(g, place)
	return f
}

// includeRow marks the dies from..to, all of one row, that count.
func (f *Frame) includeRow(g *wafermap.Grid, l *wafermap.Layout, from, to int, all bool) {
	first, last := math.MinInt, math.MaxInt
	if !all {
		first, last = l.Span(int(g.Y[from]))
	}
	for i := from; i < to; i++ {
		in := int(g.X[i]) >= first && int(g.X[i]) <= last
		f.include[i] = in
		if !in {
			f.excluded++
		}
	}
}

// ringRow finds the rings of one row. Neighbours are in the same ring or the
// next, so that squared distances need only be compared with the ring's own.
func (f *Frame) ringRow(g *wafermap.Grid, l *wafermap.Layout, from, to int) {
	_, yMM := l.PositionMM(0, int(g.Y[from]))
	y2, w2 := yMM*yMM, f.ringWidthMM*f.ringWidthMM
	ring := 0
	inner2, outer2 := 0.0, w2
	for i := from; i < to; i++ {
		xMM := (float64(g.X[i]) - l.CentreX) * l.DiePitchXMM
		r2 := xMM*xMM + y2
		for r2 >= outer2 && ring < noRing {
			ring++
			inner2, outer2 = outer2, w2*float64((ring+1)*(ring+1))
		}
		for r2 < inner2 {
			ring--
			inner2, outer2 = w2*float64(ring*ring), inner2
		}
		f.rings[i] = uint8(ring)
	}
}

// Include says which dies count, in the grid's order. Read only.
func (f *Frame) Include() []bool { return f.include }

// Len is the number of dies of the grid.
func (f *Frame) Len() int { return len(f.include) }

// Summarise gives the summary of a plane on the frame's grid over the dies that
// count. Scaled planes are summarised exactly, from counts per integer; target
// is NaN when there is none. A plane of another length, a fault of the program,
// gives a summary without values.
func (f *Frame) Summarise(p *wafermap.Plane, q quantity.Quantity, target float64) Summary {
	sc := f.scratch.Get().(*scratch)
	defer f.scratch.Put(sc)
	var s Summary
	switch c, rings, ok := f.count(p, sc); {
	case p.Len() != f.Len():
		s = summariseFloats(nil, nil, floatFacts{target: target})
	case ok:
		s = c.summary(q, target)
		s.Radial = f.radialCounted(&c, &rings)
	default:
		s = f.summariseWide(p, sc, q, target)
	}
	s.Excluded = f.excluded
	s.Missing = f.Len() - f.excluded - s.N
	return s
}

// ringSums are the sums of one ring, of integers above the sample's lowest.
type ringSums struct{ n, sum, squares uint64 }

// Rings beyond the last are padded to a power of two, so that masking an index
// replaces its bounds check.
type ringTable [32]ringSums

// count counts a scaled plane whose integers span little enough; ok is false for
// the others.
func (f *Frame) count(p *wafermap.Plane, sc *scratch) (c counted, rings ringTable, ok bool) {
	switch {
	case p.Len() != f.Len():
	case p.Encoding == wafermap.Int16:
		low, high := extent(p.K16, wafermap.Missing16)
		counts := sc.cleared(int(high) - int(low) + 2)
		countDies(p.K16, low, f, counts, &rings)
		return newCounted(counts, p.BaseK+int64(low), p.Exponent), rings, true
	case p.Encoding == wafermap.Int32:
		low, high := extent(p.K32, wafermap.Missing32)
		if span := int64(high) - int64(low); span < 1<<20 && span < int64(8*f.Len()+1<<16) {
			counts := sc.cleared(int(span) + 2)
			countDies(p.K32, low, f, counts, &rings)
			return newCounted(counts, p.BaseK+int64(low), p.Exponent), rings, true
		}
	}
	return c, rings, false
}

func (sc *scratch) cleared(n int) []uint32 {
	if cap(sc.counts) < n {
		sc.counts = make([]uint32, n)
	}
	sc.counts = sc.counts[:n]
	clear(sc.counts)
	return sc.counts
}

// extent is the range of the integers that are values; 0, 0 without any.
func extent[K int16 | int32](k []K, missing K) (low, high K) {
	low, high = -(missing + 1), missing
	for _, v := range k {
		// missing is the smallest integer, so that it never raises high.
		high = max(high, v)
		if v != missing {
			low = min(low, v)
		}
	}
	if high == missing {
		return 0, 0
	}
	return low, high
}

// countDies makes the one pass over a plane: counts per integer above low, and
// sums per ring. The values of dies that do not count are not looked at.
func countDies[K int16 | int32](k []K, low K, f *Frame, counts []uint32, rings *ringTable) {
	include := f.include[:len(k)]
	if f.rings == nil {
		for i, v := range k {
			if at := int(v) - int(low); include[i] && at >= 0 { // "no value" lies below low
				counts[at]++
			}
		}
		return
	}
	ring := f.rings[:len(k)]
	for i, v := range k {
		at := int(v) - int(low)
		if !include[i] || at < 0 {
			continue
		}
		counts[at]++
		r := &rings[ring[i]&31]
		r.n++
		r.sum += uint64(at)
		r.squares += uint64(at) * uint64(at)
	}
}

func (f *Frame) radialCounted(c *counted, rings *ringTable) []RadialBin {
	return f.radial(func(ring int) (int, float64, float64) {
		r := rings[ring]
		mean, sd := c.moments(r.n, r.sum, r.squares)
		return int(r.n), mean, sd
	})
}

func (f *Frame) radial(moments func(ring int) (n int, mean, sd float64)) []RadialBin {
	if f.rings == nil {
		return []RadialBin{}
	}
	out := make([]RadialBin, radialRings)
	for i := range out {
		out[i] = RadialBin{InnerMM: float64(i) * f.ringWidthMM, OuterMM: float64(i+1) * f.ringWidthMM}
		out[i].N, out[i].Mean, out[i].SD = moments(i)
	}
	return out
}

// summariseWide is the path of float planes and of integers that span too much
// to be counted.
func (f *Frame) summariseWide(p *wafermap.Plane, sc *scratch, q quantity.Quantity, target float64) Summary {
	v := sc.floats[:0]
	var shift float64
	var sums [radialRings + 1]struct{ n, sum, squares float64 }
	implausible := 0
	for i, in := range f.include {
		if !in {
			continue
		}
		x := p.Value(i)
		if math.IsNaN(x) || math.IsInf(x, 0) {
			continue
		}
		if len(v) == 0 {
			shift = x // near the mean, so that the squares below cancel little
		}
		v = append(v, x)
		if q.Low < q.High && (x < q.Low || x > q.High) {
			implausible++
		}
		if f.rings != nil {
			r := &sums[f.rings[i]]
			d := x - shift
			r.n++
			r.sum += d
			r.squares += d * d
		}
	}
	sc.floats = v
	facts := floatFacts{target: target, resolution: p.Resolution(), slack: 1e-12}
	if p.Encoding == wafermap.Float32 {
		facts.slack = 6e-8 // 2^-24: half a unit in the last place of binary32
	}
	if cap(sc.keys) < 2*len(v) {
		sc.keys = make([]uint64, 0, 2*len(v))
	}
	s := summariseFloats(v, sc.keys, facts)
	s.Implausible = implausible
	s.Radial = f.radial(func(ring int) (int, float64, float64) {
		r := sums[ring]
		mean, sd := math.NaN(), math.NaN()
		if r.n > 0 {
			mean = shift + r.sum/r.n
		}
		if r.n > 1 {
			sd = math.Sqrt(max(0, r.squares-r.sum*r.sum/r.n) / (r.n - 1))
		}
		return int(r.n), mean, sd
	})
	return s
}
