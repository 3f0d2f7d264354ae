package api

import (
	"fmt"
	"net/url"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/binning"
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

func (s *Server) pageSpec(c echo.Context) error {
	ctx := c.Request().Context()
	name, version := pathText(c, "spec"), 0
	if text := queryText(c, "version"); text != "" {
		n, err := strconv.Atoi(text)
		if err != nil || n < 1 {
			return fmt.Errorf("version %q is not a whole number above 0: %w", text, analytics.ErrInvalid)
		}
		version = n
	}
	sp, err := s.store.Spec(ctx, name, version)
	if err != nil {
		return missing(err, "there is no such version of a specification %s: see Bins", name)
	}
	versions, err := s.store.SpecVersions(ctx, name)
	if err != nil {
		return err
	}
	var yields []web.WaferYield
	if sp.Latest {
		if yields, err = s.waferYields(c, name); err != nil {
			return err
		}
	}
	title := sp.Name + " v" + strconv.Itoa(sp.Version)
	page := web.BinPage{Name: sp.Name, Version: sp.Version, Document: sp.Document, Versions: s.versionFacts(sp, versions),
		Facts:  specFacts(sp, web.Moment(sp.StoredAt, s.zone)),
		Yields: web.YieldsChart(title, yields, s.zone, "/bins/"+url.PathEscape(name)+"/yields.csv")}
	page.Base = s.base(c, web.Base{Title: title, Section: "bins", Finding: web.SpecSentence(title, yields, sp.Latest), Charts: page.Yields != nil})
	describeSpec(&page)
	return s.render(c, "bin", page)
}

// describeSpec says what the document means.
func describeSpec(page *web.BinPage) {
	spec, err := binning.Parse([]byte(page.Document))
	if err != nil {
		page.Problem = "This document cannot be read by this version of the program: " + err.Error()
		return
	}
	for _, a := range spec.Axes() {
		q := quantityOf(a.Quantity)
		edges := make([]string, len(a.Edges))
		for i, e := range a.Edges {
			edges[i] = strconv.FormatFloat(e, 'f', -1, 64)
		}
		line := web.SpecAxis{Label: q.Label, Unit: q.Unit, Edges: strings.Join(edges, ", ")}
		if a.Guard > 0 {
			line.Edges += "; guard band " + strconv.FormatFloat(a.Guard, 'f', -1, 64)
		}
		page.Axes = append(page.Axes, line)
	}
	for _, name := range spec.Quantities() {
		q := quantityOf(name)
		unit := q.Unit
		if unit == "" {
			unit = "no unit"
		}
		page.Needs = append(page.Needs, web.Fact{Name: q.Label, Value: unit})
	}
	for _, cell := range spec.Cells() {
		line := web.SpecCell{Name: cell.Name, Class: cell.Class.String()}
		switch cell.Class {
		case binning.Sellable, binning.Unsellable:
			page.Bins = append(page.Bins, line)
		case binning.Reject:
			page.Rejects = append(page.Rejects, line)
		}
	}
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
	for _, f := range []web.Fact{{Name: "title", Value: sp.Title}, {Name: "products", Value: strings.Join(sp.Products, ", ")},
		{Name: "bins", Value: sp.Kind + " measurements"}, {Name: "stored", Value: stored}} {
		if f.Value != "" {
			out = append(out, f)
		}
	}
	return out
}

func (s *Server) versionFacts(shown *db.Spec, all []db.Spec) []web.Fact {
	var out []web.Fact
	for _, v := range all {
		f := web.Fact{Name: "v" + strconv.Itoa(v.Version), Value: web.Moment(v.StoredAt, s.zone)}
		if v.Version != shown.Version {
			f.Href = "/bins/" + url.PathEscape(v.Name) + "?version=" + strconv.Itoa(v.Version)
		}
		out = append(out, f)
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
