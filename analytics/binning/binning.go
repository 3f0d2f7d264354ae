package binning

import (
	"fmt"
	"math/big"
	"sync"
	"time"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// Class is what a code means for yield.
type Class uint8

const (
	Sellable   Class = iota // a bin that can be sold
	Unsellable              // a bin of the spec that is not sold
	Reject                  // outside every bin, by the first reject rule that holds or the axis end it lies beyond
	Untested                // a value that the spec needs is missing
)

// String is the word used in tallies: sellable, unsellable, reject, untested.
func (c Class) String() string { return [...]string{"sellable", "unsellable", "reject", "untested"}[c] }

// UntestedName is the name of the code of dies that lack a value.
const UntestedName = "untested"

// Spec is a parsed specification document. It does not change after Parse and
// may be used by several goroutines at once.
type Spec struct {
	Name     string
	Title    string
	Kind     string
	Products []string

	ValidFrom, ValidUntil time.Time          // dates, UTC; zero: open
	Uncertainty           map[string]float64 // standard uncertainty of one reading by quantity, in its unit
	Currency              string             // of Price; "" when none is said

	axes        []Axis
	regions     []*Region
	dimensions  []Dimension
	rules       []Rule
	cells       []Cell
	regionPlans []regionPlan
	plans       []plan   // per quantity, in the order of Quantities
	axisColumns []int    // of the axes' quantities among the plans
	axisStrides []uint32 // what one cell further adds to a bin's code
	decided     []bool   // per code: a reject rule's reason, or untested
	terms       []uint32 // verdict of each conjunction that spans quantities, first rule first
	missing     uint32   // verdict of a die that lacks a value
	binners     sync.Pool
}

// Axis is one axis of the bins.
type Axis struct {
	Name     string
	Quantity string
	Edges    []float64 // ascending; cell i is [Edges[i], Edges[i+1])
	Names    []string  // of the cells
	EdgeAt   []Place   // where each edge stands in the document
	Guard    float64   // taken off every cell on each side
}

// Rule is one reject rule.
type Rule struct {
	Reason string
	When   string
}

// Cell is what one code stands for.
type Cell struct {
	Name  string // bin name, reject reason, or "untested"
	Class Class
	Price float64 // of one die; 0 where none is stated
}

// Quantities names what the spec needs, in the order Bin wants the planes:
// by first mention, regions before axes before reject rules.
func (s *Spec) Quantities() []string {
	names := make([]string, len(s.plans))
	for i := range s.plans {
		names[i] = s.plans[i].quantity
	}
	return names
}

// Axes lists the axes in the document's order. Read only.
func (s *Spec) Axes() []Axis { return s.axes }

// Regions lists the regions in the document's order. Read only.
func (s *Spec) Regions() []*Region { return s.regions }

// ValidOn reports whether the specification is meant for a day: from its first to
// its last date, both included.
func (s *Spec) ValidOn(day time.Time) bool {
	date := day.UTC().Truncate(24 * time.Hour)
	return (s.ValidFrom.IsZero() || !date.Before(s.ValidFrom)) && (s.ValidUntil.IsZero() || !date.After(s.ValidUntil))
}

// Rules lists the reject rules in the order they are tried. Read only.
func (s *Spec) Rules() []Rule { return s.rules }

// Cells lists the meaning of every code that Bin can give, code = index: bins
// first in the spec's order (the last axis varies fastest), then reject reasons
// in rule order, then the reasons of the axes' ends and guards, then untested.
// Read only.
func (s *Spec) Cells() []Cell { return s.cells }

// Bin writes the code of every die to dst (len = dies; nil = only count) and the
// dies per code to counts (len = len(Cells())), counting only dies where include
// is true (nil = all). planes are in the order of Quantities; a nil plane means
// the measurement does not have that quantity, so its dies are untested. It does
// not allocate per die. Slices of unequal length are analytics.ErrInvalid.
//
// Whoever bins many wafers keeps a Binner instead.
func (s *Spec) Bin(dst []uint16, counts []int, planes []*wafermap.Plane, include []bool) error {
	b, _ := s.binners.Get().(*Binner)
	if b == nil {
		b = s.NewBinner()
	}
	defer s.binners.Put(b)
	return b.Bin(dst, counts, planes, include)
}

// A verdict is 32 bits for one value of one quantity. Verdicts of the spec's
// quantities are joined without branching on what they mean:
//
//   - within every rule and axis: the high half is 0 and the low half is the
//     quantity's share of the bin's code, so that the sum of all verdicts is the code;
//   - a reject: the high half ranks it (untested highest, then rules from the
//     first on, then axes) and the low half is its code, so that the largest
//     verdict names what the die is rejected for.
type plan struct {
	quantity string
	cuts     []cut    // ascending
	verdicts []uint32 // per region between cuts: len(cuts) + 1
	masks    []uint64 // per region, bit t: this quantity does not rule term t out; nil when no term spans quantities
}

// regionPlan gives every outcome of a region its verdict.
type regionPlan struct {
	*Region
	columns  [2]int   // of its quantities among the plans
	verdicts []uint32 // in the guard band, outside, then cell by cell: outcome + 2
	step     uint32   // what one cell further adds to a bin's code
}

// cut is a place on the axis of real numbers that something changes at: values
// from at on lie beyond it, or, when after is set, only values above at.
type cut struct {
	at    *big.Rat
	after bool
}

func (c cut) compare(d cut) int {
	if order := c.at.Cmp(d.at); order != 0 || c.after == d.after {
		return order
	}
	if c.after {
		return 1
	}
	return -1
}

// threshold is the smallest integer k whose value k·10^exponent lies beyond the
// cut, limited to ±2^62.
func (c cut) threshold(exponent int) int64 {
	num, den := new(big.Int).Set(c.at.Num()), new(big.Int).Set(c.at.Denom())
	scale := new(big.Int).Exp(big.NewInt(10), big.NewInt(int64(max(exponent, -exponent))), nil)
	if exponent < 0 {
		num.Mul(num, scale)
	} else {
		den.Mul(den, scale)
	}
	floor, rest := new(big.Int).DivMod(num, den, new(big.Int)) // Euclidean: rounds down for a positive divisor
	if c.after || rest.Sign() != 0 {
		floor.Add(floor, big.NewInt(1))
	}
	if floor.BitLen() > 62 {
		return int64(floor.Sign()) << 62
	}
	return floor.Int64()
}

func invalid(format string, args ...any) error {
	return fmt.Errorf(format+": %w", append(args, analytics.ErrInvalid)...)
}

// Dimension is one part of a bin's name: the cells of a region or of an axis.
type Dimension struct {
	Name   string
	Cells  []string
	Stride int // what one cell further adds to a bin's code
}

// Dimensions lists the regions, then the axes. A bin's cell of dimension d is
// code / d.Stride % len(d.Cells).
func (s *Spec) Dimensions() []Dimension { return s.dimensions }

// Bins is the number of codes that are bins; they come first.
func (s *Spec) Bins() int { return s.bins() }
