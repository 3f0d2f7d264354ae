package db

import (
	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
)

// NewTallyOf puts the counts of a binning into words. The yield's denominator is
// the dies of the layout inside its edge exclusion, measured or not; when the
// layout is only assumed it is the dies measured, and OverLayout says so.
func NewTallyOf(spec string, version int, cells []binning.Cell, counts []int, l *wafermap.Layout) Tally {
	t := Tally{Spec: spec, Version: version, Cells: make([]TallyCell, 0, len(cells))}
	for i, c := range cells {
		n := counts[i]
		t.Dies += n
		if c.Class != binning.Untested {
			t.Tested += n
		}
		if c.Class == binning.Sellable {
			t.Good += n
		}
		t.Cells = append(t.Cells, TallyCell{Name: c.Name, Class: c.Class.String(), Dies: n})
	}
	t.Denominator = t.Dies
	if l != nil && !l.Assumed {
		t.Denominator, t.OverLayout = l.Dies(), true
	}
	return t
}

// AddRisks says of every bin what the measurement's uncertainty does to it.
func (t *Tally) AddRisks(r binning.Conformity) {
	for i := range r.Confident {
		c := &t.Cells[i]
		c.WronglyAccepted, c.WronglyRejected, c.Confident = &r.WronglyAccepted[i], &r.WronglyRejected[i], &r.Confident[i]
	}
}
