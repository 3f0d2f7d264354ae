package web

import (
	"fmt"
	"html"
	"math"

	"epitally/analytics/binning"
)

// grid draws two axes against each other, the dies behind their cells.
func (b BinPlots) grid(x, y *binning.Axis, dx, dy binning.Dimension, id string) BinPlot {
	left, right := axisSpan(x)
	bottom, top := axisSpan(y)
	f := b.fitted(newFrame(left, right, bottom, top, plotHeight), id)
	f.xPlaces, f.yPlaces = placesOf(x.Quantity), placesOf(y.Quantity)
	p := BinPlot{ID: id, Title: fmt.Sprintf("Axes %s and %s", x.Name, y.Name)}
	f.open(id, fmt.Sprintf("%s: %d by %d cells over %s and %s", p.Title, len(x.Names), len(y.Names), quantityTitle(x.Quantity), quantityTitle(y.Quantity)))
	f.clipped(id)
	if b.Density != nil {
		f.density(b.Density(DensityPlot{X: x.Quantity, Y: y.Quantity, Space: binning.SpaceOwn,
			Left: f.left, Right: f.right, Bottom: f.bottom, Top: f.top, Width: int(f.areaWidth()), Height: int(f.areaHeight())}))
	}
	for i := range x.Names {
		for j := range y.Names {
			has := func(code int) bool { return inCell(dx, i)(code) && inCell(dy, j)(code) }
			b.gridCell(f, [2]float64{x.Edges[i], x.Edges[i+1]}, [2]float64{y.Edges[j], y.Edges[j+1]}, x.Names[i]+" "+y.Names[j], has)
		}
	}
	if b.Edit {
		f.edgeHandles(x, "x")
		f.edgeHandles(y, "y")
	}
	f.put(`</g>`)
	f.scales(quantityTitle(x.Quantity), quantityTitle(y.Quantity))
	p.Picture = f.close()
	p.Caption = axesCaption(x, y)
	return p
}

func (b BinPlots) gridCell(f *frame, x, y [2]float64, name string, has func(int) bool) {
	class := "cell"
	if !b.sold(has) {
		class = "cell unsold"
	}
	n, known := b.countOf(has)
	words := name
	if known {
		words += ": " + Plural(n, "die", "dies")
	}
	width, height := f.x(x[1])-f.x(x[0]), f.y(y[0])-f.y(y[1])
	f.put(`<rect class="%s" x="%s" y="%s" width="%s" height="%s"><title>%s</title></rect>`, class, at(f.x(x[0])), at(f.y(y[1])), at(width), at(height), html.EscapeString(words))
	cx, cy := f.x((x[0]+x[1])/2), f.y((y[0]+y[1])/2)
	if width < 9*float64(len(name)) || height < 18 {
		return
	}
	if !known || height < 42 || width < 10*float64(len(Count(n))) {
		f.text("cell-name", cx, cy+5, "middle", name)
		return
	}
	f.text("cell-name", cx, cy-2, "middle", name)
	f.text("cell-count", cx, cy+16, "middle", Count(n))
}

// line draws one axis over the histogram of its dies.
func (b BinPlots) line(x *binning.Axis, d binning.Dimension, id string) BinPlot {
	left, right := axisSpan(x)
	f := b.fitted(newFrame(left, right, 0, 1, 300), id)
	f.xPlaces = placesOf(x.Quantity)
	p := BinPlot{ID: id, Title: "Axis " + x.Name}
	f.open(id, fmt.Sprintf("%s: %d cells over %s", p.Title, len(x.Names), quantityTitle(x.Quantity)))
	f.clipped(id)
	if b.Density != nil {
		f.density(b.Density(DensityPlot{X: x.Quantity, Space: binning.SpaceOwn, Left: f.left, Right: f.right, Top: 1,
			Width: int(f.areaWidth()), Height: int(f.areaHeight())}))
	}
	for i, name := range x.Names {
		b.gridCell(f, [2]float64{x.Edges[i], x.Edges[i+1]}, [2]float64{0, 1}, name, inCell(d, i))
	}
	if b.Edit {
		f.edgeHandles(x, "x")
	}
	f.put(`</g>`)
	f.scales(quantityTitle(x.Quantity), "")
	p.Picture = f.close()
	p.Caption = axesCaption(x)
	return p
}

// axisSpan shows the cells with a sixth about them.
func axisSpan(a *binning.Axis) (low, high float64) {
	low, high = a.Edges[0], a.Edges[len(a.Edges)-1]
	margin := (high - low) / 6
	return low - margin, high + margin
}

func axesCaption(axes ...*binning.Axis) string {
	caption := "Solid outlines are sold, dashed ones are not. A cell holds its lower edge and not its upper one; the highest edge belongs to the last cell."
	for _, a := range axes {
		if a.Guard > 0 {
			caption += fmt.Sprintf(" On %s a guard band of %s is taken off each side.", a.Name, Number(a.Guard, max(placesOf(a.Quantity), 3)))
		}
	}
	return caption
}

// edgeHandles lets the edges of an axis be moved along it. Edges that follow from
// the first one move with it.
func (f *frame) edgeHandles(a *binning.Axis, axis string) {
	for i, e := range a.Edges {
		shape := fmt.Sprintf(`line x1="%[1]s" x2="%[1]s" y1="%[2]s" y2="%[3]s"`, at(f.x(e)), at(marginRest), at(f.height-marginFoot))
		if axis == "y" {
			shape = fmt.Sprintf(`line y1="%[1]s" y2="%[1]s" x1="%[2]s" x2="%[3]s"`, at(f.y(e)), at(marginLeft), at(f.width-marginRest))
		}
		f.handle(shape, fmt.Sprintf("edge %d of %s at %s", i+1, a.Name, Number(e, decimalsIn(e))), []move{{a.EdgeAt[i], axis, e}})
	}
}

// decimalsIn is how many decimals a number is written with at the least.
func decimalsIn(v float64) int {
	for places := range 9 {
		if scaled := v * math.Pow10(places); math.Abs(scaled-math.Round(scaled)) < 1e-6 {
			return places
		}
	}
	return 9
}
