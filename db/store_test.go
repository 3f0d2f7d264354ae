package db_test

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"math"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/analytics"
	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
	"epitally/db"
	"epitally/db/dbtest"
)

func TestMain(m *testing.M) { dbtest.Main(m) }

var ctx = context.Background()

// square is a grid of side × side dies around (0, 0).
func square(side int) *wafermap.Grid {
	g := &wafermap.Grid{}
	for y := -side / 2; y < side-side/2; y++ {
		for x := -side / 2; x < side-side/2; x++ {
			g.X, g.Y = append(g.X, int16(x)), append(g.Y, int16(y))
		}
	}
	return g
}

// probe is a measurement of two quantities, one of them declared, with one die
// without a value.
func probe(t *testing.T, wafer string, at time.Time) *db.NewMeasurement {
	t.Helper()
	g := square(5)
	wavelength, leak := make([]int32, g.Len()), make([]float32, g.Len())
	for i := range wavelength {
		wavelength[i], leak[i] = int32(45500+i), float32(i)*1.5e-9
	}
	wavelength[3] = wafermap.Missing32
	dominant, _ := quantity.Lookup("dominant_wavelength_nm")
	declared, err := quantity.Declare("leak_a", "Leakage", "A", 1e-12)
	if err != nil {
		t.Fatal(err)
	}
	m := &db.NewMeasurement{Wafer: wafer, Lot: "L1", Kind: "probe", Station: "P1", MeasuredAt: at, Grid: g,
		Planes:     []wafermap.Plane{wafermap.PackScaled(dominant.Name, -2, wavelength), {Quantity: declared.Name, Encoding: wafermap.Float32, F32: leak}},
		Quantities: []quantity.Quantity{dominant, declared}, Facts: map[string]string{"operator": "none"}, Notices: []string{"a notice"}}
	layout := wafermap.AssumeLayout(g, nil)
	frame := uniformity.NewFrame(g, &layout)
	for i := range m.Planes {
		m.Derived.Summaries = append(m.Derived.Summaries, frame.Summarise(&m.Planes[i], m.Quantities[i], math.NaN()))
		s := frame.SmallMap(&m.Planes[i])
		m.Derived.SmallMaps = append(m.Derived.SmallMaps, db.SmallMap{Quantity: m.Quantities[i], Size: s.Size, Low: s.Low, High: s.High, Cells: s.Cells})
	}
	return m
}

var noon = time.Date(2026, 11, 5, 12, 0, 0, 0, time.UTC)

func source(name string, n int) db.Source {
	return db.Source{Name: name, SHA256: fmt.Sprintf("%064x", n), SeenAt: noon, Offset: -1}
}

// put stores measurements as one source.
func put(t *testing.T, s *db.Store, n int, ms ...*db.NewMeasurement) []int64 {
	t.Helper()
	l, err := s.BeginLoad(ctx)
	if err != nil {
		t.Fatal(err)
	}
	var ids []int64
	for _, m := range ms {
		id, err := l.PutMeasurement(ctx, m)
		if err != nil {
			t.Fatal(err)
		}
		ids = append(ids, id)
	}
	if _, err := l.Commit(ctx, source(fmt.Sprintf("s%d.csv", n), n)); err != nil {
		t.Fatal(err)
	}
	return ids
}

func TestAMeasurementComesBackWhole(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	in := probe(t, "W-1", noon)
	ids := put(t, s, 1, in)
	m, err := s.Measurement(ctx, ids[0])
	if err != nil {
		t.Fatal(err)
	}
	if m.Wafer != "W-1" || m.Station != "P1" || !m.MeasuredAt.Equal(noon) || m.Dies != 25 || !m.Current || m.Facts["operator"] != "none" || len(m.Notices) != 1 {
		t.Errorf("measurement %+v", m)
	}
	if len(m.Quantities) != 2 || m.Quantities[1].Unit != "A" || !m.Quantities[1].Declared {
		t.Errorf("quantities %+v; want the declared one with its unit", m.Quantities)
	}
	if m.Layout == nil || !m.Layout.Assumed || m.LayoutDies != 0 {
		t.Errorf("layout %+v, %d dies; want an assumed one and no count", m.Layout, m.LayoutDies)
	}
	g, err := s.Grid(ctx, m.GridHash)
	if err != nil || g.Hash() != in.Grid.Hash() {
		t.Errorf("grid: %v", err)
	}
	planes, err := s.Planes(ctx, m, "leak_a", "dominant_wavelength_nm")
	if err != nil || len(planes) != 2 || planes[0].Quantity != "leak_a" {
		t.Fatalf("planes: %v, %d", err, len(planes))
	}
	for i := range in.Grid.X {
		if a, b := in.Planes[0].Value(i), planes[1].Value(i); a != b && !(math.IsNaN(a) && math.IsNaN(b)) {
			t.Errorf("die %d: stored %v, read %v", i, a, b)
		}
	}
	sums, err := s.Summaries(ctx, m.ID)
	if err != nil || len(sums) != 2 || sums[0].Summary.N != 24 || sums[0].Summary.Missing != 1 || !math.IsNaN(sums[0].Summary.Target) {
		t.Errorf("summaries: %v, %+v", err, sums)
	}
	if small, err := s.SmallMap(ctx, m.ID, "leak_a"); err != nil || len(small.Cells) != small.Size*small.Size {
		t.Errorf("small map: %v", err)
	}
	if _, err := s.Planes(ctx, m, "fwhm_nm"); !errors.Is(err, analytics.ErrNotFound) {
		t.Errorf("a plane never measured: %v; want ErrNotFound", err)
	}
	var out bytes.Buffer
	if err := s.WriteDiesCSV(ctx, &out, m); err != nil || !strings.HasPrefix(out.String(), "x,y,dominant_wavelength_nm,leak_a\n-2,-2,455.00,0\n-1,-2,455.01,1.5e-09\n") {
		t.Errorf("CSV: %v\n%s", err, out.String()[:80])
	}
}

func TestTheNewestOfAKindIsCurrent(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	first := put(t, s, 1, probe(t, "W-1", noon))[0]
	second := put(t, s, 2, probe(t, "W-1", noon.Add(time.Hour)))[0]
	late := put(t, s, 3, probe(t, "W-1", noon.AddDate(0, -2, 0)))[0] // an old file found late, in another month
	for id, want := range map[int64]bool{first: false, second: true, late: false} {
		m, err := s.Measurement(ctx, id)
		if err != nil || m.Current != want {
			t.Errorf("measurement %d: current %v, %v; want %v", id, m.Current, err, want)
		}
	}
	page, err := s.Wafers(ctx, db.WaferFilter{})
	if err != nil || len(page.Rows) != 1 || page.Rows[0].Measurement.ID != second {
		t.Errorf("%v: the list shows %+v; want measurement %d", err, page.Rows, second)
	}
}

func TestTheSameBytesCommitOnce(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	var wait sync.WaitGroup
	errs := make([]error, 4)
	for i := range errs {
		m := probe(t, "W-1", noon)
		wait.Go(func() {
			l, err := s.BeginLoad(ctx)
			if err == nil {
				if _, err = l.PutMeasurement(ctx, m); err == nil {
					_, err = l.Commit(ctx, source(fmt.Sprintf("name%d.csv", i), 7))
				}
				l.Rollback(ctx)
			}
			errs[i] = err
		})
	}
	wait.Wait()
	stored := 0
	for _, err := range errs {
		switch {
		case err == nil:
			stored++
		case !errors.Is(err, analytics.ErrDuplicate) || !strings.Contains(err.Error(), "stored as source"):
			t.Errorf("%v; want ErrDuplicate that names the earlier source", err)
		}
	}
	w, err := s.Wafer(ctx, "W-1")
	if err != nil {
		t.Fatal(err)
	}
	ms, err := s.Measurements(ctx, w.ID)
	if stored != 1 || err != nil || len(ms) != 1 {
		t.Errorf("%d commits, %d measurements, %v; want one each", stored, len(ms), err)
	}
}

func TestALoadGivenUpLeavesNothing(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	l, err := s.BeginLoad(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := l.PutMeasurement(ctx, probe(t, "W-9", noon)); err != nil {
		t.Fatal(err)
	}
	l.Rollback(ctx)
	if _, err := s.Wafer(ctx, "W-9"); !errors.Is(err, analytics.ErrNotFound) {
		t.Errorf("wafer: %v; want ErrNotFound", err)
	}
	// The grid of a load given up must not be taken for stored.
	ids := put(t, s, 1, probe(t, "W-9", noon))
	if _, err := s.Measurement(ctx, ids[0]); err != nil {
		t.Errorf("after a load given up: %v", err)
	}
}

func TestAnImpossibleYearIsRefused(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	l, err := s.BeginLoad(ctx)
	if err != nil {
		t.Fatal(err)
	}
	defer l.Rollback(ctx)
	if _, err := l.PutMeasurement(ctx, probe(t, "W-1", time.Date(1901, 1, 1, 0, 0, 0, 0, time.UTC))); !errors.Is(err, analytics.ErrInvalid) || !strings.Contains(err.Error(), "clock") {
		t.Errorf("%v; want ErrInvalid that names the clock", err)
	}
}

// TestSQLDecodesWhatGoEncoded holds the view die_reading to the planes, for
// every encoding, exactly.
func TestSQLDecodesWhatGoEncoded(t *testing.T) {
	t.Parallel()
	url := dbtest.URL(t)
	s, err := db.Open(ctx, db.Config{URL: url})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	m := probe(t, "W-1", noon)
	n := m.Grid.Len()
	wide, f64 := make([]int32, n), make([]float64, n)
	for i := range n {
		wide[i], f64[i] = int32(i)*80_000_000-900_000_000, math.Pow(-1.7, float64(i))*1e-300
	}
	wide[5], f64[6] = wafermap.Missing32, math.NaN()
	f64[7], f64[8] = math.SmallestNonzeroFloat64*3, math.MaxFloat64
	m.Planes[1].F32[2], m.Planes[1].F32[4] = math.SmallestNonzeroFloat32, float32(math.NaN())
	for _, p := range []wafermap.Plane{wafermap.PackScaled("pl_intensity", -3, wide), {Quantity: "fwhm_nm", Encoding: wafermap.Float64, F64: f64}} {
		q, _ := quantity.Lookup(p.Quantity)
		m.Planes, m.Quantities = append(m.Planes, p), append(m.Quantities, q)
		m.Derived.Summaries = append(m.Derived.Summaries, m.Derived.Summaries[0])
		m.Derived.SmallMaps = append(m.Derived.SmallMaps, db.SmallMap{Quantity: q, Size: 1, Cells: []byte{0}})
	}
	put(t, s, 1, m)
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(ctx)
	for i := range m.Planes {
		rows, err := conn.Query(ctx, `SELECT x, y, value FROM die_reading WHERE wafer = 'W-1' AND quantity = $1 ORDER BY y, x`, m.Planes[i].Quantity)
		if err != nil {
			t.Fatal(err)
		}
		var x, y int16
		var value *float64
		die := 0
		if _, err := pgx.ForEachRow(rows, []any{&x, &y, &value}, func() error {
			want := m.Planes[i].Value(die)
			if x != m.Grid.X[die] || y != m.Grid.Y[die] || (value == nil) != math.IsNaN(want) || (value != nil && *value != want) {
				t.Errorf("%s die %d: SQL gives (%d, %d) %v; want (%d, %d) %v", m.Planes[i].Quantity, die, x, y, deref(value), m.Grid.X[die], m.Grid.Y[die], want)
			}
			die++
			return nil
		}); err != nil {
			t.Fatal(err)
		}
		if die != n {
			t.Errorf("%s: %d rows; want %d", m.Planes[i].Quantity, die, n)
		}
	}
}

func deref(v *float64) any {
	if v == nil {
		return nil
	}
	return *v
}

func TestEachStoredPlanesStreamsInTheOrderAsked(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	ids := put(t, s, 1, probe(t, "W-1", noon), probe(t, "W-2", noon))
	seen := map[int64]bool{}
	err := s.EachStoredPlanes(ctx, ids, []string{"fwhm_nm", "dominant_wavelength_nm"}, func(id int64, planes []db.StoredPlane) error {
		seen[id] = true
		if planes[0].N != 0 {
			t.Errorf("measurement %d: a plane of a quantity never measured has %d dies", id, planes[0].N)
		}
		p, err := db.DecodePlane("dominant_wavelength_nm", planes[1])
		if err != nil || p.Value(0) != 455 || !math.IsNaN(p.Value(3)) {
			t.Errorf("measurement %d: %v, die 0 %v, die 3 %v; want 455 and no value", id, err, p.Value(0), p.Value(3))
		}
		lanes, err := planes[1].Lanes()
		if err != nil || lanes.BaseK != p.BaseK || len(lanes.Lo) != 25 {
			t.Errorf("lanes: %v, base %d; want %d", err, lanes.BaseK, p.BaseK)
		}
		return nil
	})
	if err != nil || len(seen) != 2 {
		t.Fatalf("%v, %d measurements; want 2", err, len(seen))
	}
}
