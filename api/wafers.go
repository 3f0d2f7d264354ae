package api

import (
	"net/http"
	"time"

	"github.com/labstack/echo/v4"

	"epitally/db"
)

type wafersParams struct {
	Search  string `query:"q" doc:"start of a wafer or lot name, or a run written as \"Heron 204\" or \"204\""`
	Lot     string `query:"lot" doc:"only this lot"`
	Reactor string `query:"reactor" doc:"only what grew in this reactor"`
	Run     int    `query:"run" min:"1" max:"2000000000" doc:"only this run"`
	Recipe  string `query:"recipe" doc:"only this recipe"`
	Product string `query:"product" doc:"only this product"`
	State   string `query:"state" enum:"on colour,short,long,mixed,unmeasured" doc:"only wafers of this colour state"`
	Kind    string `query:"kind" doc:"show measurements of this kind; else the one measured last"`
	Spec    string `query:"spec" doc:"tally under the latest version of this specification; else the first of the wafer's product by name"`
	Limit   int    `query:"limit" min:"1" max:"500" default:"50" doc:"wafers per page"`
	Cursor  string `query:"cursor" doc:"next of the page before"`
	Format  string `query:"format" enum:"json,csv" doc:"overrides the Accept header"`
}

type wafersOut struct {
	Rows  []waferRowOut `json:"rows"`
	Total int           `json:"total" doc:"wafers the filter selects"`
	Next  string        `json:"next" doc:"cursor of the next page; empty at the end"`
}

type waferRowOut struct {
	Wafer       db.Wafer               `json:"wafer"`
	Measurement *measurementListed     `json:"measurement" doc:"null: unmeasured"`
	Main        *measurementSummaryOut `json:"main" doc:"summary of the wavelength the list shows: dominant, else peak, else the first quantity"`
	State       string                 `json:"state" doc:"on colour, short, long, mixed, unmeasured, or empty without a target"`
	Tally       *db.Tally              `json:"tally" doc:"null: no specification applies"`
}

func (s *Server) listWafers(c echo.Context, p wafersParams) error {
	page, err := s.store.Wafers(c.Request().Context(), db.WaferFilter{Search: p.Search, Lot: p.Lot, Reactor: p.Reactor, Run: p.Run, Recipe: p.Recipe,
		Product: p.Product, State: p.State, Kind: p.Kind, Spec: p.Spec, Limit: p.Limit, Cursor: p.Cursor})
	if err != nil {
		return err
	}
	linkNext(c, page.Next)
	out := wafersOut{Rows: mapped(page.Rows, wireRow), Total: page.Total, Next: page.Next}
	return answerTable(c, p.Format, out, func() table { return wafersTable(page.Rows, s.zone) })
}

func wireRow(r db.WaferRow) waferRowOut {
	out := waferRowOut{Wafer: wireWafer(r.Wafer), State: r.State}
	if r.Measurement != nil {
		out.Measurement = &measurementListed{Measurement: *r.Measurement}
	}
	if r.Main != nil {
		main := wireSummary(*r.Main)
		out.Main = &main
	}
	if r.Tally != nil {
		t := wireTally(*r.Tally)
		out.Tally = &t
	}
	return out
}

func wafersTable(rows []db.WaferRow, zone *time.Location) table {
	t := table{columns: []string{"wafer", "lot", "reactor", "run", "grown_at", "carrier", "ring", "pocket", "recipe", "product", "state",
		"measurement_id", "kind", "station", "measured_at", "dies", "quantity", "unit", "n", "mean", "sd", "median", "target",
		"specification", "version", "good", "denominator", "over_layout"}}
	for i := range rows {
		r := &rows[i]
		w := &r.Wafer
		row := []any{w.Name, w.Lot, w.Reactor, w.Run, inZone(w.GrownAt, zone), w.Carrier, w.Ring, w.Pocket, w.Recipe, w.Product, r.State}
		if m := r.Measurement; m != nil {
			row = append(row, m.ID, m.Kind, m.Station, m.MeasuredAt.In(zone), m.Dies)
		} else {
			row = append(row, nil, nil, nil, nil, nil)
		}
		if m := r.Main; m != nil {
			row = append(row, m.Quantity.Name, m.Quantity.Unit, m.Summary.N, m.Summary.Mean, m.Summary.SD, m.Summary.Median, m.Summary.Target)
		} else {
			row = append(row, nil, nil, nil, nil, nil, nil, nil)
		}
		if y := r.Tally; y != nil {
			row = append(row, y.Spec, y.Version, y.Good, y.Denominator, y.OverLayout)
		} else {
			row = append(row, nil, nil, nil, nil, nil)
		}
		t.add(row...)
	}
	return t
}

func inZone(t *time.Time, zone *time.Location) *time.Time {
	if t == nil {
		return nil
	}
	local := t.In(zone)
	return &local
}

type waferParams struct {
	Wafer string `path:"wafer" doc:"the wafer's name, percent-encoded"`
}

type waferDetailOut struct {
	Wafer        db.Wafer         `json:"wafer"`
	Measurements []measurementOut `json:"measurements"`
}

func (s *Server) getWafer(c echo.Context, p waferParams) error {
	ctx := c.Request().Context()
	w, err := s.store.Wafer(ctx, p.Wafer)
	if err != nil {
		return missing(err, "there is no wafer %q: find it with /api/v1/wafers?q=", p.Wafer)
	}
	all, err := s.store.Measurements(ctx, w.ID)
	if err != nil {
		return err
	}
	return answerJSON(c, http.StatusOK, mediaJSON, waferDetailOut{wireWafer(*w), mapped(all, wireMeasurement)})
}
