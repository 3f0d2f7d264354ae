package api

import (
	"net/http"

	"github.com/labstack/echo/v4"

	"epitally/analytics/quantity"
	"epitally/db"
)

type quantitiesOut struct {
	Rows []quantityOut `json:"rows"`
}

func (s *Server) listQuantities(c echo.Context, p tableParams) error {
	all, err := s.store.Quantities(c.Request().Context())
	if err != nil {
		return err
	}
	return answerTable(c, p.Format, quantitiesOut{mapped(all, wireQuantity)}, func() table { return quantitiesTable(all) })
}

func quantitiesTable(all []quantity.Quantity) table {
	t := table{columns: []string{"quantity", "label", "unit", "resolution", "plausible_low", "plausible_high", "scale", "declared"}}
	for _, q := range all {
		w := wireQuantity(q)
		t.add(w.Name, w.Label, w.Unit, w.Resolution, w.Low, w.High, w.Scale, w.Declared)
	}
	return t
}

type productsOut struct {
	Rows []db.Product `json:"rows"`
}

func (s *Server) listProducts(c echo.Context, p tableParams) error {
	all, err := s.store.Products(c.Request().Context())
	if err != nil {
		return err
	}
	return answerTable(c, p.Format, productsOut{full(all)}, func() table {
		t := table{columns: []string{"product", "layout", "wafer_diameter_mm", "die_pitch_x_mm", "die_pitch_y_mm", "edge_exclusion_mm",
			"mark", "mark_angle_deg", "x_axis", "y_axis", "centre_x", "centre_y", "layout_dies"}}
		for _, p := range all {
			l := p.Layout
			t.add(p.Name, l.Name, l.WaferDiameterMM, l.DiePitchXMM, l.DiePitchYMM, l.EdgeExclusionMM,
				l.Mark, l.MarkAngleDeg, l.XAxis, l.YAxis, l.CentreX, l.CentreY, l.Dies())
		}
		return t
	})
}

type recipesOut struct {
	Rows []db.Recipe `json:"rows"`
}

func (s *Server) listRecipes(c echo.Context, p tableParams) error {
	all, err := s.store.Recipes(c.Request().Context())
	if err != nil {
		return err
	}
	rows := mapped(all, func(r db.Recipe) db.Recipe { r.Targets = full(r.Targets); return r })
	return answerTable(c, p.Format, recipesOut{rows}, func() table {
		t := table{columns: []string{"recipe", "quantity", "target", "window"}}
		for _, r := range all {
			if len(r.Targets) == 0 {
				t.add(r.Name, nil, nil, nil)
			}
			for _, g := range r.Targets {
				t.add(r.Name, g.Quantity, g.Value, g.Window)
			}
		}
		return t
	})
}

type runsParams struct {
	tableParams
	Reactor string `query:"reactor" doc:"only this reactor"`
	Limit   int    `query:"limit" min:"1" max:"1000" default:"200" doc:"runs at most"`
}

type runsOut struct {
	Rows []db.GrowthRun `json:"rows"`
}

func (s *Server) listRuns(c echo.Context, p runsParams) error {
	all, err := s.store.Runs(c.Request().Context(), p.Reactor, p.Limit)
	if err != nil {
		return err
	}
	return answerTable(c, p.Format, runsOut{full(all)}, func() table {
		t := table{columns: []string{"reactor", "run", "recipe", "carrier", "grown_at", "wafers"}}
		for _, r := range all {
			t.add(r.Reactor, r.Number, r.Recipe, r.Carrier, inZone(r.GrownAt, s.zone), r.Wafers)
		}
		return t
	})
}

type profilesOut struct {
	Rows []db.Profile `json:"rows"`
}

func (s *Server) listProfiles(c echo.Context, _ noParams) error {
	all, err := s.store.Profiles(c.Request().Context())
	if err != nil {
		return err
	}
	return answerJSON(c, http.StatusOK, mediaJSON, profilesOut{full(all)})
}
