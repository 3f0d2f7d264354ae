// Package binning puts dies into the bins of a specification.
package binning

import (
	"errors"

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

// Spec is a parsed specification document.
type Spec struct {
	Name     string
	Title    string
	Kind     string
	Products []string
	// the rest is the builder's
}

// Parse reads a specification document (YAML). Every error is an
// *analytics.Fault with line and key.
func Parse(document []byte) (*Spec, error) { return nil, errors.New("not built yet") }

// Quantities names what the spec needs, in the order Bin wants the planes.
func (s *Spec) Quantities() []string { return nil }

// Cell is what one code stands for.
type Cell struct {
	Name  string // bin name, reject reason, or "untested"
	Class Class
}

// Cells lists the meaning of every code that Bin can give, code = index: bins
// first in the spec's order, then reject reasons in rule order, then untested.
func (s *Spec) Cells() []Cell { return nil }

// Bin writes the code of every die to dst (len = dies) and the dies per code to
// counts (len = len(Cells())), counting only dies where include is true (nil =
// all). planes are in the order of Quantities; a nil plane means the
// measurement does not have that quantity, so its dies are untested. It does
// not allocate per die.
func (s *Spec) Bin(dst []uint16, counts []int, planes []*wafermap.Plane, include []bool) error {
	return errors.New("not built yet")
}
