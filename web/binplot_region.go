package web

import (
	"fmt"
	"html"
	"math"
	"strings"

	"epitally/analytics/binning"
	"epitally/analytics/colour"
	"epitally/analytics/quantity"
)

// region draws the cells of a region in their plane, the dies behind them.
func (b BinPlots) region(r *binning.Region, d binning.Dimension, id string) BinPlot {
	f := b.fitted(b.regionFrame(r), id)
	p := BinPlot{ID: id, Title: "Region " + r.Name}
	xTitle, yTitle := spaceTitles(r)
	f.open(id, fmt.Sprintf("%s: %d cells over %s and %s", p.Title, len(r.Cells), xTitle, yTitle))
	f.clipped(id)
	if b.Density != nil {
		f.density(b.Density(DensityPlot{X: r.Quantities[0], Y: r.Quantities[1], Space: r.Space,
			Left: f.left, Right: f.right, Bottom: f.bottom, Top: f.top, Width: int(f.areaWidth()), Height: int(f.areaHeight())}))
	}
	var taken []textBox
	if r.Space != binning.SpaceOwn {
		taken = f.diagram(r.Space)
	}
	for i := range r.Cells {
		b.regionCell(f, r, d, i)
	}
	edit := b.Edit && !b.Whole // handles would cover cells that small
	taken = append(taken, f.handleRoom(r, edit)...)
	for i := range r.Cells {
		b.regionLabel(f, r, d, i, &taken)
	}
	if edit {
		f.cornerHandles(r)
	}
	f.put(`</g>`)
	f.scales(xTitle, yTitle)
	p.Picture = f.close()
	p.Caption = "Solid outlines are sold, dashed ones are not. A point on the border of two cells belongs to the right or upper one; where cells overlap, to the one of higher priority, then the first listed."
	if r.Guard > 0 {
		unit := ""
		if r.GuardInU {
			unit = " standard uncertainties"
		}
		p.Caption += fmt.Sprintf(" A guard band of %g%s is taken off inside every outline.", r.Guard, unit)
	}
	return p
}

// spaceTitles name the two directions of a region's plane.
func spaceTitles(r *binning.Region) (x, y string) {
	switch r.Space {
	case binning.SpaceXY:
		return "CIE 1931 x", "CIE 1931 y"
	case binning.SpaceUV:
		return "CIE 1976 u′", "CIE 1976 v′"
	}
	return quantityTitle(r.Quantities[0]), quantityTitle(r.Quantities[1])
}

func quantityTitle(name string) string {
	q, ok := quantity.Lookup(name)
	if !ok {
		return name
	}
	if q.Unit == "" {
		return q.Label
	}
	return q.Label + ", " + q.Unit
}

// regionFrame shows the cells with a margin about them, or the whole diagram.
func (b BinPlots) regionFrame(r *binning.Region) *frame {
	left, right, bottom, top := math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)
	for i := range r.Cells {
		for _, s := range r.Cells[i].Shapes {
			for _, c := range s.Outline {
				left, right = min(left, c[0]), max(right, c[0])
				bottom, top = min(bottom, c[1]), max(top, c[1])
			}
		}
	}
	switch {
	case b.Whole && r.Space == binning.SpaceXY:
		left, right, bottom, top = -0.02, 0.78, -0.02, 0.88
	case b.Whole && r.Space == binning.SpaceUV:
		left, right, bottom, top = -0.02, 0.66, -0.02, 0.62
	default:
		mx, my := 0.12*(right-left), 0.12*(top-bottom)
		left, right, bottom, top = left-mx, right+mx, bottom-my, top+my
	}
	f := newFrame(left, right, bottom, top, plotHeight)
	f.xPlaces, f.yPlaces = 4, 4
	if r.Space == binning.SpaceOwn {
		f.xPlaces, f.yPlaces = placesOf(r.Quantities[0]), placesOf(r.Quantities[1])
	} else {
		f.equalScales()
	}
	return f
}

// equalScales widens one direction so that a unit is as long in both.
func (f *frame) equalScales() {
	perX, perY := (f.right-f.left)/f.areaWidth(), (f.top-f.bottom)/f.areaHeight()
	if perX < perY {
		middle, half := (f.left+f.right)/2, perY*f.areaWidth()/2
		f.left, f.right = middle-half, middle+half
	} else {
		middle, half := (f.bottom+f.top)/2, perX*f.areaHeight()/2
		f.bottom, f.top = middle-half, middle+half
	}
}

// placesOf are the decimals that a quantity is commonly resolved to.
func placesOf(name string) int {
	if q, ok := quantity.Lookup(name); ok && q.Resolution > 0 {
		return max(0, int(math.Round(-math.Log10(q.Resolution))))
	}
	return 3
}

// diagram draws the spectral locus, the purple line, the Planckian locus and the
// equal-energy white. It gives the room that their names take.
func (f *frame) diagram(space binning.Space) (names []textBox) {
	in := func(p colour.XY) (x, y float64) {
		if space == binning.SpaceUV {
			q := p.UV()
			return q.U, q.V
		}
		return p.X, p.Y
	}
	var path strings.Builder
	for nm := 380; nm <= 700; nm++ {
		x, y := in(colour.Locus(float64(nm)))
		fmt.Fprintf(&path, "%s %s ", at(f.x(x)), at(f.y(y)))
	}
	f.put(`<polygon class="locus" points="%s"/>`, path.String())
	x, y := in(colour.WhiteE)
	f.spot("white-mark", x, y, 4, "white E", &names)
	for _, nm := range []int{460, 470, 480, 490, 500, 510, 520, 530, 540, 550, 560, 570, 580, 590, 600, 620, 640} {
		x, y := in(colour.Locus(float64(nm)))
		f.spot("locus-mark", x, y, 2.5, fmt.Sprintf("%d nm", nm), &names)
	}
	path.Reset()
	for mired := 40.0; mired <= 1000; mired += 5 {
		x, y := in(colour.Planckian(1e6 / mired))
		fmt.Fprintf(&path, "%s %s ", at(f.x(x)), at(f.y(y)))
	}
	f.put(`<polyline class="planckian" points="%s"/>`, path.String())
	for _, kelvin := range []float64{2000, 3000, 4000, 6500, 10000, 2700, 3500, 5000} {
		x, y := in(colour.Planckian(kelvin))
		f.spot("planckian-mark", x, y, 2.5, With(kelvin, 0, "K"), &names)
	}
	return names
}

// spot marks a place inside the plotting area with its name, to the right, the
// left, above or below, where no other name stands; if there is room nowhere the
// mark stands alone.
func (f *frame) spot(class string, x, y, radius float64, name string, taken *[]textBox) {
	if x < f.left || x > f.right || y < f.bottom || y > f.top {
		return
	}
	px, py := f.x(x), f.y(y)
	f.put(`<circle class="%s" cx="%s" cy="%s" r="%g"><title>%s</title></circle>`, class, at(px), at(py), radius, html.EscapeString(name))
	width := 7.5*float64(len([]rune(name))) + 4
	for _, place := range []struct {
		dx, dy float64
		anchor string
	}{{8, -5, "start"}, {-8, -5, "end"}, {8, 14, "start"}, {-8, 14, "end"}} {
		box := textBox{px + place.dx + width/2, py + place.dy - 5, width, 15}
		if place.anchor == "end" {
			box.x = px + place.dx - width/2
		}
		if box.x-width/2 < marginLeft || box.x+width/2 > f.width-marginRest || box.meetsAny(*taken) {
			continue
		}
		*taken = append(*taken, box, textBox{px, py, 8, 8})
		f.text("mark", px+place.dx, py+place.dy, place.anchor, name)
		return
	}
}

func (b BinPlots) regionCell(f *frame, r *binning.Region, d binning.Dimension, i int) {
	class, words := "cell", r.Cells[i].Name
	if !b.sold(inCell(d, i)) {
		class = "cell unsold"
	}
	if n, known := b.countOf(inCell(d, i)); known {
		words += ": " + Plural(n, "die", "dies")
	}
	for _, s := range r.Cells[i].Shapes {
		var path strings.Builder
		for _, outline := range append([][][2]float64{s.Outline}, s.Holes...) {
			for k, c := range outline {
				fmt.Fprintf(&path, "%s%s %s ", map[bool]string{true: "M", false: "L"}[k == 0], at(f.x(c[0])), at(f.y(c[1])))
			}
			path.WriteString("Z ")
		}
		f.put(`<path class="%s" d="%s"><title>%s</title></path>`, class, path.String(), html.EscapeString(words))
	}
}

// regionLabel names a cell and its dies where there is room: in its middle, else
// moved towards an end of it, away from labels that stand already.
func (b BinPlots) regionLabel(f *frame, r *binning.Region, d binning.Dimension, i int, taken *[]textBox) {
	s := &r.Cells[i].Shapes[0]
	x, y, width, height := middleOf(f, s.Outline)
	name := r.Cells[i].Name
	n, known := b.countOf(inCell(d, i))
	count := Count(n)
	lines, needed := 1, 9*float64(len(name))
	if known && height > 44 {
		lines, needed = 2, max(needed, 8.5*float64(len(count)))
	}
	if width < needed || height < 20 {
		return
	}
	for _, move := range [][2]float64{{0, 0}, {0, 0.28}, {0, -0.28}, {-0.22, 0.22}, {0.22, -0.22}, {0.25, 0.1}, {-0.25, -0.1}} {
		at := textBox{x + move[0]*width, y + move[1]*height, needed, 19 * float64(lines)}
		if at.meetsAny(*taken) {
			continue
		}
		*taken = append(*taken, at)
		if lines == 1 {
			f.text("cell-name", at.x, at.y+5, "middle", name)
			return
		}
		f.text("cell-name", at.x, at.y-3, "middle", name)
		f.text("cell-count", at.x, at.y+15, "middle", count)
		return
	}
}

// textBox is the room of a label: its middle and extent.
type textBox struct{ x, y, width, height float64 }

func (t textBox) meetsAny(others []textBox) bool {
	for _, o := range others {
		if math.Abs(t.x-o.x) < (t.width+o.width)/2 && math.Abs(t.y-o.y) < (t.height+o.height)/2 {
			return true
		}
	}
	return false
}

// middleOf is the mean of the corners in the picture, with its extent.
func middleOf(f *frame, outline [][2]float64) (x, y, width, height float64) {
	low, high := [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
	for _, c := range outline {
		p := [2]float64{f.x(c[0]), f.y(c[1])}
		x, y = x+p[0]/float64(len(outline)), y+p[1]/float64(len(outline))
		low, high = [2]float64{min(low[0], p[0]), min(low[1], p[1])}, [2]float64{max(high[0], p[0]), max(high[1], p[1])}
	}
	return x, y, high[0] - low[0], high[1] - low[1]
}

// handleRoom is where corners are drawn to be taken hold of.
func (f *frame) handleRoom(r *binning.Region, edit bool) (taken []textBox) {
	if !edit {
		return nil
	}
	for _, c := range r.Cells {
		for _, s := range c.Shapes {
			corners := s.Outline
			if s.Kind == "circle" {
				corners = [][2]float64{s.Centre}
			}
			for _, p := range corners {
				taken = append(taken, textBox{f.x(p[0]), f.y(p[1]), 16, 16})
			}
		}
	}
	return taken
}

// cornerHandles lets corners and the edges between them be moved. Corners at one
// place move together, so that neighbours stay neighbours.
func (f *frame) cornerHandles(r *binning.Region) {
	type corner struct {
		at    [2]float64
		moves []move
		names []string
	}
	var corners []*corner
	find := map[[2]float64]*corner{}
	for _, c := range r.Cells {
		for _, s := range c.Shapes {
			points := s.Outline
			if s.Kind == "circle" {
				points = [][2]float64{s.Centre}
			}
			for i, place := range s.CornerAt {
				at := points[i]
				if find[at] == nil {
					find[at] = &corner{at: at}
					corners = append(corners, find[at])
				}
				k := find[at]
				k.moves = append(k.moves, move{place[0], "x", at[0]}, move{place[1], "y", at[1]})
				k.names = append(k.names, c.Name)
			}
		}
	}
	for _, c := range r.Cells {
		for _, s := range c.Shapes {
			if s.Kind != "polygon" {
				continue
			}
			for i := range s.Outline {
				j := (i + 1) % len(s.Outline)
				a, b := find[s.Outline[i]], find[s.Outline[j]]
				f.handle(fmt.Sprintf(`line x1="%s" y1="%s" x2="%s" y2="%s"`, at(f.x(a.at[0])), at(f.y(a.at[1])), at(f.x(b.at[0])), at(f.y(b.at[1]))),
					fmt.Sprintf("edge of %s from (%g, %g) to (%g, %g)", c.Name, a.at[0], a.at[1], b.at[0], b.at[1]), append(append([]move{}, a.moves...), b.moves...))
			}
		}
	}
	for _, k := range corners {
		f.put(`<circle class="corner" cx="%s" cy="%s" r="6"/>`, at(f.x(k.at[0])), at(f.y(k.at[1])))
	}
	for _, k := range corners { // wider than they look, for fingers
		f.handle(fmt.Sprintf(`circle cx="%s" cy="%s" r="16"`, at(f.x(k.at[0])), at(f.y(k.at[1]))),
			fmt.Sprintf("corner of %s at (%g, %g)", strings.Join(k.names, ", "), k.at[0], k.at[1]), k.moves)
	}
}
