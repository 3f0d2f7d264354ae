package web

import (
	"encoding/json"
	"fmt"
	"html/template"
	"math"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"
)

// Colours in chart options are tokens, "@accent", that the chart script replaces
// by the ground's colours: one set of options serves light and dark.
const (
	tokenAccent = "@accent"
	tokenInk    = "@ink"
	tokenFaint  = "@faint"
	tokenBand   = "@band"
	tokenPaper  = "@paper"
)

// options marshals a chart's options after taking out what go-echarts adds and
// no chart of ours has. They hold no functions. A chart that cannot be marshalled
// is a programmer's fault.
func options(all map[string]any) scriptJSON {
	for _, unused := range []string{"title", "toolbox", "legend", "color"} {
		delete(all, unused)
	}
	all["animation"] = false
	b, err := json.Marshal(all) // escapes <, > and &, so it cannot end its block
	if err != nil {
		panic(fmt.Sprintf("chart options: %v", err))
	}
	return template.JS(b)
}

// tooltip shows the name of the point, which is its reading in words. The chart
// script draws it on the canvas: HTML with style attributes is forbidden by the
// pages' security policy.
func tooltip() charts.GlobalOpts {
	return charts.WithTooltipOpts(opts.Tooltip{Show: opts.Bool(true), Trigger: "item", Formatter: "{b}"})
}

// margins leaves room for axis titles.
func margins(left, right string) charts.GlobalOpts {
	return charts.WithGridOpts(opts.Grid{Left: left, Right: right, Top: "54", Bottom: "52"})
}

// valueAxes are two numeric axes with titles and units; lo and hi bound x, NaN
// leaves an end free.
func valueAxes(x, y string, xLow, xHigh float64, yFromZero bool) charts.GlobalOpts {
	bound := func(v float64) any {
		if math.IsNaN(v) {
			return nil
		}
		return v
	}
	return func(bc *charts.BaseConfiguration) {
		charts.WithXAxisOpts(opts.XAxis{Type: "value", Name: x, NameLocation: "middle", NameGap: 30,
			Min: bound(xLow), Max: bound(xHigh), Scale: opts.Bool(true),
			SplitLine: &opts.SplitLine{Show: opts.Bool(false)}})(bc)
		charts.WithYAxisOpts(opts.YAxis{Type: "value", Name: y, NameLocation: "end", NameGap: 30, Scale: opts.Bool(!yFromZero),
			SplitNumber: 4})(bc)
	}
}

// targetMarks draws the target as a thin line and the window about it as a band,
// both named in place; axis is the one the quantity runs along, "xAxis" or "yAxis".
func targetMarks(axis string, target, window float64, decimals int, unit string) (line *opts.MarkLines, band *opts.MarkAreas) {
	if math.IsNaN(target) {
		return nil, nil
	}
	end, place := "end", "insideTopLeft"
	if axis == "yAxis" {
		end, place = "insideStartTop", "insideTopLeft"
	}
	line = &opts.MarkLines{
		Data: []any{map[string]any{axis: target, "name": "target"}},
		MarkLineStyle: opts.MarkLineStyle{
			Symbol:    []string{"none", "none"},
			Label:     &opts.Label{Show: opts.Bool(true), Formatter: "target " + With(target, decimals, unit), Color: tokenInk, Position: end},
			LineStyle: &opts.LineStyle{Color: tokenInk, Width: 1, Type: "solid"},
		},
	}
	if !(window > 0) {
		return line, nil
	}
	band = &opts.MarkAreas{
		Data: []any{[]any{map[string]any{axis: target - window, "name": "window ±" + With(window, decimals, unit)}, map[string]any{axis: target + window}}},
		MarkAreaStyle: opts.MarkAreaStyle{
			Label:     &opts.Label{Show: opts.Bool(true), Position: place, Color: tokenInk},
			ItemStyle: &opts.ItemStyle{Color: tokenBand},
		},
	}
	return line, band
}
