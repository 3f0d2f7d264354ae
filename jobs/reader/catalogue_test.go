package reader

import (
	"errors"
	"strings"
	"testing"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

const smallCatalogue = `# what this fab makes
catalogue: fab
products:
  - product: tern-10
    layout:
      wafer_diameter_mm: 100
      die_pitch_x_mm: 0.379
      die_pitch_y_mm: 0.4
      edge_exclusion_mm: 2
      mark: flat
      mark_angle_deg: 270
      x_axis: left
      y_axis: down
      centre_x: 0.5
      centre_y: -3
  - product: plain
    layout: {wafer_diameter_mm: 50, die_pitch_x_mm: 1, die_pitch_y_mm: 1}
recipes:
  - recipe: blue
    targets:
      - {quantity: dominant_wavelength_nm, value: 455, window: 2.5}
      - {quantity: leakage_na, value: 0.5, window: 0.25}
  - recipe: without
quantities:
  - {name: leakage_na, label: Leakage, unit: nA, resolution: 0.01}
`

func TestParseCatalogue(t *testing.T) {
	t.Parallel()
	c, err := ParseCatalogue([]byte(smallCatalogue))
	if err != nil {
		t.Fatal(err)
	}
	want := wafermap.Layout{Name: "tern-10", WaferDiameterMM: 100, DiePitchXMM: 0.379, DiePitchYMM: 0.4, EdgeExclusionMM: 2,
		Mark: "flat", MarkAngleDeg: 270, XAxis: "left", YAxis: "down", CentreX: 0.5, CentreY: -3}
	if len(c.Products) != 2 || c.Products[0].Name != "tern-10" || c.Products[0].Layout != want {
		t.Errorf("products %+v\nwant %+v", c.Products, want)
	}
	usual := wafermap.Layout{Name: "plain", WaferDiameterMM: 50, DiePitchXMM: 1, DiePitchYMM: 1, Mark: "none", XAxis: "right", YAxis: "up"}
	if c.Products[1].Layout != usual {
		t.Errorf("layout of which only sizes are stated: %+v", c.Products[1].Layout)
	}
	if len(c.Recipes) != 2 || len(c.Recipes[0].Targets) != 2 || c.Recipes[0].Targets[1] != (CatalogueTarget{"leakage_na", 0.5, 0.25}) {
		t.Errorf("recipes %+v", c.Recipes)
	}
	if len(c.Quantities) != 1 || c.Quantities[0].Unit != "nA" || c.Quantities[0].Resolution != 0.01 || !c.Quantities[0].Declared {
		t.Errorf("quantities %+v", c.Quantities)
	}
}

func TestCatalogueFaults(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ name, from, to, want string }{
		{"unknown key", "centre_x: 0.5", "center_x: 0.5", "line 14, column 17: products[1].layout.center_x: unknown key \"center_x\"; use name, wafer_diameter_mm, "},
		{"wrong type", "wafer_diameter_mm: 100", `wafer_diameter_mm: "100"`, "line 6, column 26: products[1].layout.wafer_diameter_mm: expected a number"},
		{"not finite", "centre_y: -3", "centre_y: .inf", "line 15, column 17: products[1].layout.centre_y: expected a number"},
		{"missing key", "      die_pitch_y_mm: 0.4\n", "", `products[1].layout: the key "die_pitch_y_mm" is missing`},
		{"rule of the layout", "mark: flat", "mark: dent", `line 10, column 13: products[1].layout.mark: "dent" is not flat, notch or none`},
		{"centre", "centre_x: 0.5", "centre_x: 40000.5", "line 14, column 17: products[1].layout.centre_x: (40000.5, -3) is not among die coordinates"},
		{"mark without angle", "      mark_angle_deg: 270\n", "", "products[1].layout: the flat has no mark_angle_deg; state its direction"},
		{"product twice", "product: plain", "product: tern-10", `line 16, column 14: products[2].product: "tern-10" stands twice; remove one of them`},
		{"recipe twice", "recipe: without", "recipe: blue", `recipes[2].recipe: "blue" stands twice`},
		{"unknown quantity", "quantity: leakage_na", "quantity: leakage_pa", `line 22, column 20: recipes[1].targets[2].quantity: the quantity "leakage_pa" is not known; use a built-in`},
		{"two targets", "quantity: leakage_na", "quantity: dominant_wavelength_nm", `recipes[1].targets[2].quantity: the quantity "dominant_wavelength_nm" has two targets`},
		{"window", "window: 0.25", "window: 0", "line 22, column 52: recipes[1].targets[2].window: 0 is not above zero; state half the width"},
		{"resolution", "resolution: 0.01", "resolution: 0", `quantities[1].name: quantity "leakage_na": resolution 0 is not a number above zero`},
		{"quantity's name", "name: leakage_na", "name: Leakage (nA)", `line 25, column 12: quantities[1].name: quantity name "Leakage (nA)": use 1 to 63 lower-case`},
		{"a word for a list", "quantities:\n  -", "quantities: none\n#", "quantities: expected a list"},
		{"name", "catalogue: fab", "catalogue: a/b", `line 2, column 12: catalogue: "a/b" cannot be a name`},
		{"not YAML", "products:\n", "products: [\n", "not YAML"},
	} {
		text := strings.Replace(smallCatalogue, c.from, c.to, 1)
		if text == smallCatalogue {
			t.Fatalf("%s: nothing to replace", c.name)
		}
		_, err := ParseCatalogue([]byte(text))
		var f *analytics.Fault
		if !errors.As(err, &f) || !strings.Contains(err.Error(), c.want) || f.Line == 0 {
			t.Errorf("%s: %v\nwant %s", c.name, err, c.want)
		}
	}
	for _, text := range []string{"", "catalogue: x\n", "- catalogue: x\n", "catalogue: x\n---\ncatalogue: y\n", "\x00", "catalogue: {a: b}"} {
		if _, err := ParseCatalogue([]byte(text)); err == nil {
			t.Errorf("%q is read", text)
		}
	}
}

func FuzzParseCatalogue(f *testing.F) {
	f.Add(smallCatalogue)
	f.Add("catalogue: &a [*a]\n")
	f.Add("catalogue: x\nproducts: [{product: p, layout: {wafer_diameter_mm: 1e400}}]\n")
	f.Fuzz(func(t *testing.T, text string) {
		c, err := ParseCatalogue([]byte(text))
		requireFault(t, err)
		if err != nil {
			return
		}
		for _, p := range c.Products {
			if err := p.Layout.Validate(); err != nil {
				t.Errorf("%v", err)
			}
		}
	})
}
