package binning

import (
	"fmt"
	"math/big"
	"regexp"
	"strings"

	"epitally/analytics"
	"epitally/analytics/quantity"
	"epitally/analytics/yamldoc"

	"github.com/goccy/go-yaml/ast"
)

// Limits of a specification.
const (
	maxRules        = 1000
	maxAxes         = 16
	maxEdges        = 1001
	maxCodes        = 65535 // bins, reject reasons and untested together
	maxName         = 63
	maxText         = 200
	maxWhen         = 4000
	maxAlternatives = 4096 // terms of all conditions together
)

var nameRule = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9_.-]{0,62}$`)

// Parse reads a specification document (YAML, see the package comment). Every
// error is an *analytics.Fault with line, column and key.
func Parse(document []byte) (*Spec, error) {
	root, err := yamldoc.Parse(document, yamldoc.Form{Remedy: "write one specification per document", AtKeys: true})
	if err != nil {
		return nil, err
	}
	d, err := parseSpec(root)
	if err != nil {
		return nil, err
	}
	return d.build()
}

// draft is a document that has been read but not yet worked into codes.
type draft struct {
	spec    *Spec
	rules   []draftRule
	terms   int // of all rules
	axes    []draftAxis
	regions []draftRegion

	uncertainties map[string]*big.Rat

	root     yamldoc.Node
	pattern  string
	patternN yamldoc.Node
	all      bool // every bin is sellable
	sellable []draftPattern
	prices   []draftPattern
}

type draftRule struct {
	reason string
	terms  []term
	when   yamldoc.Node
}

type draftAxis struct {
	Axis
	edges               []*big.Rat
	guard               *big.Rat
	below, above, inner string // reject reasons; inner is that of the guard band
	at                  yamldoc.Node
}

type draftPattern struct {
	text  string
	price float64 // of one die, where the pattern prices bins
	at    yamldoc.Node
}

func parseSpec(root yamldoc.Node) (*draft, error) {
	f, err := root.Fields("specification!", "title", "kind!", "products", "valid", "uncertainty", "rejects", "regions", "axes", "bins")
	if err != nil {
		return nil, err
	}
	d := &draft{spec: &Spec{}, root: root, uncertainties: map[string]*big.Rat{}}
	if d.spec.Name, err = f["specification"].TextWithin(maxName); err != nil {
		return nil, err
	}
	if !nameRule.MatchString(d.spec.Name) {
		return nil, f["specification"].Fault("use letters, digits, -, _ and .", "%q cannot name a specification", d.spec.Name)
	}
	if d.spec.Kind, err = f["kind"].TextWithin(maxName); err != nil {
		return nil, err
	}
	if !quantity.ValidName(d.spec.Kind) {
		return nil, f["kind"].Fault("use the measurement's kind, such as probe or pl", "%q cannot name a kind", d.spec.Kind)
	}
	if n, ok := f["title"]; ok {
		if d.spec.Title, err = n.TextWithin(maxText); err != nil {
			return nil, err
		}
	}
	for _, part := range []struct {
		key  string
		read func(*draft, yamldoc.Node) error
	}{
		{"products", (*draft).readProducts}, {"valid", (*draft).readValid}, {"uncertainty", (*draft).readUncertainty},
		{"rejects", (*draft).readRejects}, {"regions", (*draft).readRegions}, {"axes", (*draft).readAxes}, {"bins", (*draft).readBins},
	} {
		if n, ok := f[part.key]; ok {
			if err := part.read(d, n); err != nil {
				return nil, err
			}
		}
	}
	if !f["bins"].Is() {
		d.all = true
	}
	if len(d.rules) == 0 && len(d.axes) == 0 && len(d.regions) == 0 {
		return nil, root.Fault("add rejects, regions or axes", "the specification tests nothing")
	}
	return d, nil
}

func (d *draft) readProducts(n yamldoc.Node) error {
	items, err := n.Items(maxRules)
	if err != nil {
		return err
	}
	seen := map[string]bool{}
	for _, item := range items {
		name, err := item.TextWithin(maxText)
		if err != nil {
			return err
		}
		if seen[name] {
			return item.Fault("", "product %q stands twice", name)
		}
		seen[name] = true
		d.spec.Products = append(d.spec.Products, name)
	}
	return nil
}

func (d *draft) readRejects(n yamldoc.Node) error {
	items, err := n.Items(maxRules)
	if err != nil {
		return err
	}
	for _, item := range items {
		f, err := item.Fields("reason!", "when!")
		if err != nil {
			return err
		}
		r := draftRule{when: f["when"]}
		if r.reason, err = reason(f["reason"]); err != nil {
			return err
		}
		text, err := f["when"].TextWithin(maxWhen)
		if err != nil {
			return err
		}
		terms, wrong := parseCondition(text)
		if wrong != nil {
			return conditionFault(f["when"], text, wrong)
		}
		r.terms = terms
		if d.terms += len(terms); d.terms > maxAlternatives {
			return tooLarge(item, fmt.Sprintf("the rules have more than %d alternatives", maxAlternatives))
		}
		d.rules = append(d.rules, r)
		d.spec.rules = append(d.spec.rules, Rule{Reason: r.reason, When: text})
	}
	return nil
}

func reason(n yamldoc.Node) (string, error) {
	s, err := n.TextWithin(maxName)
	if err == nil && (s == UntestedName || strings.ContainsAny(s, "\n\t")) {
		return "", n.Fault("", "%q cannot be a reject reason", s)
	}
	return s, err
}

// conditionFault moves the fault's column to the place in the text where that
// can be told: text on one line, right after the value's first character.
func conditionFault(n yamldoc.Node, text string, wrong *conditionError) error {
	f := n.Fault(wrong.remedy, "%s", wrong.problem)
	t := n.GetToken()
	origin := strings.TrimLeft(t.Origin, " ")
	if lead := strings.Index(origin, text); lead >= 0 && !strings.Contains(text, "\n") && f.Column > 0 {
		if _, plain := n.Node.(*ast.StringNode); plain {
			f.Column += lead + wrong.offset
		}
	}
	return f
}

func (d *draft) readAxes(n yamldoc.Node) error {
	items, err := n.Items(maxAxes)
	if err != nil {
		return err
	}
	seen := map[string]bool{}
	for _, item := range items {
		a, err := d.readAxis(item)
		if err != nil {
			return err
		}
		if seen[a.Name] {
			return item.Fault("", "axis %q stands twice", a.Name)
		}
		for _, r := range d.regions {
			if r.Name == a.Name {
				return item.Fault("", "%q names a region and an axis", a.Name)
			}
		}
		seen[a.Name] = true
		d.axes = append(d.axes, a)
	}
	return nil
}

func (d *draft) readAxis(n yamldoc.Node) (a draftAxis, err error) {
	f, err := n.Fields("axis!", "quantity!", "edges", "steps", "ratios", "names", "below", "above", "guard", "guard_reason")
	if err != nil {
		return a, err
	}
	a.at = n
	if a.Name, err = dimensionName(f["axis"], "axis"); err != nil {
		return a, err
	}
	if a.Quantity, err = f["quantity"].TextWithin(maxName); err != nil {
		return a, err
	}
	if !quantity.ValidName(a.Quantity) {
		return a, f["quantity"].Fault("use lower-case letters, digits and underscores, a letter first", "%q cannot name a quantity", a.Quantity)
	}
	if err := a.readBounds(n, f); err != nil {
		return a, err
	}
	if err := a.readGuard(f, d.uncertainties[a.Quantity]); err != nil {
		return a, err
	}
	a.below, a.above, a.inner = a.Name+" below", a.Name+" above", "guard"
	for key, to := range map[string]*string{"below": &a.below, "above": &a.above, "guard_reason": &a.inner} {
		if n, ok := f[key]; ok {
			if *to, err = reason(n); err != nil {
				return a, err
			}
		}
	}
	return a, a.readNames(f)
}

// readBounds reads the edges in whichever form they are given.
func (a *draftAxis) readBounds(n yamldoc.Node, f map[string]yamldoc.Node) error {
	given := 0
	for _, key := range []string{"edges", "steps", "ratios"} {
		if f[key].Is() {
			given++
		}
	}
	switch {
	case given != 1:
		return n.Fault("give one of edges, steps and ratios", "%d of edges, steps and ratios", given)
	case f["steps"].Is():
		return a.readSeries(f["steps"], false)
	case f["ratios"].Is():
		return a.readSeries(f["ratios"], true)
	}
	return a.readEdges(f["edges"])
}

func (a *draftAxis) readEdges(n yamldoc.Node) error {
	items, err := n.Items(maxEdges)
	if err != nil {
		return err
	}
	if len(items) < 2 {
		return n.Fault("", "an axis needs at least two edges")
	}
	for i, item := range items {
		v, err := decimalOf(item)
		if err != nil {
			return err
		}
		if i > 0 && a.edges[i-1].Cmp(v) >= 0 {
			return item.Fault("list the edges in ascending order", "edge %s does not follow %s", trimmed(v), trimmed(a.edges[i-1]))
		}
		a.addEdge(v)
		a.EdgeAt[i] = placeOf(item)
	}
	return nil
}

func decimalOf(n yamldoc.Node) (*big.Rat, error) {
	text, err := n.TextWithin(maxName)
	if err != nil {
		return nil, n.Fault("", "expected a decimal number")
	}
	v, ok := parseDecimal(text)
	if !ok {
		return nil, n.Fault("", "%q is not a decimal number", text)
	}
	return v, nil
}

// readGuard reads the guard; u is the quantity's standard uncertainty, nil where
// none is stated.
func (a *draftAxis) readGuard(f map[string]yamldoc.Node, u *big.Rat) error {
	a.guard = new(big.Rat)
	n, ok := f["guard"]
	if !ok {
		if at, ok := f["guard_reason"]; ok {
			return at.Fault("", "guard_reason stands without a guard")
		}
		return nil
	}
	width, inU, err := guardOf(n)
	if err != nil {
		return err
	}
	if a.guard = width; inU {
		if u == nil {
			return n.Fault(fmt.Sprintf("add uncertainty: {%s: …}", a.Quantity), "the guard is in uncertainties, but that of %s is not stated", a.Quantity)
		}
		a.guard = new(big.Rat).Mul(width, u)
	}
	twice := new(big.Rat).Add(a.guard, a.guard)
	for i := 1; i < len(a.edges); i++ {
		if width := new(big.Rat).Sub(a.edges[i], a.edges[i-1]); twice.Cmp(width) >= 0 {
			return n.Fault("", "a guard of %s on each side leaves nothing of the cell from %s to %s",
				trimmed(a.guard), trimmed(a.edges[i-1]), trimmed(a.edges[i]))
		}
	}
	a.Guard = nearest(a.guard)
	return nil
}

func (a *draftAxis) readNames(f map[string]yamldoc.Node) error {
	n, ok := f["names"]
	if !ok {
		for i := 1; i < len(a.edges); i++ {
			a.Names = append(a.Names, fmt.Sprintf("%s%d", a.Name, i))
		}
		return nil
	}
	items, err := n.Items(maxEdges)
	if err != nil {
		return err
	}
	if len(items) != len(a.edges)-1 {
		return n.Fault("give one name per cell, one fewer than edges", "%d names for %d cells", len(items), len(a.edges)-1)
	}
	seen := map[string]bool{}
	for _, item := range items {
		name, err := item.TextWithin(maxName)
		if err != nil {
			return err
		}
		if !nameRule.MatchString(name) {
			return item.Fault("use letters, digits, -, _ and .", "%q cannot name a cell", name)
		}
		if seen[name] {
			return item.Fault("", "name %q stands twice", name)
		}
		seen[name] = true
		a.Names = append(a.Names, name)
	}
	return nil
}

func (d *draft) readBins(n yamldoc.Node) error {
	f, err := n.Fields("name", "sellable", "prices", "currency")
	if err != nil {
		return err
	}
	if err := d.readPrices(f); err != nil {
		return err
	}
	if n, ok := f["name"]; ok {
		d.patternN = n
		if d.pattern, err = n.TextWithin(maxText); err != nil {
			return err
		}
	}
	s, ok := f["sellable"]
	if !ok {
		d.all = true
		return nil
	}
	if word, err := s.TextWithin(maxName); err == nil {
		if d.all = word == "all"; !d.all {
			return s.Fault(`write "all" or a list of patterns like "W2*"`, "%q does not say which bins are sellable", word)
		}
		return nil
	}
	items, err := s.Items(maxRules)
	if err != nil {
		return err
	}
	for _, item := range items {
		text, err := item.TextWithin(maxText)
		if err != nil {
			return err
		}
		d.sellable = append(d.sellable, draftPattern{text: text, at: item})
	}
	return nil
}

func nearest(v *big.Rat) float64 {
	f, _ := v.Float64()
	return f
}

// trimmed writes a decimal without trailing zeros.
func trimmed(v *big.Rat) string {
	s := v.FloatString(30)
	return strings.TrimSuffix(strings.TrimRight(s, "0"), ".")
}

// tooLarge is the fault of a specification with more codes than 16 bits hold.
func tooLarge(n yamldoc.Node, problem string) error {
	f := n.Fault("split the specification, or use fewer cells or rules", "%s", problem)
	f.Kind = analytics.ErrTooLarge
	return f
}
