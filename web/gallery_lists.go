package web

import (
	"bytes"
	"fmt"
	"math"
	"time"

	"epitally/analytics/uniformity"
)

func cannedWafers() WafersPage {
	p := WafersPage{Base: dated(Base{Title: "Wafers", Section: "wafers"}), Total: 212, OlderURL: "#older",
		Quantity: "Small maps share one scale, ±5\u202fnm about each wafer's own target: teal is short, ochre long, and what lies beyond takes the end shade."}
	p.Finding = WafersSentence(WafersFound{Total: 212, ByState: map[string]int{"on colour": 148, "long": 31, "short": 20, "mixed": 11, "unmeasured": 2},
		Link: func(s string) string { return "#" + s }, Basis: "212 wafers, " + p.MadeAt})
	for _, f := range []string{"Lot", "Reactor", "Product", "State", "Kind", "Specification"} {
		p.Fields = append(p.Fields, FilterField{Name: f, Label: f, Options: []Option{{"", "any", true}, {"x", f + " 1", false}}})
	}
	states := []string{"on colour", "long", "short", "mixed", "on colour", "unmeasured"}
	light, dark := cannedSmallMap(false), cannedSmallMap(true)
	for i, state := range states {
		w := fmt.Sprintf("K-0412-%02d", 7-i)
		line := WaferLine{Wafer: w, Href: "wafer-values.html", Lot: "K-0412", LotHref: "#", Grown: fmt.Sprintf("Heron 204, pocket %d", i+1), GrownHref: "#", Product: "harbour",
			Kind: "probe", MeasuredAt: Moment(galleryNow.Add(-time.Duration(i)*time.Hour), galleryZone), MapLight: light, MapDark: dark, MapAlt: "Small map of " + w,
			Quantity: "dominant wavelength", Off: Signed(0.8-float64(i)*0.5, 2) + thinSpace + "nm", SD: With(0.91, 2, "nm"), N: "14,402", State: state,
			Yield: Percent(71-i, 100), YieldOver: "of 14,516 layout dies", Spec: "harbour-blue v3", SpecHref: "bin.html"}
		if state == "unmeasured" {
			line = WaferLine{Wafer: w, Href: "wafer-unmeasured.html", Lot: "K-0412", Product: "harbour", State: state, Off: noValue, SD: noValue, Yield: noValue}
		}
		p.Rows = append(p.Rows, line)
	}
	return p
}

func cannedSmallMap(dark bool) string {
	l := cannedLayout()
	g := cannedGrid(l)
	plane := cannedPlane("dominant_wavelength_nm", g, l)
	m := uniformity.NewFrame(g, l).SmallMap(&plane)
	var b bytes.Buffer
	if err := PaintSmallMap(&b, SmallPicture{Size: m.Size, Cells: m.Cells, Low: m.Low, High: m.High, Target: 455, Dark: dark}); err != nil {
		return ""
	}
	return dataURI(b.Bytes())
}

func cannedSpecs() BinsPage {
	p := BinsPage{Base: dated(Base{Title: "Bins", Section: "bins"})}
	p.Finding = SpecsSentence(2, "harbour-blue v3", "bin.html", 0.71, 20)
	p.Specs = []SpecLine{
		{Name: "harbour-blue", Href: "bin.html", Title: "Harbour blue, general lighting", Version: 3, Kind: "probe", Products: "harbour", StoredAt: Moment(galleryNow, galleryZone), Yield: Percent(71, 100), YieldOver: "of 290,320 dies, last 20 wafers"},
		{Name: "quay-wide", Href: "bin.html", Title: "Quay, wide window", Version: 1, Kind: "probe", Products: "harbour, quay", StoredAt: Moment(galleryNow, galleryZone), Yield: noValue},
	}
	return p
}

func cannedSpec() BinPage {
	p := BinPage{Base: dated(Base{Title: "harbour-blue v3", Section: "bins", Charts: true}), Name: "harbour-blue", Version: 3,
		Facts:    []Fact{{Name: "title", Value: "Harbour blue, general lighting"}, {Name: "products", Value: "harbour"}, {Name: "bins", Value: "probe measurements"}},
		Versions: []VersionLine{{Name: "v3", StoredAt: Moment(galleryNow, galleryZone), Author: "R. Aalto", Reason: "flux classes as ratios"}, {Name: "v2", StoredAt: Moment(galleryNow.Add(-900*time.Hour), galleryZone), Href: "#"}},
		Last:     []Option{{"20", "the last 20", true}},
		Views:    []Option{{"cells", "the cells", true}, {"whole", "all of it", false}},
		Needs:    []Fact{{Name: "Dominant wavelength", Value: "nm"}, {Name: "Forward voltage", Value: "V"}},
		Document: cannedDocument}
	p.Look, p.Editor = cannedLook(), &SpecEditor{Try: "#", Publish: "#", Next: 4}
	for _, c := range cannedWafer().Spec.Cells[12:15] {
		p.Rejects = append(p.Rejects, SpecCell{c.Name, c.Class.String()})
	}
	var yields []WaferYield
	for i := range 40 {
		yields = append(yields, WaferYield{Wafer: fmt.Sprintf("K-04%02d-%02d", i/5, i%5), Lot: "K-0412", MeasuredAt: galleryNow.Add(-time.Duration(i) * 5 * time.Hour),
			Good: 9800 + int(1500*math.Sin(float64(i)/4)), Denominator: 14516})
	}
	p.Yields = YieldsChart("harbour-blue v3", yields, galleryZone, "#")
	p.Finding = SpecSentence("harbour-blue v3", yields, true)
	return p
}

func cannedLoads() LoadsPage {
	p := LoadsPage{Base: dated(Base{Title: "Loads", Section: "loads"}), OlderURL: "#",
		States: []Fact{{Name: "all"}, {Name: "stored", Href: "#"}, {Name: "refused", Href: "#"}, {Name: "waiting", Href: "#"}}}
	p.Finding = LoadsSentence(LoadsFound{Ever: true, Refused: 3, Sharing: 2, SharedCause: "column Vf: unit \"mV\" is declared, but values look like volts", Stored: 14, RefusedURL: "#", StoredURL: "#"})
	for i, state := range []string{"stored", "refused", "reading", "waiting", "stored"} {
		l := LoadLine{Name: fmt.Sprintf("probe-2/K-0412-%02d.csv.gz", i), Href: "load.html", State: state, Format: "epitally-csv", SeenAt: Moment(galleryNow, galleryZone), Bytes: Bytes(1_234_567), Wafers: "1", Dies: "14,402"}
		if state == "refused" {
			l.Reason, l.Place, l.Wafers, l.Dies, l.Notices = "column Vf: \"3,12\" is not a number; write decimals with a point", "line 17, column 4", noValue, noValue, 0
		}
		if i == 4 {
			l.Notices = 2
		}
		p.Rows = append(p.Rows, l)
	}
	return p
}

func cannedLoad() LoadPage {
	return LoadPage{Base: dated(Base{Title: "probe-2/K-0412-01.csv.gz", Section: "loads", Finding: LoadSentence("probe-2/K-0412-01.csv.gz", "refused", 0, 0)}),
		Name: "probe-2/K-0412-01.csv.gz", State: "refused", Reason: "column Vf: \"3,12\" is not a number; write decimals with a point", Place: "line 17, column 4",
		Facts: []Fact{{Name: "seen", Value: Moment(galleryNow, galleryZone)}, {Name: "size", Value: Bytes(1_234_567)}, {Name: "format", Value: "epitally-csv"}}}
}
