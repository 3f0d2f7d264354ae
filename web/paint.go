package web

import (
	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
)

// MapPicture is a map to paint: a plane, or the bin codes of its dies.
type MapPicture struct {
	Grid   *wafermap.Grid
	Layout *wafermap.Layout
	Plane  *wafermap.Plane // nil: Codes are painted
	Codes  []uint16        // one per die, index into Cells
	Cells  []binning.Cell
	Low    float64 // value at the scale's low end, in the plane's unit
	High   float64 // value at its high end
	Target float64 // NaN: the magnitude scale
	Size   int     // pixels, 32 to 4096
	Dark   bool
}

// SmallPicture is the small map that lists show.
type SmallPicture struct {
	Size   int    // cells along each side
	Cells  []byte // Size × Size, row 0 at the top; 0 = no die, 1 (Low) to 255 (High)
	Low    float64
	High   float64
	Target float64 // NaN: the magnitude scale
	Dark   bool
}
