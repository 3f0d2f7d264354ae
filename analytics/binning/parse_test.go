package binning

import (
	"errors"
	"fmt"
	"slices"
	"strings"
	"testing"

	"epitally/analytics"
	"epitally/analytics/yamldoc"
)

func TestParseNamesEveryCode(t *testing.T) {
	t.Parallel()
	s := mustParse(t, harbourBlue)
	if s.Name != "harbour-blue" || s.Kind != "probe" || !slices.Equal(s.Products, []string{"blue-455"}) || s.Title != "Harbour blue, 455 nm family" {
		t.Errorf("head: %q %q %q %q", s.Name, s.Title, s.Kind, s.Products)
	}
	want := []string{"dominant_wavelength_nm", "radiant_flux_mw", "forward_voltage_v", "reverse_current_ua"}
	if got := s.Quantities(); !slices.Equal(got, want) {
		t.Errorf("quantities %v, want %v", got, want)
	}
	cells := s.Cells()
	const bins = 4 * 3 * 3
	if cells[0] != (Cell{Name: "W1F1V1", Class: Unsellable}) || cells[bins-1] != (Cell{Name: "W4F3V3", Class: Unsellable}) || cells[9] != (Cell{Name: "W2F1V1", Class: Sellable}) {
		t.Errorf("bins: %v", cells[:bins])
	}
	var rest []string
	for _, c := range cells[bins:] {
		rest = append(rest, c.Name+" "+c.Class.String())
	}
	if got := strings.Join(rest, ", "); got != "open reject, leaky reject, dim reject, short reject, long reject, "+
		"F below reject, F above reject, V below reject, V above reject, untested untested" {
		t.Errorf("after the bins: %s", got)
	}
	if axes := s.Axes(); len(axes) != 3 || axes[0].Edges[1] != 452.5 || axes[2].Names[0] != "V1" {
		t.Errorf("axes: %+v", axes)
	}
	if rules := s.Rules(); len(rules) != 3 || rules[1] != (Rule{"leaky", "reverse_current_ua > 2"}) {
		t.Errorf("rules: %+v", rules)
	}
}

func TestParseSharesReasonsAndNeedsNoAxes(t *testing.T) {
	t.Parallel()
	s := mustParse(t, `specification: leak-test
kind: probe
rejects:
  - {reason: leaky, when: leak_na > 5}
  - {reason: shorted, when: leak_na > 5000}
  - {reason: leaky, when: leak_na < -5}
bins: {name: pass}
`)
	want := []Cell{{Name: "pass"}, {Name: "leaky", Class: Reject}, {Name: "shorted", Class: Reject}, {Name: UntestedName, Class: Untested}}
	if !slices.Equal(s.Cells(), want) {
		t.Errorf("cells %v", s.Cells())
	}
}

// axisDocument has one axis with the given lines of its own.
func axisDocument(lines ...string) string {
	return "specification: x\nkind: pl\naxes:\n  - axis: W\n    quantity: q\n    " + strings.Join(lines, "\n    ") + "\n"
}

func ruleDocument(when string) string {
	return "specification: x\nkind: pl\nrejects:\n  - reason: a\n    when: " + when + "\n"
}

func TestParseFaultsSayWhere(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name, document string
		line, column   int
		key, problem   string
	}{
		{"empty", "", 1, 0, "", "empty"},
		{"not YAML", "axes: [", 1, 7, "", "not YAML"},
		{"two documents", "a: b\n---\na: b\n", 1, 0, "", "2 documents"},
		{"a list", "- a", 1, 1, "", "expected keys"},
		{"no kind", "specification: x\n", 1, 1, "", `"kind" is missing`},
		{"nothing tested", "specification: x\nkind: pl\n", 1, 1, "", "tests nothing"},
		{"bad name", "specification: a b\nkind: pl\n", 1, 16, "specification", "cannot name"},
		{"bad kind", "specification: x\nkind: P L\n", 2, 7, "kind", "cannot name"},
		{"unknown key", "specification: x\nkind: pl\ncolour: red\n", 3, 1, "colour", "unknown key"},
		{"key twice", "specification: x\nkind: pl\nkind: pl\n", 3, 1, "kind", "stands twice"},
		{"key without value", "specification:\nkind: pl\n", 1, 1, "specification", "no value"},
		{"product twice", "specification: x\nkind: pl\nproducts: [a, a]\n", 3, 15, "products[2]", "stands twice"},
		{"alias", "specification: x\nkind: pl\nproducts: &a [b]\n", 3, 11, "products", "expected a list"},
		{"edges out of order", axisDocument("edges: [1, 3, 2]"), 6, 19, "axes[1].edges[3]", "does not follow 3"},
		{"equal edges", axisDocument("edges: [1, 1.0]"), 6, 16, "axes[1].edges[2]", "does not follow"},
		{"one edge", axisDocument("edges: [1]"), 6, 12, "axes[1].edges", "two edges"},
		{"edge not decimal", axisDocument("edges: [0x10, 30]"), 6, 13, "axes[1].edges[1]", "not a decimal"},
		{"edge infinite", axisDocument("edges: [0, .inf]"), 6, 16, "axes[1].edges[2]", "expected a decimal"},
		{"ill-formed quantity", "specification: x\nkind: pl\naxes: [{axis: W, quantity: Peak nm, edges: [1, 2]}]\n", 3, 28, "axes[1].quantity", "cannot name"},
		{"names short", axisDocument("edges: [1, 2, 3]", "names: [A]"), 7, 12, "axes[1].names", "1 names for 2"},
		{"name twice", axisDocument("edges: [1, 2, 3]", "names: [A, A]"), 7, 16, "axes[1].names[2]", "stands twice"},
		{"guard eats cell", axisDocument("edges: [1, 3]", "guard: 1"), 7, 12, "axes[1].guard", "leaves nothing"},
		{"guard below zero", axisDocument("edges: [1, 3]", "guard: -1"), 7, 12, "axes[1].guard", "negative"},
		{"reason without guard", axisDocument("edges: [1, 3]", "guard_reason: g"), 7, 19, "axes[1].guard_reason", "without a guard"},
		{"reason is untested", axisDocument("edges: [1, 3]", "below: untested"), 7, 12, "axes[1].below", "reject reason"},
		{"bins alike", axisDocument("edges: [1, 2, 3]") + "bins: {name: A}\n", 7, 14, "bins.name", "two bins"},
		{"bin and reason alike", axisDocument("edges: [1, 2]", "below: W1"), 4, 5, "axes[1]", "a bin and a reject"},
		{"unknown axis", axisDocument("edges: [1, 2]") + "bins: {name: \"{F}\"}\n", 7, 14, "bins.name", `"F", which is no axis or region`},
		{"open brace", axisDocument("edges: [1, 2]") + "bins: {name: \"{W\"}\n", 7, 14, "bins.name", "without its }"},
		{"sellable word", axisDocument("edges: [1, 2]") + "bins: {sellable: most}\n", 7, 18, "bins.sellable", "does not say"},
		{"sellable matches none", axisDocument("edges: [1, 2]") + "bins: {sellable: [V*]}\n", 7, 19, "bins.sellable[1]", "matches no bin"},
		{"unexpected word", ruleDocument(`"q > 1 andd b"`), 5, 18, "rejects[1].when", `unexpected "andd"`},
		{"unclosed", ruleDocument("q > 1 and (b < 2"), 5, 27, "rejects[1].when", `expected ")"`},
		{"operator", ruleDocument("q >> 1"), 5, 13, "rejects[1].when", "expected a comparison"},
		{"no quantity", ruleDocument("4 > q"), 5, 11, "rejects[1].when", "expected a quantity"},
		{"no number", ruleDocument("q > big"), 5, 15, "rejects[1].when", "decimal number"},
		{"interval reversed", ruleDocument("q outside [2, 1]"), 5, 25, "rejects[1].when", "ends below"},
		{"nested too deep", ruleDocument(strings.Repeat("(", 60) + "q > 1" + strings.Repeat(")", 60)), 5, 11 + maxDepth, "rejects[1].when", "nested"},
	} {
		_, err := Parse([]byte(c.document))
		var f *analytics.Fault
		if !errors.As(err, &f) || !errors.Is(err, analytics.ErrInvalid) {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		if f.Line != c.line || f.Column != c.column || f.Key != c.key || !strings.Contains(f.Problem, c.problem) {
			t.Errorf("%s: %v; want line %d, column %d, key %q, %q", c.name, f, c.line, c.column, c.key, c.problem)
		}
	}
}

func TestParseLimits(t *testing.T) {
	t.Parallel()
	edges := make([]string, 300)
	for i := range edges {
		edges[i] = fmt.Sprint(i)
	}
	list := "[" + strings.Join(edges, ",") + "]"
	document := "specification: x\nkind: pl\naxes:\n"
	for _, a := range []string{"A", "B", "C"} {
		document += "  - {axis: " + a + "., quantity: q, edges: " + list + "}\n"
	}
	if _, err := Parse([]byte(document)); !errors.Is(err, analytics.ErrTooLarge) {
		t.Errorf("27 million bins: %v", err)
	}
	if _, err := Parse(make([]byte, yamldoc.MaxBytes+1)); !errors.Is(err, analytics.ErrTooLarge) {
		t.Errorf("large document: %v", err)
	}
	tests := make([]string, 80)
	for i := range tests {
		tests[i] = fmt.Sprintf("a > %d and b > %d", i, i)
	}
	if _, err := Parse([]byte(ruleDocument(strings.Join(tests, " or ")))); !errors.Is(err, analytics.ErrInvalid) {
		t.Errorf("80 alternatives across quantities: %v", err)
	}
	wide := strings.Repeat("(a > 1 or a > 2) and ", 12) + "a > 3"
	if _, err := Parse([]byte(ruleDocument(wide))); !errors.Is(err, analytics.ErrInvalid) {
		t.Errorf("4096 alternatives: %v", err)
	}
}

// BenchmarkParseLargest reads an axis of as many cells as are allowed.
func BenchmarkParseLargest(b *testing.B) {
	edges := make([]string, maxEdges)
	for i := range edges {
		edges[i] = fmt.Sprint(i)
	}
	document := []byte(axisDocument("edges: ["+strings.Join(edges, ", ")+"]", "guard: 0.1"))
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Parse(document); err != nil {
			b.Fatal(err)
		}
	}
}

func TestMatches(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		pattern, name string
		want          bool
	}{
		{"W2*", "W2F1", true}, {"W2*", "W3F2", false}, {"*", "", true}, {"W?F1*", "W3F1V2", true}, {"W?F1*", "W33F1", false},
		{"*V2", "W1V2V2", true}, {"*V2*W", "V2V2", false}, {"", "a", false}, {"a**b", "ab", true},
	} {
		if got := matches(c.pattern, c.name); got != c.want {
			t.Errorf("%q on %q: %v", c.pattern, c.name, got)
		}
	}
}

func FuzzParse(f *testing.F) {
	f.Add([]byte(harbourBlue))
	f.Add([]byte(guardedDocument))
	f.Add([]byte(ruleDocument("q between [1, 2] or (q >= 3e0 and b != -.5)")))
	f.Add([]byte(axisDocument("edges: [1, 2]", "guard: 1e-3", "names: [a]")))
	f.Add([]byte("a: &b [*b]"))
	f.Add([]byte(seaGlass))
	f.Add([]byte(strings.Replace(manyPolygons(2, 2, "guard: 1.645 u"), "kind: probe", "kind: probe\nvalid: {from: 2026-01-01}\nuncertainty: {cie_x: 0.001, cie_y: 1e-3}", 1)))
	f.Fuzz(func(t *testing.T, document []byte) {
		s, err := Parse(document)
		if err != nil {
			var fault *analytics.Fault
			if !errors.As(err, &fault) {
				t.Fatalf("not a located fault: %v", err)
			}
			return
		}
		cells := s.Cells()
		if len(cells) < 2 || len(cells) > maxCodes || cells[len(cells)-1].Class != Untested || len(s.Quantities()) == 0 {
			t.Fatalf("%d codes for %d quantities", len(cells), len(s.Quantities()))
		}
		for _, p := range s.plans {
			for _, v := range p.verdicts {
				if int(v&0xffff) >= len(cells) {
					t.Fatalf("verdict %x names none of %d codes", v, len(cells))
				}
			}
		}
	})
}

// Without a word about bins all of them are sellable, as with bins that do not say.
func TestBinsAreSellableUnlessSaidOtherwise(t *testing.T) {
	t.Parallel()
	const axes = "specification: s\nkind: pl\naxes: [{axis: W, quantity: peak_wavelength_nm, edges: [450, 455]}]\n"
	for _, document := range []string{axes, axes + "bins: {name: \"{W}\"}\n", axes + "bins: {sellable: all}\n"} {
		if c := mustParse(t, document).Cells()[0]; c != (Cell{Name: "W1", Class: Sellable}) {
			t.Errorf("%s: %+v", document, c)
		}
	}
}
