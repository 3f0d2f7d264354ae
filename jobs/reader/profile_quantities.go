package reader

import (
	"strings"

	"epitally/analytics/quantity"
	"epitally/analytics/yamldoc"
)

func (p *Profile) readQuantities(n yamldoc.Node) error {
	items, err := n.Items(maxListed)
	if err != nil {
		return err
	}
	if len(items) == 0 {
		return n.Fault("", "the list is empty")
	}
	for _, item := range items {
		v, err := p.readValue(item)
		if err != nil {
			return err
		}
		for _, have := range p.values {
			if have.quantity.Name == v.quantity.Name {
				return item.Fault("", "the quantity %s stands twice", v.quantity.Name)
			}
		}
		p.values = append(p.values, v)
	}
	return nil
}

func (p *Profile) readValue(n yamldoc.Node) (v valueRule, err error) {
	from := []string{"column!"}
	if p.format == formatSTDF {
		from = []string{"test", "test_name"}
	}
	f, err := n.Fields(append([]string{"quantity!", "unit", "label", "resolution", "store_unit"}, from...)...)
	if err != nil {
		return v, err
	}
	v.line = n.Line()
	v.test = -1
	if p.format == formatSTDF {
		err = v.readTest(n, f)
	} else {
		v.column, err = readRef(f["column"])
	}
	if err != nil {
		return v, err
	}
	if f["unit"].Is() {
		if v.unit, err = f["unit"].Scalar(); err != nil {
			return v, err
		}
		v.unit, v.unitSet = strings.TrimSpace(v.unit), true
	}
	if v.quantity, err = readQuantity(f, v.unit); err != nil {
		return v, err
	}
	v.convert = quantity.Conversion{Multiple: 1}
	switch {
	case v.unitSet:
		if v.convert, err = quantity.Convert(v.unit, v.quantity.Unit); err != nil {
			return v, f["unit"].Wrap(err)
		}
	case p.format == formatDelimited && v.quantity.Unit != "":
		return v, n.Fault("add the unit that the file writes, for example unit: "+v.quantity.Unit, "the unit of the column is not stated")
	}
	return v, nil
}

func (v *valueRule) readTest(n yamldoc.Node, f map[string]yamldoc.Node) error {
	if !f["test"].Is() && !f["test_name"].Is() {
		return n.Fault("add test: NUMBER or test_name: TEXT", "nothing says which test gives the quantity")
	}
	if f["test"].Is() {
		number, err := f["test"].Whole(0, 1<<32-1)
		if err != nil {
			return err
		}
		v.test = int64(number)
	}
	if f["test_name"].Is() {
		name, err := f["test_name"].Text()
		v.testName = name
		return err
	}
	return nil
}

// readQuantity gives the built-in quantity of that name, else declares it.
func readQuantity(f map[string]yamldoc.Node, unit string) (quantity.Quantity, error) {
	name, err := f["quantity"].Text()
	if err != nil {
		return quantity.Quantity{}, err
	}
	if q, ok := quantity.Lookup(name); ok {
		for _, key := range []string{"label", "resolution", "store_unit"} {
			if f[key].Is() {
				return q, f[key].Fault("remove it", "%s is built in and has its own %s", name, key)
			}
		}
		return q, nil
	}
	if !f["resolution"].Is() {
		return quantity.Quantity{}, f["quantity"].Fault("correct the name, or declare it with unit, label and resolution", "the quantity %q is not built in", name)
	}
	resolution, err := f["resolution"].Number()
	if err != nil {
		return quantity.Quantity{}, err
	}
	label := ""
	if f["label"].Is() {
		if label, err = f["label"].Text(); err != nil {
			return quantity.Quantity{}, err
		}
	}
	if f["store_unit"].Is() {
		if unit, err = f["store_unit"].Scalar(); err != nil {
			return quantity.Quantity{}, err
		}
	}
	q, err := declareQuantity(name, label, unit, resolution)
	if err != nil {
		return q, f["quantity"].Wrap(err)
	}
	return q, nil
}
