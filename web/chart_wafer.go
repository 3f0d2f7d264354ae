package web

import (
	"fmt"
	"math"
	"strings"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"

	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
)

// Plotted is one quantity's summary with what it is held against.
type Plotted struct {
	Quantity quantity.Quantity
	Summary  uniformity.Summary
	Target   float64 // NaN: none
	Window   float64 // half width, 0: none
	CSVURL   string
	Layout   *wafermap.Layout // says what lengths are in; nil = mm
}

// axisTitle is a quantity's label with its unit.
func axisTitle(q quantity.Quantity) string {
	if q.Unit == "" {
		return q.Label
	}
	return q.Label + " / " + q.Unit
}

// HistogramChart shows how the dies spread over values; nil without values.
func HistogramChart(p Plotted) *Chart {
	h, q := p.Summary.Histogram, p.Quantity
	if len(h.Counts) == 0 || p.Summary.N == 0 {
		return nil
	}
	decimals := Decimals(min(q.Resolution, h.Width))
	c := &Chart{ID: "histogram", Question: "How do the dies spread in " + lowerFirst(q.Label) + "?", CSVURL: p.CSVURL,
		Table: Table{Head: []string{"from / " + unitOr(q.Unit), "to / " + unitOr(q.Unit), "dies"}}}
	var data []opts.BarData
	for i, n := range h.Counts {
		low, high := h.Low+float64(i)*h.Width, h.Low+float64(i+1)*h.Width
		words := fmt.Sprintf("%s to %s: %s", Number(low, decimals), With(high, decimals, q.Unit), Plural(n, "die", "dies"))
		data = append(data, opts.BarData{Name: words, Value: []float64{round(low+h.Width/2, 9), float64(n)}})
		c.Table.add(numberCell(low, decimals), numberCell(high, decimals), countCell(n))
	}
	c.Caption = fmt.Sprintf("%s dies with a value, in steps of %s", Count(p.Summary.N), With(h.Width, decimals, q.Unit))
	if h.Below+h.Above > 0 {
		c.Caption += fmt.Sprintf("; not drawn: %s below and %s above", Count(h.Below), Count(h.Above))
	}
	c.Caption = strings.TrimSuffix(c.Caption, ".") + "." // a unit may end in one
	c.Label = "Histogram of " + lowerFirst(q.Label) + ". " + c.Caption
	bar := charts.NewBar()
	low, high := h.Low, h.Low+float64(len(h.Counts))*h.Width
	if !math.IsNaN(p.Target) && p.Summary.N > 0 {
		low, high = widened(low, high, p.Target)
	}
	bar.SetGlobalOptions(tooltip(), margins("64", "24"), valueAxes(axisTitle(q), "dies", round(low, 9), round(high, 9), true))
	bar.AddSeries("dies", data, func(s *charts.SingleSeries) {
		s.BarCategoryGap = "6%"
		s.ItemStyle = &opts.ItemStyle{Color: tokenAccent}
		s.MarkLines, s.MarkAreas = targetMarks("xAxis", p.Target, p.Window, Decimals(q.Resolution)-1, q.Unit)
	})
	c.Options = options(bar.JSON())
	return c
}

// widened gives a range that shows the target too, with room for its name, unless
// it lies over three times the range away: the dies come first.
func widened(low, high, target float64) (float64, float64) {
	span := high - low
	if room := target - span/8; room < low && low-target < 3*span {
		low = room
	}
	if room := target + span/8; room > high && target-high < 3*span {
		high = room
	}
	return low, high
}

// RadialChart shows the mean by distance from the wafer's centre; nil without a
// profile.
func RadialChart(p Plotted) *Chart {
	q := p.Quantity
	if len(p.Summary.Radial) == 0 {
		return nil
	}
	decimals := Decimals(q.Resolution)
	unit, length := unitOr(q.Unit), lengthUnit(p.Layout)
	c := &Chart{ID: "radial", Question: "Does " + lowerFirst(q.Label) + " change towards the edge?", CSVURL: p.CSVURL,
		Table: Table{Head: []string{"from / " + length, "to / " + length, "mean / " + unit, "sd / " + unit, "dies"}}}
	var mean, floor, band []opts.LineData
	total := 0
	for _, r := range p.Summary.Radial {
		c.Table.add(numberCell(r.InnerMM, 1), numberCell(r.OuterMM, 1), numberCell(r.Mean, decimals+1), numberCell(r.SD, decimals+1), countCell(r.N))
		if r.N == 0 || math.IsNaN(r.Mean) {
			continue
		}
		total += r.N
		at, sd := round((r.InnerMM+r.OuterMM)/2, 6), r.SD
		if math.IsNaN(sd) {
			sd = 0
		}
		words := fmt.Sprintf("%s to %s: mean %s, sd %s, %s", Number(r.InnerMM, 1), With(r.OuterMM, 1, length),
			With(r.Mean, decimals, q.Unit), With(r.SD, decimals, q.Unit), Plural(r.N, "die", "dies"))
		mean = append(mean, opts.LineData{Name: words, Value: []float64{at, round(r.Mean, 9)}})
		floor = append(floor, opts.LineData{Value: []float64{at, round(r.Mean-sd, 9)}})
		band = append(band, opts.LineData{Value: []float64{at, round(2*sd, 9)}})
	}
	if len(mean) == 0 {
		return nil
	}
	c.Caption = fmt.Sprintf("Mean by ring over %s dies; the grey band is ± 1 standard deviation (n − 1) within the ring.", Count(total))
	c.Label = "Radial profile of " + lowerFirst(q.Label) + ". " + c.Caption
	line := charts.NewLine()
	last := p.Summary.Radial[len(p.Summary.Radial)-1].OuterMM
	line.SetGlobalOptions(tooltip(), margins("78", "24"), valueAxes("distance from the wafer's centre / "+length, axisTitle(q), 0, math.Ceil(last), false))
	bare := func(s *charts.SingleSeries) {
		s.Stack, s.Symbol = "band", "none"
		s.LineStyle = &opts.LineStyle{Width: 0.01, Opacity: opts.Float(0)}
	}
	line.AddSeries("mean", mean, func(s *charts.SingleSeries) {
		s.Symbol, s.SymbolSize = "circle", 7
		s.LineStyle = &opts.LineStyle{Color: tokenAccent, Width: 2.5}
		s.ItemStyle = &opts.ItemStyle{Color: tokenAccent}
		s.MarkLines, s.MarkAreas = targetMarks("yAxis", p.Target, p.Window, decimals-1, q.Unit)
	})
	line.AddSeries("mean − sd", floor, bare)
	line.AddSeries("sd", band, bare, func(s *charts.SingleSeries) {
		s.AreaStyle = &opts.AreaStyle{Color: tokenFaint, Opacity: opts.Float(0.35)}
	})
	c.Options = options(line.JSON())
	return c
}

func unitOr(unit string) string {
	if unit == "" {
		return "1"
	}
	return unit
}

// round cuts binary noise from numbers in options.
func round(v float64, decimals int) float64 {
	f := math.Pow10(decimals)
	if math.Abs(v) > 1e15/f {
		return v
	}
	return math.Round(v*f) / f
}
