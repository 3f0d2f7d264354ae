package binning

import "encoding/binary"

// threeLanes reports whether the call at work is the common one of re-binning
// many wafers out of the database: three quantities as they are stored, and no
// rule that spans quantities.
func (b *Binner) threeLanes() bool {
	if len(b.columns) != 3 || len(b.spec.terms) > 0 {
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
// and count in one pass, eight dies at a time. Neighbours mostly share a bin, so
// odd dies have counts of their own and do not wait for the even ones' to be
// written.
func (b *Binner) countThree(counts []int) {
	x, y, z := &b.columns[0], &b.columns[1], &b.columns[2]
	tx, ty, tz := &x.table.verdicts, &y.table.verdicts, &z.table.verdicts
	if cap(b.odd) < len(counts) {
		b.odd = make([]int, len(counts))
	}
	odd := b.odd[:len(counts)]
	clear(odd)
	i := 0
	for ; i+8 <= len(x.lo); i += 8 {
		xl, xh := binary.LittleEndian.Uint64(x.lo[i:]), binary.LittleEndian.Uint64(x.hi[i:])
		yl, yh := binary.LittleEndian.Uint64(y.lo[i:]), binary.LittleEndian.Uint64(y.hi[i:])
		zl, zh := binary.LittleEndian.Uint64(z.lo[i:]), binary.LittleEndian.Uint64(z.hi[i:])
		for range 4 {
			counts[code(tx[pair(xl, xh)], ty[pair(yl, yh)], tz[pair(zl, zh)])]++
			odd[code(tx[pair(xl>>8, xh>>8)], ty[pair(yl>>8, yh>>8)], tz[pair(zl>>8, zh>>8)])]++
			xl, xh, yl, yh, zl, zh = xl>>16, xh>>16, yl>>16, yh>>16, zl>>16, zh>>16
		}
	}
	for ; i < len(x.lo); i++ {
		at := func(c *column) uint16 { return uint16(c.hi[i])<<8 | uint16(c.lo[i]) }
		counts[code(tx[at(x)], ty[at(y)], tz[at(z)])]++
	}
	for c, n := range odd {
		counts[c] += n
	}
}

// pair puts the lowest bytes of two words together.
func pair(low, high uint64) uint16 { return uint16(high)<<8 | uint16(low&0xff) }

// code is the code that three verdicts come to: that of the largest where one
// of them rejects, else their sum.
func code(x, y, z uint32) uint32 {
	worst, c := max(x, y, z), x+y+z
	if reject := worst & 0xffff; worst >= 1<<16 { // a conditional move: which dies are rejected is no pattern to guess
		c = reject
	}
	return c
}
