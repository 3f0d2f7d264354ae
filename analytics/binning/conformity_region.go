package binning

import (
	"math"

	"epitally/analytics/wafermap"
)

// regionChance works out in which cells of a region a die may truly be.
type regionChance struct {
	*regionPlan
	region Region // with the uncertainties in force, and without its guard
	exact  bool   // no uncertainty is stated
	whole  box    // of all cells and their surroundings
	lists  [chanceSide * chanceSide][]int

	x, y  *wafermap.Plane
	cells []cellChance // of the die at hand
}

// chanceSide is how many squares a side has of the grid that lists, per square,
// the cells within reach of the uncertainty.
const chanceSide = 64

func newRegionChance(rp *regionPlan, ux, uy float64) *regionChance {
	rc := &regionChance{regionPlan: rp, region: *rp.Region, exact: ux == 0 || uy == 0}
	rc.region.u, rc.region.Guard = [2]float64{ux, uy}, 0
	if rc.exact {
		return rc
	}
	reach := rc.region
	reach.Guard, reach.GuardInU = farU, true
	rc.whole = emptyBox()
	for i := range rp.Cells {
		rc.whole = rc.whole.join(rp.Cells[i].box)
	}
	dx, dy := reach.guardReach(rc.whole)
	rc.whole = rc.whole.grown(dx, dy)
	for _, i := range rp.order {
		b := rp.Cells[i].box.grown(dx, dy)
		x1, y1 := rc.square(b.low)
		x2, y2 := rc.square(b.high)
		for y := max(0, y1); y <= min(chanceSide-1, y2); y++ {
			for x := max(0, x1); x <= min(chanceSide-1, x2); x++ {
				rc.lists[y*chanceSide+x] = append(rc.lists[y*chanceSide+x], i)
			}
		}
	}
	return rc
}

func (r *regionChance) square(p point) (x, y int) {
	return int((p.x - r.whole.low.x) / (r.whole.high.x - r.whole.low.x) * chanceSide), int((p.y - r.whole.low.y) / (r.whole.high.y - r.whole.low.y) * chanceSide)
}

func (r *regionChance) take(planes []*wafermap.Plane) {
	r.x, r.y = planes[r.columns[0]], planes[r.columns[1]]
}

func (r *regionChance) at(i int) []cellChance {
	r.cells = r.cells[:0]
	p := r.place(r.x.Value(i), r.y.Value(i))
	if r.exact {
		if c := r.region.classify(p, r.order); c >= 0 {
			r.cells = append(r.cells, cellChance{c * int(r.step), 1})
		}
		return r.cells
	}
	if !r.whole.has(p) {
		return r.cells
	}
	x, y := r.square(p)
	m := r.region.whitening(p)
	left := 1.0
	for _, i := range r.lists[min(y, chanceSide-1)*chanceSide+min(x, chanceSide-1)] {
		// Of overlapping cells the earlier has what both could claim.
		share := min(left, r.Cells[i].share(m, p))
		if share > negligible {
			r.cells = append(r.cells, cellChance{i * int(r.step), share})
			left -= share
		}
		if left <= negligible {
			break
		}
	}
	return r.cells
}

// share is the probability that the true value of a die read at p lies in the
// cell.
func (c *RegionCell) share(m metric, p point) (share float64) {
	for j := range c.Shapes {
		rough := c.Shapes[j].rough
		switch {
		case m.near(rough, p, farU):
			share = max(share, m.integral(rough, p))
		case contains(rough, p):
			return 1
		}
	}
	return share
}

// integral is the probability that a point normal about p, with the covariance
// that the metric makes round, lies inside the rings. By Green's theorem in polar
// coordinates the integral of the standard normal over a figure is the sum, over
// its edges, of signed ∫(1 − exp(−ρ²/2)) dθ/2π, with ρ(θ) the distance to the edge;
// with h the distance from p to the edge's line, ρ = h/cos φ.
func (m metric) integral(rings []ring, p point) float64 {
	origin, sum := m.apply(p), 0.0
	for _, r := range rings {
		whole := 0.0
		for i, j := 0, len(r)-1; i < len(r); j, i = i, i+1 {
			a, b := m.apply(r[j]), m.apply(r[i])
			whole += edgeShare(point{a.x - origin.x, a.y - origin.y}, point{b.x - origin.x, b.y - origin.y})
		}
		if sum == 0 {
			sum = math.Abs(whole)
		} else {
			sum -= math.Abs(whole) // a hole
		}
	}
	return max(0, min(1, sum))
}

// edgeShare is the signed probability of the triangle from the origin to the
// edge a–b under the standard normal: between its angles the normal holds
// ∫ (1 − exp(−h²/(2 cos²φ))) dφ / 2π.
func edgeShare(a, b point) float64 {
	cross, dot := a.x*b.y-a.y*b.x, a.x*b.x+a.y*b.y
	length := math.Hypot(b.x-a.x, b.y-a.y)
	if length == 0 || cross == 0 {
		return 0
	}
	h := math.Abs(cross) / length
	// t is the place along the edge from the foot of the perpendicular.
	t1 := (a.x*(b.x-a.x) + a.y*(b.y-a.y)) / length
	t2 := t1 + length
	angle := math.Abs(math.Atan2(cross, dot))
	share := angle/(2*math.Pi) - (owenT(h, t2/h) - owenT(h, t1/h))
	return math.Copysign(share, cross)
}

// owenT is Owen's T function, ∫₀ᵃ exp(−h²(1+t²)/2)/(1+t²) dt / 2π (Owen, Annals of
// Mathematical Statistics 27 (1956) 1075), by Gauss and Legendre's rule with ten
// points on pieces over which the integrand changes little; where the rest of the
// integral up to infinity is under 1e-8 it is T(h, ∞) = Φ(−h)/2. Absolute error
// under 1e-8.
func owenT(h, a float64) float64 {
	sign := 1.0
	if a < 0 {
		a, sign = -a, -1
	}
	switch {
	case h > owenFar:
		return 0
	case h < 1e-8:
		return sign * math.Atan(a) / (2 * math.Pi)
	case h*a > owenFar:
		return sign * phi(-h) / 2
	}
	sum := 0.0
	for from := 0.0; from < a; {
		to := min(a, from+min(2/h, 1+from))
		half, middle := (to-from)/2, (to+from)/2
		for i, x := range gaussX {
			t1, t2 := middle-half*x, middle+half*x
			sum += half * gaussW[i] * (owenIntegrand(h, t1) + owenIntegrand(h, t2))
		}
		from = to
	}
	return sign * sum / (2 * math.Pi)
}

// owenFar is where Φ is under 2e-8.
const owenFar = 5.5

func owenIntegrand(h, t float64) float64 {
	q := 1 + t*t
	return math.Exp(-h*h*q/2) / q
}

// Abscissae and weights of the ten-point Gauss–Legendre rule, positive half
// (Abramowitz and Stegun, table 25.4).
var (
	gaussX = [5]float64{0.1488743389816312, 0.4333953941292472, 0.6794095682990244, 0.8650633666889845, 0.9739065285171717}
	gaussW = [5]float64{0.2955242247147529, 0.2692667193099963, 0.2190863625159820, 0.1494513491505806, 0.0666713443086881}
)
