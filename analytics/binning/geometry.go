package binning

import (
	"math"
	"slices"
)

// point is a place in the plane that a region is drawn in.
type point struct{ x, y float64 }

// ring is a closed outline; the last corner joins the first.
type ring []point

// onEdge is the area under which three points count as on one line. Decimals of
// up to six places make areas of at least 1e-12, and rounding errors stay under
// 1e-15, so that it tells the two apart.
const onEdge = 1e-13

// turn is twice the area of a, b, c: positive when c lies left of a→b, 0 on it.
func turn(a, b, c point) float64 {
	t := (b.x-a.x)*(c.y-a.y) - (b.y-a.y)*(c.x-a.x)
	if math.Abs(t) < onEdge {
		return 0
	}
	return t
}

// crosses reports whether the ray from p to the right crosses the edge a–b. The
// edge is half-open in y and belongs to what lies right of it, so that of two
// cells that share it exactly one has its points: the same rule as [low, high).
func crosses(a, b, p point) bool {
	if (a.y > p.y) == (b.y > p.y) {
		return false
	}
	if a.y > b.y { // both cells that share the edge ask the same question
		a, b = b, a
	}
	return turn(a, b, p) > 0
}

// contains is the even-odd rule over the rings: holes are rings too.
func contains(rings []ring, p point) bool {
	inside := false
	for _, r := range rings {
		for i, j := 0, len(r)-1; i < len(r); j, i = i, i+1 {
			if crosses(r[j], r[i], p) {
				inside = !inside
			}
		}
	}
	return inside
}

// onOutline reports whether p lies on an edge of the rings.
func onOutline(rings []ring, p point) bool {
	for _, r := range rings {
		for i, j := 0, len(r)-1; i < len(r); j, i = i, i+1 {
			a, b := r[j], r[i]
			if turn(a, b, p) == 0 &&
				p.x >= min(a.x, b.x) && p.x <= max(a.x, b.x) && p.y >= min(a.y, b.y) && p.y <= max(a.y, b.y) {
				return true
			}
		}
	}
	return false
}

// metric stretches the plane before lengths are taken; an upper triangle, so
// that correlated errors can be made round: (x, y) → (xx·x, yx·x + yy·y).
type metric struct{ xx, yx, yy float64 }

var plain = metric{xx: 1, yy: 1}

func (m metric) apply(p point) point { return point{m.xx * p.x, m.yx*p.x + m.yy*p.y} }

// near reports whether p is closer than width to an edge of the rings.
func (m metric) near(rings []ring, p point, width float64) bool {
	limit := width * width
	p = m.apply(p)
	for _, r := range rings {
		for i, j := 0, len(r)-1; i < len(r); j, i = i, i+1 {
			if squareDistance(m.apply(r[j]), m.apply(r[i]), p) < limit {
				return true
			}
		}
	}
	return false
}

// distance is that from p to the nearest edge of the rings.
func (m metric) distance(rings []ring, p point) float64 {
	nearest := math.Inf(1)
	p = m.apply(p)
	for _, r := range rings {
		for i, j := 0, len(r)-1; i < len(r); j, i = i, i+1 {
			nearest = min(nearest, squareDistance(m.apply(r[j]), m.apply(r[i]), p))
		}
	}
	return math.Sqrt(nearest)
}

// squareDistance is that from p to the edge a–b.
func squareDistance(a, b, p point) float64 {
	dx, dy := b.x-a.x, b.y-a.y
	t := 0.0
	if length := dx*dx + dy*dy; length > 0 {
		t = max(0, min(1, ((p.x-a.x)*dx+(p.y-a.y)*dy)/length))
	}
	ex, ey := p.x-a.x-t*dx, p.y-a.y-t*dy
	return ex*ex + ey*ey
}

// area is that of the ring, positive counter-clockwise.
func (r ring) area() float64 {
	sum := 0.0
	for i, j := 0, len(r)-1; i < len(r); j, i = i, i+1 {
		sum += r[j].x*r[i].y - r[i].x*r[j].y
	}
	return sum / 2
}

// box is the smallest upright rectangle around points.
type box struct{ low, high point }

func emptyBox() box {
	return box{point{math.Inf(1), math.Inf(1)}, point{math.Inf(-1), math.Inf(-1)}}
}

func (b box) with(p point) box {
	return box{point{min(b.low.x, p.x), min(b.low.y, p.y)}, point{max(b.high.x, p.x), max(b.high.y, p.y)}}
}

func (b box) join(c box) box { return b.with(c.low).with(c.high) }

func (b box) grown(x, y float64) box {
	return box{point{b.low.x - x, b.low.y - y}, point{b.high.x + x, b.high.y + y}}
}

func (b box) has(p point) bool {
	return p.x >= b.low.x && p.x <= b.high.x && p.y >= b.low.y && p.y <= b.high.y
}

func (b box) overlaps(c box) bool {
	return b.low.x <= c.high.x && c.low.x <= b.high.x && b.low.y <= c.high.y && c.low.y <= b.high.y
}

func boxOf(rings []ring) box {
	b := emptyBox()
	for _, r := range rings {
		for _, p := range r {
			b = b.with(p)
		}
	}
	return b
}

// selfCrossing finds two edges of the ring that cross or touch, as the numbers
// of their first corners from 0.
func (r ring) selfCrossing() (first, second int, found bool) {
	n := len(r)
	for i := range n {
		for j := i + 1; j < n; j++ {
			if j == i+1 || i == 0 && j == n-1 { // neighbours share a corner; they may only not fold back
				a, b, c := r[i], r[j], r[(j+1)%n]
				if j != i+1 {
					a, b, c = r[j], r[i], r[i+1]
				}
				if turn(a, b, c) == 0 && (a.x-b.x)*(c.x-b.x)+(a.y-b.y)*(c.y-b.y) > 0 {
					return i, j, true
				}
				continue
			}
			if edgesMeet(r[i], r[i+1], r[j], r[(j+1)%n]) {
				return i, j, true
			}
		}
	}
	return 0, 0, false
}

// edgesMeet reports whether a–b and c–d have a point in common.
func edgesMeet(a, b, c, d point) bool {
	if !boxOf([]ring{{a, b}}).overlaps(boxOf([]ring{{c, d}})) {
		return false
	}
	return turn(a, b, c)*turn(a, b, d) <= 0 && turn(c, d, a)*turn(c, d, b) <= 0
}

// overlapArea is the area that two figures share, by slabs: between the heights
// at which corners lie or edges cross, every edge is straight and none crosses
// another, so that the shared length grows linearly and its middle is its mean.
func overlapArea(a, b []ring) float64 {
	common := boxOf(a)
	other := boxOf(b)
	if !common.overlaps(other) {
		return 0
	}
	low, high := max(common.low.y, other.low.y), min(common.high.y, other.high.y)
	heights := []float64{low, high}
	edges := slices.Concat(edgesOf(a), edgesOf(b))
	for i, e := range edges {
		heights = append(heights, e[0].y, e[1].y)
		for _, f := range edges[:i] {
			if y, ok := crossingHeight(e, f); ok {
				heights = append(heights, y)
			}
		}
	}
	slices.Sort(heights)
	sum := 0.0
	for i := 1; i < len(heights); i++ {
		from, to := heights[i-1], heights[i]
		if from >= low && to <= high && to > from {
			y := (from + to) / 2
			sum += (to - from) * sharedLength(spans(a, y), spans(b, y))
		}
	}
	return sum
}

func edgesOf(rings []ring) (edges [][2]point) {
	for _, r := range rings {
		for i, j := 0, len(r)-1; i < len(r); j, i = i, i+1 {
			edges = append(edges, [2]point{r[j], r[i]})
		}
	}
	return edges
}

func crossingHeight(e, f [2]point) (y float64, ok bool) {
	d := (e[1].x-e[0].x)*(f[1].y-f[0].y) - (e[1].y-e[0].y)*(f[1].x-f[0].x)
	if d == 0 {
		return 0, false
	}
	t := ((f[0].x-e[0].x)*(f[1].y-f[0].y) - (f[0].y-e[0].y)*(f[1].x-f[0].x)) / d
	return e[0].y + t*(e[1].y-e[0].y), t > 0 && t < 1
}

// spans are the intervals of x inside the rings at a height, ascending.
func spans(rings []ring, y float64) (xs []float64) {
	for _, e := range edgesOf(rings) {
		if (e[0].y > y) != (e[1].y > y) {
			xs = append(xs, e[0].x+(y-e[0].y)/(e[1].y-e[0].y)*(e[1].x-e[0].x))
		}
	}
	slices.Sort(xs)
	return xs
}

func sharedLength(a, b []float64) (sum float64) {
	for i, j := 0, 0; i+1 < len(a) && j+1 < len(b); {
		sum += max(0, min(a[i+1], b[j+1])-max(a[i], b[j]))
		if a[i+1] < b[j+1] {
			i += 2
		} else {
			j += 2
		}
	}
	return sum
}
