package db

import (
	"context"
	"errors"
	"io"
	"time"

	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
)

var errStub = errors.New("not built yet")

// Config says which database and how many connections.
type Config struct {
	URL      string // postgres:// URL or keyword string
	MaxConns int    // 0 = 8
}

// Store is everything that speaks SQL.
type Store struct{}

// Open connects, refuses a schema that is older or newer than this binary's
// (after Migrate it never is), and checks server version and LZ4.
func Open(ctx context.Context, c Config) (*Store, error) { return nil, errStub }

func (s *Store) Close() {}

// Ping answers analytics.ErrUnavailable when the database does not.
func (s *Store) Ping(ctx context.Context) error { return errStub }

// Migrate brings the database to this binary's schema; safe when two servers
// start together (session advisory lock).
func Migrate(ctx context.Context, url string) error { return errStub }

// EnsurePartitions makes the monthly partitions of measurement, plane, … that
// cover [from, to].
func (s *Store) EnsurePartitions(ctx context.Context, from, to time.Time) error { return errStub }

// ---- loading

// Load is one source being stored: one transaction, all or nothing.
type Load struct{}

// BeginLoad opens the transaction.
func (s *Store) BeginLoad(ctx context.Context) (*Load, error) { return nil, errStub }

// WaferContext is what binning and summaries need to know of a wafer before it
// is stored: layout and targets by its product and recipe, and the latest
// version of every spec of the product and the measurement kind. A wafer never
// seen gives a Wafer with only its name.
type WaferContext struct {
	Wafer Wafer
	Specs []Spec
}

// WaferContext reads inside the load's transaction (cached per product).
func (l *Load) WaferContext(ctx context.Context, wafer, kind string) (*WaferContext, error) {
	return nil, errStub
}

// NewMeasurement is a measurement to store with everything derived from it.
type NewMeasurement struct {
	Wafer, Lot, Kind, Station string
	MeasuredAt                time.Time
	DriveCurrentMA            *float64
	Facts                     map[string]string
	Notices                   []string
	SourceLayout              *wafermap.Layout // as the source stated it, or nil
	Grid                      *wafermap.Grid
	Planes                    []wafermap.Plane
	Quantities                []quantity.Quantity
	Remeasured                int
	Derived                   Derived
}

// Derived is what is computed once at load: a summary and a small map per
// plane, a tally per spec version.
type Derived struct {
	Summaries []uniformity.Summary // one per plane
	SmallMaps []SmallMap           // one per plane
	Tallies   []NewTally
	State     string // colour state word
}

// NewTally is a tally of the spec version SpecID.
type NewTally struct {
	SpecID int64
	Tally  Tally
}

// PutMeasurement stores one measurement and makes it current for its wafer and
// kind when it is the newest by measurement time. It creates the wafer when no
// run sheet has named it, and the partitions of its month when missing.
func (l *Load) PutMeasurement(ctx context.Context, m *NewMeasurement) (id int64, err error) {
	return 0, errStub
}

// NewRunSheetRow is where one wafer grew.
type NewRunSheetRow struct {
	Wafer, Lot, Reactor, Carrier, Ring, Pocket, Recipe, Product string
	Run                                                         int
	GrownAt                                                     *time.Time
}

// PutRunSheet stores rows; a wafer named again takes the newer facts. It marks
// the wafers' measurements stale.
func (l *Load) PutRunSheet(ctx context.Context, rows []NewRunSheetRow) error { return errStub }

// Catalogue is what a fab declares by hand: layouts (inside products), recipes
// and quantities.
type Catalogue struct {
	Products   []Product
	Recipes    []Recipe
	Quantities []quantity.Quantity
}

// PutCatalogue inserts or updates and marks measurements of changed products
// and recipes stale.
func (l *Load) PutCatalogue(ctx context.Context, c Catalogue) error { return errStub }

// PutSpec stores document as the next version of its spec, or answers the
// existing version when the document is the same as the latest. It marks
// measurements of its products and kind stale. Name, Title, Kind, Products and
// Document of s are used.
func (l *Load) PutSpec(ctx context.Context, s Spec) (Spec, error) { return Spec{}, errStub }

// PutProfile stores a reading profile by name, a new version when it changed.
func (l *Load) PutProfile(ctx context.Context, name, document string) error { return errStub }

// Commit records the source as stored and commits. src.SHA256 stored before
// gives analytics.ErrDuplicate (naming the earlier source and when) and rolls
// back.
func (l *Load) Commit(ctx context.Context, src Source) (id int64, err error) { return 0, errStub }

// Rollback gives the load up; harmless after Commit.
func (l *Load) Rollback(ctx context.Context) {}

// RefuseSource records a source that could not be read.
func (s *Store) RefuseSource(ctx context.Context, src Source) (id int64, err error) {
	return 0, errStub
}

// SourceByHash finds a stored source by the hex SHA-256 of its bytes;
// analytics.ErrNotFound when there is none.
func (s *Store) SourceByHash(ctx context.Context, sha256 string) (*Source, error) {
	return nil, errStub
}

// Sources lists newest first. state "" = all. Cursor as in Wafers.
func (s *Store) Sources(ctx context.Context, state string, limit int, cursor string) (rows []Source, next string, err error) {
	return nil, "", errStub
}

// Source finds one.
func (s *Store) Source(ctx context.Context, id int64) (*Source, error) { return nil, errStub }

// StaleMeasurements gives up to limit measurements whose derived numbers wait
// to be made again.
func (s *Store) StaleMeasurements(ctx context.Context, limit int) ([]int64, error) {
	return nil, errStub
}

// ReplaceDerived stores derived numbers anew and clears the stale mark.
func (s *Store) ReplaceDerived(ctx context.Context, measurementID int64, d Derived) error {
	return errStub
}

// ---- reading

// Wafers lists wafers, newest measurement first. Bad cursors and limits are
// analytics.ErrInvalid.
func (s *Store) Wafers(ctx context.Context, f WaferFilter) (*WaferPage, error) { return nil, errStub }

// FilterChoices lists what the wafers list can be filtered by.
func (s *Store) FilterChoices(ctx context.Context) (*FilterChoices, error) { return nil, errStub }

// Wafer finds a wafer by name.
func (s *Store) Wafer(ctx context.Context, name string) (*Wafer, error) { return nil, errStub }

// Measurements lists a wafer's measurements, newest first.
func (s *Store) Measurements(ctx context.Context, waferID int64) ([]Measurement, error) {
	return nil, errStub
}

// Measurement finds one by its number.
func (s *Store) Measurement(ctx context.Context, id int64) (*Measurement, error) {
	return nil, errStub
}

// Grid reads a measurement's die grid (cached by hash).
func (s *Store) Grid(ctx context.Context, hash string) (*wafermap.Grid, error) { return nil, errStub }

// Planes reads the named planes of one measurement in the order asked; none
// named = all, in display order. A missing one is analytics.ErrNotFound.
func (s *Store) Planes(ctx context.Context, m *Measurement, quantities ...string) ([]wafermap.Plane, error) {
	return nil, errStub
}

// StoredPlane is a plane as it lies in the database: see EncodePlane.
type StoredPlane struct {
	Encoding   wafermap.Encoding
	Base       float64
	Resolution float64
	N          int
	Data       []byte // values split by significance, low bytes first
}

// StoredPlane reads one plane without decoding it, for the page.
func (s *Store) StoredPlane(ctx context.Context, m *Measurement, quantity string) (*StoredPlane, error) {
	return nil, errStub
}

// EncodePlane packs a plane as it is stored.
func EncodePlane(p *wafermap.Plane) (StoredPlane, error) { return StoredPlane{}, errStub }

// DecodePlane is the inverse of EncodePlane. Damaged data is analytics.ErrInvalid.
func DecodePlane(quantity string, s StoredPlane) (wafermap.Plane, error) {
	return wafermap.Plane{}, errStub
}

// Summaries lists a measurement's summaries in display order.
func (s *Store) Summaries(ctx context.Context, measurementID int64) ([]Summary, error) {
	return nil, errStub
}

// SmallMap reads the small map of one quantity.
func (s *Store) SmallMap(ctx context.Context, measurementID int64, quantity string) (*SmallMap, error) {
	return nil, errStub
}

// Tallies lists the stored tallies of a measurement.
func (s *Store) Tallies(ctx context.Context, measurementID int64) ([]Tally, error) {
	return nil, errStub
}

// Specs lists the latest version of every spec by name.
func (s *Store) Specs(ctx context.Context) ([]Spec, error) { return nil, errStub }

// Spec finds one; version 0 = the latest.
func (s *Store) Spec(ctx context.Context, name string, version int) (*Spec, error) {
	return nil, errStub
}

// SpecVersions lists every version of a spec, newest first.
func (s *Store) SpecVersions(ctx context.Context, name string) ([]Spec, error) { return nil, errStub }

// SpecYield is one wafer's stored yield under a spec's latest version.
type SpecYield struct {
	Wafer       string    `json:"wafer"`
	Lot         string    `json:"lot"`
	MeasuredAt  time.Time `json:"measured_at"`
	Good        int       `json:"good"`
	Denominator int       `json:"denominator"`
}

// SpecYields lists current measurements tallied under a spec, newest first.
func (s *Store) SpecYields(ctx context.Context, name string, limit int) ([]SpecYield, error) {
	return nil, errStub
}

func (s *Store) Products(ctx context.Context) ([]Product, error)             { return nil, errStub }
func (s *Store) Recipes(ctx context.Context) ([]Recipe, error)               { return nil, errStub }
func (s *Store) Profiles(ctx context.Context) ([]Profile, error)             { return nil, errStub }
func (s *Store) Quantities(ctx context.Context) ([]quantity.Quantity, error) { return nil, errStub }

// Runs lists growth runs of a reactor ("" = all), newest first.
func (s *Store) Runs(ctx context.Context, reactor string, limit int) ([]GrowthRun, error) {
	return nil, errStub
}

// WriteDiesCSV streams every die of a measurement: x, y, the quantities.
func (s *Store) WriteDiesCSV(ctx context.Context, w io.Writer, m *Measurement, quantities ...string) error {
	return errStub
}
