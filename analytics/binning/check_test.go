package binning

import (
	"math"
	"strings"
	"testing"
)

func kinds(found []Finding) string {
	var words []string
	for _, f := range found {
		words = append(words, string(f.Kind)+" "+strings.Join(f.Cells, "+"))
	}
	return strings.Join(words, "; ")
}

func TestCheckFindsMistakes(t *testing.T) {
	t.Parallel()
	region := "specification: s\nkind: probe\nregions:\n  - region: C\n    cells:\n"
	axis := "specification: s\nkind: probe\n"
	for _, c := range []struct{ name, document, want string }{
		{"neighbours", region + "      - {name: A, polygon: [[0.30, 0.30], [0.32, 0.30], [0.32, 0.32], [0.30, 0.32]]}\n      - {name: B, polygon: [[0.32, 0.30], [0.34, 0.30], [0.34, 0.32], [0.32, 0.32]]}\n", ""},
		{"overlap", region + "      - {name: A, polygon: [[0.30, 0.30], [0.33, 0.30], [0.33, 0.32], [0.30, 0.32]]}\n      - {name: B, priority: 1, polygon: [[0.32, 0.30], [0.34, 0.30], [0.34, 0.32], [0.32, 0.32]]}\n", "overlap B+A"},
		{"near corner", region + "      - {name: A, polygon: [[0.30, 0.30], [0.32, 0.30], [0.32, 0.32], [0.30, 0.32]]}\n      - {name: B, polygon: [[0.3202, 0.30], [0.34, 0.30], [0.34, 0.32], [0.32, 0.32]]}\n", "near corner A+B"},
		{"covered", region + "      - {name: A, polygon: [[0.30, 0.30], [0.34, 0.30], [0.34, 0.34], [0.30, 0.34]]}\n      - {name: B, polygon: [[0.31, 0.31], [0.33, 0.31], [0.33, 0.33], [0.31, 0.33]]}\n", "overlap A+B; unreachable B"},
		{"declared hole", region + "      - {name: A, polygon: [[0.30, 0.30], [0.34, 0.30], [0.34, 0.34], [0.30, 0.34]], holes: [[[0.31, 0.31], [0.33, 0.31], [0.33, 0.33], [0.31, 0.33]]]}\n", ""},
		{"gap", region + "      - {name: A, polygon: [[0.30, 0.30], [0.34, 0.30], [0.34, 0.31], [0.31, 0.31], [0.31, 0.33], [0.34, 0.33], [0.34, 0.34], [0.30, 0.34]]}\n      - {name: B, polygon: [[0.33, 0.31], [0.34, 0.31], [0.34, 0.33], [0.33, 0.33]]}\n", "gap A+B"},
		{"beyond light", region + "      - {name: A, polygon: [[0.05, 0.30], [0.02, 0.31], [0.01, 0.20]]}\n", "outside locus A"},
		{"ruled out", axis + "rejects: [{reason: short, when: dominant_wavelength_nm < 453}]\naxes: [{axis: W, quantity: dominant_wavelength_nm, edges: [450, 452.5, 455]}]\n", "unreachable W1"},
		{"too fine to resolve", axis + "axes: [{axis: W, quantity: dominant_wavelength_nm, edges: [450, 450.005, 455]}]\n", "too fine W1"},
		{"too fine to tell", axis + "uncertainty: {dominant_wavelength_nm: 0.2}\naxes: [{axis: W, quantity: dominant_wavelength_nm, edges: [450, 450.3, 455]}]\n", "too fine W1"},
	} {
		found := mustParse(t, c.document).Check()
		if got := kinds(found); got != c.want {
			t.Errorf("%s: %q, want %q\n%+v", c.name, got, c.want, found)
		}
	}
}

func TestOverlapAreaOfKnownFigures(t *testing.T) {
	t.Parallel()
	const tolerance = 1e-12
	square := []ring{{{0, 0}, {2, 0}, {2, 2}, {0, 2}}}
	for _, c := range []struct {
		name  string
		other []ring
		want  float64
	}{
		{"quarter", []ring{{{1, 1}, {3, 1}, {3, 3}, {1, 3}}}, 1},
		{"touching", []ring{{{2, 0}, {3, 0}, {3, 2}, {2, 2}}}, 0},
		{"diamond inside", []ring{{{1, 0}, {2, 1}, {1, 2}, {0, 1}}}, 2},
		{"diamond about a corner", []ring{{{1, 2}, {2, 1}, {3, 2}, {2, 3}}}, 0.5},
		{"ring around its hole", []ring{{{-1, -1}, {3, -1}, {3, 3}, {-1, 3}}, {{0.5, 0.5}, {1.5, 0.5}, {1.5, 1.5}, {0.5, 1.5}}}, 3},
	} {
		if got := overlapArea(square, c.other); math.Abs(got-c.want) > tolerance {
			t.Errorf("%s: %g, want %g", c.name, got, c.want)
		}
	}
}

func TestCheckEmptyNamesBinsWithoutDies(t *testing.T) {
	t.Parallel()
	s := mustParse(t, "specification: s\nkind: pl\naxes: [{axis: W, quantity: dominant_wavelength_nm, edges: [450, 455, 460, 465]}]\n")
	counts := make([]int, len(s.Cells()))
	counts[1] = 5
	found := s.CheckEmpty(counts, 12)
	if len(found) != 1 || found[0].Says != "no die of the last 12 wafers fell in 2 of 3 bins: W1, W3" {
		t.Errorf("%+v", found)
	}
}
