package jobs

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"slices"
	"time"

	"golang.org/x/sync/errgroup"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/quantity"
	"epitally/db"
	"epitally/jobs/reader"
)

// Loader turns one source into stored measurements. It holds no state between
// sources but caches, and is not for concurrent use: each worker has its own.
type Loader struct {
	store    *db.Store
	log      *slog.Logger
	zone     *time.Location // for times that a source writes without a zone
	maxBytes int64          // decompressed size limit of one source
	deriver  *deriver
	now      func() time.Time
}

// LoaderConfig says how sources are read.
type LoaderConfig struct {
	Store    *db.Store
	Logger   *slog.Logger
	Zone     *time.Location
	MaxBytes int64 // decompressed bytes of one source; 0 = the reader's default
	Now      func() time.Time
}

// NewLoader makes a loader.
func NewLoader(c LoaderConfig) *Loader {
	return &Loader{store: c.Store, log: c.Logger, zone: c.Zone, maxBytes: c.MaxBytes, now: c.Now, deriver: newDeriver()}
}

// Incoming is a source to load.
type Incoming struct {
	Name     string
	R        io.Reader
	Bytes    int64            // size as it lies on disk
	Profile  string           // force a reading profile by name; "" = by its match
	Profiles []reader.Profile // profiles to choose from
	// Unchanged is asked after reading and before the commit; an error (the file
	// grew or was replaced meanwhile) gives the load up. nil = always unchanged.
	Unchanged func() error
	// Progress, when not nil, is told of every measurement stored.
	Progress func(wafer string, dies int)
}

// Load reads, derives and stores in one transaction. The Source says what was
// stored, or as much as is known when the error is not nil. A transient failure
// of the database (a deadlock, a lost connection) is analytics.ErrUnavailable.
func (l *Loader) Load(ctx context.Context, in Incoming) (src db.Source, err error) {
	src = db.Source{Name: in.Name, Bytes: in.Bytes, Offset: -1, SeenAt: l.now(), State: db.SourceReading}
	tx, err := l.store.BeginLoad(ctx)
	if err != nil {
		return src, err
	}
	defer tx.Rollback(context.WithoutCancel(ctx))

	result, err := l.readInto(ctx, tx, in)
	src.SHA256, src.Format, src.Profile = result.SHA256, result.Format, result.Profile
	src.Wafers, src.Dies, src.Notices = result.Wafers, result.Dies, result.Notices
	if err != nil {
		return src, analytics.WithSource(err, in.Name)
	}
	if in.Unchanged != nil {
		if err := in.Unchanged(); err != nil {
			return src, err
		}
	}
	src.State = db.SourceStored
	if src.ID, err = tx.Commit(ctx, src); err != nil {
		src.State = db.SourceReading
		return src, err
	}
	return src, nil
}

// Profiles reads the stored reading profiles. One that an older version took and
// this one does not is left out, and said in the log.
func (l *Loader) Profiles(ctx context.Context) ([]reader.Profile, error) {
	stored, err := l.store.Profiles(ctx)
	if err != nil {
		return nil, err
	}
	var parsed []reader.Profile
	for _, p := range stored {
		profile, err := reader.ParseProfile([]byte(p.Document))
		if err != nil {
			l.log.Error("a stored reading profile no longer parses", "profile", p.Name, "error", err)
			continue
		}
		parsed = append(parsed, profile)
	}
	return parsed, nil
}

// readInto runs the three stages: read, derive, store. Each hands over one
// measurement at a time, so that memory holds at most four of them.
func (l *Loader) readInto(ctx context.Context, tx *db.Load, in Incoming) (reader.Result, error) {
	group, stages := errgroup.WithContext(ctx)
	read := make(chan *reader.Measurement)
	derived := make(chan *db.NewMeasurement)
	var result reader.Result
	var documents documentsOf

	group.Go(func() (err error) {
		defer close(read)
		result, err = reader.Read(stages, reader.Input{
			Name: in.Name, R: in.R, Profiles: in.Profiles, ProfileName: in.Profile, Zone: l.zone, MaxBytes: l.maxBytes,
		}, reader.Sink{
			Measurement: func(m *reader.Measurement) error { return hand(stages, read, m) },
			RunSheet: func(rows []reader.RunSheetRow) error {
				documents.runSheet = append(documents.runSheet, rows...)
				return nil
			},
			Document: func(kind, name, text string) error {
				documents.kind, documents.name, documents.text = kind, name, text
				return nil
			},
		})
		return err
	})
	group.Go(func() error {
		defer close(derived)
		for m := range read {
			n, err := l.prepare(stages, tx, m)
			if err != nil {
				return err
			}
			if err := hand(stages, derived, n); err != nil {
				return err
			}
		}
		return nil
	})
	group.Go(func() error {
		for n := range derived {
			if _, err := tx.PutMeasurement(stages, n); err != nil {
				return err
			}
			if in.Progress != nil {
				in.Progress(n.Wafer, n.Grid.Len())
			}
		}
		return nil
	})
	if err := group.Wait(); err != nil {
		return result, err
	}
	return result, documents.put(ctx, tx)
}

func hand[T any](ctx context.Context, to chan<- T, v T) error {
	select {
	case to <- v:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}

// prepare derives everything that is stored beside the planes.
func (l *Loader) prepare(ctx context.Context, tx *db.Load, m *reader.Measurement) (*db.NewMeasurement, error) {
	about, err := tx.WaferContext(ctx, m.Wafer, m.Kind, m.Station, m.MeasuredAt)
	if err != nil {
		return nil, err
	}
	layout := layoutFor(about.Wafer.Layout, m.Layout, &m.Grid)
	if err := checkOnWafer(&m.Grid, m.Line, &layout, m.Wafer); err != nil {
		return nil, err
	}
	d, err := l.deriver.derive(dies{grid: &m.Grid, layout: layout, planes: m.Planes, quantities: m.Quantities, kind: m.Kind,
		measuredAt: m.MeasuredAt, driveCurrentMA: m.DriveCurrentMA, colour: about.Wafer.Colour, uncertainty: about.Uncertainty},
		about.Wafer.Targets, about.Specs)
	if err != nil {
		return nil, err
	}
	return &db.NewMeasurement{
		Wafer: m.Wafer, Lot: m.Lot, Kind: m.Kind, Station: m.Station, MeasuredAt: m.MeasuredAt,
		DriveCurrentMA: m.DriveCurrentMA, Facts: m.Facts, Notices: m.Notices, SourceLayout: m.Layout,
		Grid: &m.Grid, Planes: m.Planes, Quantities: m.Quantities, Remeasured: m.Remeasured, Derived: d,
	}, nil
}

// Recompute makes the derived numbers of one measurement anew, after its run
// sheet, its layout or a specification changed.
func (l *Loader) Recompute(ctx context.Context, id int64) (err error) {
	defer func() {
		if err != nil {
			err = fmt.Errorf("recompute measurement %d: %w", id, err)
		}
	}()
	return l.store.HoldDocuments(ctx, func() error { return l.recompute(ctx, id) })
}

func (l *Loader) recompute(ctx context.Context, id int64) error {
	m, err := l.store.Measurement(ctx, id)
	if err != nil {
		return err
	}
	w, err := l.store.Wafer(ctx, m.Wafer)
	if err != nil {
		return err
	}
	g, err := l.store.Grid(ctx, m.GridHash)
	if err != nil {
		return err
	}
	m.Quantities = slices.DeleteFunc(m.Quantities, func(q quantity.Quantity) bool { return m.DerivedFrom[q.Name] != "" })
	planes, err := l.store.Planes(ctx, m) // those measured: the list holds no others now
	if err != nil {
		return err
	}
	uncertainty, err := l.store.StationUncertainty(ctx, m.Station)
	if err != nil {
		return err
	}
	specs, err := l.store.SpecsFor(ctx, w.Product, m.Kind, m.MeasuredAt)
	if err != nil {
		return err
	}
	in := dies{grid: g, layout: *m.Layout, planes: planes, quantities: m.Quantities, kind: m.Kind,
		measuredAt: m.MeasuredAt, driveCurrentMA: m.DriveCurrentMA, colour: w.Colour, uncertainty: uncertainty}
	d, err := l.deriver.derive(in, w.Targets, specs)
	if err != nil {
		return err
	}
	return l.store.ReplaceDerived(ctx, id, d)
}

// RecomputeStale brings derived numbers up to date after run sheets, layouts,
// recipes or specifications changed.
func (l *Loader) RecomputeStale(ctx context.Context) error {
	for {
		ids, err := l.store.StaleMeasurements(ctx, 64)
		if err != nil || len(ids) == 0 {
			return err
		}
		for _, id := range ids {
			if err := l.Recompute(ctx, id); err != nil {
				return err
			}
		}
	}
}

// documentsOf is what a source holds besides measurements.
type documentsOf struct {
	runSheet         []reader.RunSheetRow
	kind, name, text string
}

func (d *documentsOf) put(ctx context.Context, tx *db.Load) error {
	if len(d.runSheet) > 0 {
		rows := make([]db.NewRunSheetRow, len(d.runSheet))
		for i, r := range d.runSheet {
			rows[i] = db.NewRunSheetRow{Wafer: r.Wafer, Lot: r.Lot, Reactor: r.Reactor, Run: r.Run, GrownAt: r.GrownAt,
				Carrier: r.Carrier, Ring: r.Ring, Pocket: r.Pocket, Recipe: r.Recipe, Product: r.Product}
		}
		if err := tx.PutRunSheet(ctx, rows); err != nil {
			return err
		}
	}
	switch d.kind {
	case "":
		return nil
	case "catalogue":
		c, err := reader.ParseCatalogue([]byte(d.text))
		if err != nil {
			return err
		}
		return tx.PutCatalogue(ctx, catalogueOf(c))
	case "specification":
		s, err := binning.Parse([]byte(d.text))
		if err != nil {
			return err
		}
		_, err = tx.PutSpec(ctx, db.NewSpec(s, d.text, "", ""))
		return err
	case "profile":
		p, err := reader.ParseProfile([]byte(d.text))
		if err != nil {
			return err
		}
		return tx.PutProfile(ctx, p.Name, d.text)
	}
	return fmt.Errorf("document of kind %q: %w", d.kind, analytics.ErrInvalid)
}

// transient reports whether the fault is ours and passes: the source is left
// where it is and tried again.
func transient(err error) bool {
	return errors.Is(err, analytics.ErrUnavailable) || errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded)
}
