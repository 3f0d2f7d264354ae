package api

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/db"
	"epitally/web"
)

// pageSpec shows one version of a specification: what it does to the dies of the
// last wafers, and where it can be changed.
func (s *Server) pageSpec(c echo.Context) error {
	ctx := c.Request().Context()
	name := pathText(c, "spec")
	version, err := numberIn(c, "version", 0, 0, 2_000_000_000)
	if err != nil {
		return err
	}
	last, err := numberIn(c, "last", lastWafers, 1, mostWafers)
	if err != nil {
		return err
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
	page := web.BinPage{Name: sp.Name, Version: sp.Version, Document: sp.Document, Versions: s.versionLines(sp, versions),
		Facts: specFacts(sp, web.Moment(sp.StoredAt, s.zone)),
		Last:  lastOptions(last), Lot: queryText(c, "lot"),
		Yields: web.YieldsChart(title, yields, s.zone, "/bins/"+url.PathEscape(name)+"/yields.csv")}
	page.Base = s.base(c, web.Base{Title: title, Section: "bins", Finding: web.SpecSentence(title, yields, sp.Latest), Charts: page.Yields != nil})
	if err := s.lookAtSpec(c, &page, sp, versions[0].Version+1, last); err != nil {
		return err
	}
	return s.render(c, "bin", page)
}

// lookAtSpec fills what needs the parsed document. A document that an older
// version of the program took and this one does not is said to be so.
func (s *Server) lookAtSpec(c echo.Context, page *web.BinPage, sp *db.Spec, next, last int) error {
	spec, err := s.specs.parse(sp)
	if err != nil {
		page.Problem = "This document cannot be read by this version of the program: " + err.Error()
		return nil
	}
	describeSpec(page, spec)
	ctx := c.Request().Context()
	list, err := s.choose(ctx, spec, nil, queryText(c, "lot"), last)
	if err != nil {
		return err
	}
	t, err := s.store.Try(ctx, spec, list, true)
	if err != nil {
		return err
	}
	ids := make([]string, len(list))
	for i := range list {
		ids[i] = strconv.FormatInt(list[i].ID, 10)
	}
	view := queryText(c, "view")
	page.Views = viewOptions(spec, view)
	page.Editor = &web.SpecEditor{Measurements: strings.Join(ids, ","), Next: next, Publish: "/api/v1/specifications",
		Try: listURL("/bins/"+url.PathEscape(sp.Name)+"/trial", "view", view)}
	page.Look, err = s.look(ctx, t, list, ids, shownAs{whole: view == "whole", before: -1})
	return err
}

// tryEdited answers with the part of the page that shows what the edited document
// in the body does. quick leaves risks and findings for later.
func (s *Server) tryEdited(c echo.Context) error {
	document, err := readDocument(c)
	if err != nil {
		return s.answerEdit(c, err)
	}
	spec, err := binning.Parse(document)
	if err != nil {
		return s.answerEdit(c, err)
	}
	var ids []string
	if text := queryText(c, "measurements"); text != "" {
		ids = strings.Split(text, ",")
	}
	before, err := numberIn(c, "before", -1, -1, 1<<40)
	if err != nil {
		return s.answerEdit(c, err)
	}
	ctx := c.Request().Context()
	list := []db.Chosen{}
	if len(ids) > 0 {
		if list, err = s.choose(ctx, spec, ids, "", 0); err != nil {
			return s.answerEdit(c, err)
		}
	}
	quick := queryText(c, "quick") == "yes"
	t, err := s.store.Try(ctx, spec, list, !quick)
	if err != nil {
		return s.answerEdit(c, err)
	}
	shown := shownAs{whole: queryText(c, "view") == "whole", before: before, boxes: boxesIn(queryText(c, "boxes"))}
	var look web.SpecLook
	if quick {
		look = s.quickLook(t, ids, shown)
	} else if look, err = s.look(ctx, t, list, ids, shown); err != nil {
		return s.answerEdit(c, err)
	}
	var b bytes.Buffer
	if err := s.pages.RenderPart(&b, "bin", "look", look); err != nil {
		return err
	}
	return c.HTMLBlob(http.StatusOK, b.Bytes())
}

// shownAs is how a trial is drawn.
type shownAs struct {
	whole  bool                  // all of a chromaticity diagram
	before int                   // sellable dies before the change; −1 = nothing was changed
	boxes  map[string][4]float64 // plots that keep their scales while something is moved
}

// boxesIn reads "plot-a0:450,460,0,1;…"; what cannot be read is left out, and the
// plot then chooses its own scales.
func boxesIn(text string) map[string][4]float64 {
	boxes := map[string][4]float64{}
	for _, item := range strings.Split(text, ";") {
		id, numbers, _ := strings.Cut(item, ":")
		parts := strings.Split(numbers, ",")
		var box [4]float64
		ok := len(parts) == len(box)
		for i := 0; ok && i < len(box); i++ {
			v, err := strconv.ParseFloat(parts[i], 64)
			box[i], ok = v, err == nil && !math.IsNaN(v) && !math.IsInf(v, 0)
		}
		if ok && box[0] < box[1] && box[2] < box[3] {
			boxes[id] = box
		}
	}
	return boxes
}

// answerEdit tells a faulty document to the script that sent it as the API does:
// a script cannot read a page of an error.
func (s *Server) answerEdit(c echo.Context, err error) error {
	if statusOf(err) >= http.StatusInternalServerError {
		return err
	}
	p := s.problemOf(err, c)
	return answerJSON(c, p.Status, mediaProblem, p)
}

// look shows a trial with findings.
func (s *Server) look(ctx context.Context, t *db.Trial, list []db.Chosen, ids []string, as shownAs) (web.SpecLook, error) {
	found, overlapWafers, err := s.store.Findings(ctx, t, list)
	if err != nil {
		return web.SpecLook{}, err
	}
	out := s.quickLook(t, ids, as)
	for _, f := range found {
		line := web.SpecFinding{Kind: string(f.Kind), Says: f.Says, Line: f.Line}
		if f.Kind == binning.Overlap && overlapWafers > 0 {
			line.Dies = fmt.Sprintf("%s of %s", web.Plural(f.Dies, "die", "dies"), web.Plural(overlapWafers, "wafer", "wafers"))
		}
		out.Findings = append(out.Findings, line)
	}
	return out, nil
}

func (s *Server) quickLook(t *db.Trial, ids []string, as shownAs) web.SpecLook {
	wafers := "the last " + web.Plural(t.Wafers, "wafer", "wafers")
	numbers := web.BinNumbers{Spec: t.Spec, Counts: t.Counts, Denominator: t.Denominator, Wafers: t.Wafers}
	if t.Risk != nil {
		numbers.Risk, numbers.RiskCounts, numbers.RiskWafers = &t.Risk.Conformity, t.Risk.Counts, t.Risk.Wafers
	}
	look := web.SpecLook{Wafers: wafers, None: t.Wafers == 0, Good: t.Good(), Total: t.Denominator, Bins: web.NewBinTable(numbers),
		Verdict: web.TrialSentence(t.Good(), t.Denominator, as.before, numbers.ConfidentShare(), wafers)}
	counts := t.Counts
	if t.Wafers == 0 {
		counts = nil // nothing was counted, which is not 0
	}
	plots := web.BinPlots{Spec: t.Spec, Counts: counts, Whole: as.whole, Boxes: as.boxes, Edit: true}
	if len(ids) > 0 {
		plots.Density = func(d web.DensityPlot) string { return densityURL(d, ids) }
	}
	look.Plots = plots.Draw()
	return look
}

// describeSpec says what the document needs and why it rejects.
func describeSpec(page *web.BinPage, spec *binning.Spec) {
	for _, name := range spec.Quantities() {
		q := quantityOf(name)
		unit := q.Unit
		if unit == "" {
			unit = "no unit"
		}
		page.Needs = append(page.Needs, web.Fact{Name: q.Label, Value: unit})
	}
	for _, cell := range spec.Cells() {
		if cell.Class == binning.Reject {
			page.Rejects = append(page.Rejects, web.SpecCell{Name: cell.Name, Class: cell.Class.String()})
		}
	}
}

func lastOptions(last int) []web.Option {
	var out []web.Option
	for _, n := range []int{1, 5, 20, 50, 100, 200, 500} {
		out = append(out, web.Option{Value: strconv.Itoa(n), Label: "the last " + strconv.Itoa(n), Selected: n == last})
	}
	return out
}

// viewOptions are offered for specifications with chromaticities.
func viewOptions(spec *binning.Spec, view string) []web.Option {
	for _, r := range spec.Regions() {
		if r.Space != binning.SpaceOwn {
			return []web.Option{{Value: "cells", Label: "the cells", Selected: view != "whole"}, {Value: "whole", Label: "all of it", Selected: view == "whole"}}
		}
	}
	return nil
}

func (s *Server) versionLines(shown *db.Spec, all []db.Spec) []web.VersionLine {
	var out []web.VersionLine
	for _, v := range all {
		f := web.VersionLine{Name: "v" + strconv.Itoa(v.Version), StoredAt: web.Moment(v.StoredAt, s.zone), Author: v.Author, Reason: v.Reason}
		if v.Version != shown.Version {
			f.Href = "/bins/" + url.PathEscape(v.Name) + "?version=" + strconv.Itoa(v.Version)
		}
		out = append(out, f)
	}
	return out
}

// numberIn reads a whole number of a page's query.
func numberIn(c echo.Context, name string, fallback, low, high int) (int, error) {
	text := queryText(c, name)
	if text == "" {
		return fallback, nil
	}
	n, err := strconv.Atoi(text)
	if err != nil || n < low || n > high {
		return 0, fmt.Errorf("%s %q is not a whole number from %d to %d: %w", name, text, low, high, analytics.ErrInvalid)
	}
	return n, nil
}

func orText(text, fallback string) string {
	if text == "" {
		return fallback
	}
	return text
}
