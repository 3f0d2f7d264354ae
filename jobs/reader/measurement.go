package reader

import (
	"time"

	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// Measurement is one wafer measured at one station at one time, as read from a
// source. Its grid is in canonical order and its planes follow it.
type Measurement struct {
	Wafer          string
	Lot            string // "" = not stated
	Kind           string // "pl", "probe" or another name of the same form as a quantity's
	Station        string // "" = not stated
	MeasuredAt     time.Time
	DriveCurrentMA *float64          // nil = not stated
	Facts          map[string]string // whatever else the source states, key → text; shown, never computed with
	// Layout is what the source itself says of the wafer's geometry (pitch,
	// diameter, flat), or nil. Assumed is true in it.
	Layout     *wafermap.Layout
	Grid       wafermap.Grid
	Planes     []wafermap.Plane
	Quantities []quantity.Quantity // one per plane, same order
	// Line holds, per die of the grid, the 1-based text line its last row stood
	// on; nil for sources without lines.
	Line       []int32
	Remeasured int      // dies the source measured more than once
	Notices    []string // what a person should know, though it was read
}

// RunSheetRow says where one wafer grew and what it is for.
type RunSheetRow struct {
	Line    int
	Wafer   string
	Lot     string
	Reactor string
	Run     int
	GrownAt *time.Time // nil = not stated
	Carrier string
	Ring    string
	Pocket  string
	Recipe  string
	Product string
}
