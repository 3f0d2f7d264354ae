package binning

import (
	"fmt"
	"math"

	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/yamldoc"
)

// Limits of regions.
const (
	maxRegions  = 4
	maxCells    = 600
	maxShapes   = 50
	maxCorners  = 500
	circleSides = 360
	maxPriority = 1000
)

type draftRegion struct {
	*Region
	inner string // reject reason of the guard band
	at    yamldoc.Node
}

func (d *draft) readRegions(n yamldoc.Node) error {
	items, err := n.Items(maxRegions)
	if err != nil {
		return err
	}
	for _, item := range items {
		r, err := d.readRegion(item)
		if err != nil {
			return err
		}
		for _, other := range d.regions {
			if other.Name == r.Name {
				return item.Fault("", "region %q stands twice", r.Name)
			}
		}
		r.finish()
		d.regions = append(d.regions, r)
	}
	return nil
}

func (d *draft) readRegion(n yamldoc.Node) (r draftRegion, err error) {
	f, err := n.Fields("region!", "space", "quantities", "cells!", "outside", "guard", "guard_reason")
	if err != nil {
		return r, err
	}
	r = draftRegion{Region: &Region{Space: SpaceXY, Quantities: [2]string{"cie_x", "cie_y"}}, at: n}
	if r.Name, err = dimensionName(f["region"], "region"); err != nil {
		return r, err
	}
	if err := r.readSpace(f); err != nil {
		return r, err
	}
	if err := r.readCells(f["cells"]); err != nil {
		return r, err
	}
	if r.Outside = r.Name + " outside"; f["outside"].Is() {
		if r.Outside, err = reason(f["outside"]); err != nil {
			return r, err
		}
	}
	return r, d.readRegionGuard(&r, f)
}

func dimensionName(n yamldoc.Node, what string) (string, error) {
	name, err := n.TextWithin(maxName)
	if err == nil && !nameRule.MatchString(name) {
		return "", n.Fault("use letters, digits, -, _ and .", "%q cannot name a %s", name, what)
	}
	return name, err
}

func (r *draftRegion) readSpace(f map[string]yamldoc.Node) error {
	if n, ok := f["quantities"]; ok {
		items, err := n.Items(2)
		if err != nil {
			return err
		}
		if len(items) != 2 {
			return n.Fault("name two, such as [cie_x, cie_y]", "a region needs two quantities")
		}
		for i, item := range items {
			name, err := item.TextWithin(maxName)
			if err != nil {
				return err
			}
			if !quantity.ValidName(name) {
				return item.Fault("", "%q cannot name a quantity", name)
			}
			r.Quantities[i] = name
		}
		if r.Quantities[0] == r.Quantities[1] {
			return n.Fault("", "the two quantities are the same")
		}
	}
	measured := SpaceOwn
	switch r.Quantities {
	case [2]string{"cie_x", "cie_y"}:
		measured = SpaceXY
	case [2]string{"cie_u_prime", "cie_v_prime"}:
		measured = SpaceUV
	}
	r.Space = measured
	if n, ok := f["space"]; ok {
		word, err := n.Choice(string(SpaceXY), string(SpaceUV), string(SpaceOwn))
		if err != nil {
			return err
		}
		r.Space = Space(word)
	}
	switch {
	case r.Space == measured:
	case measured == SpaceXY && r.Space == SpaceUV:
		r.convert = true
	default:
		return f["space"].Fault("leave space out, or measure cie_x and cie_y", "cells in %s cannot be met by %s and %s", r.Space, r.Quantities[0], r.Quantities[1])
	}
	return nil
}

func (r *draftRegion) readCells(n yamldoc.Node) error {
	items, err := n.Items(maxCells)
	if err != nil {
		return err
	}
	if len(items) == 0 {
		return n.Fault("", "a region needs at least one cell")
	}
	seen := map[string]bool{}
	for _, item := range items {
		f, err := item.Fields("name!", "priority", "polygon", "holes", "circle", "quadrangle", "any_of")
		if err != nil {
			return err
		}
		c := RegionCell{}
		if c.Name, err = dimensionName(f["name"], "cell"); err != nil {
			return err
		}
		if seen[c.Name] {
			return f["name"].Fault("", "cell %q stands twice", c.Name)
		}
		seen[c.Name] = true
		if p, ok := f["priority"]; ok {
			if c.Priority, err = p.Whole(-maxPriority, maxPriority); err != nil {
				return err
			}
		}
		if c.Shapes, err = r.readShapes(item, f); err != nil {
			return err
		}
		r.Cells = append(r.Cells, c)
	}
	return nil
}

func (r *draftRegion) readShapes(n yamldoc.Node, f map[string]yamldoc.Node) ([]Shape, error) {
	if list, ok := f["any_of"]; ok {
		for _, key := range []string{"polygon", "circle", "quadrangle"} {
			if other, twice := f[key]; twice {
				return nil, other.Fault("move it into any_of", "the cell has any_of and a %s", key)
			}
		}
		items, err := list.Items(maxShapes)
		if err != nil {
			return nil, err
		}
		if len(items) == 0 {
			return nil, list.Fault("", "any_of lists no shape")
		}
		var shapes []Shape
		for _, item := range items {
			f, err := item.Fields("polygon", "holes", "circle", "quadrangle")
			if err != nil {
				return nil, err
			}
			s, err := r.readShape(item, f)
			if err != nil {
				return nil, err
			}
			shapes = append(shapes, s)
		}
		return shapes, nil
	}
	s, err := r.readShape(n, f)
	return []Shape{s}, err
}

func (r *draftRegion) readShape(n yamldoc.Node, f map[string]yamldoc.Node) (s Shape, err error) {
	kinds := 0
	for _, key := range []string{"polygon", "circle", "quadrangle"} {
		if f[key].Is() {
			kinds++
		}
	}
	if kinds != 1 {
		return s, n.Fault("give one of polygon, circle and quadrangle, or a list any_of", "%d shapes where one is expected", kinds)
	}
	if holes, ok := f["holes"]; ok && !f["polygon"].Is() {
		return s, holes.Fault("", "only a polygon has holes")
	}
	switch {
	case f["polygon"].Is():
		err = r.readPolygon(&s, f["polygon"], f["holes"])
	case f["circle"].Is():
		err = r.readCircle(&s, f["circle"])
	default:
		err = r.readQuadrangle(&s, f["quadrangle"])
	}
	return s, err
}

func (r *draftRegion) readPolygon(s *Shape, n, holes yamldoc.Node) error {
	s.Kind = "polygon"
	outline, at, err := r.corners(n)
	if err != nil {
		return err
	}
	s.Outline, s.CornerAt = outline, at
	s.rings = []ring{ringOf(outline)}
	if !holes.Is() {
		return nil
	}
	items, err := holes.Items(maxShapes)
	if err != nil {
		return err
	}
	for _, item := range items {
		hole, _, err := r.corners(item)
		if err != nil {
			return err
		}
		inner := ringOf(hole)
		for _, p := range inner {
			if !contains(s.rings[:1], p) && !onOutline(s.rings[:1], p) {
				return item.Fault("", "the hole's corner (%g, %g) lies outside its polygon", p.x, p.y)
			}
		}
		s.Holes = append(s.Holes, hole)
		s.rings = append(s.rings, inner)
	}
	return nil
}

// corners reads a list of points and makes sure that they close a figure.
func (r *draftRegion) corners(n yamldoc.Node) (list [][2]float64, at [][2]Place, err error) {
	items, err := n.Items(maxCorners)
	if err != nil {
		return nil, nil, err
	}
	if len(items) < 3 {
		return nil, nil, n.Fault("", "a polygon needs at least three corners, this one has %d", len(items))
	}
	for _, item := range items {
		p, places, err := r.pair(item)
		if err != nil {
			return nil, nil, err
		}
		list, at = append(list, p), append(at, places)
	}
	if last := len(list) - 1; last > 0 && list[0] == list[last] {
		return nil, nil, items[last].Fault("leave the last corner out: the outline closes by itself", "the first corner stands again at the end")
	}
	outline := ringOf(list)
	if i, j, crossing := outline.selfCrossing(); crossing {
		return nil, nil, n.Fault("list the corners in order around the figure", "the edges from corner %d and from corner %d cross or touch", i+1, j+1)
	}
	if math.Abs(outline.area()) < onEdge {
		return nil, nil, n.Fault("", "the corners enclose no area")
	}
	return list, at, nil
}

// pair reads a point of the region's space.
func (r *draftRegion) pair(n yamldoc.Node) (p [2]float64, at [2]Place, err error) {
	items, err := n.Items(2)
	if err != nil {
		return p, at, err
	}
	if len(items) != 2 {
		return p, at, n.Fault("", "a point needs two numbers")
	}
	for i, item := range items {
		v, err := decimalOf(item)
		if err != nil {
			return p, at, err
		}
		p[i], at[i] = nearest(v), placeOf(item)
	}
	if r.Space != SpaceOwn && (p[0] < 0 || p[0] > 1 || p[1] <= 0 || p[1] > 1) {
		return p, at, n.Fault("chromaticities lie between 0 and 1", "(%g, %g) is no chromaticity", p[0], p[1])
	}
	return p, at, nil
}

func ringOf(corners [][2]float64) ring {
	out := make(ring, len(corners))
	for i, c := range corners {
		out[i] = point{c[0], c[1]}
	}
	return out
}

func (r *draftRegion) readCircle(s *Shape, n yamldoc.Node) error {
	f, err := n.Fields("centre!", "steps!")
	if err != nil {
		return err
	}
	if r.Space == SpaceOwn {
		return n.Fault("draw a polygon", "a circle of steps needs a chromaticity, not %s and %s", r.Quantities[0], r.Quantities[1])
	}
	s.Kind = "circle"
	var at [2]Place
	if s.Centre, at, err = r.pair(f["centre"]); err != nil {
		return err
	}
	s.CornerAt = [][2]Place{at}
	if s.Steps, err = f["steps"].Number(); err != nil {
		return err
	}
	if !(s.Steps > 0 && s.Steps <= 100) {
		return f["steps"].Fault("common circles have 3, 5 or 7 steps", "%g steps", s.Steps)
	}
	if s.centre = (colour.UV{U: s.Centre[0], V: s.Centre[1]}); r.Space == SpaceXY {
		s.centre = colour.XY{X: s.Centre[0], Y: s.Centre[1]}.UV()
	}
	s.trace(r.Space)
	return nil
}

// trace sets the outline of a circle.
func (s *Shape) trace(space Space) {
	for i := range circleSides {
		sin, cos := math.Sincos(2 * math.Pi * float64(i) / circleSides)
		q := colour.UV{U: s.centre.U + colour.StepRadius*s.Steps*cos, V: s.centre.V + colour.StepRadius*s.Steps*sin}
		p := [2]float64{q.U, q.V}
		if space == SpaceXY {
			xy := q.XY()
			p = [2]float64{xy.X, xy.Y}
		}
		s.Outline = append(s.Outline, p)
	}
	s.rings = []ring{ringOf(s.Outline)}
}

func (r *draftRegion) readQuadrangle(s *Shape, n yamldoc.Node) error {
	f, err := n.Fields("cct!", "edition", "steps")
	if err != nil {
		return err
	}
	if r.Space == SpaceOwn {
		return n.Fault("draw a polygon", "a quadrangle of a colour temperature needs a chromaticity")
	}
	s.Kind = "quadrangle"
	if s.NominalK, err = f["cct"].Whole(1000, 20000); err != nil {
		return err
	}
	edition, steps := 2015, 7
	if f["edition"].Is() {
		if edition, err = f["edition"].Whole(2000, 2100); err != nil {
			return err
		}
	}
	if f["steps"].Is() {
		if steps, err = f["steps"].Whole(1, 20); err != nil {
			return err
		}
	}
	s.Steps = float64(steps)
	corners, err := colour.QuadrangleSteps(s.NominalK, edition, steps)
	if err != nil {
		return n.Wrap(err)
	}
	for _, c := range corners {
		p := [2]float64{c.X, c.Y}
		if r.Space == SpaceUV {
			q := c.UV()
			p = [2]float64{q.U, q.V}
		}
		s.Outline = append(s.Outline, p)
		s.Centre[0] += p[0] / 4
		s.Centre[1] += p[1] / 4
	}
	s.rings = []ring{ringOf(s.Outline)}
	return nil
}

func (d *draft) readRegionGuard(r *draftRegion, f map[string]yamldoc.Node) (err error) {
	r.inner = "guard"
	n, ok := f["guard"]
	if !ok {
		if at, ok := f["guard_reason"]; ok {
			return at.Fault("", "guard_reason stands without a guard")
		}
		return nil
	}
	if f["guard_reason"].Is() {
		if r.inner, err = reason(f["guard_reason"]); err != nil {
			return err
		}
	}
	width, inU, err := guardOf(n)
	if err != nil {
		return err
	}
	r.Guard, r.GuardInU = nearest(width), inU
	if !inU {
		return nil
	}
	for i, q := range r.Quantities {
		if r.u[i] = d.uncertainty(q); r.u[i] == 0 {
			return n.Fault(fmt.Sprintf("add uncertainty: {%s: …}", q), "the guard is in uncertainties, but that of %s is not stated", q)
		}
	}
	return nil
}
