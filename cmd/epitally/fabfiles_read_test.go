package main

import (
	"math"
	"os"
	"path/filepath"
	"testing"
	"time"

	"epitally/analytics/simfab"
	"epitally/analytics/wafermap"
	"epitally/jobs/reader"
)

// everything is what the readers found in a fab's folder.
type everything struct {
	measurements map[string]*reader.Measurement // by wafer and kind
	sheet        map[string]reader.RunSheetRow  // by wafer
	documents    map[string]int                 // by kind
	catalogue    reader.Catalogue
	profiles     []reader.Profile
}

func readFab(t *testing.T, dir string) everything {
	t.Helper()
	all := everything{measurements: map[string]*reader.Measurement{}, sheet: map[string]reader.RunSheetRow{}, documents: map[string]int{}}
	sink := reader.Sink{
		Measurement: func(m *reader.Measurement) error { all.measurements[m.Wafer+" "+m.Kind] = m; return nil },
		RunSheet: func(rows []reader.RunSheetRow) error {
			for _, r := range rows {
				all.sheet[r.Wafer] = r
			}
			return nil
		},
		Document: func(kind, name, text string) (err error) {
			all.documents[kind]++
			switch kind {
			case "catalogue":
				all.catalogue, err = reader.ParseCatalogue([]byte(text))
			case "profile":
				var p reader.Profile
				p, err = reader.ParseProfile([]byte(text))
				all.profiles = append(all.profiles, p)
			}
			return err
		},
	}
	for _, sub := range []string{"documents", "runs", "pl", "probe"} {
		files, err := os.ReadDir(filepath.Join(dir, sub))
		if err != nil {
			t.Fatal(err)
		}
		for _, file := range files {
			name := filepath.Join(sub, file.Name())
			f, err := os.Open(filepath.Join(dir, name))
			if err != nil {
				t.Fatal(err)
			}
			got, err := reader.Read(t.Context(), reader.Input{Name: name, R: f, Profiles: all.profiles, Zone: simfab.DefaultEnd().Location()}, sink)
			f.Close()
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			if len(got.Notices) > 0 {
				t.Errorf("%s: notices %q", name, got.Notices)
			}
		}
	}
	return all
}

func TestFabFilesReadBackAsTheyWereGrown(t *testing.T) {
	t.Parallel()
	const wafers = 24
	all := readFab(t, growFab(t, wafers))
	f := simfab.New(simfab.Config{Seed: 1, Wafers: wafers})
	if len(all.measurements) != 2*wafers || len(all.sheet) != wafers {
		t.Errorf("%d measurements and %d rows on run sheets, want %d and %d", len(all.measurements), len(all.sheet), 2*wafers, wafers)
	}
	if all.documents["catalogue"] != 1 || all.documents["profile"] != 1 || all.documents["specification"] != len(fabSpecifications()) {
		t.Errorf("documents by kind: %v", all.documents)
	}
	if len(all.catalogue.Products) != len(f.Products) || len(all.catalogue.Recipes) != len(f.Recipes) {
		t.Fatalf("the catalogue lists %d products and %d recipes", len(all.catalogue.Products), len(all.catalogue.Recipes))
	}
	for i, p := range f.Products {
		if got := all.catalogue.Products[i]; got.Name != p.Name || got.Layout != p.Layout {
			t.Errorf("catalogue gives %+v, want %+v", got, p.Layout)
		}
	}
	for i := range f.Wafers {
		pl, probe := f.Measure(i)
		compareReading(t, all.measurements[pl.Wafer.Name+" pl"], pl)
		compareReading(t, all.measurements[pl.Wafer.Name+" probe"], probe)
		row, w := all.sheet[pl.Wafer.Name], pl.Wafer
		if row.Lot != w.Lot || row.Reactor != w.Run.Reactor || row.Run != w.Run.Number || row.Carrier != w.Run.Carrier ||
			row.Ring != w.Ring || row.Pocket != w.Pocket || row.Recipe != w.Recipe.Name || row.Product != w.Product.Name ||
			row.GrownAt == nil || !row.GrownAt.Equal(w.Run.GrownAt) {
			t.Errorf("run sheet of %s: %+v", w.Name, row)
		}
	}
}

func compareReading(t *testing.T, got *reader.Measurement, want *simfab.Reading) {
	t.Helper()
	name := want.Wafer.Name + " " + want.Kind
	if got == nil {
		t.Errorf("%s was not read", name)
		return
	}
	// The other station's clock shows minutes only; so do all times here.
	if got.Lot != want.Wafer.Lot || got.Station != want.Station || !got.MeasuredAt.Equal(want.MeasuredAt.Truncate(time.Minute)) {
		t.Errorf("%s: lot %q, station %q, measured at %v", name, got.Lot, got.Station, got.MeasuredAt)
	}
	if want.DriveCurrentMA > 0 && (got.DriveCurrentMA == nil || *got.DriveCurrentMA != want.DriveCurrentMA) {
		t.Errorf("%s: drive current %v, want %g mA", name, got.DriveCurrentMA, want.DriveCurrentMA)
	}
	if got.Grid.Len() != len(want.X) || len(got.Planes) != len(want.Columns) {
		t.Errorf("%s: %d dies, %d planes, want %d and %d", name, got.Grid.Len(), len(got.Planes), len(want.X), len(want.Columns))
		return
	}
	planes := map[string]*wafermap.Plane{}
	for i := range got.Planes {
		planes[got.Planes[i].Quantity] = &got.Planes[i]
	}
	for _, c := range want.Columns {
		p := planes[c.Quantity]
		if p == nil {
			t.Errorf("%s: %s was not read", name, c.Quantity)
			continue
		}
		for k, v := range c.K {
			value := math.NaN()
			if v != simfab.NoValue {
				value = wafermap.Scaled(int64(v), -c.Decimals)
			}
			if g := p.Value(k); g != value && !(math.IsNaN(g) && math.IsNaN(value)) || got.Grid.X[k] != want.X[k] || got.Grid.Y[k] != want.Y[k] {
				t.Errorf("%s: %s at (%d, %d) reads %v, want %v at (%d, %d)", name, c.Quantity, got.Grid.X[k], got.Grid.Y[k], g, value, want.X[k], want.Y[k])
				break
			}
		}
	}
}
