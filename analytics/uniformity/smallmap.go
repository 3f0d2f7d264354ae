package uniformity

import (
	"math"

	"epitally/analytics/wafermap"
)

// SmallMapSize is the side of a small map in cells.
const SmallMapSize = 48

// SmallMap is the picture of a plane that lists show.
type SmallMap struct {
	Size      int     // Size × Size cells over the square about the wafer, row 0 at the top
	Low, High float64 // values of cell codes 1 and 255; NaN for a plane without values
	Cells     []byte  // 0 = no value there; else linear from Low (1) to High (255), clipped
}

const (
	cells  = SmallMapSize * SmallMapSize
	noCell = cells // dies beyond the wafer's square
)

// picture says which dies make which cell. Where dies are smaller than cells,
// every die has the cell its centre lies in and a cell is the mean of its dies;
// else every cell has the die that covers the cell's centre.
type picture struct {
	cellOf []uint16 // per die; nil when dies are larger than cells
	dieOf  []int32  // per cell, -1 = none; nil when dies are smaller than cells
}

func newPicture(g *wafermap.Grid, l *wafermap.Layout) picture {
	side := l.WaferDiameterMM / SmallMapSize
	if l.DiePitchXMM > side || l.DiePitchYMM > side {
		return picture{dieOf: diesUnderCells(g, l, side)}
	}
	xMin, _, xMax, _ := g.Bounds()
	columns := make([]uint16, xMax-xMin+1)
	for i := range columns {
		xMM, _ := l.PositionMM(xMin+i, 0)
		columns[i] = cellAt(xMM, side)
	}
	cellOf := make([]uint16, g.Len())
	var row uint16
	for i := range cellOf {
		if i == 0 || g.Y[i] != g.Y[i-1] {
			_, yMM := l.PositionMM(0, int(g.Y[i]))
			row = cellAt(-yMM, side) // rows count downward
		}
		column := columns[int(g.X[i])-xMin]
		if cellOf[i] = row*SmallMapSize + column; row == SmallMapSize || column == SmallMapSize {
			cellOf[i] = noCell
		}
	}
	return picture{cellOf: cellOf}
}

// cellAt is the row or column of a distance from the centre, SmallMapSize
// beyond the square.
func cellAt(mm, side float64) uint16 {
	c := math.Floor(mm/side) + SmallMapSize/2
	if !(c >= 0 && c < SmallMapSize) {
		return SmallMapSize
	}
	return uint16(c)
}

func diesUnderCells(g *wafermap.Grid, l *wafermap.Layout, side float64) []int32 {
	dieOf := make([]int32, cells)
	at := func(mm, pitch, centre float64, reversed bool) int {
		if reversed {
			mm = -mm
		}
		return int(math.Floor(mm/pitch + centre + 0.5))
	}
	for i := range dieOf {
		xMM := (float64(i%SmallMapSize) + 0.5 - SmallMapSize/2) * side
		yMM := (SmallMapSize/2 - 0.5 - float64(i/SmallMapSize)) * side
		x := at(xMM, l.DiePitchXMM, l.CentreX, l.XAxis == "left")
		y := at(yMM, l.DiePitchYMM, l.CentreY, l.YAxis == "down")
		dieOf[i] = -1
		if int(int16(x)) == x && int(int16(y)) == y {
			dieOf[i] = int32(g.Find(int16(x), int16(y)))
		}
	}
	return dieOf
}

// SmallMap paints the plane over the range from the 1st to the 99th percentile
// of the dies that count. Whoever has the plane's summary calls Paint with its
// Q01 and Q99 instead, which spares a pass.
func (f *Frame) SmallMap(p *wafermap.Plane) SmallMap {
	sc := f.scratch.Get().(*scratch)
	defer f.scratch.Put(sc)
	c, _, ok := f.count(p, sc)
	if ok {
		at := func(rank int) float64 { return wafermap.Scaled(c.at(rank), c.exponent) }
		return f.Paint(p, quantile(c.n, 0.01, at), quantile(c.n, 0.99, at))
	}
	v := sc.floats[:0]
	for i, in := range f.include {
		if in && i < p.Len() {
			if x := p.Value(i); !math.IsNaN(x) && !math.IsInf(x, 0) {
				v = append(v, x)
			}
		}
	}
	sc.floats = v
	sortFloats(v, sc.keys)
	return f.Paint(p, Quantile(v, 0.01), Quantile(v, 0.99))
}

// Paint makes the small map over a given range. Every die with a value is
// painted, those in the edge exclusion too.
func (f *Frame) Paint(p *wafermap.Plane, low, high float64) SmallMap {
	m := SmallMap{Size: SmallMapSize, Low: low, High: high, Cells: make([]byte, cells)}
	if p.Len() != f.Len() || math.IsNaN(low) || math.IsNaN(high) {
		return m
	}
	if f.picture.dieOf != nil {
		for i, die := range f.picture.dieOf {
			if die >= 0 {
				m.Cells[i] = shade(p.Value(int(die)), low, high)
			}
		}
		return m
	}
	means := f.cellMeans(p)
	for i := range m.Cells {
		m.Cells[i] = shade(means[i], low, high)
	}
	return m
}

// cellMeans is the mean of the values in every cell, NaN where there is none.
func (f *Frame) cellMeans(p *wafermap.Plane) *[cells]float64 {
	var means [cells]float64
	switch p.Encoding {
	case wafermap.Int16:
		integerMeans(&means, p.K16, wafermap.Missing16, f.picture.cellOf, p)
	case wafermap.Int32:
		integerMeans(&means, p.K32, wafermap.Missing32, f.picture.cellOf, p)
	default:
		var n [cells + 1]float64
		for i, c := range f.picture.cellOf {
			if x := p.Value(i); c < noCell && !math.IsNaN(x) && !math.IsInf(x, 0) {
				n[c]++
				means[c] += (x - means[c]) / n[c]
			}
		}
		for i := range means {
			if n[i] == 0 {
				means[i] = math.NaN()
			}
		}
	}
	return &means
}

func integerMeans[K int16 | int32](means *[cells]float64, k []K, missing K, cellOf []uint16, p *wafermap.Plane) {
	var sums [4096]struct{ sum, n int64 } // a power of two, so that masking replaces the bounds check
	cellOf = cellOf[:len(k)]
	for i, v := range k {
		if v == missing {
			continue
		}
		s := &sums[cellOf[i]&4095]
		s.sum += int64(v)
		s.n++
	}
	for i := range means {
		means[i] = math.NaN()
		if s := sums[i]; s.n > 0 {
			means[i] = scaledFloat(float64(p.BaseK)+float64(s.sum)/float64(s.n), p.Exponent)
		}
	}
}

// shade codes a value: 0 for none, 128 when the range has no width.
func shade(v, low, high float64) byte {
	switch {
	case math.IsNaN(v) || math.IsInf(v, 0):
		return 0
	case !(high > low):
		return 128
	}
	return byte(1 + math.Round(254*max(0, min(1, (v-low)/(high-low)))))
}
