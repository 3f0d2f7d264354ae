package binning

// threeLanes reports whether the call at work is the common one of re-binning
// many wafers out of the database: three quantities as they are stored, and no
// region or rule that spans quantities.
func (b *Binner) threeLanes() bool {
	if len(b.columns) != 3 || len(b.spec.terms)+len(b.spec.regionPlans) > 0 {
		return false
	}
	for i := range b.columns {
		if b.columns[i].lo == nil {
			return false
		}
	}
	return true
}

// countThree counts the dies per code without writing a code down: join, settle
// and count in one pass. Neighbours mostly share a bin, so every other die has
// counts of its own and does not wait for the last one's to be written.
// Only dies that are included count; include nil includes all.
func (b *Binner) countThree(counts []int, include []bool, dies int) {
	if cap(b.odd) < len(counts) {
		b.odd = make([]int, len(counts))
	}
	odd := b.odd[:len(counts)]
	clear(odd)
	eachRun(include, dies, func(from, to int) { b.countRun(counts, odd, from, to) })
	for c, n := range odd {
		counts[c] += n
	}
}

func (b *Binner) countRun(counts, odd []int, from, to int) {
	x, y, z := &b.columns[0], &b.columns[1], &b.columns[2]
	tx, ty, tz := &x.table.verdicts, &y.table.verdicts, &z.table.verdicts
	xl := x.lo[from:to]
	n := len(xl)
	xh, yl, yh, zl, zh := x.hi[from:to][:n], y.lo[from:to][:n], y.hi[from:to][:n], z.lo[from:to][:n], z.hi[from:to][:n]
	i := 0
	for ; i+1 < len(xl); i += 2 {
		counts[code(tx[pair(xl[i], xh[i])], ty[pair(yl[i], yh[i])], tz[pair(zl[i], zh[i])])]++
		odd[code(tx[pair(xl[i+1], xh[i+1])], ty[pair(yl[i+1], yh[i+1])], tz[pair(zl[i+1], zh[i+1])])]++
	}
	if i < len(xl) {
		counts[code(tx[pair(xl[i], xh[i])], ty[pair(yl[i], yh[i])], tz[pair(zl[i], zh[i])])]++
	}
}

// eachRun visits the runs of dies that are included; nil includes all.
func eachRun(include []bool, dies int, visit func(from, to int)) {
	if include == nil {
		visit(0, dies)
		return
	}
	for from := 0; from < dies; {
		if !include[from] {
			from++
			continue
		}
		to := from + 1
		for to < dies && include[to] {
			to++
		}
		visit(from, to)
		from = to
	}
}

// pair puts a low and a high byte together.
func pair(low, high byte) uint16 { return uint16(high)<<8 | uint16(low) }

// code is the code that three verdicts come to: that of the largest where one
// of them rejects, else their sum.
func code(x, y, z uint32) uint32 {
	worst, c := max(x, y, z), x+y+z
	if reject := worst & 0xffff; worst >= 1<<16 { // a conditional move: which dies are rejected is no pattern to guess
		c = reject
	}
	return c
}
