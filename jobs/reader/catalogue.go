package reader

import (
	"fmt"
	"strings"

	"epitally/analytics"
	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
	"epitally/analytics/yamldoc"
)

// Catalogue is what a fab makes: products with their layouts, recipes with their
// targets, what stations' readings are worth, and quantities that are not built in.
type Catalogue struct {
	Name       string
	Products   []CatalogueProduct
	Recipes    []CatalogueRecipe
	Quantities []quantity.Quantity
	Stations   []CatalogueStation
}

// CatalogueStation is what one station's readings are worth.
type CatalogueStation struct {
	Name        string
	Uncertainty map[string]float64 // standard uncertainty of one reading by quantity, in its unit
}

// CatalogueProduct is one product and its die grid. The layout's name is the
// product's unless it states one.
type CatalogueProduct struct {
	Name   string
	Layout wafermap.Layout
}

// CatalogueRecipe is one recipe and what it is meant to grow.
type CatalogueRecipe struct {
	Name    string
	Targets []CatalogueTarget
	Colour  *colour.PeakModel // how its dominant wavelength follows from the peak; nil = the default line model
}

// CatalogueTarget is the value a recipe aims at and the half width of the window
// about it, in the quantity's unit.
type CatalogueTarget struct {
	Quantity      string
	Value, Window float64
}

// Limits of a catalogue.
const (
	maxEntries = 10_000
	maxTargets = 100
)

// ParseCatalogue reads a catalogue (YAML, see the package comment). Every error
// is an *analytics.Fault with line, column and key.
func ParseCatalogue(document []byte) (Catalogue, error) {
	root, err := parseDocument(document)
	if err != nil {
		return Catalogue{}, err
	}
	f, err := root.Fields("catalogue!", "products", "recipes", "quantities", "stations")
	if err != nil {
		return Catalogue{}, err
	}
	var c Catalogue
	if c.Name, err = nameIn(f["catalogue"]); err != nil {
		return Catalogue{}, err
	}
	// Quantities first: recipes may name them.
	if err := c.each(f["quantities"], c.addQuantity); err != nil {
		return Catalogue{}, err
	}
	if err := c.each(f["products"], c.addProduct); err != nil {
		return Catalogue{}, err
	}
	if err := c.each(f["recipes"], c.addRecipe); err != nil {
		return Catalogue{}, err
	}
	if err := c.each(f["stations"], c.addStation); err != nil {
		return Catalogue{}, err
	}
	if len(c.Products)+len(c.Recipes)+len(c.Quantities)+len(c.Stations) == 0 {
		return Catalogue{}, root.Fault("add products, recipes, quantities or stations", "the catalogue holds nothing")
	}
	return c, nil
}

// each hands over the entries of a list that may be absent, refusing a name
// that stands twice.
func (c *Catalogue) each(list yamldoc.Node, add func(yamldoc.Node) (named yamldoc.Node, name string, err error)) error {
	if !list.Is() {
		return nil
	}
	items, err := list.Items(maxEntries)
	if err != nil {
		return err
	}
	seen := map[string]bool{}
	for _, item := range items {
		at, name, err := add(item)
		if err != nil {
			return err
		}
		if seen[name] {
			return at.Fault("remove one of them", "%q stands twice", name)
		}
		seen[name] = true
	}
	return nil
}

func (c *Catalogue) addQuantity(n yamldoc.Node) (named yamldoc.Node, name string, err error) {
	q, err := quantityIn(n)
	if err != nil {
		return n, "", err
	}
	c.Quantities = append(c.Quantities, q)
	return n, q.Name, nil
}

// quantityIn reads the declaration of a quantity: name, label, unit, resolution.
func quantityIn(n yamldoc.Node) (quantity.Quantity, error) {
	f, err := n.Fields("name!", "label", "unit", "resolution!")
	if err != nil {
		return quantity.Quantity{}, err
	}
	var name, label, unit string
	if name, err = f["name"].Text(); err != nil {
		return quantity.Quantity{}, err
	}
	if l, ok := f["label"]; ok {
		if label, err = l.Text(); err != nil {
			return quantity.Quantity{}, err
		}
	}
	if u, ok := f["unit"]; ok {
		if unit, err = u.Scalar(); err != nil {
			return quantity.Quantity{}, err
		}
	}
	resolution, err := f["resolution"].Number()
	if err != nil {
		return quantity.Quantity{}, err
	}
	q, err := declareQuantity(name, label, strings.TrimSpace(unit), resolution)
	if err != nil {
		return quantity.Quantity{}, f["name"].Fault("", "%s", withoutKind(err))
	}
	return q, nil
}

// withoutKind is an error's text without the kind it wraps, which the fault
// says otherwise.
func withoutKind(err error) string {
	text := err.Error()
	for _, kind := range []error{analytics.ErrInvalid, analytics.ErrConflict, analytics.ErrTooLarge} {
		text = strings.TrimSuffix(text, ": "+kind.Error())
	}
	return text
}

// nameIn reads the name of a product, recipe or catalogue.
func nameIn(n yamldoc.Node) (string, error) {
	text, err := n.Text()
	if err != nil {
		return "", err
	}
	if err := checkName("catalogue", text); err != nil {
		return "", n.Fault(fmt.Sprintf("write 1 to %d printable characters without / and \\", maxName), "%s cannot be a name", shown([]byte(text)))
	}
	return text, nil
}

func (c *Catalogue) addProduct(n yamldoc.Node) (named yamldoc.Node, name string, err error) {
	f, err := n.Fields("product!", "layout!")
	if err != nil {
		return n, "", err
	}
	p := CatalogueProduct{}
	if p.Name, err = nameIn(f["product"]); err != nil {
		return n, "", err
	}
	if p.Layout, err = layoutIn(f["layout"], p.Name); err != nil {
		return n, "", err
	}
	c.Products = append(c.Products, p)
	return f["product"], p.Name, nil
}

// layoutIn reads a product's layout. What it may leave out is what has one usual
// value: no edge exclusion, no mark, x to the right, y up, centre (0, 0).
func layoutIn(n yamldoc.Node, product string) (wafermap.Layout, error) {
	l := wafermap.Layout{Name: product, Mark: "none", XAxis: "right", YAxis: "up"}
	f, err := n.Fields("name", "wafer_diameter_mm!", "die_pitch_x_mm!", "die_pitch_y_mm!", "edge_exclusion_mm",
		"mark", "mark_angle_deg", "x_axis", "y_axis", "centre_x", "centre_y")
	if err != nil {
		return l, err
	}
	for _, v := range []struct {
		key string
		to  *float64
	}{{"wafer_diameter_mm", &l.WaferDiameterMM}, {"die_pitch_x_mm", &l.DiePitchXMM}, {"die_pitch_y_mm", &l.DiePitchYMM},
		{"edge_exclusion_mm", &l.EdgeExclusionMM}, {"mark_angle_deg", &l.MarkAngleDeg}, {"centre_x", &l.CentreX}, {"centre_y", &l.CentreY}} {
		if at, ok := f[v.key]; ok {
			if *v.to, err = at.Number(); err != nil {
				return l, err
			}
		}
	}
	for _, v := range []struct {
		key string
		to  *string
	}{{"name", &l.Name}, {"mark", &l.Mark}, {"x_axis", &l.XAxis}, {"y_axis", &l.YAxis}} {
		if at, ok := f[v.key]; ok {
			if *v.to, err = at.Text(); err != nil {
				return l, err
			}
		}
	}
	if _, ok := f["mark_angle_deg"]; !ok && l.Mark != "none" {
		return l, n.Fault("state its direction from the centre in degrees: 0 right, 90 up, 270 down", "the %s has no mark_angle_deg", l.Mark)
	}
	return l, layoutFault(n, f, l.Validate())
}

// layoutFault places the rule of Layout.Validate that was broken at the key it
// names.
func layoutFault(n yamldoc.Node, f map[string]yamldoc.Node, err error) error {
	if err == nil {
		return nil
	}
	text := withoutKind(err)
	_, text, _ = strings.Cut(text, `": `) // past the layout's name
	keys, problem, _ := strings.Cut(text, ": ")
	for _, key := range strings.Split(keys, ", ") {
		if at, ok := f[key]; ok {
			return at.Fault("", "%s", problem)
		}
	}
	return n.Fault("", "%s", text)
}

func (c *Catalogue) addRecipe(n yamldoc.Node) (named yamldoc.Node, name string, err error) {
	f, err := n.Fields("recipe!", "targets", "colour")
	if err != nil {
		return n, "", err
	}
	r := CatalogueRecipe{}
	if r.Name, err = nameIn(f["recipe"]); err != nil {
		return n, "", err
	}
	if t, ok := f["targets"]; ok {
		items, err := t.Items(maxTargets)
		if err != nil {
			return n, "", err
		}
		for _, item := range items {
			if err := c.addTarget(&r, item); err != nil {
				return n, "", err
			}
		}
	}
	if at, ok := f["colour"]; ok {
		if r.Colour, err = colourIn(at); err != nil {
			return n, "", err
		}
	}
	c.Recipes = append(c.Recipes, r)
	return f["recipe"], r.Name, nil
}

func (c *Catalogue) addTarget(r *CatalogueRecipe, n yamldoc.Node) error {
	f, err := n.Fields("quantity!", "value!", "window!")
	if err != nil {
		return err
	}
	t := CatalogueTarget{}
	if t.Quantity, err = f["quantity"].Text(); err != nil {
		return err
	}
	if !c.knows(t.Quantity) {
		return f["quantity"].Fault("use a built-in quantity, or declare it under quantities", "the quantity %q is not known", t.Quantity)
	}
	for _, other := range r.Targets {
		if other.Quantity == t.Quantity {
			return f["quantity"].Fault("remove one of them", "the quantity %q has two targets", t.Quantity)
		}
	}
	if t.Value, err = f["value"].Number(); err != nil {
		return err
	}
	if t.Window, err = f["window"].Number(); err != nil {
		return err
	}
	if !(t.Window > 0) {
		return f["window"].Fault("state half the width of the window about the target", "%g is not above zero", t.Window)
	}
	r.Targets = append(r.Targets, t)
	return nil
}

func (c *Catalogue) knows(name string) bool {
	if _, ok := quantity.Lookup(name); ok {
		return true
	}
	for _, q := range c.Quantities {
		if q.Name == name {
			return true
		}
	}
	return false
}
