package colour

import (
	"math"
	"testing"
)

// All monochromatic light is light: none is refused by the last bit of x + y, and
// none turns complementary where the tabulated locus runs to and fro by its
// rounding. From 699 nm on all of it has one chromaticity within 10⁻⁷.
func TestLocusIsNowhereRefused(t *testing.T) {
	t.Parallel()
	const tolerance = 0.5 // nm; at the ends 10⁻⁶ in x, the table's rounding, is tenths of a nanometre
	for _, white := range []XY{WhiteE, WhiteD65, WhiteA} {
		for nm := 360; nm <= 830; nm++ {
			d, err := DominantOf(Locus(float64(nm)), white)
			if err != nil || d.Complementary || math.Abs(d.ExcitationPurity-1) > 1e-4 {
				t.Errorf("%d nm against %v: %+v %v", nm, white, d, err)
				continue
			}
			if want := min(float64(nm), reddestNM); nm >= 400 && math.Abs(d.WavelengthNM-want) > tolerance {
				t.Errorf("%d nm against %v: %g nm", nm, white, d.WavelengthNM)
			}
			if _, err := CCTOf(Locus(float64(nm))); err != nil {
				if _, meaningless := Meaningless(err); !meaningless {
					t.Errorf("colour temperature of %d nm: %v", nm, err)
				}
			}
		}
	}
}

// The ends of the locus as they are printed, to four and five decimals (CIE
// 15:2018: 0.7347, 0.2653 from 699 nm on; 360 nm at 0.1756, 0.0053), are the ends and
// not purple; a thousandth along the purple line is purple.
func TestPrintedEndsOfTheLocusAreNotPurple(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		p    XY
		want float64
	}{{XY{0.7347, 0.2653}, 699}, {XY{0.73469, 0.26531}, 699}, {XY{0.1756, 0.0053}, 360}, {XY{0.17556, 0.00529}, 360}} {
		d, err := DominantOf(c.p, WhiteE)
		if err != nil || d.Complementary || math.Abs(d.WavelengthNM-c.want) > 1 {
			t.Errorf("%v: %+v %v, want %g nm", c.p, d, err, c.want)
		}
	}
	red, violet := Locus(reddestNM), Locus(firstNM)
	for _, share := range []float64{0.002, 0.5, 0.998} {
		p := XY{red.X + share*(violet.X-red.X), red.Y + share*(violet.Y-red.Y)}
		if d, err := DominantOf(p, WhiteE); err != nil || !d.Complementary || math.Abs(d.ExcitationPurity-1) > 1e-9 {
			t.Errorf("%g along the purple line: %+v %v", share, d, err)
		}
	}
}

// agrees holds the fast way against the direct one (what DominantOf does once it has
// the outline) at a point: the same numbers, or NaN where there is an error.
func agrees(t *testing.T, table *DominantTable, p XY) {
	t.Helper()
	const tolerance = 1e-6 // nm
	dst, purity := []float64{0}, []float64{0}
	table.Wavelengths(dst, purity, []float64{p.X}, []float64{p.Y})
	d, err := table.fan.dominant(p)
	if err != nil {
		if !math.IsNaN(dst[0]) || !math.IsNaN(purity[0]) {
			t.Errorf("%v: %g nm, purity %g where %v", p, dst[0], purity[0], err)
		}
		return
	}
	want := d.WavelengthNM
	if d.Complementary {
		want = -want
	}
	if !(want >= -reddestNM && want <= reddestNM && d.ExcitationPurity >= 0 && d.ExcitationPurity <= 1) {
		t.Errorf("%v: %+v", p, d)
	}
	if !(math.Abs(dst[0]-want) <= tolerance && math.Abs(purity[0]-d.ExcitationPurity) <= 1e-9) {
		t.Errorf("%v: %g nm, purity %g; want %g, %g", p, dst[0], purity[0], want, d.ExcitationPurity)
	}
}

// A dense grid over and around all colours.
func TestTableOverAGrid(t *testing.T) {
	t.Parallel()
	for _, white := range []XY{WhiteE, WhiteD65, WhiteA} {
		table, err := NewDominantTable(white)
		if err != nil {
			t.Fatal(err)
		}
		for x := -0.0125; x < 0.8; x += 0.0025 {
			for y := -0.0125; y < 0.9; y += 0.0025 {
				agrees(t, table, XY{x, y})
			}
		}
		for nm := 360.0; nm <= 830; nm += 0.25 {
			agrees(t, table, Locus(nm))
		}
	}
}

// FuzzDominant looks for points where either way panics, gives a number out of
// range, or differs from the other.
func FuzzDominant(f *testing.F) {
	for _, p := range []XY{{0.3, 0.3}, {0.7347, 0.2653}, {0, 0}, {math.Inf(1), math.Inf(1)}, {math.Inf(-1), math.Inf(1)}, {math.NaN(), 0.3}, {1e308, 1e308}, {5e-324, 5e-324}} {
		f.Add(p.X, p.Y)
	}
	table, err := NewDominantTable(WhiteE)
	if err != nil {
		f.Fatal(err)
	}
	f.Fuzz(func(t *testing.T, x, y float64) {
		agrees(t, table, XY{x, y})
		if c, err := CCTOf(XY{x, y}); err == nil && !(c.K >= lowestCCT && c.K <= highestCCT && math.Abs(c.Duv) <= farthest) {
			t.Errorf("(%g, %g): %+v", x, y, c)
		}
		if _, err := DominantOf(WhiteE, XY{x, y}); err == nil && !(x > 0 && y > 0 && x+y < 1) {
			t.Errorf("white (%g, %g) is taken", x, y)
		}
	})
}
