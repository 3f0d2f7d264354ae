package binning

import (
	"math"
	"math/bits"
	"sort"

	"epitally/analytics/wafermap"
)

// maxTables bounds the tables a Binner keeps per quantity. Wafers of one product
// share a base as a rule (see wafermap.PackScaled).
const maxTables = 4

// Binner bins wafers under one spec. It keeps the tables it makes for the bases
// and exponents it meets, and is not for concurrent use.
type Binner struct {
	spec    *Spec
	tables  [][]*table // per quantity
	turn    int        // which table gives way next
	columns []column   // of the call at work
	block   block
	odd     []int // of countThree
}

// NewBinner makes a Binner.
func (s *Spec) NewBinner() *Binner {
	return &Binner{spec: s, tables: make([][]*table, len(s.plans)), columns: make([]column, len(s.plans))}
}

// Lanes is a plane of scaled 16-bit integers as it is stored: the low bytes of
// all dies, then the high bytes. Both nil means that the measurement does not
// have the quantity, unless Plane holds it in another encoding.
type Lanes struct {
	BaseK    int64
	Exponent int
	Lo, Hi   []byte
	Plane    *wafermap.Plane
}

// table holds the verdict of every int16 of one base and exponent, indexed by
// the integer's bits.
type table struct {
	base     int64
	exponent int
	verdicts [1 << 16]uint32
	masks    *[1 << 16]uint64 // nil when no rule term spans quantities
}

// Bin is Spec.Bin.
func (b *Binner) Bin(dst []uint16, counts []int, planes []*wafermap.Plane, include []bool) error {
	if len(planes) != len(b.columns) {
		return invalid("specification %s: %d planes for %d quantities", b.spec.Name, len(planes), len(b.columns))
	}
	for i, p := range planes {
		b.columns[i] = b.planeColumn(i, p)
	}
	return b.run(dst, counts, include)
}

// BinLanes is Bin on planes as they are stored, without putting their bytes
// together first.
func (b *Binner) BinLanes(dst []uint16, counts []int, lanes []Lanes, include []bool) error {
	if len(lanes) != len(b.columns) {
		return invalid("specification %s: %d planes for %d quantities", b.spec.Name, len(lanes), len(b.columns))
	}
	for i, l := range lanes {
		switch {
		case len(l.Lo) != len(l.Hi):
			return invalid("specification %s: %s: %d low bytes for %d high bytes", b.spec.Name, b.spec.plans[i].quantity, len(l.Lo), len(l.Hi))
		case l.Lo == nil:
			b.columns[i] = b.planeColumn(i, l.Plane)
		default:
			b.columns[i] = column{present: true, dies: len(l.Lo), lo: l.Lo, hi: l.Hi, table: b.table(i, l.BaseK, l.Exponent)}
		}
	}
	return b.run(dst, counts, include)
}

// column is where the verdicts of one quantity come from in one call.
type column struct {
	present bool
	dies    int
	table   *table // int16 planes
	k16     []int16
	lo, hi  []byte
	wide    *wideColumn // other planes
}

func (b *Binner) planeColumn(i int, p *wafermap.Plane) column {
	switch {
	case p == nil:
		return column{}
	case p.Encoding == wafermap.Int16:
		return column{present: true, dies: len(p.K16), k16: p.K16, table: b.table(i, p.BaseK, p.Exponent)}
	}
	return column{present: true, dies: p.Len(), wide: newWideColumn(&b.spec.plans[i], p)}
}

// table finds or makes the table of a quantity for a base and exponent.
func (b *Binner) table(i int, base int64, exponent int) *table {
	for _, t := range b.tables[i] {
		if t.base == base && t.exponent == exponent {
			return t
		}
	}
	t := new(table)
	if len(b.tables[i]) < maxTables {
		b.tables[i] = append(b.tables[i], t)
	} else {
		b.turn = (b.turn + 1) % maxTables
		t = b.tables[i][b.turn]
	}
	t.fill(&b.spec.plans[i], base, exponent, b.spec.missing)
	return t
}

// fill writes the verdicts region by region.
func (t *table) fill(p *plan, base int64, exponent int, missing uint32) {
	t.base, t.exponent = base, exponent
	if p.masks != nil && t.masks == nil {
		t.masks = new([1 << 16]uint64)
	}
	from := int64(math.MinInt16)
	for region := range p.verdicts {
		to := int64(math.MaxInt16) + 1
		if region < len(p.cuts) {
			to = max(from, min(to, p.cuts[region].threshold(exponent)-base))
		}
		for k := from; k < to; k++ {
			t.verdicts[uint16(k)] = p.verdicts[region]
		}
		if t.masks != nil {
			for k := from; k < to; k++ {
				t.masks[uint16(k)] = p.masks[region]
			}
		}
		from = to
	}
	t.verdicts[1<<15] = missing // Missing16
	if t.masks != nil {
		t.masks[1<<15] = 0
	}
}

// wideColumn finds regions by search, for planes that are not int16.
type wideColumn struct {
	plan       *plan
	plane      *wafermap.Plane
	integers   []int64   // thresholds of Int32 planes
	floats     []float64 // thresholds of float planes
	lastRegion int
}

// newWideColumn sets the thresholds. A float plane's value is the float nearest
// to a decimal, so it is compared with the floats of its own width nearest to the
// edges: a value written like an edge is at that edge.
func newWideColumn(p *plan, plane *wafermap.Plane) *wideColumn {
	w := &wideColumn{plan: p, plane: plane}
	for _, c := range p.cuts {
		switch plane.Encoding {
		case wafermap.Int32:
			w.integers = append(w.integers, c.threshold(plane.Exponent)-plane.BaseK)
		case wafermap.Float32:
			f, _ := c.at.Float32()
			if c.after {
				f = math.Nextafter32(f, float32(math.Inf(1)))
			}
			w.floats = append(w.floats, float64(f))
		default:
			f := nearest(c.at)
			if c.after {
				f = math.Nextafter(f, math.Inf(1))
			}
			w.floats = append(w.floats, f)
		}
	}
	return w
}

// region is that of die i, -1 without a value. A die's neighbour lies in the
// same region as a rule, which is tried first.
func (w *wideColumn) region(i int) int {
	if w.plane.Encoding == wafermap.Int32 {
		k := w.plane.K32[i]
		if k == wafermap.Missing32 {
			return -1
		}
		return w.search(int64(k))
	}
	v := w.plane.Value(i)
	if math.IsNaN(v) {
		return -1
	}
	if r := w.lastRegion; (r == 0 || v >= w.floats[r-1]) && (r == len(w.floats) || v < w.floats[r]) {
		return r
	}
	w.lastRegion = sort.Search(len(w.floats), func(j int) bool { return v < w.floats[j] })
	return w.lastRegion
}

func (w *wideColumn) search(k int64) int {
	t := w.integers
	if r := w.lastRegion; (r == 0 || k >= t[r-1]) && (r == len(t) || k < t[r]) {
		return r
	}
	w.lastRegion = sort.Search(len(t), func(j int) bool { return k < t[j] })
	return w.lastRegion
}

// blockDies is how many dies are worked on at once: their verdicts stay in the
// nearest cache while one quantity after the other is joined in.
const blockDies = 1024

type block struct {
	sum   [blockDies]uint32  // of verdicts
	worst [blockDies]uint32  // largest verdict
	masks [blockDies]uint64  // terms that no quantity has ruled out
	x, y  [blockDies]float64 // readings of a region's quantities
}

// run bins the dies of b.columns.
func (b *Binner) run(dst []uint16, counts []int, include []bool) error {
	defer clear(b.columns) // a Binner that waits in a pool holds no planes
	dies, whole, err := b.check(dst, counts, include)
	if err != nil {
		return err
	}
	clear(counts)
	if dst == nil && b.threeLanes() {
		b.countThree(counts, include, dies)
		return nil
	}
	untested := len(b.spec.cells) - 1
	for from := 0; from < dies; from += blockDies {
		to := min(from+blockDies, dies)
		codes := b.block.sum[:to-from]
		if whole {
			b.join(from, to)
			b.settle(to - from)
		} else {
			for i := range codes {
				codes[i] = uint32(untested)
			}
		}
		if dst != nil {
			out := dst[from:to]
			for i, c := range codes {
				out[i] = uint16(c)
			}
		}
		if include == nil {
			for _, c := range codes {
				counts[c]++
			}
			continue
		}
		in := include[from:to]
		for i, c := range codes {
			if in[i] {
				counts[c]++
			}
		}
	}
	return nil
}

// check finds the number of dies, and whether every quantity is there.
func (b *Binner) check(dst []uint16, counts []int, include []bool) (dies int, whole bool, err error) {
	dies, whole = max(len(dst), len(include)), true
	for i, c := range b.columns {
		if !c.present {
			whole = false
			continue
		}
		if dies = max(dies, c.dies); c.dies != dies {
			return 0, false, invalid("specification %s: %d dies of %s, %d elsewhere", b.spec.Name, c.dies, b.spec.plans[i].quantity, dies)
		}
	}
	for _, c := range b.columns {
		if c.present && c.dies != dies {
			return 0, false, invalid("specification %s: planes of unequal length, %d and %d dies", b.spec.Name, c.dies, dies)
		}
	}
	switch {
	case dst != nil && len(dst) != dies:
		return 0, false, invalid("specification %s: room for %d codes of %d dies", b.spec.Name, len(dst), dies)
	case include != nil && len(include) != dies:
		return 0, false, invalid("specification %s: include lists %d of %d dies", b.spec.Name, len(include), dies)
	case len(counts) != len(b.spec.cells):
		return 0, false, invalid("specification %s: room for %d counts of %d codes", b.spec.Name, len(counts), len(b.spec.cells))
	}
	return dies, whole, nil
}

// join sums and compares the verdicts of dies from..to over all quantities.
func (b *Binner) join(from, to int) {
	n := to - from
	sum, worst := b.block.sum[:n], b.block.worst[:n]
	clear(sum)
	clear(worst)
	for i := range b.columns {
		switch c := &b.columns[i]; {
		case c.k16 != nil:
			joinIntegers(sum, worst, c.k16[from:to], &c.table.verdicts)
		case c.lo != nil:
			joinLanes(sum, worst, c.lo[from:to], c.hi[from:to], &c.table.verdicts)
		default:
			c.wide.join(sum, worst, from, b.spec.missing)
		}
	}
	for i := range b.spec.regionPlans {
		b.joinRegion(&b.spec.regionPlans[i], from, to)
	}
	if len(b.spec.terms) > 0 {
		b.joinTerms(from, to)
	}
}

func joinIntegers(sum, worst []uint32, k []int16, t *[1 << 16]uint32) {
	sum, worst = sum[:len(k)], worst[:len(k)]
	for i, v := range k {
		e := t[uint16(v)]
		sum[i] += e
		worst[i] = max(worst[i], e)
	}
}

func joinLanes(sum, worst []uint32, lo, hi []byte, t *[1 << 16]uint32) {
	sum, worst, hi = sum[:len(lo)], worst[:len(lo)], hi[:len(lo)]
	for i, l := range lo {
		e := t[uint16(hi[i])<<8|uint16(l)]
		sum[i] += e
		worst[i] = max(worst[i], e)
	}
}

func (w *wideColumn) join(sum, worst []uint32, from int, missing uint32) {
	for i := range sum {
		e := missing
		if r := w.region(from + i); r >= 0 {
			e = w.plan.verdicts[r]
		}
		sum[i] += e
		worst[i] = max(worst[i], e)
	}
}

// joinTerms finds the first term, of those that span quantities, that holds.
func (b *Binner) joinTerms(from, to int) {
	masks := b.block.masks[:to-from]
	for i := range masks {
		masks[i] = math.MaxUint64
	}
	for i := range b.columns {
		switch c := &b.columns[i]; {
		case c.k16 != nil:
			for j, v := range c.k16[from:to] {
				masks[j] &= c.table.masks[uint16(v)]
			}
		case c.lo != nil:
			for j := range masks {
				masks[j] &= c.table.masks[uint16(c.hi[from+j])<<8|uint16(c.lo[from+j])]
			}
		default:
			for j := range masks {
				r := c.wide.region(from + j)
				if r < 0 {
					masks[j] = 0
				} else {
					masks[j] &= c.wide.plan.masks[r]
				}
			}
		}
	}
	for i, m := range masks {
		if m != 0 {
			b.block.worst[i] = max(b.block.worst[i], b.spec.terms[bits.TrailingZeros64(m)])
		}
	}
}

// settle turns the joined verdicts into codes, in place of the sums.
func (b *Binner) settle(n int) {
	sum, worst := b.block.sum[:n], b.block.worst[:n]
	for i, w := range worst {
		code := sum[i]
		if w >= 1<<16 {
			code = w & 0xffff
		}
		sum[i] = code
	}
}
