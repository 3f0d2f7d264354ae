package web

import (
	"image"
	"image/color"
	"image/png"
	"io"
	"math"
)

// densityStep is how many pixels a square of a density picture has on each side.
const densityStep = 4

// DensityField counts dies over the plane of a plot.
type DensityField struct {
	plot          DensityPlot
	columns, rows int
	counts        []int // row by row from the top; of a line only the first row
}

// NewDensityField makes an empty field of a plot's box and size.
func NewDensityField(d DensityPlot) *DensityField {
	f := &DensityField{plot: d, columns: max(1, d.Width/densityStep), rows: max(1, d.Height/densityStep)}
	f.counts = make([]int, f.columns*f.rows)
	return f
}

// Add counts dies by two values each; dies outside the box or without a value do
// not count.
func (f *DensityField) Add(x, y []float64) {
	perX, perY := float64(f.columns)/(f.plot.Right-f.plot.Left), float64(f.rows)/(f.plot.Top-f.plot.Bottom)
	y = y[:len(x)]
	for i, v := range x {
		c, r := (v-f.plot.Left)*perX, (f.plot.Top-y[i])*perY
		if c >= 0 && c < float64(f.columns) && r >= 0 && r < float64(f.rows) {
			f.counts[int(r)*f.columns+int(c)]++
		}
	}
}

// AddLine counts dies by one value.
func (f *DensityField) AddLine(x []float64) {
	perX := float64(f.columns) / (f.plot.Right - f.plot.Left)
	for _, v := range x {
		if c := (v - f.plot.Left) * perX; c >= 0 && c < float64(f.columns) {
			f.counts[int(c)]++
		}
	}
}

// densityInk is the accent in mid lightness, which shows on paper and on slate.
var densityInk = color.NRGBA{R: 0x2f, G: 0x8d, B: 0x96}

// WritePNG draws the field: of a plane, ink that is denser with the logarithm of
// the dies; of a line, bars.
func (f *DensityField) WritePNG(w io.Writer) error {
	most := 0
	for _, n := range f.counts {
		most = max(most, n)
	}
	img := image.NewNRGBA(image.Rect(0, 0, f.columns, f.rows))
	for row := range f.rows {
		for col := range f.columns {
			ink := densityInk
			if f.plot.Y == "" {
				if float64(f.rows-row) > float64(f.counts[col])/float64(max(1, most))*float64(f.rows)*0.95 {
					continue
				}
				ink.A = 110
			} else {
				n := f.counts[row*f.columns+col]
				if n == 0 {
					continue
				}
				ink.A = uint8(30 + 170*math.Log1p(float64(n))/math.Log1p(float64(most)))
			}
			img.SetNRGBA(col, row, ink)
		}
	}
	return (&png.Encoder{CompressionLevel: png.BestSpeed}).Encode(w, img)
}
