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
	w := conformityWork{dims: s.chances(u)}
	for i := range w.dims {
		w.dims[i].take(planes)
	}
	for i, c := range codes {
		if (include == nil || include[i]) && !s.decided[c] {
			w.add(&out, i, int(c), confidence)
		}
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

// conformityWork works out dies one after the other.
type conformityWork struct {
	dims       []chance
	bins, next []cellChance // that the die at hand may truly be in
}

// chance works out in which cells of one dimension a die may truly be.
type chance interface {
	take(planes []*wafermap.Plane)
	// at gives the cells of die i with their probabilities.
	at(i int) []cellChance
}

type cellChance struct {
	code int // what the cell adds to a bin's code
	p    float64
}

const (
	// farU is how many standard uncertainties away an edge is of no account:
	// Φ(−4) = 3e−5, under what a share is shown to.
	farU = 4
	// negligible is a probability that is left out of the sums.
	negligible = 1e-6
)

// add puts die i into the sums.
func (w *conformityWork) add(o *Conformity, i, own int, confidence float64) {
	w.bins = append(w.bins[:0], cellChance{0, 1})
	for _, d := range w.dims {
		cells := d.at(i)
		if len(cells) == 1 { // certain of this dimension, as a rule
			for k := range w.bins {
				w.bins[k].code += cells[0].code
				w.bins[k].p *= cells[0].p
			}
			continue
		}
		w.next = w.next[:0]
		for _, b := range w.bins {
			for _, c := range cells {
				w.next = append(w.next, cellChance{b.code + c.code, b.p * c.p})
			}
		}
		w.bins, w.next = w.next, w.bins
	}
	conforms := 0.0
	for _, b := range w.bins {
		if b.code == own {
			conforms = b.p
		} else {
			o.WronglyRejected[b.code] += b.p
		}
	}
	if own < len(o.Confident) {
		o.WronglyAccepted[own] += 1 - conforms
		if conforms >= confidence {
			o.Confident[own]++
		}
	}
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
		list = append(list, newRegionChance(rp, stated(rp.Quantities[0]), stated(rp.Quantities[1])))
	}
	for i, a := range s.axes {
		list = append(list, &axisChance{column: s.axisColumns[i], edges: a.Edges, stride: int(s.axisStrides[i]), u: stated(a.Quantity)})
	}
	return list
}
