package web

import (
	"image"
	"math"
	"sort"

	"epitally/analytics/wafermap"
)

// view places a wafer on a square picture.
type view struct {
	layout  *wafermap.Layout
	size    int
	pxPerMM float64
	flat    float64 // distance of the flat's chord from the centre, mm; +Inf = none
	markX   float64 // direction of the mark
	markY   float64
}

// viewMargin is the room round the wafer, as a share of its diameter.
const viewMargin = 0.03

// gapFrom is the die size in pixels, along its shorter side, from which a line is
// left between dies.
const gapFrom = 8

func newView(l *wafermap.Layout, size int) *view {
	v := &view{layout: l, size: size, pxPerMM: float64(size) / (l.WaferDiameterMM * (1 + 2*viewMargin)), flat: math.Inf(1)}
	v.markX, v.markY = math.Cos(l.MarkAngleDeg*math.Pi/180), math.Sin(l.MarkAngleDeg*math.Pi/180)
	if l.Mark == "flat" {
		v.flat = flatOffsetMM(l.WaferDiameterMM)
	}
	return v
}

// mm is the place of pixel i along an axis that grows with i.
func (v *view) mm(i int) float64 { return (float64(i) + 0.5 - float64(v.size)/2) / v.pxPerMM }

func (v *view) paintWafer(img *image.Paletted) {
	r2 := v.layout.WaferDiameterMM * v.layout.WaferDiameterMM / 4
	for py := range v.size {
		y := -v.mm(py)
		row := img.Pix[py*img.Stride:]
		for px := range v.size {
			x := v.mm(px)
			if x*x+y*y <= r2 && x*v.markX+y*v.markY <= v.flat {
				row[px] = inkWafer
			}
		}
	}
}

// noDie marks a pixel that lies between dies.
const noDie = math.MinInt32

// axis gives the die coordinate under each pixel of an axis, noDie between dies.
func (v *view) axis(pitch, centre float64, flip bool) []int {
	out := make([]int, v.size)
	end := 1.0
	if min(v.layout.DiePitchXMM, v.layout.DiePitchYMM)*v.pxPerMM >= gapFrom {
		end = 0.5 - 1/(pitch*v.pxPerMM) - 1e-9 // one pixel in a die's width is the line between dies
	}
	for i := range out {
		mm := v.mm(i)
		if flip {
			mm = -mm
		}
		at := mm/pitch + centre
		die := math.Floor(at + 0.5)
		if at-die >= end {
			out[i] = noDie
		} else {
			out[i] = int(die)
		}
	}
	return out
}

func (v *view) paintDies(img *image.Paletted, p MapPicture, paint func(int) ink) {
	l := v.layout
	columns := v.axis(l.DiePitchXMM, l.CentreX, l.XAxis == "left")
	rows := v.axis(l.DiePitchYMM, l.CentreY, l.YAxis == "up") // pixels grow downwards
	xMin, _, xMax, _ := p.Grid.Bounds()
	line := make([]int32, xMax-xMin+1) // index of the die at each x of the row, -1 = none
	drawn := noDie
	for py, y := range rows {
		if y == noDie {
			continue
		}
		if y != drawn {
			fillLine(line, p.Grid, y, xMin)
			drawn = y
		}
		row := img.Pix[py*img.Stride:]
		for px, x := range columns {
			if x < xMin || x > xMax || line[x-xMin] < 0 {
				continue
			}
			row[px] = paint(int(line[x-xMin])).at(px, py)
		}
	}
}

func fillLine(line []int32, g *wafermap.Grid, y, xMin int) {
	for i := range line {
		line[i] = -1
	}
	first := sort.Search(len(g.Y), func(i int) bool { return int(g.Y[i]) >= y })
	for i := first; i < len(g.Y) && int(g.Y[i]) == y; i++ {
		line[int(g.X[i])-xMin] = int32(i)
	}
}

// at is the palette index of the ink at a pixel: patterns and hatching depend
// only on the pixel's place, so that they run on from die to die.
func (i ink) at(px, py int) uint8 {
	if i.missing {
		if (px+py)%5 == 0 {
			return inkHatch
		}
		return inkPaper
	}
	struck := false
	switch patterns[i.pattern] {
	case "rise":
		struck = (px+py)%6 < 2
	case "fall":
		struck = (px-py+6*4096)%6 < 2
	case "level":
		struck = py%5 < 2
	case "dots":
		struck = px%4 < 2 && py%4 < 2
	}
	if struck {
		return inkPaper
	}
	return i.index
}

// paintLines draws the wafer's edge, its notch and the edge exclusion.
func (v *view) paintLines(img *image.Paletted) {
	r := v.layout.WaferDiameterMM / 2
	v.circle(img, r, false)
	if v.layout.EdgeExclusionMM > 0 {
		v.circle(img, r-v.layout.EdgeExclusionMM, true)
	}
	if v.layout.Mark == "notch" {
		for d := -3.0; d <= 3; d += 0.25 / v.pxPerMM {
			depth := r - (3 - math.Abs(d))
			v.dot(img, v.markX*depth-v.markY*d, v.markY*depth+v.markX*d)
		}
	}
	if v.layout.Mark == "flat" {
		half := math.Sqrt(r*r - v.flat*v.flat)
		for d := -half; d <= half; d += 0.5 / v.pxPerMM {
			v.dot(img, v.markX*v.flat-v.markY*d, v.markY*v.flat+v.markX*d)
		}
	}
}

// circle draws a circle of radius r mm, cut by the flat; dashed 3 on, 3 off.
func (v *view) circle(img *image.Paletted, r float64, dashed bool) {
	steps := int(2*math.Pi*r*v.pxPerMM*2) + 8
	for i := range steps {
		if dashed && (i/12)%2 == 1 {
			continue
		}
		s, c := math.Sincos(2 * math.Pi * float64(i) / float64(steps))
		if c*r*v.markX+s*r*v.markY <= v.flat {
			v.dot(img, c*r, s*r)
		}
	}
}

// dot inks the pixel at (x, y) mm.
func (v *view) dot(img *image.Paletted, x, y float64) {
	px, py := int(x*v.pxPerMM+float64(v.size)/2), int(-y*v.pxPerMM+float64(v.size)/2)
	if px >= 0 && py >= 0 && px < v.size && py < v.size {
		img.Pix[py*img.Stride+px] = inkLine
	}
}
