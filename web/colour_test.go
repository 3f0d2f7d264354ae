package web

import (
	"math"
	"testing"
)

func TestDeviationScaleIsEvenOnBothSides(t *testing.T) {
	t.Parallel()
	p := NewPalettes()
	for name, pal := range map[string]Palette{"light": p.Light, "dark": p.Dark} {
		s := shades(pal.Deviation)
		if len(s) != scaleSteps {
			t.Fatalf("%s: %d shades, want %d", name, len(s), scaleSteps)
		}
		// 8-bit channels move L* by up to about 0.4; the gamut slack by less.
		const tolL = 0.9
		step := (s[255].lightness() - s[128].lightness()) / 127
		for i := 1; i < 128; i++ {
			a, b := s[128-i].lightness(), s[127+i].lightness()
			if math.Abs(a-b) > tolL {
				t.Errorf("%s: shades %d and %d: L* %.2f and %.2f differ", name, 128-i, 127+i, a, b)
			}
			if got := s[128+i].lightness() - s[128].lightness(); math.Abs(got-step*float64(i)) > tolL {
				t.Errorf("%s: L* after %d steps moved %.2f, want %.2f", name, i, got, step*float64(i))
			}
		}
		if math.Abs(s[255].lightness()-s[128].lightness()) < 50 {
			t.Errorf("%s: the scale spans too little lightness", name)
		}
	}
}

func TestMagnitudeScaleRises(t *testing.T) {
	t.Parallel()
	s := shades(cividis)
	if len(s) != scaleSteps {
		t.Fatalf("%d shades, want %d", len(s), scaleSteps)
	}
	for i := 8; i < len(s); i++ {
		if s[i].lightness() <= s[i-8].lightness() {
			t.Errorf("shade %d is not lighter than shade %d", i, i-8)
		}
	}
}

func TestBinFillsStandApartInGrey(t *testing.T) {
	t.Parallel()
	p := NewPalettes()
	for name, pal := range map[string]Palette{"light": p.Light, "dark": p.Dark} {
		for i := 1; i < len(pal.Bins); i++ {
			if d := mustHex(pal.Bins[i-1]).lightness() - mustHex(pal.Bins[i]).lightness(); d < 6 {
				t.Errorf("%s: fills %d and %d differ by L* %.1f, want at least 6", name, i-1, i, d)
			}
		}
	}
}

func TestLooksAreAllDifferent(t *testing.T) {
	t.Parallel()
	var classes []string
	for range 40 {
		classes = append(classes, "sellable")
	}
	for range 9 {
		classes = append(classes, "reject")
	}
	seen := map[BinLook]int{}
	for i, l := range LooksOf(append(classes, "untested")) {
		if j, ok := seen[l]; ok {
			t.Errorf("cells %d and %d look the same: %+v", j, i, l)
		}
		seen[l] = i
	}
}

func TestFromLChKnownColours(t *testing.T) {
	t.Parallel()
	// L*a*b* of sRGB primaries under D65, from the formulas of IEC 61966-2-1 and
	// CIE 15: red 53.24, 104.55, 40.0°; white 100, 0.
	for _, c := range []struct {
		l, c, h float64
		want    RGB
	}{{53.24, 104.55, 40.0, RGB{255, 0, 0}}, {100, 0, 0, RGB{255, 255, 255}}, {0, 0, 0, RGB{}}} {
		got, _ := fromLCh(c.l, c.c, c.h)
		for _, d := range []int{int(got.R) - int(c.want.R), int(got.G) - int(c.want.G), int(got.B) - int(c.want.B)} {
			if d < -2 || d > 2 {
				t.Errorf("L* %g: %v, want %v within 2", c.l, got, c.want)
			}
		}
	}
}
