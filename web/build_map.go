package web

import (
	"math"
	"net/url"
	"strconv"

	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// fillMap sets what the map shows and what its script needs.
func (in *WaferInput) fillMap(p *WaferPage, shown *Plotted) {
	m := in.Measurement
	d := &MapData{Wafer: in.Wafer, Grid: in.GridURL, Dies: m.Dies, Layout: mapLayout(m.Layout), Shown: shown.Quantity.Name, View: p.View, Palette: palettes()}
	for _, q := range in.Planes {
		d.Quantities = append(d.Quantities, mapQuantity(q, m.api()))
	}
	if in.Spec != nil {
		d.Bins = &MapBins{URL: m.api() + "/bins?" + in.Spec.under(), Spec: in.Spec.Name, Version: in.Spec.Version, Cells: mapCells(in.Spec)}
	}
	p.Map = d
	p.MarkWords, p.EdgeWords = markWords(m.Layout), ""
	if m.Layout.EdgeExclusionMM > 0 {
		p.EdgeWords = "edge exclusion of " + With(m.Layout.EdgeExclusionMM, 1, "mm")
	}
	png := url.Values{"size": {"720"}, "quantity": {shown.Quantity.Name}}
	switch {
	case p.View == "bins":
		p.MapTitle = "Where do its bins lie?"
		png = url.Values{"size": {"720"}, "specification": {in.Spec.Name}, "version": {strconv.Itoa(in.Spec.Version)}}
	case shown.Quantity.Scale == quantity.Deviation && !math.IsNaN(shown.Target):
		p.MapTitle = "Where is it off target in " + inWords(shown.Quantity) + "?"
	default:
		p.MapTitle = "How does " + inWords(shown.Quantity) + " lie on the wafer?"
	}
	p.MapPNG = m.api() + "/map.png?" + png.Encode()
	p.MapAlt = "Map of wafer " + in.Wafer + ", " + Count(m.Dies) + " dies: " + p.MapTitle
}

// inWords is a quantity inside a sentence, with its unit.
func inWords(q quantity.Quantity) string {
	if q.Unit == "" {
		return lowerFirst(q.Label)
	}
	return lowerFirst(q.Label) + " (" + q.Unit + ")"
}

// lengthUnit is what lengths on a wafer are in: dies, where neither the source
// nor a product says how large one is.
func lengthUnit(l *wafermap.Layout) string {
	if l != nil && l.Name == wafermap.AssumedUnits {
		return "dies"
	}
	return "mm"
}

func mapLayout(l *wafermap.Layout) MapLayout {
	out := MapLayout{Diameter: l.WaferDiameterMM, PitchX: l.DiePitchXMM, PitchY: l.DiePitchYMM, Edge: l.EdgeExclusionMM, Mark: l.Mark, MarkAngle: l.MarkAngleDeg,
		FlipX: l.XAxis == "left", FlipY: l.YAxis == "down", CentreX: l.CentreX, CentreY: l.CentreY, Assumed: l.Assumed, LengthUnit: lengthUnit(l)}
	if l.Mark == "flat" {
		out.FlatHeight = flatOffsetMM(l.WaferDiameterMM)
	}
	return out
}

func mapQuantity(p Plotted, api string) MapQuantity {
	q := p.Quantity
	target := ScaleTarget(q, p.Target)
	low, high := ScaleRange(p.Summary, q, target)
	out := MapQuantity{Name: q.Name, Label: q.Label, Unit: q.Unit, Decimals: Decimals(q.Resolution), Plane: api + "/planes/" + url.PathEscape(q.Name),
		Scale: "magnitude", Low: low, High: high}
	if !math.IsNaN(target) {
		out.Scale, out.Target = "deviation", &target
	} else if q.Scale == quantity.Category {
		out.Scale = "category"
	}
	return out
}

// markWords says where the flat or notch is.
func markWords(l *wafermap.Layout) string {
	if l.Mark == "none" {
		return "no flat or notch, since none is known"
	}
	side := [...]string{"right", "top right", "top", "top left", "left", "bottom left", "bottom", "bottom right"}
	turn := math.Mod(math.Mod(l.MarkAngleDeg, 360)+360, 360)
	return l.Mark + " at the " + side[int(math.Round(turn/45))%8]
}
