package db_test

import (
	"errors"
	"fmt"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/analytics"
	"epitally/analytics/wafermap"
	"epitally/db"
	"epitally/db/dbtest"
)

func TestMigrationsGoUpDownAndUp(t *testing.T) {
	t.Parallel()
	url := dbtest.URL(t)
	if err := db.MigrateDown(ctx, url); err != nil {
		t.Fatal(err)
	}
	if _, err := db.Open(ctx, db.Config{URL: url}); err == nil {
		t.Error("Open took a database without a schema")
	}
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(ctx)
	var left int
	if err := conn.QueryRow(ctx, `SELECT count(*) FROM pg_class c JOIN pg_namespace n ON n.oid = c.relnamespace
		WHERE n.nspname = 'public' AND c.relname NOT LIKE 'goose%'`).Scan(&left); err != nil || left != 0 {
		t.Errorf("%d relations are left after the way down, %v", left, err)
	}
	// Two servers start together.
	var wait sync.WaitGroup
	for range 2 {
		wait.Go(func() {
			if err := db.Migrate(ctx, url); err != nil {
				t.Error(err)
			}
		})
	}
	wait.Wait()
	s, err := db.Open(ctx, db.Config{URL: url})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	put(t, s, 1, probe(t, "W-1", noon))
	if _, err := conn.Exec(ctx, `INSERT INTO goose_db_version (version_id, is_applied) VALUES (99999, true)`); err != nil {
		t.Fatal(err)
	}
	if _, err := db.Open(ctx, db.Config{URL: url}); !errors.Is(err, analytics.ErrConflict) || !strings.Contains(err.Error(), "newer") {
		t.Errorf("a newer schema: %v; want ErrConflict", err)
	}
}

var gannet = db.Product{Name: "gannet-1", Layout: wafermap.Layout{Name: "gannet-1", WaferDiameterMM: 50, DiePitchXMM: 5, DiePitchYMM: 5,
	EdgeExclusionMM: 2, Mark: "notch", MarkAngleDeg: 270, XAxis: "right", YAxis: "up"}}

// fab stores a catalogue, a run sheet of n wafers in two runs, and readings of all.
func fab(t *testing.T, n int) *db.Store {
	t.Helper()
	s := dbtest.New(t)
	l, err := s.BeginLoad(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if err := l.PutCatalogue(ctx, db.Catalogue{Products: []db.Product{gannet},
		Recipes: []db.Recipe{{Name: "blue", Targets: []db.Target{{Quantity: "dominant_wavelength_nm", Value: 455, Window: 2.5}}}}}); err != nil {
		t.Fatal(err)
	}
	var rows []db.NewRunSheetRow
	for i := range n {
		rows = append(rows, db.NewRunSheetRow{Wafer: fmt.Sprintf("A-%03d", i), Lot: fmt.Sprintf("LOT-%d", i%3), Reactor: "Heron", Run: 204 + i%2,
			GrownAt: &noon, Carrier: "C7", Ring: "outer", Pocket: fmt.Sprint(i), Recipe: "blue", Product: "gannet-1"})
	}
	if err := l.PutRunSheet(ctx, rows); err != nil {
		t.Fatal(err)
	}
	if _, err := l.Commit(ctx, source("documents", 1000)); err != nil {
		t.Fatal(err)
	}
	for i := range n - 1 { // the last stays unmeasured
		m := probe(t, fmt.Sprintf("A-%03d", i), noon.Add(time.Duration(i/2)*time.Minute)) // pairs share a time
		m.Derived.State = []string{"on colour", "long"}[i%2]
		put(t, s, i, m)
	}
	return s
}

func TestTheWafersListFiltersAndTurnsPages(t *testing.T) {
	t.Parallel()
	s := fab(t, 9)
	for name, c := range map[string]struct {
		filter db.WaferFilter
		want   int
	}{
		"all":         {db.WaferFilter{}, 9},
		"prefix":      {db.WaferFilter{Search: "a-00"}, 9},
		"one":         {db.WaferFilter{Search: "A-004"}, 1},
		"lot":         {db.WaferFilter{Search: "lot-1"}, 3},
		"run":         {db.WaferFilter{Search: "204"}, 5},
		"reactor run": {db.WaferFilter{Search: "heron 205"}, 4},
		"wildcard":    {db.WaferFilter{Search: "%"}, 0},
		"lot field":   {db.WaferFilter{Lot: "LOT-0"}, 3},
		"state":       {db.WaferFilter{State: "long"}, 4},
		"unmeasured":  {db.WaferFilter{State: "unmeasured"}, 1},
		"kind":        {db.WaferFilter{Kind: "probe"}, 8},
		"other kind":  {db.WaferFilter{Kind: "pl"}, 0},
		"run field":   {db.WaferFilter{Reactor: "Heron", Run: 205, Recipe: "blue", Product: "gannet-1"}, 4},
	} {
		page, err := s.Wafers(ctx, c.filter)
		if err != nil || page.Total != c.want || len(page.Rows) != c.want {
			t.Errorf("%s: %v, total %d, %d rows; want %d", name, err, page.Total, len(page.Rows), c.want)
		}
	}
	if counts, err := s.StateCounts(ctx, db.WaferFilter{Lot: "LOT-0"}); err != nil || counts["on colour"] != 2 || counts["long"] != 1 || len(counts) != 2 {
		t.Errorf("states of LOT-0: %v, %v; want wafers 0 and 6 on colour, 3 long", counts, err)
	}
	seen := map[string]bool{}
	var last *time.Time
	for cursor, pages := "", 0; ; pages++ {
		page, err := s.Wafers(ctx, db.WaferFilter{Limit: 2, Cursor: cursor})
		if err != nil || pages > 5 {
			t.Fatalf("page %d: %v", pages, err)
		}
		for _, r := range page.Rows {
			if seen[r.Wafer.Name] {
				t.Errorf("%s stands on two pages", r.Wafer.Name)
			}
			seen[r.Wafer.Name] = true
			if r.Measurement != nil {
				if last != nil && r.Measurement.MeasuredAt.After(*last) {
					t.Errorf("%s is newer than the line above it", r.Wafer.Name)
				}
				last = &r.Measurement.MeasuredAt
			}
			if len(r.Wafer.Targets) != 1 || r.Wafer.Layout == nil {
				t.Errorf("%s: targets %v, layout %v", r.Wafer.Name, r.Wafer.Targets, r.Wafer.Layout)
			}
		}
		if cursor = page.Next; cursor == "" {
			break
		}
	}
	if len(seen) != 9 {
		t.Errorf("pages show %d wafers; want 9", len(seen))
	}
	for _, bad := range []db.WaferFilter{{Limit: -1}, {Limit: 501}, {Cursor: "nonsense"}} {
		if _, err := s.Wafers(ctx, bad); !errors.Is(err, analytics.ErrInvalid) {
			t.Errorf("%+v: %v; want ErrInvalid", bad, err)
		}
	}
}

func TestSpecificationsKeepTheirVersions(t *testing.T) {
	t.Parallel()
	s := fab(t, 3)
	store := func(n int, document string) db.Spec {
		t.Helper()
		l, err := s.BeginLoad(ctx)
		if err != nil {
			t.Fatal(err)
		}
		spec, err := l.PutSpec(ctx, db.Spec{Name: "harbour", Kind: "probe", Products: []string{"gannet-1"}, Document: document})
		if err != nil {
			t.Fatal(err)
		}
		if _, err := l.Commit(ctx, source("spec", 2000+n)); err != nil {
			t.Fatal(err)
		}
		return spec
	}
	if v := store(1, "one").Version; v != 1 {
		t.Errorf("first version is %d", v)
	}
	stale, err := s.StaleMeasurements(ctx, 100)
	if err != nil || len(stale) != 2 {
		t.Errorf("%d measurements are stale after a new specification, %v; want 2", len(stale), err)
	}
	for _, id := range stale {
		m, err := s.Measurement(ctx, id)
		if err != nil {
			t.Fatal(err)
		}
		specs, err := s.SpecsFor(ctx, "gannet-1", "probe", time.Now())
		if err != nil || len(specs) != 1 {
			t.Fatalf("%v, %d specifications", err, len(specs))
		}
		d := probe(t, m.Wafer, noon).Derived
		d.State, d.Tallies = "mixed", []db.NewTally{{SpecID: specs[0].ID, Tally: db.Tally{Good: 20, Denominator: 25, Cells: []db.TallyCell{{Name: "W1", Class: "sellable", Dies: 20}}}}}
		if err := s.ReplaceDerived(ctx, id, d); err != nil {
			t.Fatal(err)
		}
	}
	if stale, _ := s.StaleMeasurements(ctx, 100); len(stale) != 0 {
		t.Errorf("%d are stale still", len(stale))
	}
	yields, err := s.SpecYields(ctx, "harbour", 10)
	if err != nil || len(yields) != 2 || yields[0].Good != 20 {
		t.Errorf("yields: %v, %+v", err, yields)
	}
	page, err := s.Wafers(ctx, db.WaferFilter{State: "mixed"})
	if err != nil || len(page.Rows) != 2 || page.Rows[0].Tally == nil || page.Rows[0].Tally.Cells[0].Name != "W1" {
		t.Errorf("list: %v, %+v", err, page)
	}
	if v := store(2, "one").Version; v != 1 {
		t.Errorf("the same document again became version %d", v)
	}
	if v := store(3, "two").Version; v != 2 {
		t.Errorf("a changed document became version %d", v)
	}
	old, err := s.Spec(ctx, "harbour", 1)
	if err != nil || old.Document != "one" || old.Latest {
		t.Errorf("version 1: %v, %+v", err, old)
	}
	if versions, err := s.SpecVersions(ctx, "harbour"); err != nil || len(versions) != 2 || versions[0].Version != 2 {
		t.Errorf("versions: %v, %+v", err, versions)
	}
	if _, err := s.Spec(ctx, "nowhere", 0); !errors.Is(err, analytics.ErrNotFound) {
		t.Errorf("a spec never stored: %v; want ErrNotFound", err)
	}
}

func TestRefusedSourcesAreListed(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	bad := db.Source{Name: "odd\x00name\xff.csv", Reason: "line 3: a NUL byte \x00", Line: 3, Offset: -1, SeenAt: noon}
	id, err := s.RefuseSource(ctx, bad)
	if err != nil {
		t.Fatal(err)
	}
	put(t, s, 1, probe(t, "W-1", noon))
	src, err := s.Source(ctx, id)
	if err != nil || src.State != db.SourceRefused || src.Line != 3 || !strings.Contains(src.Name, `\x00`) {
		t.Errorf("%v: %+v", err, src)
	}
	refused, _, err := s.Sources(ctx, db.SourceRefused, 10, "")
	if err != nil || len(refused) != 1 {
		t.Errorf("%v, %d refused; want 1", err, len(refused))
	}
	if counts, err := s.SourceCounts(ctx, noon.Add(-time.Second)); err != nil || counts[db.SourceStored] != 1 || counts[db.SourceRefused] != 1 {
		t.Errorf("counts %v, %v; want one each", counts, err)
	}
	if counts, err := s.SourceCounts(ctx, noon.Add(time.Second)); err != nil || len(counts) != 0 {
		t.Errorf("counts after %v, %v; want none", counts, err)
	}
	first, next, err := s.Sources(ctx, "", 1, "")
	if err != nil || len(first) != 1 || next == "" {
		t.Fatalf("%v, %d, next %q", err, len(first), next)
	}
	second, next, err := s.Sources(ctx, "", 1, next)
	if err != nil || len(second) != 1 || next != "" || second[0].ID == first[0].ID {
		t.Errorf("%v, second page %+v, next %q", err, second, next)
	}
}

func TestRunSheetsAndCataloguesMayComeLater(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	put(t, s, 1, probe(t, "W-1", noon))
	w, err := s.Wafer(ctx, "W-1")
	if err != nil || w.Reactor != "" || w.Run != nil || w.Layout != nil || w.Lot != "L1" {
		t.Fatalf("%v: %+v; want nothing known but the lot", err, w)
	}
	l, err := s.BeginLoad(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if err := l.PutRunSheet(ctx, []db.NewRunSheetRow{{Wafer: "W-1", Reactor: "Tern", Run: 7, Recipe: "blue", Product: "gannet-1"}}); err != nil {
		t.Fatal(err)
	}
	if err := l.PutCatalogue(ctx, db.Catalogue{Products: []db.Product{gannet}}); err != nil {
		t.Fatal(err)
	}
	if _, err := l.Commit(ctx, source("later", 2)); err != nil {
		t.Fatal(err)
	}
	if w, err = s.Wafer(ctx, "W-1"); err != nil || w.Reactor != "Tern" || w.Run == nil || *w.Run != 7 || w.Layout == nil || w.Lot != "L1" {
		t.Errorf("%v: %+v; want reactor, run, layout, and the lot it had", err, w)
	}
	if stale, err := s.StaleMeasurements(ctx, 10); err != nil || len(stale) != 1 {
		t.Errorf("%d stale, %v; want 1", len(stale), err)
	}
	runs, err := s.Runs(ctx, "Tern", 10)
	if err != nil || len(runs) != 1 || runs[0].Wafers != 1 {
		t.Errorf("runs: %v, %+v", err, runs)
	}
	products, err := s.Products(ctx)
	if err != nil || len(products) != 1 || products[0].Layout != gannet.Layout {
		t.Errorf("products: %v, %+v", err, products)
	}
}

// TestADocumentWaitsForWhatIsDerivedWithoutIt stores a specification while a
// load that has not seen it is under way: the load's measurement must not keep
// numbers that lack it without being marked.
func TestADocumentWaitsForWhatIsDerivedWithoutIt(t *testing.T) {
	t.Parallel()
	url := dbtest.URL(t)
	s, err := db.Open(ctx, db.Config{URL: url})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	document := func(n int, put func(*db.Load) error) error {
		l, err := s.BeginLoad(ctx)
		if err == nil {
			if err = put(l); err == nil {
				_, err = l.Commit(ctx, source("document", n))
			}
			l.Rollback(ctx)
		}
		return err
	}
	if err := document(1, func(l *db.Load) error {
		return l.PutRunSheet(ctx, []db.NewRunSheetRow{{Wafer: "W-1", Product: "gannet-1"}})
	}); err != nil {
		t.Fatal(err)
	}
	l, err := s.BeginLoad(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if c, err := l.WaferContext(ctx, "W-1", "probe", "", time.Now()); err != nil || len(c.Specs) != 0 {
		t.Fatalf("%v, %d specifications; want none yet", err, len(c.Specs))
	}
	stored := make(chan error, 1)
	go func() {
		stored <- document(2, func(l *db.Load) error {
			_, err := l.PutSpec(ctx, db.Spec{Name: "harbour", Kind: "probe", Products: []string{"gannet-1"}, Document: "one"})
			return err
		})
	}()
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(ctx)
	for waiting := false; !waiting; {
		if err := conn.QueryRow(ctx, `SELECT EXISTS (SELECT FROM pg_locks WHERE locktype = 'advisory' AND NOT granted
			AND database = (SELECT oid FROM pg_database WHERE datname = current_database()))`).Scan(&waiting); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := l.PutMeasurement(ctx, probe(t, "W-1", noon)); err != nil {
		t.Fatal(err)
	}
	if _, err := l.Commit(ctx, source("readings", 3)); err != nil {
		t.Fatal(err)
	}
	if err := <-stored; err != nil {
		t.Fatal(err)
	}
	if stale, err := s.StaleMeasurements(ctx, 10); err != nil || len(stale) != 1 {
		t.Errorf("%d stale, %v; want the measurement that was derived without the specification", len(stale), err)
	}
}
