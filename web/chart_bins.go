package web

import (
	"fmt"
	"sort"
	"time"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"
)

// mostBars is how many bars a chart of bins has at most.
const mostBars = 24

// Binned is dies per bin, in words.
type Binned struct {
	Spec        string // "harbour-blue v3"
	Cells       []MapCell
	Denominator int
	OverLayout  bool
	CSVURL      string
}

// over says what a yield is over.
func over(layout bool) string {
	if layout {
		return "dies on the layout inside the edge exclusion"
	}
	return "measured dies, since no layout is known"
}

// BinChart shows dies per bin and per reject reason; nil without dies.
func BinChart(b Binned) *Chart {
	c := &Chart{ID: "bins", Question: "Where are the dies lost?", CSVURL: b.CSVURL,
		Table: Table{Head: []string{"bin or reason", "class", "dies", "share"}}}
	var shown []MapCell
	for _, mc := range b.Cells {
		c.Table.add(textCell(mc.Name), textCell(mc.Class), countCell(mc.Dies), shareCell(mc.Dies, b.Denominator))
		if mc.Dies > 0 {
			shown = append(shown, mc)
		}
	}
	if len(shown) == 0 {
		return nil
	}
	left := len(b.Cells) - len(shown)
	c.Caption = fmt.Sprintf("Dies of this measurement under %s; shares are of %s %s.", b.Spec, Count(b.Denominator), over(b.OverLayout))
	if len(shown) > mostBars {
		shown = largest(shown, mostBars)
		c.Caption += fmt.Sprintf(" The %d fullest are drawn, the lost dies first; the table has all.", mostBars)
	} else if left > 0 {
		c.Caption += fmt.Sprintf(" %s without dies left out.", Plural(left, "bin or reason", "bins and reasons"))
	}
	lostFirst(shown)
	c.Label, c.Tall = "Dies per bin and per reject reason. "+c.Caption, len(shown)
	var names []string
	var data []opts.BarData
	for _, cell := range shown {
		name := cell.Name
		if cell.Class != "sellable" && cell.Class != cell.Name {
			name += " · " + cell.Class
		}
		names = append(names, name)
		label := Count(cell.Dies) + "  " + Percent(cell.Dies, b.Denominator)
		data = append(data, opts.BarData{Name: name + ": " + Plural(cell.Dies, "die", "dies") + ", " + Percent(cell.Dies, b.Denominator), Value: cell.Dies,
			ItemStyle: &opts.ItemStyle{Color: "@" + cell.Look.Token()},
			Label:     &opts.Label{Show: opts.Bool(true), Position: "right", Color: tokenInk, Formatter: label}})
	}
	bar := charts.NewBar()
	bar.SetGlobalOptions(tooltip(), margins("12", "120"),
		charts.WithXAxisOpts(opts.XAxis{Type: "value", Name: "dies", NameLocation: "middle", NameGap: 30, SplitNumber: 4}),
		charts.WithYAxisOpts(opts.YAxis{Type: "category", Data: names, Inverse: opts.Bool(true)}))
	bar.AddSeries("dies", data, func(s *charts.SingleSeries) { s.BarCategoryGap = "25%" })
	all := bar.JSON()
	all["grid"] = map[string]any{"left": 12, "right": 130, "top": 8, "bottom": 52, "containLabel": true}
	c.Options = options(all)
	return c
}

// lostFirst puts what is not sold before what is, the most dies first, and
// leaves the bins that are sold in the specification's order.
func lostFirst(cells []MapCell) {
	sort.SliceStable(cells, func(i, j int) bool {
		a, b := cells[i].Class != "sellable", cells[j].Class != "sellable"
		if a != b {
			return a
		}
		return a && cells[i].Dies > cells[j].Dies
	})
}

// Token names the look for the scripts: "bin:3:rise", "reject:0:" or "missing".
func (l BinLook) Token() string {
	switch {
	case l.Missing:
		return "missing"
	case l.Reject:
		return fmt.Sprintf("reject:%d:%s", l.Fill, l.Pattern)
	default:
		return fmt.Sprintf("bin:%d:%s", l.Fill, l.Pattern)
	}
}

// largest keeps the n cells with most dies, in their old order.
func largest(cells []MapCell, n int) []MapCell {
	order := make([]int, len(cells))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool { return cells[order[i]].Dies > cells[order[j]].Dies })
	order = order[:n]
	sort.Ints(order)
	out := make([]MapCell, n)
	for i, k := range order {
		out[i] = cells[k]
	}
	return out
}

// WaferYield is one wafer's yield under a specification.
type WaferYield struct {
	Wafer, Lot        string
	MeasuredAt        time.Time
	Good, Denominator int
}

// YieldsChart shows the yield of wafers by the time they were measured; nil
// without wafers.
func YieldsChart(spec string, yields []WaferYield, zone *time.Location, csvURL string) *Chart {
	c := &Chart{ID: "yields", Question: "How have wafers yielded under it?", CSVURL: csvURL,
		Table: Table{Head: []string{"wafer", "lot", "measured at", "sellable dies", "of dies", "yield"}}}
	var data []opts.ScatterData
	for _, y := range yields {
		c.Table.add(textCell(y.Wafer), textCell(y.Lot), cell{Moment(y.MeasuredAt, zone), y.MeasuredAt.In(zone).Format(time.RFC3339)},
			countCell(y.Good), countCell(y.Denominator), shareCell(y.Good, y.Denominator))
		if y.Denominator == 0 {
			continue
		}
		words := fmt.Sprintf("%s, %s: %s of %s dies", y.Wafer, Moment(y.MeasuredAt, zone), Percent(y.Good, y.Denominator), Count(y.Denominator))
		// Wall-clock time of the fab, whatever the reader's own zone.
		data = append(data, opts.ScatterData{Name: words, Value: []any{y.MeasuredAt.In(zone).Format("2006-01-02T15:04:05"), round(100*float64(y.Good)/float64(y.Denominator), 3)}, SymbolSize: 9})
	}
	if len(data) == 0 {
		return nil
	}
	c.Caption = fmt.Sprintf("The last %s under %s, each over its own layout dies (or its measured dies where no layout is known).", Plural(len(data), "wafer", "wafers"), spec)
	c.Label = "Yield by time of measurement. " + c.Caption
	s := charts.NewScatter()
	s.SetGlobalOptions(tooltip(), margins("64", "24"),
		charts.WithXAxisOpts(opts.XAxis{Type: "time", Name: "measured at", NameLocation: "middle", NameGap: 30, SplitLine: &opts.SplitLine{Show: opts.Bool(false)}}),
		charts.WithYAxisOpts(opts.YAxis{Type: "value", Name: "yield / %", NameLocation: "end", Min: 0, Max: 100}))
	s.AddSeries("yield", data, func(s *charts.SingleSeries) { s.ItemStyle = &opts.ItemStyle{Color: tokenAccent} })
	c.Options = options(s.JSON())
	return c
}
