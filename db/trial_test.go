package db_test

import (
	"math"
	"testing"
	"time"

	"epitally/analytics/binning"
	"epitally/analytics/derive"
	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
	"epitally/db"
	"epitally/db/dbtest"
)

// peakWafer stores a measurement of peak and width; the dominant wavelength of
// its dies is computed.
func peakWafer(t *testing.T, s *db.Store, wafer string, peakNM float64) {
	t.Helper()
	g := &wafermap.Grid{}
	var peak, fwhm []int32
	for x := range 40 {
		g.X, g.Y = append(g.X, int16(x)), append(g.Y, 0)
		peak, fwhm = append(peak, int32(math.Round(100*(peakNM+0.1*float64(x))))), append(fwhm, 1900)
	}
	m := &db.NewMeasurement{Wafer: wafer, Kind: "pl", Station: "m-1", MeasuredAt: time.Date(2026, 11, 5, 12, 0, 0, 0, time.UTC), Grid: g,
		Planes: []wafermap.Plane{wafermap.PackScaled("peak_wavelength_nm", -2, peak), wafermap.PackScaled("fwhm_nm", -2, fwhm)}}
	var d derive.Deriver
	more, err := d.Compute(derive.Source{Planes: m.Planes})
	if err != nil {
		t.Fatal(err)
	}
	layout := wafermap.AssumeLayout(g, nil)
	frame := uniformity.NewFrame(g, &layout)
	for _, p := range append(m.Planes, more.Planes...) {
		q, _ := quantity.Lookup(p.Quantity)
		sum := frame.Summarise(&p, q, math.NaN())
		m.Derived.Summaries = append(m.Derived.Summaries, sum)
		small := frame.Paint(&p, sum.Q01, sum.Q99)
		m.Derived.SmallMaps = append(m.Derived.SmallMaps, db.SmallMap{Quantity: q, Size: small.Size, Low: small.Low, High: small.High, Cells: small.Cells})
	}
	m.Derived.DerivedFrom = more.From
	l, err := s.BeginLoad(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	defer l.Rollback(t.Context())
	if _, err := l.PutMeasurement(t.Context(), m); err != nil {
		t.Fatal(err)
	}
	if _, err := l.Commit(t.Context(), db.Source{Name: wafer, Format: "test", SeenAt: m.MeasuredAt, Offset: -1}); err != nil {
		t.Fatal(err)
	}
}

func parsed(t *testing.T, document string) *binning.Spec {
	t.Helper()
	spec, err := binning.Parse([]byte(document))
	if err != nil {
		t.Fatal(err)
	}
	return spec
}

// TestTrialOnComputedQuantities bins by a dominant wavelength that no plane holds,
// along every way that planes are read.
func TestTrialOnComputedQuantities(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	ctx := t.Context()
	peakWafer(t, s, "W-1", 450)
	peakWafer(t, s, "W-2", 452)
	ms, err := s.SelectMeasurements(ctx, db.Selection{Kind: "pl", Last: 10})
	if err != nil || len(ms) != 2 {
		t.Fatalf("%v: %d measurements", err, len(ms))
	}
	if from := ms[0].DerivedFrom[derive.Dominant]; from == "" {
		t.Fatal("the measurement does not say what the dominant wavelength was computed from")
	}
	planes, err := s.Planes(ctx, &ms[0], derive.Dominant, "peak_wavelength_nm")
	if err != nil || math.Abs(planes[0].Value(0)-planes[1].Value(0)-4) > 1.5 {
		t.Fatalf("%v: dominant %g, peak %g", err, planes[0].Value(0), planes[1].Value(0))
	}
	stored, err := s.StoredPlane(ctx, &ms[0], derive.Dominant)
	if err != nil || stored.N != 40 {
		t.Fatalf("%v: %+v", err, stored)
	}
	spec := parsed(t, "specification: a\nkind: pl\nuncertainty: {dominant_wavelength_nm: 0.1}\naxes: [{axis: W, quantity: dominant_wavelength_nm, edges: [453, 456, 459]}]\nbins: {prices: {W1: 2, W2: 1}}\n")
	list, err := s.Counting(ctx, ms)
	if err != nil {
		t.Fatal(err)
	}
	trial, err := s.Try(ctx, spec, list, true)
	if err != nil {
		t.Fatal(err)
	}
	total := 0
	for _, n := range trial.Counts {
		total += n
	}
	if total != 80 || trial.Denominator != 80 || trial.Good() < 40 || trial.Risk == nil || trial.Risk.Wafers != 2 || trial.Value() <= float64(trial.Good()) {
		t.Errorf("%d of %d dies: %+v", total, trial.Denominator, trial)
	}
	wider := parsed(t, "specification: b\nkind: pl\naxes: [{axis: W, quantity: dominant_wavelength_nm, edges: [453, 457, 459]}]\nbins: {prices: {W1: 2, W2: 1}}\n")
	c, err := s.CompareSpecs(ctx, spec, wider, list, nil)
	if err != nil {
		t.Fatal(err)
	}
	if len(c.Moves) != 1 || c.Moves[0].From != "W2" || c.Moves[0].To != "W1" || c.Moves[0].Dies != c.After.Counts[0]-c.Before.Counts[0] || c.Moves[0].Value != float64(c.Moves[0].Dies) {
		t.Errorf("%+v; %v, %v", c.Moves, c.Before.Counts, c.After.Counts)
	}
	none := parsed(t, "specification: c\nkind: pl\naxes: [{axis: V, quantity: forward_voltage_v, edges: [3, 4]}]\n")
	if trial, err = s.Try(ctx, none, list, true); err != nil || trial.Counts[len(trial.Counts)-1] != 80 || trial.Risk != nil {
		t.Errorf("without the quantity: %v %+v", err, trial)
	}
	if _, err := s.MeasurementsByID(ctx, []int64{ms[0].ID, 99999}); err == nil {
		t.Error("a measurement there is not was found")
	}
}

// TestVersionsInForce: a version that begins later leaves the one before in force
// until then.
func TestVersionsInForce(t *testing.T) {
	t.Parallel()
	s := dbtest.New(t)
	put := func(document string) {
		t.Helper()
		l, err := s.BeginLoad(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		defer l.Rollback(t.Context())
		if _, err := l.PutSpec(t.Context(), db.NewSpec(parsed(t, document), document, "R. Aalto", "as agreed")); err != nil {
			t.Fatal(err)
		}
		if _, err := l.Commit(t.Context(), db.Source{Name: "spec", Format: "specification", SeenAt: time.Now(), Offset: -1}); err != nil {
			t.Fatal(err)
		}
	}
	base := "specification: a\nkind: pl\nproducts: [blue]\naxes: [{axis: W, quantity: dominant_wavelength_nm, edges: [453, 456]}]\n"
	put(base)
	put(base + "valid: {from: 2027-01-01, until: 2027-06-30}\n")
	for day, want := range map[string]int{"2026-12-31": 1, "2027-01-01": 2, "2027-06-30": 2, "2027-07-01": 1} {
		at, err := time.Parse(time.DateOnly, day)
		if err != nil {
			t.Fatal(err)
		}
		specs, err := s.SpecsFor(t.Context(), "blue", "pl", at.Add(10*time.Hour))
		if err != nil || len(specs) != 1 || specs[0].Version != want {
			t.Errorf("%s: %v, %+v; want version %d", day, err, specs, want)
		}
	}
	latest, err := s.Spec(t.Context(), "a", 0)
	if err != nil || latest.Version != 2 || latest.Author != "R. Aalto" || latest.Reason != "as agreed" || latest.ValidFrom != "2027-01-01" || latest.ValidUntil != "2027-06-30" {
		t.Errorf("%v: %+v", err, latest)
	}
}
