package api

import (
	"context"
	"io/fs"
	"log/slog"
	"math"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"epitally/analytics/binning"
	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
	"epitally/db"
	"epitally/db/dbtest"
	"epitally/web"
)

// Quantities of the fixture.
const (
	dominant = "dominant_wavelength_nm"
	voltage  = "forward_voltage_v"
)

const fixtureSpec = `specification: harbour-blue
title: Harbour blue
kind: probe
products: [blue-455]
rejects:
  - {reason: open, when: forward_voltage_v > 3.6}
axes:
  - {axis: W, quantity: dominant_wavelength_nm, edges: [452.5, 455, 457.5], below: short, above: long}
bins:
  sellable: [W1, W2]
`

var (
	noon = time.Date(2026, 11, 5, 12, 0, 0, 0, time.UTC)
	zone = time.FixedZone("CET", 3600)
)

// fixtureLayout is a 2-inch wafer of some 350 dies, a quarter of them in the edge
// exclusion.
func fixtureLayout() wafermap.Layout {
	return wafermap.Layout{Name: "two-inch", WaferDiameterMM: 50.8, DiePitchXMM: 2.4, DiePitchYMM: 2.4, EdgeExclusionMM: 2,
		Mark: "flat", MarkAngleDeg: 270, XAxis: "right", YAxis: "up"}
}

// disc is every die whose centre lies on the wafer.
func disc(l wafermap.Layout) *wafermap.Grid {
	g := &wafermap.Grid{}
	reach := int(l.WaferDiameterMM/2/min(l.DiePitchXMM, l.DiePitchYMM)) + 1
	for y := -reach; y <= reach; y++ {
		for x := -reach; x <= reach; x++ {
			if l.OnWafer(x, y) {
				g.X, g.Y = append(g.X, int16(x)), append(g.Y, int16(y))
			}
		}
	}
	return g
}

// probeOf is a probe measurement over g: a bowl of wavelength about 455 nm, a
// voltage that rises along x, and one die without a voltage.
func probeOf(t testing.TB, wafer string, at time.Time, g *wafermap.Grid, l wafermap.Layout) *db.NewMeasurement {
	t.Helper()
	w, v := make([]int32, g.Len()), make([]int32, g.Len())
	for i := range w {
		r := l.RadiusMM(int(g.X[i]), int(g.Y[i])) / (l.WaferDiameterMM / 2)
		w[i] = int32(math.Round(45350 + 450*r*r))
		v[i] = int32(3100 + int32(g.X[i])%50)
	}
	v[0] = wafermap.Missing32
	m := &db.NewMeasurement{Wafer: wafer, Lot: "L-7", Kind: "probe", Station: "P1", MeasuredAt: at, Grid: g, SourceLayout: &l,
		Planes: []wafermap.Plane{wafermap.PackScaled(dominant, -2, w), wafermap.PackScaled(voltage, -3, v)}}
	frame := uniformity.NewFrame(g, &l)
	for i := range m.Planes {
		q, _ := quantity.Lookup(m.Planes[i].Quantity)
		target := math.NaN()
		if q.Name == dominant {
			target = 455
		}
		m.Quantities = append(m.Quantities, q)
		sum := frame.Summarise(&m.Planes[i], q, target)
		small := frame.Paint(&m.Planes[i], sum.Q01, sum.Q99)
		m.Derived.Summaries = append(m.Derived.Summaries, sum)
		m.Derived.SmallMaps = append(m.Derived.SmallMaps, db.SmallMap{Quantity: q, Size: small.Size, Low: small.Low, High: small.High, Cells: small.Cells})
	}
	m.Derived.State = uniformity.OnColour
	return m
}

// fixture is a server over a database with one grown, probed and tallied wafer
// and one without a run sheet.
type fixture struct {
	*Server
	store  *db.Store
	layout wafermap.Layout
	grid   *wafermap.Grid
	id     int64 // of the tallied measurement of wafer K-1
	odd    int64 // of the measurement of wafer "a/b ü?#%41", which no run sheet names
	spec   db.Spec
}

const oddName = "a/b ü?#%41"

func setup(t testing.TB) *fixture {
	t.Helper()
	f := &fixture{store: dbtest.New(t), layout: fixtureLayout()}
	f.grid = disc(f.layout)
	f.Server = newServer(t, f.store, nil)
	f.loadDocuments(t)
	probe := probeOf(t, "K-1", noon, f.grid, f.layout)
	probe.Derived.Tallies = []db.NewTally{{SpecID: f.spec.ID, Tally: tallyOf(t, f.spec, probe, f.layout)}}
	odd := probeOf(t, oddName, noon.Add(time.Hour), f.grid, f.layout)
	odd.Derived.State = ""
	odd.SourceLayout = nil
	f.id, f.odd = f.put(t, probe), f.put(t, odd)
	return f
}

func tallyOf(t testing.TB, spec db.Spec, m *db.NewMeasurement, l wafermap.Layout) db.Tally {
	t.Helper()
	parsed, err := binning.Parse([]byte(spec.Document))
	if err != nil {
		t.Fatal(err)
	}
	counts := make([]int, len(parsed.Cells()))
	if err := parsed.Bin(nil, counts, binning.PickPlanes(parsed, m.Planes), l.Counted(m.Grid)); err != nil {
		t.Fatal(err)
	}
	return db.NewTallyOf(spec.Name, spec.Version, parsed.Cells(), counts, &l)
}

func (f *fixture) loadDocuments(t testing.TB) {
	t.Helper()
	ctx := t.Context()
	load, err := f.store.BeginLoad(ctx)
	if err != nil {
		t.Fatal(err)
	}
	defer load.Rollback(ctx)
	if err := load.PutCatalogue(ctx, db.Catalogue{Products: []db.Product{{Name: "blue-455", Layout: f.layout}},
		Recipes: []db.Recipe{{Name: "MQW-455", Targets: []db.Target{{Quantity: dominant, Value: 455, Window: 1.5}}}}}); err != nil {
		t.Fatal(err)
	}
	if f.spec, err = load.PutSpec(ctx, db.Spec{Name: "harbour-blue", Title: "Harbour blue", Kind: "probe", Products: []string{"blue-455"}, Document: fixtureSpec}); err != nil {
		t.Fatal(err)
	}
	if err := load.PutRunSheet(ctx, []db.NewRunSheetRow{{Wafer: "K-1", Lot: "L-7", Reactor: "Heron", Carrier: "C1", Ring: "inner", Pocket: "3",
		Recipe: "MQW-455", Product: "blue-455", Run: 204, GrownAt: &noon}}); err != nil {
		t.Fatal(err)
	}
	if err := load.PutProfile(ctx, "prober-a", "profile: prober-a\n"); err != nil {
		t.Fatal(err)
	}
	commit(t, load, "documents.yaml", 1)
}

func (f *fixture) put(t testing.TB, m *db.NewMeasurement) int64 {
	t.Helper()
	ctx := t.Context()
	load, err := f.store.BeginLoad(ctx)
	if err != nil {
		t.Fatal(err)
	}
	defer load.Rollback(ctx)
	id, err := load.PutMeasurement(ctx, m)
	if err != nil {
		t.Fatal(err)
	}
	commit(t, load, "probe.csv", int(id)+1)
	return id
}

func commit(t testing.TB, load *db.Load, name string, n int) {
	t.Helper()
	if _, err := load.Commit(t.Context(), db.Source{Name: name, SHA256: hexSHA256([]byte{byte(n), byte(n >> 8)}), SeenAt: noon, Offset: -1, State: db.SourceStored}); err != nil {
		t.Fatal(err)
	}
}

// pageAssets stand in for the built ones, so that these tests need no build.
func pageAssets() fs.FS {
	assets := fstest.MapFS{}
	for _, name := range []string{"app.js", "charts.js", "first.js", "style.css", "icon.svg"} {
		assets[name] = &fstest.MapFile{Data: []byte("/* " + name + " */")}
	}
	return assets
}

func newServer(t testing.TB, store *db.Store, log *slog.Logger) *Server {
	t.Helper()
	pages, err := web.NewPages(pageAssets())
	if err != nil {
		t.Fatal(err)
	}
	s, err := New(Config{Store: store, Pages: pages, Logger: log, Now: func() time.Time { return noon }, Zone: zone, RequestID: func() string { return "r-1" }})
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// request makes a request; header pairs follow.
func request(method, target string, body string, header ...string) *http.Request {
	r := httptest.NewRequestWithContext(context.Background(), method, target, strings.NewReader(body))
	for i := 0; i+1 < len(header); i += 2 {
		r.Header.Set(header[i], header[i+1])
	}
	return r
}

// do answers a request without looking at the answer.
func do(h http.Handler, r *http.Request) *httptest.ResponseRecorder {
	w := httptest.NewRecorder()
	h.ServeHTTP(w, r)
	return w
}
