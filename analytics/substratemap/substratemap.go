// Package substratemap writes and reads the bins of a wafer's dies as a substrate
// map in XML per SEMI E142.
//
// The standard leaves open, as far as public sources tell, whether the first row of
// a map is the row at the origin or the top of the picture. Both are settings here:
// where the origin lies, which way the axes grow, and which row comes first; a
// comment at the head of a written file says which were used, and a reader is told.
// Die coordinates are kept as they are: a reference device named "die 0 0" says at
// which column and row of the map the die (0, 0) lies, be it inside the map or not.
package substratemap

import (
	"fmt"

	"epitally/analytics"
)

// Map is the bins of one wafer. Columns and rows count from 0 at the origin, in the
// directions of the axes.
type Map struct {
	Wafer, Lot, Product string
	Name                string // of what binned it: "harbour-blue v3"
	DiameterMM          float64
	StepXMM, StepYMM    float64 // pitch; 0 = not known
	Place               Place
	Columns, Rows       int
	ZeroColumn, ZeroRow int      // where the die (0, 0) lies
	Codes               []uint16 // row by row from the origin; NullCode = no die
	Bins                []Bin
}

// NullCode stands for a place without a die.
const NullCode = 0xFFFF

// Bin is what a code stands for.
type Bin struct {
	Code  uint16
	Name  string
	Pass  bool
	Count int // dies; counted from the codes when written, as stated when read
}

// Place says how the map lies.
type Place struct {
	Origin      string // LowerLeft, LowerRight, UpperLeft or UpperRight
	Axis        string // UpRight, DownRight, UpLeft or DownLeft: how coordinates grow
	TopRowFirst bool   // the first row written is the top of the picture; else the row at the origin
}

// DefaultPlace is the standard's: the origin at the lower left, up and right, and
// the row at the origin first.
var DefaultPlace = Place{Origin: "LowerLeft", Axis: "UpRight"}

// axisOf is the axis direction that leads from an origin into the map.
var axisOf = map[string]string{"LowerLeft": "UpRight", "LowerRight": "UpLeft", "UpperLeft": "DownRight", "UpperRight": "DownLeft"}

// Check refuses an origin that is none and an axis that leads out of the map, with
// analytics.ErrInvalid.
func (p Place) Check() error {
	axis, ok := axisOf[p.Origin]
	if !ok {
		return fmt.Errorf("origin %q: use LowerLeft, LowerRight, UpperLeft or UpperRight: %w", p.Origin, analytics.ErrInvalid)
	}
	if p.Axis != axis {
		return fmt.Errorf("axis direction %q leads out of the map from origin %s: use %s: %w", p.Axis, p.Origin, axis, analytics.ErrInvalid)
	}
	return nil
}

// PlaceAt is the place of an origin, its axes leading into the map.
func PlaceAt(origin string, topRowFirst bool) (Place, error) {
	p := Place{origin, axisOf[origin], topRowFirst}
	return p, p.Check()
}

// originAtTop reports whether rows count from the top down.
func (p Place) originAtTop() bool { return p.Origin == "UpperLeft" || p.Origin == "UpperRight" }

// reversed reports whether the rows are written from the far side of the map.
func (p Place) reversed() bool { return p.TopRowFirst && !p.originAtTop() }

func (m *Map) check() error {
	if err := m.Place.Check(); err != nil {
		return err
	}
	if m.Wafer == "" || m.Columns < 1 || m.Rows < 1 || m.Columns > maxSide || m.Rows > maxSide || len(m.Codes) != m.Columns*m.Rows {
		return fmt.Errorf("a map of %d columns and %d rows with %d codes for wafer %q is not whole: %w", m.Columns, m.Rows, len(m.Codes), m.Wafer, analytics.ErrInvalid)
	}
	known := map[uint16]bool{NullCode: true}
	for _, b := range m.Bins {
		known[b.Code] = true
	}
	for i, c := range m.Codes {
		if !known[c] {
			return fmt.Errorf("column %d, row %d has the code %04X, which no bin explains: %w", i%m.Columns, i/m.Columns, c, analytics.ErrInvalid)
		}
	}
	return nil
}

// maxSide bounds columns and rows.
const maxSide = 16_384
