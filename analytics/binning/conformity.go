package binning

import (
	"math"

	"epitally/analytics/wafermap"
)

// Conformity is what the measurement's uncertainty does to the tally of a
// specification, per code of the bins. It follows JCGM 106:2012 with an
// uninformative prior (its clause 7.2 with a process spread that is wide against
// the uncertainty): a reading η with standard uncertainty u leaves the true value
// normal about η, so that the conformance probability of a cell [a, b) is
// Φ((b−η)/u) − Φ((a−η)/u) (7.4), and of a cell drawn in a plane the integral of
// the two-dimensional normal over it. Errors of different quantities are taken as
// independent. Guards decide which dies are accepted (8.3); what they must
// conform to is the cell without its guard.
//
// A die that a reject rule takes out, or that is untested, is taken as decided.
type Conformity struct {
	// WronglyAccepted is the expected number of dies in the bin whose true values
	// lie outside it: the sum of 1 − conformance probability over its dies.
	WronglyAccepted []float64
	// WronglyRejected is the expected number of dies elsewhere whose true values
	// lie in the bin: the sum of their conformance probabilities for it.
	WronglyRejected []float64
	// Confident counts the bin's dies whose conformance probability is at least
	// the Confidence asked for.
	Confident []int
}

// Conformity works out the risks of a binning that Bin has made: codes are the
// dies' codes, planes and include as for Bin. Quantities without a stated
// uncertainty count as exact. u gives uncertainties that the specification does
// not state itself, those of the station, by quantity; it may be nil.
func (s *Spec) Conformity(codes []uint16, planes []*wafermap.Plane, include []bool, u map[string]float64, confidence float64) (Conformity, error) {
	if len(planes) != len(s.plans) {
		return Conformity{}, invalid("specification %s: %d planes for %d quantities", s.Name, len(planes), len(s.plans))
	}
	for i, p := range planes {
		if p == nil || p.Len() != len(codes) {
			planes = nil
			if p != nil {
				return Conformity{}, invalid("specification %s: %d dies of %s, %d codes", s.Name, p.Len(), s.plans[i].quantity, len(codes))
			}
			break
		}
	}
	bins := s.bins()
	out := Conformity{make([]float64, bins), make([]float64, bins), make([]int, bins)}
	if planes == nil {
		return out, nil
	}
	dims := s.chances(u)
	for i, c := range codes {
		if include != nil && !include[i] || !s.open(int(c)) {
			continue
		}
		out.add(s, dims, planes, i, int(c), confidence)
	}
	return out, nil
}

// Confidence is the conformance probability that a bin's confident dies have at
// least.
const Confidence = 0.95

// Uncertain reports whether any quantity that bins dies has an uncertainty, the
// specification's own or one of u.
func (s *Spec) Uncertain(u map[string]float64) bool {
	stated := func(q string) bool { return s.Uncertainty[q] > 0 || u[q] > 0 }
	for _, r := range s.regions {
		if stated(r.Quantities[0]) && stated(r.Quantities[1]) {
			return true
		}
	}
	for _, a := range s.axes {
		if stated(a.Quantity) {
			return true
		}
	}
	return false
}

// bins is the number of codes that are bins.
func (s *Spec) bins() int {
	for i, c := range s.cells {
		if c.Class == Reject || c.Class == Untested {
			return i
		}
	}
	return len(s.cells)
}

// open reports whether a code leaves the die's place among the bins to its
// readings: the bins, and the rejects of regions and axes.
func (s *Spec) open(code int) bool { return !s.decided[code] }

// add puts die i into the sums. Almost every die is far from every edge and
// conforms for certain, to its own bin alone.
func (o *Conformity) add(s *Spec, dims []chance, planes []*wafermap.Plane, i, code int, confidence float64) {
	certain := true
	for d := range dims {
		certain = dims[d].at(planes, i) && certain
	}
	own := code < len(o.Confident)
	if certain {
		if own {
			o.Confident[code]++
		}
		return
	}
	p := o.spread(dims, code, 0, 0, 1)
	if own {
		o.WronglyAccepted[code] += 1 - p
		if p >= confidence {
			o.Confident[code]++
		}
	}
}

// spread walks the bins that the die may truly be in and gives each its
// probability; it returns that of the die's own bin.
func (o *Conformity) spread(dims []chance, own, dim, code int, p float64) float64 {
	if dim == len(dims) {
		if code != own {
			o.WronglyRejected[code] += p
			return 0
		}
		return p
	}
	sum := 0.0
	for _, c := range dims[dim].cells {
		sum += o.spread(dims, own, dim+1, code+c.code, p*c.p)
	}
	return sum
}

// chance works out in which cells of one dimension a die may truly be.
type chance struct {
	cells []cellChance // of the die at hand
	axis  *axisChance
	plane *regionChance
}

type cellChance struct {
	code int // what the cell adds to a bin's code
	p    float64
}

// negligible is a probability that is left out of the sums.
const negligible = 1e-7

// farU is how many standard uncertainties away an edge is of no account:
// Φ(−5.5) = 2e−8.
const farU = 5.5

// at sets the cells of die i, and reports whether there is no doubt: it is in one
// cell for certain, or certainly in none.
func (c *chance) at(planes []*wafermap.Plane, i int) bool {
	c.cells = c.cells[:0]
	if c.axis != nil {
		return c.axis.at(&c.cells, planes[c.axis.column].Value(i))
	}
	return c.plane.at(&c.cells, point{planes[c.plane.columns[0]].Value(i), planes[c.plane.columns[1]].Value(i)})
}

type axisChance struct {
	column int
	edges  []float64
	stride int
	u      float64
}

func (a *axisChance) at(cells *[]cellChance, v float64) bool {
	last := len(a.edges) - 1
	below := a.u > 0
	for i := 0; i < last; i++ {
		low, high := a.edges[i], a.edges[i+1]
		if a.u == 0 {
			if v >= low && (v < high || i == last-1 && v == high) {
				*cells = append(*cells, cellChance{i * a.stride, 1})
			}
			continue
		}
		if v > high+farU*a.u || v < low-farU*a.u {
			continue
		}
		if v >= low+farU*a.u && v <= high-farU*a.u {
			*cells = append(*cells, cellChance{i * a.stride, 1})
			return true
		}
		below = false
		if p := phi((high-v)/a.u) - phi((low-v)/a.u); p > negligible {
			*cells = append(*cells, cellChance{i * a.stride, p})
		}
	}
	return a.u == 0 || below && len(*cells) == 0
}

// phi is the standard normal distribution function Φ.
func phi(z float64) float64 { return math.Erfc(-z/math.Sqrt2) / 2 }

// chances makes the dimensions ready, with the specification's own uncertainties
// before those of u.
func (s *Spec) chances(u map[string]float64) []chance {
	stated := func(quantity string) float64 {
		if v := s.Uncertainty[quantity]; v > 0 {
			return v
		}
		return u[quantity]
	}
	var list []chance
	for i := range s.regionPlans {
		rp := &s.regionPlans[i]
		list = append(list, chance{plane: newRegionChance(rp, stated(rp.Quantities[0]), stated(rp.Quantities[1]))})
	}
	for i, a := range s.axes {
		list = append(list, chance{axis: &axisChance{column: s.axisColumns[i], edges: a.Edges, stride: int(s.axisStrides[i]), u: stated(a.Quantity)}})
	}
	return list
}
