package wafermap

import (
	"encoding/json"
	"errors"
	"math"
	"testing"

	"epitally/analytics"
	"epitally/testdata/sharedtest"
)

func layoutOf(diameter, edge, pitchX, pitchY, centreX, centreY float64) Layout {
	return Layout{Name: "test", WaferDiameterMM: diameter, EdgeExclusionMM: edge, DiePitchXMM: pitchX, DiePitchYMM: pitchY,
		CentreX: centreX, CentreY: centreY, Mark: "none", XAxis: "right", YAxis: "up"}
}

// The table "Whole dies by geometry" of the field numbers, derived there by
// arithmetic. Which lattice offset it took is not stated: every one of its counts
// is the largest over four offsets, the wafer's centre on a die's centre or
// between two dies, along x and along y.
func TestDiesMatchesTheGeometryTable(t *testing.T) {
	t.Parallel()
	pitches := [][2]float64{{0.26, 0.26}, {0.30, 0.34}, {0.40, 0.40}, {0.56, 0.76}, {1.05, 1.05}}
	for _, row := range []struct {
		diameter, edge float64
		dies           [5]int
	}{
		{50.8, 2, [5]int{25_089, 16_574, 10_520, 3_903, 1_476}},
		{100, 2, [5]int{106_361, 70_379, 44_765, 16_720, 6_392}},
		{150, 3, [5]int{239_828, 158_781, 101_061, 37_836, 14_516}},
		{200, 3, [5]int{435_804, 288_594, 183_788, 68_872, 26_452}},
	} {
		for i, p := range pitches {
			most := 0
			for _, centre := range [][2]float64{{0, 0}, {0.5, 0}, {0, 0.5}, {0.5, 0.5}} {
				l := layoutOf(row.diameter, row.edge, p[0], p[1], centre[0], centre[1])
				most = max(most, l.Dies())
			}
			if most != row.dies[i] {
				t.Errorf("%g mm, dies %g × %g mm: %d, want %d", row.diameter, p[0], p[1], most, row.dies[i])
			}
		}
	}
}

// The gross_die_exact cases of the yield checks: die (i, j) occupies ox + i·w to
// ox + (i+1)·w, so that its centre is at ox + (i + ½)·w.
func TestDiesMatchesTheExactCases(t *testing.T) {
	t.Parallel()
	var checks struct {
		Cases []struct {
			ID, Op string
			Input  struct {
				Diameter      float64
				DieW          float64    `json:"die_w"`
				DieH          float64    `json:"die_h"`
				StreetX       float64    `json:"street_x"`
				StreetY       float64    `json:"street_y"`
				EdgeExclusion float64    `json:"edge_exclusion"`
				LatticeOffset [2]float64 `json:"lattice_offset"`
			}
			Expect struct{ Count int }
		}
	}
	b := sharedtest.Read(t, "reference/checks/yield.json")
	if err := json.Unmarshal(b, &checks); err != nil {
		t.Fatal(err)
	}
	seen := 0
	for _, c := range checks.Cases {
		if c.Op != "gross_die_exact" {
			continue
		}
		seen++
		in := c.Input
		if in.StreetX != 0 || in.StreetY != 0 {
			t.Fatalf("%s: a street is not part of a layout", c.ID)
		}
		l := layoutOf(in.Diameter, in.EdgeExclusion, in.DieW, in.DieH, -in.LatticeOffset[0]/in.DieW-0.5, -in.LatticeOffset[1]/in.DieH-0.5)
		if got := l.Dies(); got != c.Expect.Count {
			t.Errorf("%s: %d dies, want %d", c.ID, got, c.Expect.Count)
		}
	}
	if seen == 0 {
		t.Error("no gross_die_exact case found")
	}
}

func TestSpanAgreesWithInside(t *testing.T) {
	t.Parallel()
	for _, l := range []Layout{
		layoutOf(10, 0, 1, 1, 0.5, 0.5), layoutOf(50.8, 2, 0.7, 0.9, 12.25, -3), layoutOf(100, 3, 60, 20, 0, 0), layoutOf(30, 0, 30, 1, 0.5, 0),
	} {
		l.XAxis, l.YAxis = "left", "down"
		total := 0
		for y := -80; y <= 80; y++ {
			first, last := l.Span(y)
			for x := -80; x <= 80; x++ {
				if l.Inside(x, y) {
					total++
				}
				if inSpan := x >= first && x <= last; inSpan != l.Inside(x, y) {
					t.Fatalf("%+v die (%d, %d): span [%d, %d], inside %v", l, x, y, first, last, l.Inside(x, y))
				}
			}
		}
		if got := l.Dies(); got != total {
			t.Errorf("%+v: %d dies, want %d", l, got, total)
		}
	}
}

func discGrid(radius int) *Grid {
	g := &Grid{}
	for y := -radius; y <= radius; y++ {
		for x := -radius; x <= radius; x++ {
			if x*x+y*y <= radius*radius {
				g.X, g.Y = append(g.X, int16(x+100)), append(g.Y, int16(y+50))
			}
		}
	}
	return g
}

func TestAssumeLayout(t *testing.T) {
	t.Parallel()
	g := discGrid(20)
	for _, c := range []struct {
		name     string
		hint     *Layout
		want     string
		diameter func(float64) bool
		pitch    func(float64) bool
	}{
		{"nothing stated", nil, AssumedUnits, above(40), equals(1)},
		{"both stated", &Layout{WaferDiameterMM: 50, DiePitchXMM: 1.1, DiePitchYMM: 1.1, Mark: "flat", MarkAngleDeg: 270}, AssumedFromSource, equals(50), equals(1.1)},
		{"pitch only", &Layout{DiePitchXMM: 0.5}, AssumedFromExtent, above(20), equals(0.5)},
		{"diameter only", &Layout{WaferDiameterMM: 50}, AssumedFromExtent, equals(50), func(p float64) bool { return p > 1.1 && p < 50.0/40 }},
		{"diameter too small", &Layout{WaferDiameterMM: 10, DiePitchXMM: 1, DiePitchYMM: 1}, AssumedFromExtent, above(40), equals(1)},
		{"not numbers", &Layout{WaferDiameterMM: math.NaN(), DiePitchXMM: math.Inf(1), CentreX: math.NaN(), MarkAngleDeg: math.Inf(1)}, AssumedUnits, above(40), equals(1)},
	} {
		l := AssumeLayout(g, c.hint)
		if err := l.Validate(); err != nil {
			t.Errorf("%s: %v", c.name, err)
		}
		if !l.Assumed || l.Name != c.want || !c.diameter(l.WaferDiameterMM) || !c.pitch(l.DiePitchXMM) {
			t.Errorf("%s: %+v", c.name, l)
		}
		if l.CentreX != 100 || l.CentreY != 50 {
			t.Errorf("%s: centre (%g, %g), want (100, 50)", c.name, l.CentreX, l.CentreY)
		}
		for i := range g.X {
			if !l.OnWafer(int(g.X[i]), int(g.Y[i])) {
				t.Fatalf("%s: die (%d, %d) is off the wafer", c.name, g.X[i], g.Y[i])
			}
		}
	}
	if l := AssumeLayout(&Grid{}, nil); l.Validate() != nil {
		t.Errorf("empty grid: %v", l.Validate())
	}
	if l := AssumeLayout(g, &Layout{CentreX: 101.5, CentreY: 50}); l.CentreX != 101.5 {
		t.Errorf("stated centre was dropped: %g", l.CentreX)
	}
}

func above(low float64) func(float64) bool {
	return func(v float64) bool { return v > low && v < 1.1*low }
}
func equals(want float64) func(float64) bool { return func(v float64) bool { return v == want } }

func TestValidateNamesTheField(t *testing.T) {
	t.Parallel()
	for _, change := range []func(*Layout){
		func(l *Layout) { l.WaferDiameterMM = 501 },
		func(l *Layout) { l.DiePitchXMM = 0 },
		func(l *Layout) { l.DiePitchYMM = math.NaN() },
		func(l *Layout) { l.EdgeExclusionMM = 25 },
		func(l *Layout) { l.Mark = "corner" },
		func(l *Layout) { l.CentreX = math.Inf(1) },
		func(l *Layout) { l.MarkAngleDeg = math.NaN() },
	} {
		l := layoutOf(50, 2, 1, 1, 0, 0)
		change(&l)
		if err := l.Validate(); !errors.Is(err, analytics.ErrInvalid) {
			t.Errorf("%+v: %v", l, err)
		}
		if l.Dies() != 0 {
			t.Errorf("%+v: an ill-formed layout has dies", l)
		}
	}
}

func BenchmarkDies(b *testing.B) {
	b.ReportAllocs()
	l := layoutOf(200, 3, 0.17, 0.17, 0, 0)
	for b.Loop() {
		if l.Dies() < 1_000_000 {
			b.Fatal("not a million dies")
		}
	}
}
