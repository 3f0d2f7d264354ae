package web

import (
	"bytes"
	"errors"
	"image"
	"image/png"
	"math"
	"testing"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
)

// discWafer is a 100 mm wafer of the given pitch whose wavelength rises from
// 450 nm on the left to 460 nm on the right; every 97th die has no value.
func discWafer(pitchMM float64) (*wafermap.Grid, *wafermap.Layout, *wafermap.Plane) {
	l := &wafermap.Layout{Name: "test", WaferDiameterMM: 100, DiePitchXMM: pitchMM, DiePitchYMM: pitchMM, EdgeExclusionMM: 2,
		Mark: "flat", MarkAngleDeg: 270, XAxis: "right", YAxis: "down"}
	reach := int(50/pitchMM) + 1
	g, p := &wafermap.Grid{}, &wafermap.Plane{Quantity: "peak_wavelength_nm", Encoding: wafermap.Int16, Exponent: -2, BaseK: 45500}
	for y := -reach; y <= reach; y++ {
		for x := -reach; x <= reach; x++ {
			if !l.Inside(x, y) {
				continue
			}
			xMM, _ := l.PositionMM(x, y)
			k := int16(math.Round(1000 * xMM / 100))
			if len(g.X)%97 == 96 {
				k = wafermap.Missing16
			}
			g.X, g.Y, p.K16 = append(g.X, int16(x)), append(g.Y, int16(y)), append(p.K16, k)
		}
	}
	return g, l, p
}

func decodePNG(t *testing.T, b []byte) *image.Paletted {
	t.Helper()
	img, err := png.Decode(bytes.NewReader(b))
	if err != nil {
		t.Fatal(err)
	}
	p, ok := img.(*image.Paletted)
	if !ok {
		t.Fatalf("picture is a %T, want a paletted one", img)
	}
	return p
}

func hexAt(img image.Image, x, y int) string {
	r, g, b, _ := img.At(x, y).RGBA()
	return RGB{uint8(r >> 8), uint8(g >> 8), uint8(b >> 8)}.Hex()
}

func TestPaintMapPutsShortLeftAndLongRight(t *testing.T) {
	t.Parallel()
	g, l, p := discWafer(0.5)
	pal := NewPalettes().Light
	s := shades(pal.Deviation)
	for name, flip := range map[string]bool{"x to the right": false, "x to the left": true} {
		layout := *l
		if flip {
			layout.XAxis = "left"
		}
		var b bytes.Buffer
		if err := PaintMap(&b, MapPicture{Grid: g, Layout: &layout, Plane: p, Low: 451, High: 459, Target: 455, Size: 300}); err != nil {
			t.Fatal(err)
		}
		img := decodePNG(t, b.Bytes())
		left, right := hexAt(img, 22, 150), hexAt(img, 278, 150)
		if flip {
			left, right = right, left
		}
		// Both places lie beyond the range and so at the scale's ends.
		if left != s[0].Hex() || right != s[255].Hex() {
			t.Errorf("%s: left %s right %s, want %s and %s", name, left, right, s[0].Hex(), s[255].Hex())
		}
		if got := hexAt(img, 2, 2); got != pal.Paper {
			t.Errorf("%s: corner %s, want paper %s", name, got, pal.Paper)
		}
		// Below the flat (32.5 mm chord: 47.28 mm from the centre) is paper too.
		if got := hexAt(img, 150, 294); got != pal.Paper {
			t.Errorf("%s: below the flat %s, want paper", name, got)
		}
	}
}

func TestPaintMapHatchesMissingDiesAndNeverShadesThem(t *testing.T) {
	t.Parallel()
	l := &wafermap.Layout{WaferDiameterMM: 10, DiePitchXMM: 4, DiePitchYMM: 4, Mark: "none", XAxis: "right", YAxis: "up"}
	g := &wafermap.Grid{X: []int16{0}, Y: []int16{0}}
	p := &wafermap.Plane{Encoding: wafermap.Float64, F64: []float64{math.NaN()}}
	var b bytes.Buffer
	if err := PaintMap(&b, MapPicture{Grid: g, Layout: l, Plane: p, Low: 0, High: 1, Target: math.NaN(), Size: 64}); err != nil {
		t.Fatal(err)
	}
	img := decodePNG(t, b.Bytes())
	seen := map[uint8]int{}
	for y := 25; y < 39; y++ {
		for x := 25; x < 39; x++ {
			seen[img.ColorIndexAt(x, y)]++
		}
	}
	if seen[inkHatch] == 0 || seen[inkPaper] == 0 || len(seen) != 2 {
		t.Errorf("inks of a missing die: %v, want hatch and paper only", seen)
	}
}

func TestPaintMapOfBins(t *testing.T) {
	t.Parallel()
	l := &wafermap.Layout{WaferDiameterMM: 10, DiePitchXMM: 2, DiePitchYMM: 2, Mark: "notch", MarkAngleDeg: 90, XAxis: "right", YAxis: "up"}
	g := &wafermap.Grid{X: []int16{-1, 1}, Y: []int16{0, 0}}
	cells := []binning.Cell{{Name: "A1", Class: binning.Sellable}, {Name: "leaks", Class: binning.Reject}}
	var b bytes.Buffer
	if err := PaintMap(&b, MapPicture{Grid: g, Layout: l, Codes: []uint16{0, 1}, Cells: cells, Size: 106, Dark: true}); err != nil {
		t.Fatal(err)
	}
	img, pal := decodePNG(t, b.Bytes()), NewPalettes().Dark
	if got := hexAt(img, 33, 53); got != pal.Bins[0] {
		t.Errorf("bin A1 is %s, want %s", got, pal.Bins[0])
	}
	if got := hexAt(img, 73, 53); got != pal.Reject[0] {
		t.Errorf("reject is %s, want %s", got, pal.Reject[0])
	}
}

func TestPaintRefusesWhatDoesNotFit(t *testing.T) {
	t.Parallel()
	g, l, p := discWafer(5)
	for name, m := range map[string]MapPicture{
		"too small":   {Grid: g, Layout: l, Plane: p, Size: 31},
		"too large":   {Grid: g, Layout: l, Plane: p, Size: 4097},
		"short codes": {Grid: g, Layout: l, Codes: []uint16{1}, Size: 64},
	} {
		if err := PaintMap(&bytes.Buffer{}, m); !errors.Is(err, analytics.ErrInvalid) {
			t.Errorf("%s: %v, want ErrInvalid", name, err)
		}
	}
	if err := PaintSmallMap(&bytes.Buffer{}, SmallPicture{Size: 3, Cells: make([]byte, 8)}); !errors.Is(err, analytics.ErrInvalid) {
		t.Errorf("small map: %v, want ErrInvalid", err)
	}
}

func TestPaintSmallMapCentresTheTarget(t *testing.T) {
	t.Parallel()
	// Codes 1, 128 and 255 stand for 450, 455 and 460; the target is 455.
	m := SmallPicture{Size: 2, Cells: []byte{1, 128, 255, 0}, Low: 450, High: 460, Target: 455}
	var b bytes.Buffer
	if err := PaintSmallMap(&b, m); err != nil {
		t.Fatal(err)
	}
	img := decodePNG(t, b.Bytes())
	if _, _, _, a := img.At(1, 1).RGBA(); a != 0 {
		t.Error("a cell without a die is not transparent")
	}
	s := shades(NewPalettes().Light.Deviation)
	if got := hexAt(img, 0, 0); got != s[0].Hex() {
		t.Errorf("low end %s, want %s", got, s[0].Hex())
	}
	r, g, bl, _ := img.At(1, 0).RGBA()
	if l := (RGB{uint8(r >> 8), uint8(g >> 8), uint8(bl >> 8)}).lightness(); l < 94 {
		t.Errorf("the target has L* %.1f, want paper (at least 94)", l)
	}
}

func BenchmarkPaintMap(b *testing.B) {
	for name, pitch := range map[string]float64{"14k_dies": 0.73, "1M_dies": 0.0835} {
		g, l, p := discWafer(pitch)
		b.Run(name, func(b *testing.B) {
			b.ReportAllocs()
			b.ReportMetric(float64(g.Len()), "dies")
			var buf bytes.Buffer
			for b.Loop() {
				buf.Reset()
				if err := PaintMap(&buf, MapPicture{Grid: g, Layout: l, Plane: p, Low: 450, High: 460, Target: 455, Size: 512}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
