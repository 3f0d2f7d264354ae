package api

import (
	"math"

	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/db"
)

// Answers are the types of package db where those can be sent as they stand, and
// the types here where a list must not be null or a quantity needs its keys.

// quantityOut describes one physical value that dies have.
type quantityOut struct {
	Name       string   `json:"quantity"`
	Label      string   `json:"label"`
	Unit       string   `json:"unit" doc:"empty for a ratio"`
	Resolution float64  `json:"resolution" doc:"what stations of common practice resolve"`
	Low        *float64 `json:"plausible_low" doc:"null: no limit"`
	High       *float64 `json:"plausible_high" doc:"null: no limit"`
	Scale      string   `json:"scale" doc:"how maps paint it: magnitude, deviation (from a target) or category"`
	Declared   bool     `json:"declared" doc:"by a reading profile or a catalogue; else built in"`
}

func wireQuantity(q quantity.Quantity) quantityOut {
	out := quantityOut{Name: q.Name, Label: q.Label, Unit: q.Unit, Resolution: q.Resolution, Declared: q.Declared,
		Scale: [...]string{quantity.Magnitude: "magnitude", quantity.Deviation: "deviation", quantity.Category: "category"}[q.Scale]}
	// Declared quantities have ±1e300 for "no limit".
	if q.Low > -1e300 {
		out.Low = &q.Low
	}
	if q.High < 1e300 {
		out.High = &q.High
	}
	return out
}

// mapped applies f to every element; never nil.
func mapped[A, B any](from []A, f func(A) B) []B {
	out := make([]B, len(from))
	for i := range from {
		out[i] = f(from[i])
	}
	return out
}

// full is v, or an empty slice for nil, which JSON would write as null.
func full[T any](v []T) []T {
	if v == nil {
		return []T{}
	}
	return v
}

func wireWafer(w db.Wafer) db.Wafer {
	w.Targets = full(w.Targets)
	return w
}

// measurementOut is db.Measurement with its quantities in full.
type measurementOut struct {
	db.Measurement
	Quantities []quantityOut `json:"quantities"`
}

func wireMeasurement(m db.Measurement) measurementOut {
	m.Notices = full(m.Notices)
	if m.Facts == nil {
		m.Facts = map[string]string{}
	}
	if m.DerivedFrom == nil {
		m.DerivedFrom = map[string]string{}
	}
	m.Suspects = full(m.Suspects)
	return measurementOut{m, mapped(m.Quantities, wireQuantity)}
}

// measurementListed is db.Measurement as lists have it: without what the store
// does not read for a list.
type measurementListed struct {
	db.Measurement
	Grid        *omitted `json:"grid,omitempty"`
	Layout      *omitted `json:"layout,omitempty"`
	LayoutDies  *omitted `json:"layout_dies,omitempty"`
	Facts       *omitted `json:"facts,omitempty"`
	Notices     *omitted `json:"notices,omitempty"`
	DerivedFrom *omitted `json:"derived_from,omitempty"`
	Suspects    *omitted `json:"suspects,omitempty"`
	Quantities  *omitted `json:"quantities,omitempty"`
}

type measurementSummaryOut struct {
	MeasurementID int64              `json:"measurement_id"`
	Quantity      quantityOut        `json:"quantity"`
	Summary       uniformity.Summary `json:"summary"`
}

func wireSummary(s db.Summary) measurementSummaryOut {
	return measurementSummaryOut{s.MeasurementID, wireQuantity(s.Quantity), s.Summary}
}

// rebinnedOut is db.Tally with what the reader must know of it.
type rebinnedOut struct {
	db.Tally
	Notices []string `json:"notices" doc:"what the counts must be read with"`
}

func wireTally(t db.Tally) db.Tally {
	t.Cells = full(t.Cells)
	return t
}

// float is v, or nil for NaN.
func float(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}
