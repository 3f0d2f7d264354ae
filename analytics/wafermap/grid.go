package wafermap

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"

	"epitally/analytics"
)

// Grid is the die grid of a measurement: the coordinates its planes are indexed
// by, in canonical order (y ascending, then x ascending, each pair once).
type Grid struct {
	X, Y []int16
}

// MaxDies is the largest grid accepted: 4 million dies (a 300 mm wafer of
// 0.13 mm dies), far above any LED wafer.
const MaxDies = 4_000_000

// Len is the number of dies.
func (g *Grid) Len() int { return len(g.X) }

// Bounds gives the smallest and largest coordinates; all zero for an empty grid.
func (g *Grid) Bounds() (xMin, yMin, xMax, yMax int) {
	if len(g.X) == 0 {
		return 0, 0, 0, 0
	}
	xMin, xMax = int(g.X[0]), int(g.X[0])
	for _, x := range g.X {
		xMin, xMax = min(xMin, int(x)), max(xMax, int(x))
	}
	return xMin, int(g.Y[0]), xMax, int(g.Y[len(g.Y)-1])
}

// Check returns an ErrInvalid error unless the grid is in canonical order.
func (g *Grid) Check() error {
	if len(g.X) != len(g.Y) {
		return fmt.Errorf("die grid: %d x for %d y: %w", len(g.X), len(g.Y), analytics.ErrInvalid)
	}
	for i := 1; i < len(g.X); i++ {
		if g.Y[i] < g.Y[i-1] || (g.Y[i] == g.Y[i-1] && g.X[i] <= g.X[i-1]) {
			return fmt.Errorf("die grid: die %d (%d, %d) does not follow (%d, %d): %w",
				i, g.X[i], g.Y[i], g.X[i-1], g.Y[i-1], analytics.ErrInvalid)
		}
	}
	return nil
}

// Find gives the index of die (x, y), or -1.
func (g *Grid) Find(x, y int16) int {
	lo, hi := 0, len(g.X)
	for lo < hi {
		m := (lo + hi) / 2
		if g.Y[m] < y || (g.Y[m] == y && g.X[m] < x) {
			lo = m + 1
		} else {
			hi = m
		}
	}
	if lo < len(g.X) && g.X[lo] == x && g.Y[lo] == y {
		return lo
	}
	return -1
}

// Run is dies that follow each other along x on one row.
type Run struct {
	X, Y int16
	N    int32
}

// Runs gives the grid as runs along x: what the page and the database hold,
// since a whole wafer is a few thousand runs at most.
func (g *Grid) Runs() []Run {
	var runs []Run
	for i := range g.X {
		if n := len(runs); n > 0 && runs[n-1].Y == g.Y[i] && int32(g.X[i]) == int32(runs[n-1].X)+runs[n-1].N {
			runs[n-1].N++
			continue
		}
		runs = append(runs, Run{X: g.X[i], Y: g.Y[i], N: 1})
	}
	return runs
}

// GridFromRuns is the inverse of Runs. Bad runs are analytics.ErrInvalid.
func GridFromRuns(runs []Run) (*Grid, error) {
	total := 0
	for _, r := range runs {
		if r.N <= 0 || int(r.X)+int(r.N) > 1<<15 {
			return nil, fmt.Errorf("die grid: run at (%d, %d) of %d dies: %w", r.X, r.Y, r.N, analytics.ErrInvalid)
		}
		if total += int(r.N); total > MaxDies {
			return nil, fmt.Errorf("die grid: over %d dies: %w", MaxDies, analytics.ErrTooLarge)
		}
	}
	g := &Grid{X: make([]int16, 0, total), Y: make([]int16, 0, total)}
	for _, r := range runs {
		for k := int32(0); k < r.N; k++ {
			g.X, g.Y = append(g.X, int16(int32(r.X)+k)), append(g.Y, r.Y)
		}
	}
	return g, g.Check()
}

// EncodeRuns writes runs as 8 bytes each: x int16, y int16, n int32, little-endian.
func EncodeRuns(runs []Run) []byte {
	b := make([]byte, 0, 8*len(runs))
	for _, r := range runs {
		b = binary.LittleEndian.AppendUint16(b, uint16(r.X))
		b = binary.LittleEndian.AppendUint16(b, uint16(r.Y))
		b = binary.LittleEndian.AppendUint32(b, uint32(r.N))
	}
	return b
}

// DecodeRuns is the inverse of EncodeRuns.
func DecodeRuns(b []byte) ([]Run, error) {
	if len(b)%8 != 0 {
		return nil, fmt.Errorf("die grid: %d bytes is not whole runs of 8: %w", len(b), analytics.ErrInvalid)
	}
	runs := make([]Run, len(b)/8)
	for i := range runs {
		p := b[8*i:]
		runs[i] = Run{int16(binary.LittleEndian.Uint16(p)), int16(binary.LittleEndian.Uint16(p[2:])), int32(binary.LittleEndian.Uint32(p[4:]))}
	}
	return runs, nil
}

// Hash identifies the grid by content: SHA-256 of EncodeRuns(Runs()).
func (g *Grid) Hash() [32]byte { return sha256.Sum256(EncodeRuns(g.Runs())) }
