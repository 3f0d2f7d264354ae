package api

import (
	"fmt"
	"net/url"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics/quantity"
	"epitally/db"
	"epitally/web"
)

// Wafers that yields are shown over: the list's figure, and the spec's chart.
const (
	yieldsInList  = 20
	yieldsInChart = 200
)

func (s *Server) pageSpecs(c echo.Context) error {
	ctx := c.Request().Context()
	specs, err := s.store.Specs(ctx)
	if err != nil {
		return err
	}
	page := web.BinsPage{Base: s.base(c, web.Base{Title: "Bins", Section: "bins"})}
	var bestName, bestHref string
	var bestShare float64
	bestWafers := 0
	for i := range specs {
		line := s.specLine(&specs[i])
		yields, err := s.store.SpecYields(ctx, specs[i].Name, yieldsInList)
		if err != nil {
			return err
		}
		good, all := 0, 0
		for _, y := range yields {
			good, all = good+y.Good, all+y.Denominator
		}
		line.Yield = web.Percent(good, all)
		if all > 0 {
			line.YieldOver = fmt.Sprintf("of %s dies, last %s", web.Count(all), web.Plural(len(yields), "wafer", "wafers"))
			if len(yields) > bestWafers {
				bestName, bestHref, bestWafers, bestShare = line.Name+" v"+strconv.Itoa(line.Version), line.Href, len(yields), float64(good)/float64(all)
			}
		}
		page.Specs = append(page.Specs, line)
	}
	page.Finding = web.SpecsSentence(len(specs), bestName, bestHref, bestShare, bestWafers)
	return s.render(c, "bins", page)
}

func (s *Server) specLine(sp *db.Spec) web.SpecLine {
	return web.SpecLine{Name: sp.Name, Href: "/bins/" + url.PathEscape(sp.Name), Title: sp.Title, Version: sp.Version, Kind: sp.Kind,
		Products: strings.Join(sp.Products, ", "), StoredAt: web.Moment(sp.StoredAt, s.zone)}
}

// quantityOf is the built-in quantity, or one that bears only its name.
func quantityOf(name string) quantity.Quantity {
	if q, ok := quantity.Lookup(name); ok {
		return q
	}
	return quantity.Quantity{Name: name, Label: name}
}

func specFacts(sp *db.Spec, stored string) []web.Fact {
	var out []web.Fact
	valid := ""
	if sp.ValidFrom != "" || sp.ValidUntil != "" {
		valid = strings.TrimSpace(strings.Join([]string{orText(sp.ValidFrom, "always"), "to", orText(sp.ValidUntil, "further notice")}, " "))
	}
	for _, f := range []web.Fact{{Name: "title", Value: sp.Title}, {Name: "products", Value: strings.Join(sp.Products, ", ")},
		{Name: "bins", Value: sp.Kind + " measurements"}, {Name: "valid", Value: valid}, {Name: "stored", Value: stored}} {
		if f.Value != "" {
			out = append(out, f)
		}
	}
	return out
}

func (s *Server) waferYields(c echo.Context, spec string) ([]web.WaferYield, error) {
	rows, err := s.store.SpecYields(c.Request().Context(), spec, yieldsInChart)
	if err != nil {
		return nil, err
	}
	out := make([]web.WaferYield, len(rows))
	for i, r := range rows {
		out[i] = web.WaferYield(r)
	}
	return out, nil
}

func (s *Server) pageSpecYields(c echo.Context) error {
	name := pathText(c, "spec")
	if _, err := s.store.Spec(c.Request().Context(), name, 0); err != nil {
		return missing(err, "there is no specification %s: see Bins", name)
	}
	yields, err := s.waferYields(c, name)
	if err != nil {
		return err
	}
	return answerChart(c, web.YieldsChart(name, yields, s.zone, ""), name+"-yields.csv")
}
