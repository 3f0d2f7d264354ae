package binning

import (
	"encoding/json"
	"fmt"
	"slices"
	"strings"
	"testing"

	"epitally/analytics/colour"
	"epitally/testdata/sharedtest"
)

// TestPublishedQuadrangles bins the printed centres of ANSI C78.377-2015 by the
// printed corners, as a specification of polygons and as one of quadrangles.
func TestPublishedQuadrangles(t *testing.T) {
	t.Parallel()
	var file struct {
		Cases []struct {
			Op    string
			Input struct {
				Bins   map[string][][2]float64
				Points [][2]float64
			}
			Expect struct{ Bins [][]string }
		}
	}
	if err := json.Unmarshal(sharedtest.Read(t, "reference/checks/binning.json"), &file); err != nil {
		t.Fatal(err)
	}
	seen := 0
	for _, c := range file.Cases {
		if c.Op != "bin_quadrangles" {
			continue
		}
		var polygons, quadrangles strings.Builder
		head := "specification: s\nkind: probe\nregions:\n  - region: C\n    cells:\n"
		polygons.WriteString(head)
		quadrangles.WriteString(head)
		var names []string
		for name := range c.Input.Bins {
			names = append(names, name)
		}
		slices.Sort(names)
		for _, name := range names {
			fmt.Fprintf(&polygons, "      - {name: c%s, polygon: %s}\n", name, strings.ReplaceAll(fmt.Sprint(c.Input.Bins[name]), " ", ", "))
			fmt.Fprintf(&quadrangles, "      - {name: c%s, quadrangle: {cct: %s, edition: 2015}}\n", name, name)
		}
		for _, document := range []string{polygons.String(), quadrangles.String()} {
			s := mustParse(t, document)
			r := s.regions[0]
			for i, p := range c.Input.Points {
				cell := r.raster.at(r, point{p[0], p[1]})
				if cell < 0 || !slices.Contains(c.Expect.Bins[i], strings.TrimPrefix(r.Cells[cell].Name, "c")) {
					t.Errorf("(%g, %g) is in cell %d, want %v", p[0], p[1], cell, c.Expect.Bins[i])
				}
				seen++
			}
		}
	}
	if seen == 0 {
		t.Error("the file has no case of bin_quadrangles")
	}
}

// The quadrangles of 2008 overlap in slivers and those of 2015 leave one at
// 2500 K: the check must say so.
func TestKnownSliversAreFound(t *testing.T) {
	t.Parallel()
	document := func(edition int, ccts ...int) string {
		text := "specification: s\nkind: probe\nregions:\n  - region: C\n    cells:\n"
		for _, k := range ccts {
			text += fmt.Sprintf("      - {name: c%d, quadrangle: {cct: %d, edition: %d}}\n", k, k, edition)
		}
		return text
	}
	early := mustParse(t, document(2008, 2700, 3000, 3500, 4000, 4500, 5000, 5700, 6500)).Check()
	if !slices.ContainsFunc(early, func(f Finding) bool { return f.Kind == Overlap }) {
		t.Errorf("2008: %s", kinds(early))
	}
	late := mustParse(t, document(2015, 2200, 2500)).Check()
	if !slices.ContainsFunc(late, func(f Finding) bool { return f.Kind == NearCorner && f.Cells[0] == "c2200" }) {
		t.Errorf("2015: %s", kinds(late))
	}
}

func TestShapesTogether(t *testing.T) {
	t.Parallel()
	s := mustParse(t, `specification: s
kind: probe
regions:
  - region: C
    cells:
      - name: M
        any_of:
          - polygon: [[0.30, 0.30], [0.32, 0.30], [0.32, 0.32], [0.30, 0.32]]
          - circle: {centre: [0.36, 0.36], steps: 5}
      - {name: N, quadrangle: {cct: 2700, steps: 4}}
axes:
  - {axis: V, quantity: forward_voltage_v, steps: {from: 2.9, step: 0.1, count: 4}}
`)
	if e := s.Axes()[0].Edges; fmt.Sprint(e) != "[2.9 3 3.1 3.2 3.3]" {
		t.Errorf("stepped edges %v", e)
	}
	r := s.regions[0]
	// Five steps are 0.0055 in u′, v′.
	centre := colour.XY{X: 0.36, Y: 0.36}.UV()
	just := func(away float64) point {
		p := colour.UV{U: centre.U + away, V: centre.V}.XY()
		return point{p.X, p.Y}
	}
	for _, c := range []struct {
		p    point
		want int
	}{{point{0.31, 0.31}, 0}, {just(0.00549), 0}, {just(0.00551), outsideCells}, {point{0.4578, 0.4101}, 1}, {point{0.34, 0.33}, outsideCells}} {
		if got := r.raster.at(r, c.p); got != c.want {
			t.Errorf("(%.4f, %.4f) is in %d, want %d", c.p.x, c.p.y, got, c.want)
		}
	}
}
