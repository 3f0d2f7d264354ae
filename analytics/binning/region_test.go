package binning

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"epitally/analytics/wafermap"
)

const seaGlass = `specification: sea-glass
kind: probe
rejects:
  - {reason: open, when: forward_voltage_v > 4.5}
regions:
  - region: C
    cells:
      - {name: A, polygon: [[0.30, 0.30], [0.32, 0.30], [0.32, 0.32], [0.30, 0.32]]}
      - {name: B, polygon: [[0.32, 0.30], [0.34, 0.30], [0.34, 0.32], [0.32, 0.32]]}
      - name: D
        polygon: [[0.30, 0.32], [0.34, 0.32], [0.34, 0.36], [0.30, 0.36]]
        holes: [[[0.31, 0.33], [0.33, 0.33], [0.33, 0.35], [0.31, 0.35]]]
      - {name: K, priority: 1, circle: {centre: [0.315, 0.315], steps: 1}}
    outside: off-colour
axes:
  - {axis: F, quantity: luminous_flux_lm, ratios: {from: 1, ratio: 1.25, count: 3, places: 2}}
bins:
  name: "{C}-{F}"
  sellable: ["A*", "B*", "D*"]
  prices: {"A*": 0.03, "*": 0.01}
  currency: EUR
`

// planesOf packs columns of decimals as a reader would.
func planesOf(t *testing.T, columns map[string][]string) []wafermap.Plane {
	t.Helper()
	var planes []wafermap.Plane
	for name, texts := range columns {
		p := wafermap.Plane{Quantity: name, Encoding: wafermap.Int32, Exponent: -4}
		for _, text := range texts {
			k := int32(wafermap.Missing32)
			if text != "" {
				v, ok := parseDecimal(text)
				if !ok {
					t.Fatalf("%q is no decimal", text)
				}
				k = int32(math.Round(nearest(v) * 1e4))
			}
			p.K32 = append(p.K32, k)
		}
		planes = append(planes, p)
	}
	return planes
}

func TestRegionsBinDies(t *testing.T) {
	t.Parallel()
	s := mustParse(t, seaGlass)
	dies := []struct{ x, y, flux, volt, want string }{
		{"0.31", "0.31", "1.0", "3", "A-F1"},         // inside; the lowest flux edge belongs to F1
		{"0.32", "0.31", "1.25", "3", "B-F2"},        // the shared edge belongs to the cell on its right
		{"0.31", "0.32", "1.1", "3", "D-F1"},         // and a shared horizontal edge to the cell above
		{"0.34", "0.31", "1.1", "3", "B-F1"},         // the outer edge of the whole is closed
		{"0.34", "0.36", "1.1", "3", "D-F1"},         // at its corner too
		{"0.32", "0.34", "1.1", "3", "off-colour"},   // in the hole
		{"0.31", "0.33", "1.1", "3", "D-F1"},         // corner of the hole: lies on D's outline only
		{"0.315", "0.315", "1.95", "3", "K-F3"},      // the circle goes before A; 1.25³ = 1.953125 → 1.95, closed
		{"0.315", "0.315", "1.96", "3", "F above"},   // over the top flux edge
		{"0.3401", "0.31", "1.1", "3", "off-colour"}, // just outside
		{"0.3401", "0.31", "1.1", "4.6", "open"},     // reject rules go first
		{"", "0.31", "1.1", "4.6", "untested"},
		{"0.31", "", "1.1", "3", "untested"},
	}
	columns := map[string][]string{}
	for _, d := range dies {
		for q, v := range map[string]string{"cie_x": d.x, "cie_y": d.y, "luminous_flux_lm": d.flux, "forward_voltage_v": d.volt} {
			columns[q] = append(columns[q], v)
		}
	}
	codes, counts := make([]uint16, len(dies)), make([]int, len(s.Cells()))
	if err := s.Bin(codes, counts, PickPlanes(s, planesOf(t, columns)), nil); err != nil {
		t.Fatal(err)
	}
	for i, d := range dies {
		if got := s.Cells()[codes[i]].Name; got != d.want {
			t.Errorf("die %d at (%s, %s), %s lm: %s, want %s", i, d.x, d.y, d.flux, got, d.want)
		}
	}
}

func TestRegionsNameAndPriceBins(t *testing.T) {
	t.Parallel()
	s := mustParse(t, seaGlass)
	if got := strings.Join(s.Quantities(), " "); got != "cie_x cie_y luminous_flux_lm forward_voltage_v" {
		t.Errorf("quantities %s", got)
	}
	want := map[string]Cell{
		"A-F1": {"A-F1", Sellable, 0.03}, "B-F3": {"B-F3", Sellable, 0.01}, "K-F2": {"K-F2", Unsellable, 0.01},
	}
	for _, c := range s.Cells() {
		if w, ok := want[c.Name]; ok && w != c {
			t.Errorf("%+v, want %+v", c, w)
		}
		delete(want, c.Name)
	}
	if len(want) > 0 || s.Currency != "EUR" {
		t.Errorf("not named: %v; currency %q", want, s.Currency)
	}
	if e := s.Axes()[0].Edges; fmt.Sprint(e) != "[1 1.25 1.56 1.95]" { // 1.25² = 1.5625, 1.25³ = 1.953125
		t.Errorf("ratio edges %v", e)
	}
}

// TestRasterAgreesWithTheCells holds the look-up against the direct question on
// a cell by cell basis, over points in, between and around many cells.
func TestRasterAgreesWithTheCells(t *testing.T) {
	t.Parallel()
	for _, guard := range []string{"", "guard: 0.0004"} {
		s := mustParse(t, manyPolygons(14, 14, guard))
		r := s.regions[0]
		rng := rand.New(rand.NewPCG(3, 9))
		found := map[int]int{}
		for range 200_000 {
			p := point{0.28 + 0.2*rng.Float64(), 0.28 + 0.2*rng.Float64()}
			if rng.IntN(2) == 0 { // on the decimals that corners lie on
				p = point{math.Round(p.x*1e3) / 1e3, math.Round(p.y*1e3) / 1e3}
			}
			got, want := r.raster.at(r, p), r.classify(p, r.order)
			if got != want {
				t.Fatalf("guard %q: (%v, %v) is in cell %d by raster, %d directly", guard, p.x, p.y, got, want)
			}
			found[min(got, 0)]++
		}
		if found[0] < 50_000 || found[outsideCells] < 50_000 || (guard != "") != (found[inGuard] > 1000) {
			t.Errorf("guard %q: the points hardly test it: %v", guard, found)
		}
	}
}

// manyPolygons is a specification of columns × rows leaning quadrangles in x, y.
func manyPolygons(columns, rows int, guard string) string {
	var b strings.Builder
	b.WriteString("specification: many\nkind: probe\nregions:\n  - region: C\n    " + guard + "\n    cells:\n")
	at := func(i, j int) string {
		return fmt.Sprintf("[%.3f, %.3f]", 0.3+0.01*float64(i)+0.002*float64(j), 0.3+0.008*float64(j)+0.001*float64(i))
	}
	for j := range rows {
		for i := range columns {
			fmt.Fprintf(&b, "      - {name: c%02d%02d, polygon: [%s, %s, %s, %s]}\n", j, i, at(i, j), at(i+1, j), at(i+1, j+1), at(i, j+1))
		}
	}
	return b.String()
}

func TestRegionsInUVMatchThoseInXY(t *testing.T) {
	t.Parallel()
	s := mustParse(t, `specification: uv
kind: probe
regions:
  - {region: C, space: uv, cells: [{name: A, polygon: [[0.19, 0.46], [0.21, 0.46], [0.21, 0.48], [0.19, 0.48]]}, {name: O, circle: {centre: [0.23, 0.50], steps: 7}}]}
`)
	// x = 9u/(6u − 16v + 12), y = 4v/(6u − 16v + 12): CIE 15:2018, 8.1.
	for _, c := range []struct{ u, v, want string }{{"0.2", "0.47", "A"}, {"0.212", "0.47", "C outside"}, {"0.2376", "0.5", "O"}, {"0.2378", "0.5", "C outside"}} {
		u, v := ratOf(t, c.u), ratOf(t, c.v)
		d := 6*u - 16*v + 12
		planes := planesOf(t, map[string][]string{"cie_x": {fmt.Sprintf("%.4f", 9*u/d)}, "cie_y": {fmt.Sprintf("%.4f", 4*v/d)}})
		codes := make([]uint16, 1)
		if err := s.Bin(codes, make([]int, len(s.Cells())), PickPlanes(s, planes), nil); err != nil {
			t.Fatal(err)
		}
		if got := s.Cells()[codes[0]].Name; got != c.want {
			t.Errorf("u′ %s, v′ %s: %s, want %s", c.u, c.v, got, c.want)
		}
	}
}

func ratOf(t *testing.T, text string) float64 {
	t.Helper()
	v, ok := parseDecimal(text)
	if !ok {
		t.Fatalf("%q is no decimal", text)
	}
	return nearest(v)
}

func TestRegionsRefuse(t *testing.T) {
	t.Parallel()
	head := "specification: s\nkind: probe\nregions:\n  - region: C\n"
	for _, c := range []struct{ body, want string }{
		{"    cells: [{name: A, polygon: [[0.3, 0.3], [0.4, 0.4], [0.4, 0.3], [0.3, 0.4]]}]", "line 5, column 32: regions[1].cells[1].polygon: the edges from corner 1 and from corner 3 cross or touch"},
		{"    cells: [{name: A, polygon: [[0.3, 0.3], [0.4, 0.4]]}]", "at least three corners, this one has 2"},
		{"    cells: [{name: A, polygon: [[0.3, 0.3], [0.4, 0.3], [0.35, 0.3]]}]", "cross or touch"},
		{"    cells: [{name: A, polygon: [[0.3, 0.3], [0.4, 0.3], [0.35, 0]]}]", "(0.35, 0) is no chromaticity"},
		{"    cells: [{name: A, polygon: [[0.3, 0.3], [0.4, .nan], [0.35, 0.4]]}]", "expected a decimal number"},
		{"    cells: [{name: A, polygon: [[0.3, 0.3], [0.4, 0.3], [0.4, 0.4], [0.3, 0.3]]}]", "the first corner stands again at the end"},
		{"    cells: [{name: A, circle: {centre: [0.3, 0.3], steps: 0}}]", "0 steps"},
		{"    cells: [{name: A}]", "0 shapes where one is expected"},
		{"    cells: [{name: A, circle: {centre: [0.3, 0.3], steps: 3}, polygon: [[0.3, 0.3], [0.4, 0.3], [0.4, 0.4]]}]", "2 shapes where one is expected"},
		{"    cells: []", "at least one cell"},
		{"    space: uv\n    quantities: [forward_voltage_v, cie_y]\n    cells: [{name: A, circle: {centre: [0.3, 0.3], steps: 3}}]", "cells in uv cannot be met by forward_voltage_v and cie_y"},
		{"    guard: 1.645 u\n    cells: [{name: A, circle: {centre: [0.3, 0.3], steps: 3}}]", "that of cie_x is not stated; add uncertainty: {cie_x: …}"},
		{"    guard: -1\n    cells: [{name: A, circle: {centre: [0.3, 0.3], steps: 3}}]", "cannot be negative"},
		{"    cells: [{name: A, polygon: [[0.3, 0.3], [0.4, 0.3], [0.4, 0.4]], holes: [[[0.5, 0.5], [0.6, 0.5], [0.6, 0.6]]]}]", "lies outside its polygon"},
		{"    cells: [{name: A, any_of: []}]", "any_of lists no shape"},
	} {
		_, err := Parse([]byte(head + c.body + "\n"))
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s\n gives %v\n want %s", c.body, err, c.want)
		}
	}
}

func TestSeriesRefuse(t *testing.T) {
	t.Parallel()
	head := "specification: s\nkind: probe\naxes:\n  - {axis: F, quantity: luminous_flux_lm, "
	for body, want := range map[string]string{
		"steps: {from: 1, step: 0, count: 3}}":                  "a step of 0",
		"steps: {from: 1, step: 0.1, count: 0}}":                "whole number from 1",
		"ratios: {from: 0, ratio: 1.1, count: 3, places: 2}}":   "ratios need a first edge above 0",
		"ratios: {from: 1, ratio: 1, count: 3, places: 2}}":     "a ratio of 1",
		"ratios: {from: 1, ratio: 1.001, count: 3, places: 2}}": "are both 1 after rounding",
		"edges: [1, 2], steps: {from: 1, step: 1, count: 2}}":   "2 of edges, steps and ratios",
		"guard: 0.1}": "0 of edges, steps and ratios",
	} {
		if _, err := Parse([]byte(head + body + "\n")); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s gives %v, want %s", body, err, want)
		}
	}
}

// Hundreds of cells over one another must neither take memory without end nor
// change where a die falls.
func TestCellsOverOneAnother(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(7, 7))
	var b strings.Builder
	b.WriteString("specification: heap\nkind: probe\nregions:\n  - region: C\n    cells:\n")
	for i := range maxCells {
		fmt.Fprintf(&b, "      - {name: c%d, polygon: [[%.4f, 0.1], [0.6, %.4f], [%.4f, 0.6]]}\n", i, 0.1+0.2*rng.Float64(), 0.1+0.2*rng.Float64(), 0.1+0.2*rng.Float64())
	}
	s := mustParse(t, b.String())
	r := s.regions[0]
	for range 2000 {
		p := point{0.05 + 0.6*rng.Float64(), 0.05 + 0.6*rng.Float64()}
		if got, want := r.raster.at(r, p), r.classify(p, r.order); got != want {
			t.Fatalf("(%g, %g): %d, want %d", p.x, p.y, got, want)
		}
	}
	if _, err := Parse([]byte(b.String() + "      - {name: more, polygon: [[0.1, 0.1], [0.2, 0.1], [0.2, 0.2]]}\n")); err == nil || !strings.Contains(err.Error(), "at most 600") {
		t.Errorf("one cell more: %v", err)
	}
}

// TestGuardedRasterAgrees is TestRasterAgreesWithTheCells for circles, overlapping
// cells, u′, v′ and a guard in uncertainties that lean.
func TestGuardedRasterAgrees(t *testing.T) {
	t.Parallel()
	const cells = `
    cells:
      - {name: K, priority: 1, circle: {centre: [%s], steps: 6}}
      - name: A
        polygon: [[%s], [%s], [%s], [%s]]
      - {name: B, any_of: [{polygon: [[%[3]s], [%[6]s], [%[4]s]]}, {circle: {centre: [%[6]s], steps: 4}}]}
`
	xy := fmt.Sprintf(cells, "0.335, 0.335", "0.31, 0.31", "0.35, 0.31", "0.35, 0.35", "0.31, 0.35", "0.37, 0.33")
	uv := fmt.Sprintf(cells, "0.21, 0.48", "0.20, 0.47", "0.22, 0.47", "0.22, 0.49", "0.20, 0.49", "0.235, 0.48")
	for name, region := range map[string]string{
		"width": "{}guard: 0.001" + xy, "uncertainties": "{}guard: 1.645 u" + xy, "uv": "{}space: uv\n    guard: 2 u" + uv,
	} {
		s := mustParse(t, "specification: g\nkind: probe\nuncertainty: {cie_x: 0.0008, cie_y: 0.0015}\nregions:\n  - region: C\n"+strings.Replace(region, "{}", "    ", 1))
		r := s.regions[0]
		low, high := r.raster.low, point{r.raster.low.x + rasterSide/r.raster.perX, r.raster.low.y + rasterSide/r.raster.perY}
		rng := rand.New(rand.NewPCG(4, 4))
		found := map[int]int{}
		for range 60_000 {
			p := point{low.x + (high.x-low.x)*rng.Float64(), low.y + (high.y-low.y)*rng.Float64()}
			got, want := r.raster.at(r, p), r.classify(p, r.order)
			if got != want {
				t.Fatalf("%s: (%v, %v) is in cell %d by raster, %d directly", name, p.x, p.y, got, want)
			}
			found[got]++
		}
		if found[0] < 300 || found[1] < 1000 || found[2] < 1000 || found[inGuard] < 1000 {
			t.Errorf("%s: the points hardly test it: %v", name, found)
		}
	}
}
