package binning

import (
	"math/big"
	"strings"
	"time"

	"github.com/goccy/go-yaml/ast"

	"epitally/analytics/quantity"
	"epitally/analytics/yamldoc"
)

// Place is where a number stands in the document, for an editor that changes it
// there. The zero Place is a number that does not stand in it.
type Place struct {
	Line   int // from 1
	Column int // from 1, in characters
	Length int // characters
}

func placeOf(n yamldoc.Node) Place {
	switch n.Node.(type) {
	case *ast.IntegerNode, *ast.FloatNode:
		t := n.GetToken()
		return Place{t.Position.Line, t.Position.Column, len(t.Value)}
	}
	return Place{}
}

// guardOf reads "0.05", a width in the unit of the quantity, or "1.645 u", a
// multiple of its standard uncertainty.
func guardOf(n yamldoc.Node) (width *big.Rat, inU bool, err error) {
	text, err := n.TextWithin(maxName)
	if err != nil {
		return nil, false, err
	}
	number, inU := strings.CutSuffix(text, "u")
	width, ok := parseDecimal(strings.TrimSpace(number))
	switch {
	case !ok:
		return nil, false, n.Fault(`write a width like 0.05, or a multiple of the standard uncertainty like "1.645 u"`, "%q is not a guard", text)
	case width.Sign() < 0:
		return nil, false, n.Fault("", "a guard band cannot be negative")
	}
	return width, inU, nil
}

// readUncertainty reads the standard uncertainties of single readings.
func (d *draft) readUncertainty(n yamldoc.Node) error {
	entries, err := n.Entries()
	if err != nil {
		return err
	}
	for _, e := range entries {
		if !quantity.ValidName(e.Name) {
			return e.Value.Fault("", "%q cannot name a quantity", e.Name)
		}
		v, err := decimalOf(e.Value)
		if err != nil {
			return err
		}
		if v.Sign() <= 0 {
			return e.Value.Fault("write the standard uncertainty (one sigma) of one reading, in the quantity's unit", "an uncertainty of %s", trimmed(v))
		}
		d.uncertainties[e.Name] = v
	}
	return nil
}

// uncertainty is that of a quantity in its unit; 0 where none is stated.
func (d *draft) uncertainty(quantity string) float64 {
	if v, ok := d.uncertainties[quantity]; ok {
		return nearest(v)
	}
	return 0
}

// readValid reads from when until when the specification is meant to be used.
func (d *draft) readValid(n yamldoc.Node) error {
	f, err := n.Fields("from", "until")
	if err != nil {
		return err
	}
	for key, to := range map[string]*time.Time{"from": &d.spec.ValidFrom, "until": &d.spec.ValidUntil} {
		node, ok := f[key]
		if !ok {
			continue
		}
		text, err := node.TextWithin(maxName)
		if err != nil {
			return err
		}
		if *to, err = time.Parse(time.DateOnly, text); err != nil {
			return node.Fault("write it as 2026-12-31", "%q is not a date", text)
		}
	}
	if !d.spec.ValidFrom.IsZero() && !d.spec.ValidUntil.IsZero() && d.spec.ValidUntil.Before(d.spec.ValidFrom) {
		return f["until"].Fault("", "the specification ends before it begins")
	}
	return nil
}

// readSeries reads edges that follow from a first one: by steps of equal width,
// or by ratios, each edge the last times the ratio, rounded to the places given.
func (a *draftAxis) readSeries(n yamldoc.Node, ratios bool) error {
	keys := []string{"from!", "step!", "count!"}
	if ratios {
		keys = []string{"from!", "ratio!", "count!", "places!"}
	}
	f, err := n.Fields(keys...)
	if err != nil {
		return err
	}
	from, err := decimalOf(f["from"])
	if err != nil {
		return err
	}
	count, err := f["count"].Whole(1, maxEdges-1)
	if err != nil {
		return err
	}
	if ratios {
		return a.ratioEdges(f, from, count)
	}
	step, err := decimalOf(f["step"])
	if err != nil {
		return err
	}
	if step.Sign() <= 0 {
		return f["step"].Fault("", "a step of %s", trimmed(step))
	}
	for i := range count + 1 {
		a.addEdge(new(big.Rat).Add(from, new(big.Rat).Mul(step, big.NewRat(int64(i), 1))))
	}
	a.EdgeAt[0] = placeOf(f["from"])
	return nil
}

func (a *draftAxis) ratioEdges(f map[string]yamldoc.Node, from *big.Rat, count int) error {
	ratio, err := decimalOf(f["ratio"])
	if err != nil {
		return err
	}
	places, err := f["places"].Whole(0, 12)
	switch {
	case err != nil:
		return err
	case from.Sign() <= 0:
		return f["from"].Fault("ratios need a first edge above 0", "a first edge of %s", trimmed(from))
	case ratio.Cmp(big.NewRat(1, 1)) <= 0 || ratio.Cmp(big.NewRat(100, 1)) > 0:
		return f["ratio"].Fault("common ratios are 1.08, 1.14 and 1.25", "a ratio of %s", trimmed(ratio))
	}
	exact := from
	for i := range count + 1 {
		edge, _ := new(big.Rat).SetString(exact.FloatString(places))
		if i > 0 && edge.Cmp(a.edges[i-1]) <= 0 {
			return f["places"].Fault("give more places", "edges %d and %d are both %s after rounding", i, i+1, trimmed(edge))
		}
		a.addEdge(edge)
		// Rounding to 40 places keeps the fraction short and changes no edge.
		exact, _ = new(big.Rat).SetString(new(big.Rat).Mul(exact, ratio).FloatString(40))
	}
	a.EdgeAt[0] = placeOf(f["from"])
	return nil
}

func (a *draftAxis) addEdge(v *big.Rat) {
	a.edges = append(a.edges, v)
	a.Edges = append(a.Edges, nearest(v))
	a.EdgeAt = append(a.EdgeAt, Place{})
}

// readPrices reads what one die of a bin brings: the first pattern that fits a
// bin's name gives its price.
func (d *draft) readPrices(f map[string]yamldoc.Node) error {
	if n, ok := f["currency"]; ok {
		text, err := n.TextWithin(maxCurrency)
		if err != nil {
			return err
		}
		if d.spec.Currency = text; !f["prices"].Is() {
			return n.Fault("", "a currency stands without prices")
		}
	}
	n, ok := f["prices"]
	if !ok {
		return nil
	}
	entries, err := n.Entries()
	if err != nil {
		return err
	}
	for _, e := range entries {
		price, err := e.Value.Number()
		if err != nil {
			return err
		}
		if price < 0 || price > maxPrice {
			return e.Value.Fault("write the price of one die", "a price of %g", price)
		}
		d.prices = append(d.prices, draftPattern{e.Name, price, e.Value})
	}
	return nil
}

// Limits of prices.
const (
	maxCurrency = 8
	maxPrice    = 1e9
)
