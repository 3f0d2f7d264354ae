package reader

import (
	"fmt"
	"slices"

	"epitally/analytics"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// measurement brings the rows gathered so far into canonical order and settles
// duplicates.
func (t *table) measurement(a *about) (*Measurement, error) {
	n := t.n
	x, y, line := t.x[:n:n], t.y[:n:n], t.line[:n:n]
	if err := t.place.apply(x, y, line); err != nil {
		return nil, err
	}
	order := wafermap.Canonical(x, y)
	if order.Starts != nil && a.duplicates == refuseDuplicates {
		return nil, duplicateFault(&order, x, y, line)
	}
	m := a.measurement()
	rows := order.Last()
	if a.duplicates == firstWins {
		rows = order.First()
	}
	m.Remeasured = order.Repeated()
	m.Grid = wafermap.Grid{X: wafermap.Gather(x, rows), Y: wafermap.Gather(y, rows)}
	m.Line = wafermap.Gather(line, rows)
	m.Quantities = make([]quantity.Quantity, len(t.cols))
	m.Planes = make([]wafermap.Plane, len(t.cols))
	for i := range t.cols {
		m.Quantities[i] = t.cols[i].quantity
		m.Planes[i] = t.cols[i].plane(n, rows)
	}
	return m, nil
}

// measurement fills what a source states besides dies.
func (a *about) measurement() *Measurement {
	b := a.inherit() // its own maps: the measurement is handed over
	return &Measurement{Wafer: b.wafer, Lot: b.lot, Kind: b.kind, Station: b.station, MeasuredAt: b.measuredAt,
		DriveCurrentMA: b.driveCurrentMA, Facts: b.facts, Layout: b.layout}
}

// duplicateFault names the first line of the source that repeats a die.
func duplicateFault(o *wafermap.Ordering, x, y []int16, line []int32) error {
	first, second := int32(0), int32(0)
	for die := range o.Starts {
		if g := o.Group(die); len(g) > 1 && (second == 0 || g[1] < second) {
			first, second = g[0], g[1]
		}
	}
	return &analytics.Fault{Line: int(line[second]), Offset: -1,
		Problem: fmt.Sprintf("die (%d, %d) stands a second time, first on line %d", x[second], y[second], line[first]),
		Remedy:  "remove one of the two, or state `duplicates: last` (or first) to keep one"}
}

// lookup finds a quantity that is declared or built in.
func (a *about) lookup(name string) (quantity.Quantity, bool) {
	if q, ok := a.declared[name]; ok {
		return q, true
	}
	return quantity.Lookup(name)
}

func builtinNames() string {
	var names []string
	for _, q := range quantity.Builtin() {
		names = append(names, q.Name)
	}
	slices.Sort(names)
	return listOr(names, "")
}
