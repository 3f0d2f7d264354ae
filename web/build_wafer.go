package web

import (
	"fmt"
	"math"
	"net/url"
	"sort"
	"strconv"
	"strings"
	"time"

	"epitally/analytics/binning"
	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
)

// WaferInput is everything the page of a wafer is built from.
type WaferInput struct {
	Wafer       string
	Growth      Growth
	Measurement *MeasurementInput // nil: unmeasured
	All         []MeasurementInput
	Planes      []Plotted // of the measurement, in display order; CSVURL unused
	Shown       string    // quantity asked for; "" or unknown = the main one
	View        string    // "bins" or anything else
	Spec        *SpecInput
	SpecChoices []Option
	Grid        *wafermap.Grid
	GridURL     string
	Zone        *time.Location
}

// Growth is where a wafer grew and what it is for; empty = not known.
type Growth struct {
	Lot, Reactor, Carrier, Ring, Pocket, Recipe, Product string
	Run                                                  *int
	GrownAt                                              *time.Time
}

// MeasurementInput is a measurement without its planes.
type MeasurementInput struct {
	ID             int64
	Kind, Station  string
	MeasuredAt     time.Time
	DriveCurrentMA *float64
	Dies           int
	Remeasured     int
	Current        bool
	SourceID       int64
	Layout         *wafermap.Layout
	Facts          map[string]string
	Notices        []string
	DerivedFrom    map[string]string // quantity → what it was computed from
	Suspects       []colour.Suspect
}

// SpecInput is the measurement binned under one specification version.
type SpecInput struct {
	Name        string
	Version     int
	Latest      bool
	Cells       []binning.Cell
	Counts      []int    // dies that count per cell
	Codes       []uint16 // per die of the grid
	Good        int
	Denominator int
	OverLayout  bool
	Confident   int // sellable dies that conform with 95 % confidence; −1 = no uncertainty is known
}

func (s *SpecInput) title() string { return s.Name + " v" + strconv.Itoa(s.Version) }

// value is the specification as the page's form and URL name it.
func (s *SpecInput) value() string {
	if s.Latest {
		return s.Name
	}
	return s.Name + "@" + strconv.Itoa(s.Version)
}

// api is the root of the addresses of a measurement's data.
func (m *MeasurementInput) api() string {
	return "/api/v1/measurements/" + strconv.FormatInt(m.ID, 10)
}

// under is the query that names a specification version to the API.
func (s *SpecInput) under() string {
	return url.Values{"specification": {s.Name}, "version": {strconv.Itoa(s.Version)}}.Encode()
}

// NewWaferPage builds the page of a wafer. Base fields other than title,
// section and finding are the caller's.
func NewWaferPage(in WaferInput) WaferPage {
	p := WaferPage{Wafer: in.Wafer, Facts: growthFacts(in.Growth, in.Zone), View: "quantity"}
	p.Title, p.Section = "Wafer "+in.Wafer, "wafers"
	if in.Measurement == nil {
		p.State, p.LoadHint = "unmeasured", true
		p.Finding = WaferSentence(WaferFound{Wafer: in.Wafer, Basis: "No measurement is stored."})
		return p
	}
	if in.View == "bins" && in.Spec != nil {
		p.View = "bins"
	}
	main, shown := in.pick(MainQuantity(in.quantities(), in.Measurement.DerivedFrom)), in.pick(in.Shown)
	if shown == nil {
		shown = main
	}
	p.Notices, p.Suspects = in.notices(), in.Measurement.Suspects
	p.Measured, p.Downloads = measuredFacts(in.Measurement, in.Zone), in.downloads()
	p.Measurements, p.Specs = in.measurementOptions(), in.SpecChoices
	for _, q := range in.Planes {
		p.Quantities = append(p.Quantities, Option{q.Quantity.Name, axisTitle(q.Quantity), shown != nil && q.Quantity.Name == shown.Quantity.Name})
		line := statLine(q)
		line.From = in.Measurement.DerivedFrom[q.Quantity.Name]
		p.Stats = append(p.Stats, line)
	}
	p.StatsOver = "Figures are " + in.countedWords() + "."
	p.Finding = in.sentence(main)
	if main != nil && !math.IsNaN(main.Target) {
		p.State = uniformity.ColourState(main.Summary, main.Window)
	}
	if shown == nil {
		return p
	}
	p.Charts = true
	p.Histogram, p.Radial = in.charts(shown)
	in.fillMap(&p, shown)
	in.fillBins(&p)
	return p
}

// MainQuantity is the quantity a wafer is judged by first: the dominant
// wavelength that was measured, else the peak wavelength, else the dominant
// wavelength that was computed, else the first; "" when there is none.
func MainQuantity(names []string, derivedFrom map[string]string) string {
	const dominant, peak = "dominant_wavelength_nm", "peak_wavelength_nm"
	wanted := []string{dominant, peak}
	if derivedFrom[dominant] != "" {
		wanted = []string{peak, dominant}
	}
	for _, want := range wanted {
		for _, name := range names {
			if name == want {
				return name
			}
		}
	}
	if len(names) > 0 {
		return names[0]
	}
	return ""
}

func (in *WaferInput) quantities() []string {
	names := make([]string, len(in.Planes))
	for i := range in.Planes {
		names[i] = in.Planes[i].Quantity.Name
	}
	return names
}

func (in *WaferInput) pick(name string) *Plotted {
	for i := range in.Planes {
		if in.Planes[i].Quantity.Name == name {
			return &in.Planes[i]
		}
	}
	return nil
}

// href is this page under another view or quantity.
func (in *WaferInput) href(view, quantity string) string {
	q := url.Values{"measurement": {strconv.FormatInt(in.Measurement.ID, 10)}, "view": {view}}
	if quantity != "" {
		q.Set("quantity", quantity)
	}
	if in.Spec != nil {
		q.Set("specification", in.Spec.value())
	}
	return waferHref(in.Wafer) + "?" + q.Encode()
}

func (in *WaferInput) sentence(main *Plotted) Sentence {
	m := in.Measurement
	f := WaferFound{Wafer: in.Wafer, Measured: true, Target: math.NaN(), BinsHref: in.href("bins", ""),
		Basis: fmt.Sprintf("%s measurement of %s, %s; %s", m.Kind, Plural(m.Dies, "die", "dies"), Moment(m.MeasuredAt, in.Zone), "figures "+in.countedWords())}
	if main != nil {
		f.Quantity, f.Summary, f.Target = main.Quantity, &main.Summary, main.Target
		f.QuantityHref = in.href("quantity", main.Quantity.Name)
	}
	if s := in.Spec; s != nil {
		f.Spec, f.SpecHref = s.title(), "/bins/"+url.PathEscape(s.Name)+"?version="+strconv.Itoa(s.Version)
		f.Good, f.Denominator, f.OverLayout = s.Good, s.Denominator, s.OverLayout
		f.Loss = in.loss()
	}
	return WaferSentence(f)
}

// loss finds the largest group of dies that cannot be sold.
func (in *WaferInput) loss() Loss {
	s, best, counted := in.Spec, -1, 0
	for i, n := range s.Counts {
		counted += n
		if s.Cells[i].Class != binning.Sellable && n > 0 && (best < 0 || n > s.Counts[best]) {
			best = i
		}
	}
	if gone := s.Denominator - counted; gone > 0 && (best < 0 || gone > s.Counts[best]) {
		return Loss{Class: "unmeasured", Dies: gone}
	}
	if best < 0 {
		return Loss{}
	}
	return Loss{Name: s.Cells[best].Name, Class: s.Cells[best].Class.String(), Dies: s.Counts[best],
		Place: LossPlace(in.Grid, in.Measurement.Layout, s.Codes, uint16(best))}
}

func (in *WaferInput) charts(shown *Plotted) (histogram, radial *Chart) {
	h, r := *shown, *shown
	q := url.Values{"measurement": {strconv.FormatInt(in.Measurement.ID, 10)}, "quantity": {shown.Quantity.Name}}
	root := waferHref(in.Wafer) + "/charts/"
	h.CSVURL, r.CSVURL = root+"histogram.csv?"+q.Encode(), root+"radial.csv?"+q.Encode()
	return HistogramChart(h), RadialChart(r)
}

func (in *WaferInput) fillBins(p *WaferPage) {
	s := in.Spec
	if s == nil {
		return
	}
	p.SpecTitle, p.SpecHref = s.title(), "/bins/"+url.PathEscape(s.Name)+"?version="+strconv.Itoa(s.Version)
	p.YieldBig = Percent(s.Good, s.Denominator)
	p.YieldOver = fmt.Sprintf("%s of %s %s", Count(s.Good), Count(s.Denominator), over(s.OverLayout))
	if s.Confident >= 0 && s.Denominator > 0 {
		p.Confident = Percent(s.Confident, s.Denominator)
	}
	q := s.under() + "&measurement=" + strconv.FormatInt(in.Measurement.ID, 10)
	p.BinYield = SpecChart(s, waferHref(in.Wafer)+"/charts/bins.csv?"+q)
}

func mapCells(s *SpecInput) []MapCell {
	classes := make([]string, len(s.Cells))
	for i, c := range s.Cells {
		classes[i] = c.Class.String()
	}
	cells := make([]MapCell, len(s.Cells))
	for i, look := range LooksOf(classes) {
		cells[i] = MapCell{Name: s.Cells[i].Name, Class: classes[i], Dies: s.Counts[i], Look: look}
	}
	return cells
}

func (in *WaferInput) measurementOptions() []Option {
	var out []Option
	for _, m := range in.All {
		// Without the zone, which the figures below say: a select cuts long labels.
		label := m.Kind + ", " + m.MeasuredAt.In(in.Zone).Format("2006-01-02 15:04")
		if !m.Current {
			label += ", older"
		}
		out = append(out, Option{strconv.FormatInt(m.ID, 10), label, m.ID == in.Measurement.ID})
	}
	return out
}

func (in *WaferInput) countedWords() string {
	if l := in.Measurement.Layout; l == nil || l.Assumed {
		return "over all measured dies, since no layout is known"
	} else if l.EdgeExclusionMM > 0 {
		return "over the measured dies inside the edge exclusion of " + With(l.EdgeExclusionMM, 1, "mm")
	}
	return "over the measured dies on the layout"
}

func (in *WaferInput) notices() []string {
	m := in.Measurement
	var out []string
	if !m.Current {
		out = append(out, "This measurement is not the current one: a newer "+m.Kind+" measurement of the wafer is stored.")
	}
	if in.Growth.Reactor == "" {
		out = append(out, "The wafer is in no run sheet yet: where it grew, its product and its target are not known.")
	}
	if m.Layout != nil && m.Layout.Assumed {
		out = append(out, "No product layout is known: the outline is assumed from the measurement, and yields are over the measured dies.")
	}
	return append(out, m.Notices...)
}

func (in *WaferInput) downloads() []Fact {
	api := in.Measurement.api()
	out := []Fact{
		{Name: "All dies as CSV", Href: api + "/dies?format=csv"},
		{Name: "as Parquet", Href: api + "/dies?format=parquet"},
		{Name: "as XLSX", Href: api + "/dies?format=xlsx"},
		{Name: "Figures as JSON", Href: api + "/summaries"},
	}
	if in.Spec != nil {
		out = append(out, Fact{Name: "Bins as a substrate map", Href: api + "/substrate-map.xml?" + in.Spec.under()})
	}
	return out
}

func growthFacts(g Growth, zone *time.Location) []Fact {
	list := func(key, value string) string { return "/wafers?" + url.Values{key: {value}}.Encode() }
	var out []Fact
	add := func(name, value, href string) {
		if value != "" {
			out = append(out, Fact{name, value, href})
		}
	}
	add("lot", g.Lot, list("lot", g.Lot))
	add("product", g.Product, list("product", g.Product))
	add("recipe", g.Recipe, list("recipe", g.Recipe))
	add("reactor", g.Reactor, list("reactor", g.Reactor))
	if g.Run != nil {
		run := strconv.Itoa(*g.Run)
		add("run", run, "/wafers?"+url.Values{"reactor": {g.Reactor}, "run": {run}}.Encode())
	}
	add("carrier", g.Carrier, "")
	add("ring", g.Ring, "")
	add("pocket", g.Pocket, "")
	if g.GrownAt != nil {
		add("grown", Moment(*g.GrownAt, zone), "")
	}
	return out
}

func measuredFacts(m *MeasurementInput, zone *time.Location) []Fact {
	out := []Fact{{Name: "kind", Value: m.Kind}, {Name: "measured at", Value: Moment(m.MeasuredAt, zone)}}
	if m.Station != "" {
		out = append(out, Fact{Name: "station", Value: m.Station})
	}
	if m.DriveCurrentMA != nil {
		out = append(out, Fact{Name: "drive current", Value: With(*m.DriveCurrentMA, Decimals(0.1), "mA")})
	}
	out = append(out, Fact{Name: "dies", Value: Count(m.Dies)}, Fact{Name: "remeasured dies", Value: Count(m.Remeasured)})
	if m.SourceID != 0 {
		id := strconv.FormatInt(m.SourceID, 10)
		out = append(out, Fact{Name: "came from", Value: "load " + id, Href: "/loads/" + id})
	}
	keys := make([]string, 0, len(m.Facts))
	for k := range m.Facts {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	for _, k := range keys {
		out = append(out, Fact{Name: strings.ReplaceAll(k, "_", " "), Value: m.Facts[k]})
	}
	return out
}

// statLine formats one summary with the decimals of its quantity, one more for
// means and spreads.
func statLine(p Plotted) StatLine {
	s, d := p.Summary, Decimals(p.Quantity.Resolution)
	line := StatLine{Label: p.Quantity.Label, Unit: p.Quantity.Unit, N: Count(s.N), Missing: Count(s.Missing), Implausible: s.Implausible,
		Mean: Number(s.Mean, d+1), SD: Number(s.SD, d+1), RobustSD: Number(s.RobustSD, d+1), Min: Number(s.Min, d), Max: Number(s.Max, d),
		Q01: Number(s.Q01, d), Q05: Number(s.Q05, d), Q25: Number(s.Q25, d), Median: Number(s.Median, d),
		Q75: Number(s.Q75, d), Q95: Number(s.Q95, d), Q99: Number(s.Q99, d), Within: noValue}
	if p.Quantity.Scale == quantity.Deviation && !math.IsNaN(s.Within1) {
		u := thinSpace + p.Quantity.Unit + " "
		line.Within = "±1" + u + PercentOf(s.Within1) + ", ±2" + u + PercentOf(s.Within2) + ", ±5" + u + PercentOf(s.Within5)
	}
	return line
}

// SpecChart is the chart of a measurement binned under a specification.
func SpecChart(s *SpecInput, csvURL string) *Chart {
	return BinChart(Binned{Spec: s.title(), Cells: mapCells(s), Denominator: s.Denominator, OverLayout: s.OverLayout, CSVURL: csvURL})
}
