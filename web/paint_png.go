package web

import (
	"fmt"
	"image"
	"image/color"
	"image/png"
	"io"
	"math"

	"epitally/analytics"
)

// Palette indices of map pictures; shades of a scale or fills of bins follow.
const (
	inkPaper = iota
	inkWafer
	inkHatch
	inkLine
	inkShades // first shade
)

// levels is how many shades fit a 256-colour picture beside the fixed colours.
const levels = 256 - inkShades

// encoder writes pictures fast rather than small: they are made on request.
var encoder = png.Encoder{CompressionLevel: png.BestSpeed}

// PaintMap writes the map as a square PNG: dies to scale, the wafer's edge, its
// flat or notch, the edge exclusion as a dashed line, dies without a value
// hatched. Where several dies share a pixel it shows the one at its middle. A
// size outside 32 to 4096 is analytics.ErrInvalid.
func PaintMap(w io.Writer, p MapPicture) error {
	if p.Size < 32 || p.Size > 4096 {
		return fmt.Errorf("picture size %d: use 32 to 4096 pixels: %w", p.Size, analytics.ErrInvalid)
	}
	if p.Grid == nil || p.Layout == nil {
		return fmt.Errorf("picture without grid or layout: %w", analytics.ErrInvalid)
	}
	n := len(p.Codes)
	if p.Plane != nil {
		n = p.Plane.Len()
	}
	if n != p.Grid.Len() {
		return fmt.Errorf("picture of %d dies on a grid of %d: %w", n, p.Grid.Len(), analytics.ErrInvalid)
	}
	inks, paint := p.inks()
	img := image.NewPaletted(image.Rect(0, 0, p.Size, p.Size), inks)
	view := newView(p.Layout, p.Size)
	view.paintWafer(img)
	view.paintDies(img, p, paint)
	view.paintLines(img)
	return encoder.Encode(w, img)
}

// ink is how one shade or bin is put on paper.
type ink struct {
	index   uint8
	pattern uint8 // index of patterns
	missing bool
}

// inks gives the picture's palette, and per die the ink it is painted with.
func (p MapPicture) inks() (color.Palette, func(die int) ink) {
	pal := paletteFor(p.Dark)
	inks := fixedInks(pal)
	if p.Plane == nil {
		classes := make([]string, len(p.Cells))
		for i, c := range p.Cells {
			classes[i] = c.Class.String()
		}
		for _, hex := range append(append([]string(nil), pal.Bins...), pal.Reject...) {
			inks = append(inks, opaque(mustHex(hex)))
		}
		byCode := make([]ink, len(classes))
		for i, l := range LooksOf(classes) {
			byCode[i] = l.ink()
		}
		return inks, func(die int) ink {
			if code := int(p.Codes[die]); code < len(byCode) {
				return byCode[code]
			}
			return ink{missing: true}
		}
	}
	scale := pal.Magnitude
	if !math.IsNaN(p.Target) {
		scale = pal.Deviation
	}
	inks = append(inks, levelsOf(scale)...)
	factor := float64(levels) / (p.High - p.Low)
	return inks, func(die int) ink {
		v := p.Plane.Value(die)
		if math.IsNaN(v) {
			return ink{missing: true}
		}
		return ink{index: inkShades + uint8(min(max((v-p.Low)*factor, 0), levels-1))}
	}
}

func (l BinLook) ink() ink {
	if l.Missing {
		return ink{missing: true}
	}
	i := ink{index: inkShades + uint8(l.Fill)}
	if l.Reject {
		i.index += 8
	}
	for k, name := range patterns {
		if name == l.Pattern {
			i.pattern = uint8(k)
		}
	}
	return i
}

func paletteFor(dark bool) Palette {
	if p := palettes(); dark {
		return p.Dark
	} else {
		return p.Light
	}
}

func fixedInks(p Palette) color.Palette {
	return color.Palette{opaque(mustHex(p.Paper)), opaque(mustHex(p.Wafer)), opaque(mustHex(p.Hatch)), opaque(mustHex(p.Ink))}
}

func opaque(c RGB) color.RGBA { return color.RGBA{c.R, c.G, c.B, 255} }

// levelsOf thins a scale to the shades that fit a picture.
func levelsOf(scale string) color.Palette {
	s := shades(scale)
	out := make(color.Palette, levels)
	for i := range out {
		out[i] = opaque(s[i*(len(s)-1)/(levels-1)])
	}
	return out
}

// SmallMapReach is how far the scale of small maps reaches to both sides of the
// target, in the quantity's unit (only wavelengths show as deviations, so nm): one
// scale for all, since they stand together in a list.
const SmallMapReach = 5

// PaintSmallMap writes the small map as a PNG of one pixel a cell on a
// transparent ground.
func PaintSmallMap(w io.Writer, m SmallPicture) error {
	if m.Size < 1 || m.Size > 1024 || len(m.Cells) != m.Size*m.Size {
		return fmt.Errorf("small map of %d cells for a side of %d: %w", len(m.Cells), m.Size, analytics.ErrInvalid)
	}
	pal := paletteFor(m.Dark)
	scale, low, high := pal.Magnitude, m.Low, m.High
	if !math.IsNaN(m.Target) {
		scale, low, high = pal.Deviation, m.Target-SmallMapReach, m.Target+SmallMapReach
	}
	inks := append(color.Palette{color.RGBA{}}, levelsOf(scale)...)
	index := smallInks(m, low, high)
	img := image.NewPaletted(image.Rect(0, 0, m.Size, m.Size), inks)
	for i, c := range m.Cells {
		img.Pix[i] = index[c]
	}
	return encoder.Encode(w, img)
}

// smallInks maps cell codes to palette indices of the scale from low to high.
func smallInks(m SmallPicture, low, high float64) (index [256]uint8) {
	for c := 1; c < 256; c++ {
		v := m.Low + (m.High-m.Low)*float64(c-1)/254
		t := 0.5
		if high > low {
			t = (v - low) / (high - low)
		}
		index[c] = 1 + uint8(min(max(t*levels, 0), levels-1))
	}
	return index
}
