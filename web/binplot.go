package web

import (
	"fmt"
	"html"
	"html/template"
	"math"
	"strconv"
	"strings"

	"epitally/analytics/binning"
)

// BinPlot is a picture of one region, or of one or two axes, of a specification.
type BinPlot struct {
	ID      string
	Title   string
	Caption string
	Picture template.HTML // an SVG element
}

// BinPlots says what is drawn of a specification.
type BinPlots struct {
	Spec   *binning.Spec
	Counts []int // dies per code; nil = none counted yet
	// Density makes the address of the picture of the dies behind a plot; nil = none.
	Density func(DensityPlot) string
	// Boxes are the scales that plots are to have, by their ids: left, right, bottom,
	// top. A plot without one chooses its own.
	Boxes map[string][4]float64
	Whole bool // chromaticities: the whole diagram, not only the cells' surroundings
	Edit  bool // corners and edges can be moved
}

// DensityPlot is what a picture of dies shows: how many have which values.
type DensityPlot struct {
	X, Y          string // quantities; Y "" = a histogram of X
	Space         binning.Space
	Left, Right   float64
	Bottom, Top   float64
	Width, Height int
}

// Draw draws every region and every axis, two axes to a plot.
func (b BinPlots) Draw() []BinPlot {
	var plots []BinPlot
	dims := b.Spec.Dimensions()
	regions, axes := b.Spec.Regions(), b.Spec.Axes()
	for i := range regions {
		plots = append(plots, b.region(regions[i], dims[i], fmt.Sprintf("plot-r%d", i)))
	}
	for i := 0; i < len(axes); i += 2 {
		id := fmt.Sprintf("plot-a%d", i)
		d := dims[len(regions)+i:]
		if i+1 < len(axes) {
			plots = append(plots, b.grid(&axes[i], &axes[i+1], d[0], d[1], id))
		} else {
			plots = append(plots, b.line(&axes[i], d[0], id))
		}
	}
	return plots
}

// countOf is the dies in the bins that share cells of one or two dimensions.
func (b BinPlots) countOf(has func(code int) bool) (n int, known bool) {
	if b.Counts == nil {
		return 0, false
	}
	for code := range b.Spec.Bins() {
		if has(code) {
			n += b.Counts[code]
		}
	}
	return n, true
}

func inCell(d binning.Dimension, cell int) func(code int) bool {
	return func(code int) bool { return code/d.Stride%len(d.Cells) == cell }
}

// sold reports whether any bin of a cell is sellable.
func (b BinPlots) sold(has func(code int) bool) bool {
	for code, c := range b.Spec.Cells()[:b.Spec.Bins()] {
		if has(code) && c.Class == binning.Sellable {
			return true
		}
	}
	return false
}

// frame maps data to the picture and writes SVG.
type frame struct {
	strings.Builder
	left, right, bottom, top float64 // data at the edges of the plotting area
	width, height            float64 // of the picture
	xPlaces, yPlaces         int     // decimals that a move is rounded to at least
}

// Margins of a picture, in its own units.
const (
	plotWidth  = 880
	plotHeight = 560
	marginLeft = 76
	marginRest = 18
	marginFoot = 54
)

func newFrame(left, right, bottom, top, height float64) *frame {
	return &frame{left: left, right: right, bottom: bottom, top: top, width: plotWidth, height: height}
}

// fitted takes the scales asked for, if any.
func (b BinPlots) fitted(f *frame, id string) *frame {
	if box, ok := b.Boxes[id]; ok {
		f.left, f.right, f.bottom, f.top = box[0], box[1], box[2], box[3]
	}
	return f
}

func (f *frame) areaWidth() float64  { return f.width - marginLeft - marginRest }
func (f *frame) areaHeight() float64 { return f.height - marginRest - marginFoot }

func (f *frame) x(v float64) float64 {
	return marginLeft + (v-f.left)/(f.right-f.left)*f.areaWidth()
}

func (f *frame) y(v float64) float64 {
	return marginRest + (f.top-v)/(f.top-f.bottom)*f.areaHeight()
}

// put writes one element.
func (f *frame) put(format string, args ...any) { fmt.Fprintf(f, format+"\n", args...) }

func at(v float64) string { return strconv.FormatFloat(v, 'f', 1, 64) }

// text writes words at a place of the picture.
func (f *frame) text(class string, x, y float64, anchor, words string) {
	f.put(`<text class="%s" x="%s" y="%s" text-anchor="%s">%s</text>`, class, at(x), at(y), anchor, html.EscapeString(words))
}

// open begins the picture; the attributes tell a script how pixels are values.
func (f *frame) open(id, label string) {
	f.put(`<svg class="binplot" id="%s" viewBox="0 0 %s %s" role="group" aria-label="%s" data-left="%v" data-right="%v" data-bottom="%v" data-top="%v" data-area="%d %d %s %s">`,
		id, at(f.width), at(f.height), html.EscapeString(label), f.left, f.right, f.bottom, f.top, marginLeft, marginRest, at(f.areaWidth()), at(f.areaHeight()))
	f.put(`<clipPath id="%s-area"><rect x="%d" y="%d" width="%s" height="%s"/></clipPath>`, id, marginLeft, marginRest, at(f.areaWidth()), at(f.areaHeight()))
	f.put(`<rect class="area" x="%d" y="%d" width="%s" height="%s"/>`, marginLeft, marginRest, at(f.areaWidth()), at(f.areaHeight()))
}

func (f *frame) clipped(id string) { f.put(`<g clip-path="url(#%s-area)">`, id) }

// density puts the picture of the dies behind what follows.
func (f *frame) density(address string) {
	if address != "" {
		f.put(`<image href="%s" x="%d" y="%d" width="%s" height="%s" preserveAspectRatio="none"/>`, html.EscapeString(address), marginLeft, marginRest, at(f.areaWidth()), at(f.areaHeight()))
	}
}

// scales draws the ticks and titles of both axes; yTitle "" leaves y bare.
func (f *frame) scales(xTitle, yTitle string) {
	step, places := niceStep(f.right-f.left, 8)
	for v := math.Ceil(f.left/step) * step; v <= f.right+step*1e-9; v += step {
		f.put(`<line class="tick" x1="%[1]s" x2="%[1]s" y1="%[2]s" y2="%[3]s"/>`, at(f.x(v)), at(f.height-marginFoot), at(f.height-marginFoot+6))
		f.text("scale", f.x(v), f.height-marginFoot+22, "middle", Number(v, places))
	}
	f.text("title", marginLeft+f.areaWidth()/2, f.height-10, "middle", xTitle)
	if yTitle == "" {
		return
	}
	step, places = niceStep(f.top-f.bottom, 6)
	for v := math.Ceil(f.bottom/step) * step; v <= f.top+step*1e-9; v += step {
		f.put(`<line class="tick" x1="%s" x2="%s" y1="%[3]s" y2="%[3]s"/>`, at(marginLeft-6), at(marginLeft), at(f.y(v)))
		f.text("scale", marginLeft-10, f.y(v)+5, "end", Number(v, places))
	}
	f.put(`<text class="title" transform="translate(18 %s) rotate(-90)" text-anchor="middle">%s</text>`, at(marginRest+f.areaHeight()/2), html.EscapeString(yTitle))
}

// niceStep divides a span into at most n steps of 1, 2 or 5 times a power of ten,
// and gives the decimals that its multiples need.
func niceStep(span float64, n int) (step float64, places int) {
	raw := span / float64(n)
	power := math.Pow10(int(math.Floor(math.Log10(raw))))
	step = 10 * power
	for _, m := range []float64{1, 2, 5} {
		if m*power >= raw*(1-1e-9) {
			step = m * power
			break
		}
	}
	return step, max(0, -int(math.Floor(math.Log10(step)+1e-9)))
}

func (f *frame) close() template.HTML {
	f.put(`</svg>`)
	return template.HTML(f.String())
}

// move is one number of the document that follows a handle.
type move struct {
	place binning.Place
	axis  string // x or y
	value float64
}

// handle draws what can be taken hold of: shape is an SVG shape without its class.
func (f *frame) handle(shape, label string, moves []move) {
	var words []string
	for _, m := range moves {
		if m.place != (binning.Place{}) {
			words = append(words, fmt.Sprintf("%d:%d:%d:%s:%v", m.place.Line, m.place.Column, m.place.Length, m.axis, m.value))
		}
	}
	if len(words) == 0 {
		return
	}
	f.put(`<%s class="handle" tabindex="0" role="button" aria-roledescription="movable" aria-label="%s" data-moves="%s" data-places="%d %d"/>`,
		shape, html.EscapeString("move "+label), strings.Join(words, ";"), f.xPlaces, f.yPlaces)
}
