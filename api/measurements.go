package api

import (
	"context"
	"net/http"

	"github.com/labstack/echo/v4"

	"epitally/db"
)

type measurementParams struct {
	ID int64 `path:"id" min:"1" doc:"the measurement's number"`
}

type measurementTableParams struct {
	measurementParams
	Format string `query:"format" enum:"json,csv" doc:"overrides the Accept header"`
}

// measurement finds the measurement that most addresses begin with.
func (s *Server) measurement(ctx context.Context, id int64) (*db.Measurement, error) {
	m, err := s.store.Measurement(ctx, id)
	return m, missing(err, "there is no measurement %d: its number stands on the wafer's page and in /api/v1/wafers", id)
}

// identity is what tells a measurement from one of the same number in a database
// that was made anew; ETags are made from it.
func identity(m *db.Measurement) []any {
	return []any{m.ID, m.Wafer, m.Kind, m.Station, m.MeasuredAt.UnixNano(), m.SourceID, m.GridHash}
}

func (s *Server) getMeasurement(c echo.Context, p measurementParams) error {
	m, err := s.measurement(c.Request().Context(), p.ID)
	if err != nil {
		return err
	}
	return answerJSON(c, http.StatusOK, mediaJSON, wireMeasurement(*m))
}

type summariesOut struct {
	Rows []measurementSummaryOut `json:"rows"`
}

func (s *Server) listSummaries(c echo.Context, p measurementTableParams) error {
	ctx := c.Request().Context()
	if _, err := s.measurement(ctx, p.ID); err != nil {
		return err
	}
	all, err := s.store.Summaries(ctx, p.ID)
	if err != nil {
		return err
	}
	return answerTable(c, p.Format, summariesOut{mapped(all, wireSummary)}, func() table { return summariesTable(all) })
}

func summariesTable(all []db.Summary) table {
	t := table{columns: []string{"quantity", "unit", "n", "missing", "excluded", "implausible", "mean", "sd", "min", "q01", "q05", "q25", "median",
		"q75", "q95", "q99", "max", "robust_sd", "target", "within_1", "within_2", "within_5"}}
	for _, m := range all {
		v := m.Summary
		t.add(m.Quantity.Name, m.Quantity.Unit, v.N, v.Missing, v.Excluded, v.Implausible, v.Mean, v.SD, v.Min, v.Q01, v.Q05, v.Q25, v.Median,
			v.Q75, v.Q95, v.Q99, v.Max, v.RobustSD, v.Target, v.Within1, v.Within2, v.Within5)
	}
	return t
}

type talliesOut struct {
	Rows []db.Tally `json:"rows"`
}

func (s *Server) listTallies(c echo.Context, p measurementTableParams) error {
	ctx := c.Request().Context()
	if _, err := s.measurement(ctx, p.ID); err != nil {
		return err
	}
	all, err := s.store.Tallies(ctx, p.ID)
	if err != nil {
		return err
	}
	return answerTable(c, p.Format, talliesOut{mapped(all, wireTally)}, func() table { return talliesTable(all...) })
}

func talliesTable(all ...db.Tally) table {
	t := table{columns: []string{"specification", "version", "bin", "class", "dies", "denominator", "over_layout"}}
	for _, y := range all {
		for _, cell := range y.Cells {
			t.add(y.Spec, y.Version, cell.Name, cell.Class, cell.Dies, y.Denominator, y.OverLayout)
		}
	}
	return t
}
