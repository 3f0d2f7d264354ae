package binning

import "math"

// rasterSide is how many squares a raster has on each side: 512 × 512 codes of
// 16 bits stay in the second cache.
const rasterSide = 512

// raster answers most dies by one look-up. A square that no outline (nor guard
// band) touches lies in one cell or in none; for the others it lists the cells
// that come into question.
type raster struct {
	low        point
	perX, perY float64  // squares per unit
	codes      []uint16 // per square: cell + 1, 0 for none, or mixedSquare
	first      []int32  // of mixed squares: where their candidates begin; by square's row-major number
	candidates []int    // in the region's order, −1 ends a list
	all        []int    // every cell, when lists would be too long; else nil
}

// mostCandidates bounds the lists' memory to some tens of megabytes. Cells that
// all lie over one another reach it; then every cell is asked.
const mostCandidates = 1 << 22

// Codes besides cells.
const (
	mixedSquare = math.MaxUint16     // an outline, or the end of the guard band, passes through
	guardSquare = math.MaxUint16 - 1 // all of it is in the guard band
)

func newRaster(r *Region) *raster {
	whole := emptyBox()
	for i := range r.Cells {
		whole = whole.join(r.Cells[i].box)
	}
	margin := 1e-9
	whole = whole.grown(margin, margin)
	g := &raster{low: whole.low, codes: make([]uint16, rasterSide*rasterSide)}
	g.perX = rasterSide / (whole.high.x - whole.low.x)
	g.perY = rasterSide / (whole.high.y - whole.low.y)
	for i := range r.Cells {
		for j := range r.Cells[i].Shapes {
			s := &r.Cells[i].Shapes[j]
			slack := margin
			if s.Kind == "circle" { // its points are joined by chords, which lie inside the circle
				b := boxOf(s.rings)
				slack += 1e-4 * max(b.high.x-b.low.x, b.high.y-b.low.y)
			}
			for _, e := range edgesOf(s.rings) {
				g.mark(e[0], e[1], slack)
			}
		}
	}
	g.fill(r)
	if r.Guard > 0 {
		g.fillGuard(r, whole)
	}
	g.list(r)
	return g
}

// columns are the squares of a row that lie between two places.
func (g *raster) columns(from, to float64) (first, last int) {
	return g.clamp((from - g.low.x) * g.perX), g.clamp((to - g.low.x) * g.perX)
}

func (g *raster) rows(from, to float64) (first, last int) {
	return g.clamp((from - g.low.y) * g.perY), g.clamp((to - g.low.y) * g.perY)
}

func (g *raster) clamp(at float64) int { return int(max(0, min(rasterSide-1, at))) }

// mark calls mixed every square within reach of the edge a–b.
func (g *raster) mark(a, b point, reach float64) {
	g.along(a, b, reach, reach, func(square int) { g.codes[square] = mixedSquare })
}

// along visits every square within reach of the edge a–b, row by row.
func (g *raster) along(a, b point, reachX, reachY float64, visit func(square int)) {
	if a.y > b.y {
		a, b = b, a
	}
	first, last := g.rows(a.y-reachY, b.y+reachY)
	for row := first; row <= last; row++ {
		bottom := g.low.y + float64(row)/g.perY - reachY
		top := g.low.y + float64(row+1)/g.perY + reachY
		x1, x2 := a.x, b.x
		if a.y < b.y {
			t1 := max(0, min(1, (bottom-a.y)/(b.y-a.y)))
			t2 := max(0, min(1, (top-a.y)/(b.y-a.y)))
			x1, x2 = a.x+t1*(b.x-a.x), a.x+t2*(b.x-a.x)
		}
		from, to := g.columns(min(x1, x2)-reachX, max(x1, x2)+reachX)
		for i := row*rasterSide + from; i <= row*rasterSide+to; i++ {
			visit(i)
		}
	}
}

// list gives every mixed square its candidates: the cells whose box it meets.
func (g *raster) list(r *Region) {
	counts := make([]int32, rasterSide*rasterSide)
	each := func(visit func(square, cell int)) {
		for _, cell := range r.order {
			b := r.Cells[cell].box
			x1, x2 := g.columns(b.low.x, b.high.x)
			y1, y2 := g.rows(b.low.y, b.high.y)
			for row := y1; row <= y2; row++ {
				for i := row*rasterSide + x1; i <= row*rasterSide+x2; i++ {
					if g.codes[i] == mixedSquare {
						visit(i, cell)
					}
				}
			}
		}
	}
	each(func(square, _ int) { counts[square]++ })
	most := 0
	for i, n := range counts {
		if g.codes[i] == mixedSquare {
			most += int(n) + 1
		}
	}
	if most > mostCandidates {
		g.all = r.order
		return
	}
	g.first = make([]int32, len(counts))
	total := int32(0)
	for i, n := range counts {
		g.first[i] = total
		if g.codes[i] == mixedSquare {
			total += n + 1
		}
	}
	g.candidates = make([]int, total)
	at := counts
	copy(at, g.first)
	each(func(square, cell int) {
		g.candidates[at[square]] = cell
		at[square]++
	})
	for i, code := range g.codes {
		if code == mixedSquare {
			g.candidates[at[i]] = -1
		}
	}
}

// fill gives every other square its cell: neighbours in a row that no outline
// parts share theirs.
func (g *raster) fill(r *Region) {
	for row := range rasterSide {
		known, code := false, uint16(0)
		y := g.low.y + (float64(row)+0.5)/g.perY
		for col := range rasterSide {
			i := row*rasterSide + col
			if g.codes[i] == mixedSquare {
				known = false
				continue
			}
			if !known {
				x := g.low.x + (float64(col)+0.5)/g.perX
				code, known = uint16(r.holder(point{x, y}, r.order)+1), true
			}
			g.codes[i] = code
		}
	}
}

// fillGuard looks at the squares within reach of the guard of some outline that no
// outline passes through: each lies in one cell, and as a rule wholly in the
// cell's guard band or wholly out of it.
func (g *raster) fillGuard(r *Region, whole box) {
	reachX, reachY := r.guardReach(whole)
	seen := make([]bool, len(g.codes))
	half := point{0.5 / g.perX, 0.5 / g.perY}
	for _, cell := range r.order {
		for j := range r.Cells[cell].Shapes {
			for _, e := range edgesOf(r.Cells[cell].Shapes[j].rings) {
				g.along(e[0], e[1], reachX, reachY, func(square int) {
					code := g.codes[square]
					if seen[square] || code == mixedSquare || code == 0 {
						return
					}
					seen[square] = true
					g.codes[square] = r.guardCode(int(code)-1, g.middle(square), half)
				})
			}
		}
	}
}

// guardCode is the code of a square about p that lies in a cell.
func (r *Region) guardCode(cell int, p, half point) uint16 {
	m := r.metricAt(p)
	a, b := m.apply(half), m.apply(point{half.x, -half.y})
	// The metric itself changes by far less than 1 % over a square.
	spread := 1.01 * max(math.Hypot(a.x, a.y), math.Hypot(b.x, b.y))
	always := true
	for j := range r.Cells[cell].Shapes {
		s := &r.Cells[cell].Shapes[j]
		if !s.holds(p, r.Space) {
			continue
		}
		distance, off := m.distance(s.rough, p), m.apply(s.off)
		spread := spread + math.Abs(off.x) + math.Abs(off.y)
		if distance-spread > 1.01*r.Guard {
			return uint16(cell + 1)
		}
		always = always && distance+spread < 0.99*r.Guard
	}
	if always {
		return guardSquare
	}
	return mixedSquare
}

// at is the cell at p, outsideCells or inGuard; not a number is outside.
func (g *raster) at(r *Region, p point) int {
	fx, fy := (p.x-g.low.x)*g.perX, (p.y-g.low.y)*g.perY
	if !(fx >= 0 && fx < rasterSide && fy >= 0 && fy < rasterSide) {
		return outsideCells
	}
	square := int(fy)*rasterSide + int(fx)
	switch code := g.codes[square]; code {
	case mixedSquare:
		return r.classify(p, g.candidatesOf(square))
	case guardSquare:
		return inGuard
	default:
		return int(code) - 1
	}
}

func (g *raster) candidatesOf(square int) []int {
	if g.all != nil {
		return g.all
	}
	from := g.first[square]
	to := from
	for g.candidates[to] >= 0 {
		to++
	}
	return g.candidates[from:to]
}
