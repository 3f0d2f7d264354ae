package db

import (
	"time"

	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
)

// Wafer is a wafer with what is known of its growth. Empty strings and nil
// pointers mean that no run sheet has said so yet.
type Wafer struct {
	ID      int64            `json:"id"`
	Name    string           `json:"wafer"`
	Lot     string           `json:"lot"`
	Reactor string           `json:"reactor"`
	Run     *int             `json:"run"`
	GrownAt *time.Time       `json:"grown_at"`
	Carrier string           `json:"carrier"`
	Ring    string           `json:"ring"`
	Pocket  string           `json:"pocket"`
	Recipe  string           `json:"recipe"`
	Product string           `json:"product"`
	Layout  *wafermap.Layout `json:"layout"`  // the product's layout; nil when there is no product
	Targets []Target         `json:"targets"` // the recipe's targets

	Colour *colour.PeakModel `json:"colour"` // the recipe's; null = the default line model
}

// Target is what a recipe means a quantity to be.
type Target struct {
	Quantity string  `json:"quantity"`
	Value    float64 `json:"value"`  // in the quantity's unit
	Window   float64 `json:"window"` // half width within which a wafer is on colour, same unit
}

// Measurement is a stored measurement without its planes.
type Measurement struct {
	ID             int64               `json:"id"`
	WaferID        int64               `json:"wafer_id"`
	Wafer          string              `json:"wafer"`
	Kind           string              `json:"kind"`
	Station        string              `json:"station"`
	MeasuredAt     time.Time           `json:"measured_at"`
	DriveCurrentMA *float64            `json:"drive_current_ma"`
	Dies           int                 `json:"dies"`
	Remeasured     int                 `json:"remeasured"`
	Current        bool                `json:"current"`
	SourceID       int64               `json:"source_id"`
	GridHash       string              `json:"grid"`        // hex SHA-256
	Layout         *wafermap.Layout    `json:"layout"`      // the one in force: the product's, else the source's, else assumed from the grid's extent; never nil
	LayoutDies     int                 `json:"layout_dies"` // dies on the layout inside the edge exclusion; 0 when Layout.Assumed
	Facts          map[string]string   `json:"facts"`
	Notices        []string            `json:"notices"`
	Quantities     []quantity.Quantity `json:"quantities"`
	DerivedFrom    map[string]string   `json:"derived_from"` // quantity → what it was computed from; what is not named was measured
	Suspects       []colour.Suspect    `json:"suspects"`     // what in it breaks physics
}

// Summary is the stored summary of one plane.
type Summary struct {
	MeasurementID int64              `json:"measurement_id"`
	Quantity      quantity.Quantity  `json:"quantity"`
	Summary       uniformity.Summary `json:"summary"`
}

// Tally is dies per bin of one measurement under one spec version.
type Tally struct {
	MeasurementID int64       `json:"measurement_id"`
	Spec          string      `json:"specification"`
	Version       int         `json:"version"`
	Dies          int         `json:"dies"`        // dies of the measurement
	Tested        int         `json:"tested"`      // dies with every value the spec needs
	Good          int         `json:"good"`        // dies in sellable bins
	Denominator   int         `json:"denominator"` // dies the yield is over
	OverLayout    bool        `json:"over_layout"` // true: Denominator is the layout's dies inside the edge exclusion; false: no layout is known and it is Dies
	Cells         []TallyCell `json:"cells"`
}

// TallyCell is one line of a tally.
type TallyCell struct {
	Name  string `json:"name"`
	Class string `json:"class"` // "sellable", "unsellable", "reject", "untested"
	Dies  int    `json:"dies"`
	// Of bins under a specification or a station that states uncertainties, else
	// nil; see binning.Conformity.
	WronglyAccepted *float64 `json:"wrongly_accepted,omitempty"` // expected dies of the bin that truly lie outside it
	WronglyRejected *float64 `json:"wrongly_rejected,omitempty"` // expected dies elsewhere that truly lie in it
	Confident       *int     `json:"confident,omitempty"`        // dies of the bin that conform with 95 % confidence
}

// Spec is one version of a specification. Versions never change once stored.
type Spec struct {
	ID       int64     `json:"id"`
	Name     string    `json:"specification"`
	Version  int       `json:"version"`
	Title    string    `json:"title"`
	Kind     string    `json:"kind"` // measurement kind it bins
	Products []string  `json:"products"`
	Document string    `json:"document"` // the YAML as given
	StoredAt time.Time `json:"stored_at"`
	Latest   bool      `json:"latest"`
	Author   string    `json:"author"` // who published the version, "" when it came as a file
	Reason   string    `json:"reason"` // why, in their words
	// First and last day it is meant for, as YYYY-MM-DD; "" = open.
	ValidFrom  string `json:"valid_from"`
	ValidUntil string `json:"valid_until"`
}

// Product is what die is made from a wafer, on which layout.
type Product struct {
	Name   string          `json:"product"`
	Layout wafermap.Layout `json:"layout"`
}

// Recipe is what was meant to grow.
type Recipe struct {
	Name    string            `json:"recipe"`
	Targets []Target          `json:"targets"`
	Colour  *colour.PeakModel `json:"colour"` // how its dominant wavelength follows from the peak; null = the default line model
}

// GrowthRun is one growth run of one reactor.
type GrowthRun struct {
	Reactor string     `json:"reactor"`
	Number  int        `json:"run"`
	Recipe  string     `json:"recipe"`
	Carrier string     `json:"carrier"`
	GrownAt *time.Time `json:"grown_at"`
	Wafers  int        `json:"wafers"`
}

// Source states, the words the pages use (DESIGN: waiting → reading → stored | refused).
const (
	SourceWaiting = "waiting"
	SourceReading = "reading"
	SourceStored  = "stored"
	SourceRefused = "refused"
)

// Source is a file data came from.
type Source struct {
	ID       int64      `json:"id"`
	Name     string     `json:"name"`   // path inside the drop folder, or as given
	SHA256   string     `json:"sha256"` // hex, of the decompressed bytes; "" while not known
	Bytes    int64      `json:"bytes"`
	Format   string     `json:"format"` // "epitally-csv", "delimited", "stdf", "run-sheet", "catalogue", "specification", "profile", ""
	State    string     `json:"state"`
	Reason   string     `json:"reason"` // why refused; "" otherwise
	Line     int        `json:"line"`
	Column   int        `json:"column"`
	Offset   int64      `json:"offset"`
	Profile  string     `json:"profile"`
	SeenAt   time.Time  `json:"seen_at"`
	StoredAt *time.Time `json:"stored_at"`
	Wafers   int        `json:"wafers"`
	Dies     int64      `json:"dies"`
	Notices  []string   `json:"notices"`
}

// WaferFilter selects wafers; zero fields do not filter.
type WaferFilter struct {
	Search  string // matches the start of a wafer or lot name, or a run written as "Heron 204" or "204"; case-insensitive
	Lot     string
	Reactor string
	Run     int
	Recipe  string
	Product string
	State   string // colour state word
	Kind    string // list measurements of this kind; "" = the kind measured last
	Spec    string // tally under the latest version of this spec; "" = the first spec of the wafer's product by name
	Limit   int    // 1 to 500; 0 = 50
	Cursor  string // from WaferPage.Next; "" = from the start
}

// WaferRow is one line of the wafers list: newest measurement first.
type WaferRow struct {
	Wafer       Wafer        `json:"wafer"`
	Measurement *Measurement `json:"measurement"` // nil: unmeasured; without Facts and Quantities
	Main        *Summary     `json:"main"`        // summary of the wavelength the list shows (dominant, else peak, else the first quantity)
	State       string       `json:"state"`       // on colour, short, long, mixed, unmeasured, or "" without a target
	Tally       *Tally       `json:"tally"`       // nil: no spec applies
}

// WaferPage is one page of the wafers list.
type WaferPage struct {
	Rows  []WaferRow `json:"rows"`
	Total int        `json:"total"` // wafers the filter selects
	Next  string     `json:"next"`  // cursor of the next page; "" at the end
}

// FilterChoices is what the wafers list can be filtered by.
type FilterChoices struct {
	Lots, Reactors, Recipes, Products, States, Specs, Kinds []string
}

// Profile is a stored reading profile.
type Profile struct {
	Name     string    `json:"profile"`
	Version  int       `json:"version"`
	Document string    `json:"document"`
	StoredAt time.Time `json:"stored_at"`
}

// SmallMap is the picture of a plane that lists show, computed at load.
type SmallMap struct {
	Quantity quantity.Quantity
	Size     int     // Size × Size cells over the wafer's square, row 0 at the top
	Low      float64 // value of cell code 1
	High     float64 // value of cell code 255
	Cells    []byte  // 0 = no die there; else linear from Low (1) to High (255)
}
