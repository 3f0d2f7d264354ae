package binning

import (
	"math"
	"slices"

	"epitally/analytics/colour"
)

// Space is the plane that a region's cells are drawn in.
type Space string

const (
	SpaceXY  Space = "xy"  // CIE 1931 x, y
	SpaceUV  Space = "uv"  // CIE 1976 u′, v′
	SpaceOwn Space = "own" // the two quantities themselves
)

// Region is a dimension of the bins that two quantities decide together: cells
// drawn in a plane.
type Region struct {
	Name       string
	Space      Space
	Quantities [2]string // in x, then y order of the plane they are measured in
	Cells      []RegionCell
	Outside    string  // reject reason of dies in no cell
	Guard      float64 // in the units of the space, or in standard uncertainties when GuardInU
	GuardInU   bool

	convert bool // dies are measured in x, y and the cells are drawn in u′, v′
	u       [2]float64
	order   []int // cells by falling priority, then as listed
	raster  *raster
}

// RegionCell is one named cell of a region: any of its shapes.
type RegionCell struct {
	Name     string
	Priority int // of overlapping cells the one with the highest has the die, then the first listed
	Shapes   []Shape

	box box
}

// Shape is one closed figure.
type Shape struct {
	Kind     string       // "polygon", "circle" or "quadrangle"
	Outline  [][2]float64 // corners in the region's space; of a circle 360 points on it
	Holes    [][][2]float64
	Centre   [2]float64 // of a circle and of a quadrangle, in the region's space
	CornerAt [][2]Place // where the outline's corners, or the circle's centre, stand in the document
	Steps    float64    // of a circle: radius 0.0011·n in u′, v′ (CIE TN 001:2014); of a quadrangle: its steps
	NominalK int        // of a quadrangle

	rings  []ring
	rough  []ring    // the same with fewer points, for distances and integrals
	off    point     // how far rough is off at most
	centre colour.UV // of a circle
}

// holds reports whether the shape has the point, by the half-open rule; circles
// are closed and exact.
func (s *Shape) holds(p point, space Space) bool {
	if s.Kind != "circle" {
		return contains(s.rings, p)
	}
	q := colour.UV{U: p.x, V: p.y}
	if space == SpaceXY {
		q = colour.XY{X: p.x, Y: p.y}.UV()
	}
	return math.Hypot(q.U-s.centre.U, q.V-s.centre.V) <= colour.StepRadius*s.Steps*(1+1e-12)
}

// near is metric.near for a shape: a circle's outline is asked roughly, and in full
// only where that does not tell.
func (s *Shape) near(m metric, p point, width float64) bool {
	if s.off == (point{}) {
		return m.near(s.rings, p, width)
	}
	off := m.apply(s.off)
	doubt := math.Abs(off.x) + math.Abs(off.y)
	switch distance := m.distance(s.rough, p); {
	case distance < width-doubt:
		return true
	case distance > width+doubt:
		return false
	}
	return m.near(s.rings, p, width)
}

// roughen draws a circle with a tenth of its points, set out so far that the area
// stays that of the circle: nowhere off by more than 0.4 % of the radius.
func (s *Shape) roughen() {
	s.rough = s.rings
	if s.Kind != "circle" {
		return
	}
	full := s.rings[0]
	var middle point
	for _, p := range full {
		middle.x, middle.y = middle.x+p.x/float64(len(full)), middle.y+p.y/float64(len(full))
	}
	var r ring
	for i := 0; i < len(full); i += 10 {
		r = append(r, full[i])
	}
	grow := math.Sqrt(full.area() / r.area())
	for i, p := range r {
		r[i] = point{middle.x + grow*(p.x-middle.x), middle.y + grow*(p.y-middle.y)}
	}
	s.rough = []ring{r}
	b := boxOf(s.rough)
	s.off = point{0.0025 * (b.high.x - b.low.x), 0.0025 * (b.high.y - b.low.y)}
}

func (c *RegionCell) holds(p point, space Space) bool {
	if !c.box.has(p) {
		return false
	}
	for i := range c.Shapes {
		if c.Shapes[i].holds(p, space) {
			return true
		}
	}
	return false
}

// finish works out what classify and the raster need.
func (r *Region) finish() {
	for i := range r.Cells {
		c := &r.Cells[i]
		c.box = emptyBox()
		for j := range c.Shapes {
			c.Shapes[j].roughen()
			c.box = c.box.join(boxOf(c.Shapes[j].rings).grown(1e-9, 1e-9))
		}
		r.order = append(r.order, i)
	}
	slices.SortStableFunc(r.order, func(a, b int) int { return r.Cells[b].Priority - r.Cells[a].Priority })
	r.raster = newRaster(r)
}

// place is where a die's two readings lie in the region's plane.
func (r *Region) place(x, y float64) point {
	if r.convert {
		q := colour.XY{X: x, Y: y}.UV()
		return point{q.U, q.V}
	}
	return point{x, y}
}

// Outcomes of classify besides the number of a cell.
const (
	outsideCells = -1
	inGuard      = -2
)

// classify says in which cell a die at p is, outsideCells or inGuard. Candidates
// are cells in r.order's sequence; the first that holds p has it. A point that no
// cell holds but that lies on an outline belongs to the first cell it bounds: the
// outer edge of the whole is closed.
func (r *Region) classify(p point, candidates []int) int {
	found := r.holder(p, candidates)
	if found >= 0 && r.Guard > 0 && r.nearOutline(found, p) {
		return inGuard
	}
	return found
}

// holder is classify without the guard.
func (r *Region) holder(p point, candidates []int) int {
	for _, i := range candidates {
		if r.Cells[i].holds(p, r.Space) {
			return i
		}
	}
	return r.boundedAt(p, candidates)
}

func (r *Region) boundedAt(p point, candidates []int) int {
	for _, i := range candidates {
		if !r.Cells[i].box.has(p) {
			continue
		}
		for j := range r.Cells[i].Shapes {
			if s := &r.Cells[i].Shapes[j]; s.Kind != "circle" && onOutline(s.rings, p) {
				return i
			}
		}
	}
	return outsideCells
}

// nearOutline reports whether p is in the guard band of a cell: closer than the
// guard to the outline of every shape of the cell that holds it.
func (r *Region) nearOutline(cell int, p point) bool {
	m := r.metricAt(p)
	for j := range r.Cells[cell].Shapes {
		s := &r.Cells[cell].Shapes[j]
		if s.holds(p, r.Space) && !s.near(m, p, r.Guard) {
			return false
		}
	}
	return true
}

// metricAt makes lengths at p those that the guard is stated in.
func (r *Region) metricAt(p point) metric {
	if r.GuardInU {
		return r.whitening(p)
	}
	return plain
}

// whitening is the metric at p in which the measurement's error is round with a
// standard deviation of 1: the inverse of a square root of its covariance, which
// for cells in u′, v′ is that of x, y carried over by the derivative of the map.
func (r *Region) whitening(p point) metric {
	if !r.convert {
		return metric{xx: 1 / r.u[0], yy: 1 / r.u[1]}
	}
	q := colour.UV{U: p.x, V: p.y}.XY()
	d := -2*q.X + 12*q.Y + 3
	// ∂(u′, v′)/∂(x, y)
	ux, uy := (4*d+8*q.X)/(d*d), -48*q.X/(d*d)
	vx, vy := 18*q.Y/(d*d), (9*d-108*q.Y)/(d*d)
	sx, sy := r.u[0]*r.u[0], r.u[1]*r.u[1]
	uu, uv, vv := ux*ux*sx+uy*uy*sy, ux*vx*sx+uy*vy*sy, vx*vx*sx+vy*vy*sy
	a := math.Sqrt(uu)
	b := uv / a
	c := math.Sqrt(vv - b*b)
	return metric{xx: 1 / a, yx: -b / (a * c), yy: 1 / c}
}

// guardReach is how far the guard reaches from an outline at most, in x and y of
// the space.
func (r *Region) guardReach(b box) (x, y float64) {
	if r.Guard == 0 || !r.GuardInU {
		return r.Guard, r.Guard
	}
	for _, p := range []point{b.low, b.high, {b.low.x, b.high.y}, {b.high.x, b.low.y}} {
		m := r.whitening(p)
		// An error of Guard has x within Guard/xx, and y within Guard times the length of the row (yx, xx)/(xx·yy).
		x = max(x, r.Guard/m.xx)
		y = max(y, r.Guard*math.Hypot(m.yx, m.xx)/(m.xx*m.yy))
	}
	return 1.5 * x, 1.5 * y // the map's derivative changes a little inside the box
}
