package web

import (
	"html/template"

	"epitally/analytics/colour"
)

// WaferPage shows one measurement of one wafer.
type WaferPage struct {
	Base
	Wafer        string
	State        string
	Facts        []Fact // where it grew and what it is for
	Measured     []Fact // of the measurement shown
	Notices      []string
	Suspects     []colour.Suspect // what in the measurement breaks physics
	Measurements []Option         // selectors of the form; empty when there is no choice
	Quantities   []Option
	Specs        []Option // value "name" or "name@version"
	View         string   // "quantity" or "bins"
	Map          *MapData // nil: unmeasured
	MapTitle     string   // what the map shows, with its unit
	MapPNG       string   // URL of the server's picture, for reading without script and for print
	MapAlt       string
	MarkWords    string // "flat at the bottom"
	EdgeWords    string // "edge exclusion of 3 mm"; "" = none
	Histogram    *Chart
	Radial       *Chart
	BinYield     *Chart
	SpecTitle    string
	SpecHref     string
	YieldBig     string // "71 %"
	Confident    string // "64 %": those that conform with 95 % confidence; "" = no uncertainty is known
	YieldOver    string // "10,306 of 14,516 layout dies inside the edge exclusion"
	Stats        []StatLine
	StatsOver    string // which dies the figures are over
	Downloads    []Fact // CSV of the dies and the like
	LoadHint     bool   // unmeasured: say how to load
}

// StatLine is one row of the statistics table: formatted with the decimals of
// its quantity, one more for spreads.
type StatLine struct {
	Label, Unit           string
	From                  string // what it was computed from; "" = measured
	N, Missing            string
	Mean, SD, RobustSD    string
	Min, Q01, Q05, Q25    string
	Median, Q75, Q95, Q99 string
	Max                   string
	Within                string // "±1 nm 40 %, ±2 nm 71 %, ±5 nm 99 %"; "–" without a target
	Implausible           int
}

// MapData is what the map script needs, as JSON.
type MapData struct {
	Wafer      string        `json:"wafer"`
	Grid       string        `json:"grid"` // URL of the binary grid
	Dies       int           `json:"dies"`
	Layout     MapLayout     `json:"layout"`
	Quantities []MapQuantity `json:"quantities"`
	Shown      string        `json:"shown"` // name of the quantity shown
	View       string        `json:"view"`  // "quantity" or "bins"
	Bins       *MapBins      `json:"bins"`  // nil: no specification applies
	Palette    Palettes      `json:"palette"`
}

// MapLayout is the part of a layout that drawing needs; lengths in LengthUnit.
type MapLayout struct {
	Diameter   float64 `json:"diameter"`
	PitchX     float64 `json:"pitch_x"`
	PitchY     float64 `json:"pitch_y"`
	Edge       float64 `json:"edge"`
	Mark       string  `json:"mark"`
	MarkAngle  float64 `json:"mark_angle"`
	FlipX      bool    `json:"flip_x"` // die x grows to the left
	FlipY      bool    `json:"flip_y"` // die y grows downwards
	CentreX    float64 `json:"centre_x"`
	CentreY    float64 `json:"centre_y"`
	Assumed    bool    `json:"assumed"`
	LengthUnit string  `json:"length_unit"` // "mm", or "dies" where no pitch is known
	FlatHeight float64 `json:"flat_offset"` // distance of the flat's chord from the centre; 0 = no flat
}

// MapQuantity is one plane that can be shown.
type MapQuantity struct {
	Name     string   `json:"name"`
	Label    string   `json:"label"`
	Unit     string   `json:"unit"`
	Decimals int      `json:"decimals"`
	Plane    string   `json:"plane"` // URL of the binary plane
	Scale    string   `json:"scale"` // "deviation", "magnitude" or "category"
	Low      float64  `json:"low"`
	High     float64  `json:"high"`
	Target   *float64 `json:"target"`
}

// MapBins is the dies' bins under one spec version.
type MapBins struct {
	URL     string    `json:"url"` // URL of the binary codes
	Spec    string    `json:"spec"`
	Version int       `json:"version"`
	Cells   []MapCell `json:"cells"` // index = code
}

// MapCell is one bin, reject reason or "untested".
type MapCell struct {
	Name  string  `json:"name"`
	Class string  `json:"class"`
	Dies  int     `json:"dies"`
	Look  BinLook `json:"look"`
}

// Chart is a chart with its words: every chart can be read as a table.
type Chart struct {
	ID       string // element id, also the name in CSVURL
	Question string // heading
	Caption  string // what it shows, with the sample size
	Label    string // for readers who do not see it
	Options  any    // ECharts options, JSON
	Table    Table
	CSVURL   string
	Tall     int // rows of a horizontal bar chart, for its height; 0 = the usual height
}

// Table is a small table; the first column heads its rows.
type Table struct {
	Head []string
	Rows [][]string // as a person reads them
	Raw  [][]string // the same as a program reads them: no separators, no units
}

// HeightClass is the style class for the height of a chart with Tall rows.
func (c *Chart) HeightClass() string {
	switch {
	case c.Tall == 0:
		return "chart"
	case c.Tall <= 6:
		return "chart chart-6"
	case c.Tall <= 12:
		return "chart chart-12"
	default:
		return "chart chart-24"
	}
}

// scriptJSON marks data as already being JSON for a data block.
type scriptJSON = template.JS
