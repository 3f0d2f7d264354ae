package api

import (
	"fmt"
	"math"
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/db"
	"epitally/web"
)

func (s *Server) pageWafers(c echo.Context) error {
	ctx := c.Request().Context()
	f, err := waferFilter(c)
	if err != nil {
		return err
	}
	list, err := s.store.Wafers(ctx, f)
	if err != nil {
		return err
	}
	if only := (db.WaferFilter{Search: f.Search}); f == only && list.Total == 1 && strings.EqualFold(list.Rows[0].Wafer.Name, f.Search) {
		// Whoever typed a wafer's whole name wants the wafer, not a list of one.
		return c.Redirect(http.StatusSeeOther, "/wafers/"+url.PathEscape(list.Rows[0].Wafer.Name))
	}
	choices, err := s.store.FilterChoices(ctx)
	if err != nil {
		return err
	}
	states, err := s.store.StateCounts(ctx, f)
	if err != nil {
		return err
	}
	narrowed := f
	narrowed.Cursor, narrowed.Limit = "", 0
	page := web.WafersPage{Total: list.Total, Fields: filterFields(f, choices), Filtered: narrowed != (db.WaferFilter{}),
		Quantity: fmt.Sprintf("Small maps share one scale, ±%d\u202fnm about each wafer's own target: teal is short, ochre long, and what lies beyond takes the end shade. Without a target they show the value on a scale of their own, dark low and bright high.", web.SmallMapReach)}
	page.Empty, page.Drop = list.Total == 0 && !page.Filtered, s.drop
	page.Base = s.base(c, web.Base{Title: "Wafers", Section: "wafers", Search: f.Search})
	page.Finding = web.WafersSentence(web.WafersFound{Total: list.Total, ByState: states, Filtered: page.Filtered, AllURL: "/wafers",
		Link: func(state string) string { g := narrowed; g.State = state; return wafersURL(g) }, Basis: "All wafers that the filter selects, " + page.MadeAt})
	for i := range list.Rows {
		page.Rows = append(page.Rows, s.waferLine(&list.Rows[i]))
	}
	if list.Next != "" {
		older := f
		older.Cursor = list.Next
		page.OlderURL = wafersURL(older)
	}
	if f.Cursor != "" {
		page.FirstURL = wafersURL(narrowed)
	}
	return s.render(c, "wafers", page)
}

func waferFilter(c echo.Context) (db.WaferFilter, error) {
	f := db.WaferFilter{Search: queryText(c, "q"), Lot: queryText(c, "lot"), Reactor: queryText(c, "reactor"), Recipe: queryText(c, "recipe"),
		Product: queryText(c, "product"), State: queryText(c, "state"), Kind: queryText(c, "kind"), Spec: queryText(c, "spec"), Cursor: c.QueryParam("cursor")}
	if text := queryText(c, "run"); text != "" {
		run, err := strconv.Atoi(text)
		if err != nil || run < 1 {
			return f, fmt.Errorf("run %q is not a run number: write it as a whole number above 0: %w", text, analytics.ErrInvalid)
		}
		f.Run = run
	}
	return f, nil
}

func wafersURL(f db.WaferFilter) string {
	run := ""
	if f.Run > 0 {
		run = strconv.Itoa(f.Run)
	}
	return listURL("/wafers", "q", f.Search, "lot", f.Lot, "reactor", f.Reactor, "run", run, "recipe", f.Recipe, "product", f.Product,
		"state", f.State, "kind", f.Kind, "spec", f.Spec, "cursor", f.Cursor)
}

func filterFields(f db.WaferFilter, c *db.FilterChoices) []web.FilterField {
	field := func(name, label, chosen, none string, values []string) web.FilterField {
		out := web.FilterField{Name: name, Label: label, Options: []web.Option{{Label: none, Selected: chosen == ""}}}
		known := chosen == ""
		for _, v := range values {
			known = known || v == chosen
			out.Options = append(out.Options, web.Option{Value: v, Label: v, Selected: v == chosen})
		}
		if !known {
			out.Options = append(out.Options, web.Option{Value: chosen, Label: chosen, Selected: true})
		}
		return out
	}
	fields := []web.FilterField{
		field("state", "State", f.State, "any", c.States),
		field("product", "Product", f.Product, "any", c.Products),
		field("reactor", "Reactor", f.Reactor, "any", c.Reactors),
		field("recipe", "Recipe", f.Recipe, "any", c.Recipes),
		field("lot", "Lot", f.Lot, "any", c.Lots),
		field("kind", "Measurement", f.Kind, "the newest", c.Kinds),
		field("spec", "Yield under", f.Spec, "the product's first", c.Specs),
	}
	if f.Run > 0 {
		run := strconv.Itoa(f.Run)
		fields = append(fields, field("run", "Run", run, "any", []string{run}))
	}
	return fields
}

func (s *Server) waferLine(r *db.WaferRow) web.WaferLine {
	w := &r.Wafer
	none := web.Number(math.NaN(), 0)
	line := web.WaferLine{Wafer: w.Name, Href: "/wafers/" + url.PathEscape(w.Name), Lot: w.Lot, LotHref: listURL("/wafers", "lot", w.Lot),
		Product: w.Product, State: r.State, Off: none, SD: none, Yield: none}
	if w.Reactor != "" {
		line.Grown, line.GrownHref = grownWords(w)
	}
	m := r.Measurement
	if m == nil {
		return line
	}
	line.Kind, line.MeasuredAt = m.Kind, web.Moment(m.MeasuredAt, s.zone)
	line.Href += "?measurement=" + strconv.FormatInt(m.ID, 10)
	if r.Main != nil {
		fillSummary(&line, r.Main, m.ID)
	}
	if t := r.Tally; t != nil {
		line.Yield, line.YieldOver = web.Percent(t.Good, t.Denominator), "of "+web.Count(t.Denominator)+" measured dies"
		if t.OverLayout {
			line.YieldOver = "of " + web.Count(t.Denominator) + " layout dies"
		}
		line.Spec = t.Spec + " v" + strconv.Itoa(t.Version)
		line.SpecHref = "/bins/" + url.PathEscape(t.Spec) + "?version=" + strconv.Itoa(t.Version)
	}
	return line
}

func fillSummary(line *web.WaferLine, main *db.Summary, measurementID int64) {
	q, sum := main.Quantity, main.Summary
	d := web.Decimals(q.Resolution)
	line.Quantity = strings.ToLower(q.Label)
	line.SD, line.N = web.With(sum.SD, d, q.Unit), web.Count(sum.N)
	if off := sum.Median - sum.Target; math.IsNaN(off) {
		line.Off, line.OffIsMedian = web.With(sum.Median, d, q.Unit), true
	} else {
		line.Off = web.SignedWith(off, d, q.Unit)
	}
	if sum.N == 0 {
		line.OffIsMedian = false
	}
	root := "/api/v1/measurements/" + strconv.FormatInt(measurementID, 10) + "/small-map.png?quantity=" + url.QueryEscape(q.Name)
	line.MapLight, line.MapDark = root+"&theme=light", root+"&theme=dark"
	line.MapAlt = "Small map of wafer " + line.Wafer + ": " + line.Quantity
}

func grownWords(w *db.Wafer) (words, href string) {
	words, href = w.Reactor, listURL("/wafers", "reactor", w.Reactor)
	if w.Run != nil {
		run := strconv.Itoa(*w.Run)
		words, href = words+" "+run, listURL("/wafers", "reactor", w.Reactor, "run", run)
	}
	if w.Pocket != "" {
		words += ", pocket " + w.Pocket
	}
	return words, href
}
