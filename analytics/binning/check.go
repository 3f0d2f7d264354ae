package binning

import (
	"fmt"
	"math"
	"strings"

	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// Finding is something about a specification that whoever uses it should know. A
// document with findings is still valid.
type Finding struct {
	Kind  FindingKind `json:"kind"`
	Says  string      `json:"says"`            // one sentence in plain words, with its numbers
	Cells []string    `json:"cells,omitempty"` // the cells or bins it is about
	Area  float64     `json:"area,omitempty"`  // in the region's space
	Dies  int         `json:"dies,omitempty"`  // that it hits, where dies were looked at
	Line  int         `json:"line,omitempty"`  // of the document; 0 = the whole

	region int // of an overlap or a gap: the region, and for an overlap its two cells
	pair   [2]int
}

// FindingKind is the word for a kind of finding.
type FindingKind string

// The kinds of findings.
const (
	Overlap      FindingKind = "overlap"       // two cells share an area
	Gap          FindingKind = "gap"           // dies between cells fall in none
	NearCorner   FindingKind = "near corner"   // corners that are almost, but not quite, the same
	Unreachable  FindingKind = "unreachable"   // a bin that no die can ever be in
	TooFine      FindingKind = "too fine"      // a cell narrower than what is measured
	OutsideLocus FindingKind = "outside locus" // a corner that no light has
	Empty        FindingKind = "empty"         // a bin that no die of the wafers looked at fell in
)

// Check looks for what is likely to be a mistake in a specification.
func (s *Spec) Check() []Finding {
	var found []Finding
	for i, r := range s.regions {
		found = append(found, r.overlaps(i)...)
		found = append(found, r.gaps(i)...)
		found = append(found, r.nearCorners()...)
		found = append(found, r.hidden()...)
		found = append(found, r.beyondLocus()...)
	}
	for i := range s.axes {
		found = append(found, s.checkAxis(i)...)
	}
	return found
}

// CheckEmpty finds the bins that none of the counted dies fell in; counts is a
// sum of what Bin gives, over wafers of that number.
func (s *Spec) CheckEmpty(counts []int, wafers int) []Finding {
	var empty []string
	for i := range s.bins() {
		if counts[i] == 0 {
			empty = append(empty, s.cells[i].Name)
		}
	}
	if len(empty) == 0 || wafers == 0 {
		return nil
	}
	return []Finding{{Kind: Empty, Cells: empty,
		Says: fmt.Sprintf("no die of the last %d wafers fell in %d of %d bins: %s", wafers, len(empty), s.bins(), shortList(empty, 12))}}
}

func shortList(names []string, limit int) string {
	if len(names) <= limit {
		return strings.Join(names, ", ")
	}
	return strings.Join(names[:limit], ", ") + fmt.Sprintf(" and %d more", len(names)-limit)
}

// overlaps finds cells that share an area. Cells that touch share none; what
// rounding leaves of a common edge is under a millionth of the smaller cell.
func (r *Region) overlaps(region int) (found []Finding) {
	for i := range r.Cells {
		for j := i + 1; j < len(r.Cells); j++ {
			a, b := &r.Cells[i], &r.Cells[j]
			area := cellOverlap(a, b)
			smaller := min(a.area(), b.area())
			if area <= 1e-6*smaller {
				continue
			}
			first, second := a, b
			if b.Priority > a.Priority {
				first, second = b, a
			}
			found = append(found, Finding{Kind: Overlap, Cells: []string{first.Name, second.Name}, Area: area, region: region, pair: [2]int{i, j},
				Says: fmt.Sprintf("cells %s and %s of %s overlap over an area of %.3g, %.2g %% of the smaller; %s has the dies there", first.Name, second.Name, r.Name, area, 100*area/smaller, first.Name)})
		}
	}
	return found
}

func (c *RegionCell) area() (sum float64) {
	for i := range c.Shapes {
		for k, ring := range c.Shapes[i].rings {
			if a := math.Abs(ring.area()); k == 0 {
				sum += a
			} else {
				sum -= a
			}
		}
	}
	return sum
}

func cellOverlap(a, b *RegionCell) (sum float64) {
	if !a.box.overlaps(b.box) {
		return 0
	}
	for i := range a.Shapes {
		for j := range b.Shapes {
			sum += overlapArea(a.Shapes[i].rough, b.Shapes[j].rough)
		}
	}
	return sum
}

// nearCornerLimit is how close corners of neighbours must be to count as meant to
// be the same: five units of the fourth decimal, in which chromaticities are
// commonly printed.
const nearCornerLimit = 0.0005

func (r *Region) nearCorners() (found []Finding) {
	if r.Space == SpaceOwn {
		return nil
	}
	for i := range r.Cells {
		for j := i + 1; j < len(r.Cells); j++ {
			a, b := &r.Cells[i], &r.Cells[j]
			if !a.box.grown(nearCornerLimit, nearCornerLimit).overlaps(b.box) {
				continue
			}
			if p, q, far := closestCorners(a, b); far > 0 {
				found = append(found, Finding{Kind: NearCorner, Cells: []string{a.Name, b.Name},
					Says: fmt.Sprintf("corner (%g, %g) of %s and corner (%g, %g) of %s are %.1g apart: dies between them may fall in both cells or in neither", p.x, p.y, a.Name, q.x, q.y, b.Name, far)})
			}
		}
	}
	return found
}

// closestCorners finds two corners of straight-sided cells that are almost the
// same; far is 0 when there are none.
func closestCorners(a, b *RegionCell) (p, q point, far float64) {
	for i := range a.Shapes {
		for j := range b.Shapes {
			if a.Shapes[i].Kind == "circle" || b.Shapes[j].Kind == "circle" {
				continue
			}
			for _, c := range a.Shapes[i].rings[0] {
				for _, d := range b.Shapes[j].rings[0] {
					if away := math.Hypot(c.x-d.x, c.y-d.y); away > 1e-9 && away < nearCornerLimit && (far == 0 || away < far) {
						p, q, far = c, d, away
					}
				}
			}
		}
	}
	return p, q, far
}

// hidden finds cells that others cover altogether.
func (r *Region) hidden() (found []Finding) {
	seen := make([]bool, len(r.Cells))
	for _, code := range r.raster.codes {
		if code != 0 && code < guardSquare {
			seen[code-1] = true
		}
	}
	for i := range r.Cells {
		if !seen[i] && !r.reachable(i) {
			c := r.Cells[i]
			found = append(found, Finding{Kind: Unreachable, Cells: []string{c.Name},
				Says: fmt.Sprintf("no die can be in cell %s of %s: cells before it, or the guard, cover it", c.Name, r.Name)})
		}
	}
	return found
}

// reachable looks for a point of the cell that is the cell's own, over a grid.
func (r *Region) reachable(cell int) bool {
	b := r.Cells[cell].box
	const side = 60
	for i := range side {
		for j := range side {
			p := point{b.low.x + (float64(i)+0.5)/side*(b.high.x-b.low.x), b.low.y + (float64(j)+0.5)/side*(b.high.y-b.low.y)}
			if r.raster.at(r, p) == cell {
				return true
			}
		}
	}
	return false
}

func (r *Region) beyondLocus() (found []Finding) {
	if r.Space == SpaceOwn {
		return nil
	}
	locus := []ring{locusRing(r.Space)}
	for i := range r.Cells {
		outside := 0
		var at point
		for j := range r.Cells[i].Shapes {
			for _, p := range r.Cells[i].Shapes[j].rings[0] {
				if !contains(locus, p) && !onOutline(locus, p) {
					at, outside = p, outside+1
				}
			}
		}
		if outside > 0 {
			found = append(found, Finding{Kind: OutsideLocus, Cells: []string{r.Cells[i].Name},
				Says: fmt.Sprintf("cell %s of %s reaches outside the spectral locus, as at (%.4g, %.4g): no light has those chromaticities", r.Cells[i].Name, r.Name, at.x, at.y)})
		}
	}
	return found
}

// locusRing is the spectral locus closed by the purple line.
func locusRing(space Space) (r ring) {
	for nm := 380; nm <= 700; nm++ {
		p := colour.Locus(float64(nm))
		if q := p.UV(); space == SpaceUV {
			p = colour.XY{X: q.U, Y: q.V}
		}
		r = append(r, point{p.X, p.Y})
	}
	return r
}

// checkAxis finds cells that no die can be in, and cells too narrow to measure.
func (s *Spec) checkAxis(i int) (found []Finding) {
	a := &s.axes[i]
	plan := &s.plans[s.axisColumns[i]]
	q, known := quantity.Lookup(a.Quantity)
	for c, name := range a.Names {
		low, high := a.Edges[c], a.Edges[c+1]
		if !plan.accepts(low+a.Guard, high-a.Guard) {
			found = append(found, Finding{Kind: Unreachable, Cells: []string{name}, Line: a.EdgeAt[c].Line,
				Says: fmt.Sprintf("no die can be in cell %s of %s: the reject rules or another axis take out all of %g to %g", name, a.Name, low, high)})
		}
		width := high - low
		switch u := s.Uncertainty[a.Quantity]; {
		case u > 0 && width < 2*u:
			found = append(found, Finding{Kind: TooFine, Cells: []string{name}, Line: a.EdgeAt[c].Line,
				Says: fmt.Sprintf("cell %s of %s is %.3g wide, under two standard uncertainties of %s (%.3g)", name, a.Name, width, a.Quantity, u)})
		case known && width < q.Resolution:
			found = append(found, Finding{Kind: TooFine, Cells: []string{name}, Line: a.EdgeAt[c].Line,
				Says: fmt.Sprintf("cell %s of %s is %.3g wide, less than %s is commonly resolved to (%g)", name, a.Name, width, a.Quantity, q.Resolution)})
		}
	}
	return found
}

// accepts reports whether any value between low and high is not rejected.
func (p *plan) accepts(low, high float64) bool {
	for region, v := range p.verdicts {
		if v >= 1<<16 {
			continue
		}
		from, to := math.Inf(-1), math.Inf(1)
		if region > 0 {
			from = nearest(p.cuts[region-1].at)
		}
		if region < len(p.cuts) {
			to = nearest(p.cuts[region].at)
		}
		if min(to, high) > max(from, low) {
			return true
		}
	}
	return false
}

// HasOverlaps reports whether any finding is an overlap, whose dies can be counted.
func (s *Spec) HasOverlaps(found []Finding) bool {
	for i := range found {
		if found[i].Kind == Overlap {
			return true
		}
	}
	return false
}

// CountOverlaps adds the dies of one measurement that lie in two cells at once to
// the overlaps among the findings of Check. planes and include are as for Bin; a
// measurement that lacks a quantity adds none.
func (s *Spec) CountOverlaps(found []Finding, planes []*wafermap.Plane, include []bool) {
	for i := range found {
		f := &found[i]
		if f.Kind != Overlap {
			continue
		}
		rp := &s.regionPlans[f.region]
		x, y := planes[rp.columns[0]], planes[rp.columns[1]]
		if x == nil || y == nil {
			continue
		}
		a, b := &rp.Cells[f.pair[0]], &rp.Cells[f.pair[1]]
		for d := range x.Len() {
			if include != nil && !include[d] {
				continue
			}
			if p := rp.place(x.Value(d), y.Value(d)); a.holds(p, rp.Space) && b.holds(p, rp.Space) {
				f.Dies++
			}
		}
	}
}
