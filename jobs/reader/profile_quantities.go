package reader

import (
	"strings"

	"epitally/analytics/quantity"
)

func (p *Profile) readQuantities(n node) error {
	items, err := n.items(maxListed)
	if err != nil {
		return err
	}
	if len(items) == 0 {
		return n.fault("", "the list is empty")
	}
	for _, item := range items {
		v, err := p.readValue(item)
		if err != nil {
			return err
		}
		for _, have := range p.values {
			if have.quantity.Name == v.quantity.Name {
				return item.fault("", "the quantity %s stands twice", v.quantity.Name)
			}
		}
		p.values = append(p.values, v)
	}
	return nil
}

func (p *Profile) readValue(n node) (v valueRule, err error) {
	from := []string{"column!"}
	if p.format == formatSTDF {
		from = []string{"test", "test_name"}
	}
	f, err := n.fields(append([]string{"quantity!", "unit", "label", "resolution", "store_unit"}, from...)...)
	if err != nil {
		return v, err
	}
	v.line, _ = position(n.GetToken())
	v.test = -1
	if p.format == formatSTDF {
		err = v.readTest(n, f)
	} else {
		v.column, err = readRef(f["column"])
	}
	if err != nil {
		return v, err
	}
	if f["unit"].is() {
		if v.unit, err = f["unit"].scalar(); err != nil {
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
			return v, f["unit"].wrap(err)
		}
	case p.format == formatDelimited && v.quantity.Unit != "":
		return v, n.fault("add the unit that the file writes, for example unit: "+v.quantity.Unit, "the unit of the column is not stated")
	}
	return v, nil
}

func (v *valueRule) readTest(n node, f map[string]node) error {
	if !f["test"].is() && !f["test_name"].is() {
		return n.fault("add test: NUMBER or test_name: TEXT", "nothing says which test gives the quantity")
	}
	if f["test"].is() {
		number, err := f["test"].whole(0, 1<<32-1)
		if err != nil {
			return err
		}
		v.test = int64(number)
	}
	if f["test_name"].is() {
		name, err := f["test_name"].text()
		v.testName = name
		return err
	}
	return nil
}

// readQuantity gives the built-in quantity of that name, else declares it.
func readQuantity(f map[string]node, unit string) (quantity.Quantity, error) {
	name, err := f["quantity"].text()
	if err != nil {
		return quantity.Quantity{}, err
	}
	if q, ok := quantity.Lookup(name); ok {
		for _, key := range []string{"label", "resolution", "store_unit"} {
			if f[key].is() {
				return q, f[key].fault("remove it", "%s is built in and has its own %s", name, key)
			}
		}
		return q, nil
	}
	if !f["resolution"].is() {
		return quantity.Quantity{}, f["quantity"].fault("correct the name, or declare it with unit, label and resolution", "the quantity %q is not built in", name)
	}
	resolution, err := f["resolution"].number()
	if err != nil {
		return quantity.Quantity{}, err
	}
	label := ""
	if f["label"].is() {
		if label, err = f["label"].text(); err != nil {
			return quantity.Quantity{}, err
		}
	}
	if f["store_unit"].is() {
		if unit, err = f["store_unit"].scalar(); err != nil {
			return quantity.Quantity{}, err
		}
	}
	q, err := declareQuantity(name, label, unit, resolution)
	if err != nil {
		return q, f["quantity"].wrap(err)
	}
	return q, nil
}
