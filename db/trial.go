package db

import (
	"context"
	"fmt"
	"slices"
	"sync"

	"golang.org/x/sync/errgroup"

	"epitally/analytics/binning"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// mostRiskDies bounds the dies that risks are worked out over; more wafers are
// thinned evenly.
const mostRiskDies = 500_000

// Chosen is one measurement that a specification is tried on.
type Chosen struct {
	Measurement
	Include     []bool // dies that count; shared, read only; nil = all
	Counted     int    // of them
	Denominator int    // dies that a yield is over
}

// Counting finds which dies of each measurement count; wafers of one grid and
// layout share the answer.
func (s *Store) Counting(ctx context.Context, ms []Measurement) (list []Chosen, err error) {
	defer wrap(&err, "dies that count of %d measurements", len(ms))
	type place struct {
		grid   string
		layout wafermap.Layout
	}
	known := map[place][]bool{}
	list = make([]Chosen, len(ms))
	for i, m := range ms {
		c := Chosen{Measurement: m, Counted: m.Dies, Denominator: m.Dies}
		at := place{m.GridHash, *m.Layout}
		include, ok := known[at]
		if !ok {
			g, err := s.Grid(ctx, m.GridHash)
			if err != nil {
				return nil, err
			}
			include = m.Layout.Counted(g)
			known[at] = include
		}
		if include != nil {
			c.Include, c.Counted, c.Denominator = include, 0, m.LayoutDies
			for _, in := range include {
				if in {
					c.Counted++
				}
			}
		}
		list[i] = c
	}
	return list, nil
}

// Trial is a specification tried on wafers.
type Trial struct {
	Spec        *binning.Spec
	Wafers      int
	Counts      []int // dies per code, of those that count
	Denominator int
	Risk        *Risk // nil = not asked for, or no uncertainty is known
}

// Risk is what the uncertainty of measurement does to the bins, over some of the
// wafers.
type Risk struct {
	binning.Conformity
	Wafers int
	Counts []int // dies per code of those wafers
}

// Try bins all the wafers, on both halves of the list at once, and the risks over
// as many of them as have half a million dies.
func (s *Store) Try(ctx context.Context, spec *binning.Spec, list []Chosen, risks bool) (t *Trial, err error) {
	defer wrap(&err, "try specification %s on %d wafers", spec.Name, len(list))
	t = &Trial{Spec: spec, Wafers: len(list), Counts: make([]int, len(spec.Cells()))}
	group, both := errgroup.WithContext(ctx)
	var mu sync.Mutex
	for _, half := range [][]Chosen{list[:len(list)/2], list[len(list)/2:]} {
		if len(half) == 0 {
			continue
		}
		group.Go(func() error {
			counts, err := s.countAll(both, spec, half)
			if err != nil {
				return err
			}
			mu.Lock()
			defer mu.Unlock()
			for i, n := range counts {
				t.Counts[i] += n
			}
			return nil
		})
	}
	for i := range list {
		t.Denominator += list[i].Denominator
	}
	if err := group.Wait(); err != nil {
		return nil, err
	}
	if risks {
		t.Risk, err = s.risks(ctx, spec, list)
	}
	return t, err
}

// countAll sums the dies per code over measurements, straight from the planes as
// they are stored.
func (s *Store) countAll(ctx context.Context, spec *binning.Spec, list []Chosen) ([]int, error) {
	total, counts := make([]int, len(spec.Cells())), make([]int, len(spec.Cells()))
	binner := spec.NewBinner()
	byID, ids := make(map[int64]*Chosen, len(list)), make([]int64, len(list))
	for i := range list {
		byID[list[i].ID], ids[i] = &list[i], list[i].ID
	}
	lanes := make([]binning.Lanes, len(spec.Quantities()))
	err := s.EachStoredPlanes(ctx, ids, spec.Quantities(), func(id int64, planes []StoredPlane) error {
		c := byID[id]
		any := false
		for i := range planes {
			var err error
			if lanes[i], err = planes[i].Lanes(); err != nil {
				return err
			}
			any = any || planes[i].N > 0
		}
		if !any {
			total[len(total)-1] += c.Counted
			return nil
		}
		if err := binner.BinLanes(nil, counts, lanes, c.Include); err != nil {
			return fmt.Errorf("measurement %d of wafer %s: %w", id, c.Wafer, err)
		}
		for i, n := range counts {
			total[i] += n
		}
		return nil
	})
	return total, err
}

// risks works out the conformity of the bins over wafers spread evenly over the
// list; nil when neither the specification nor a station states an uncertainty.
func (s *Store) risks(ctx context.Context, spec *binning.Spec, list []Chosen) (*Risk, error) {
	dies := 0
	for i := range list {
		dies += list[i].Counted
	}
	step := max(1, (dies+mostRiskDies-1)/mostRiskDies)
	r := &Risk{Counts: make([]int, len(spec.Cells()))}
	bins := spec.Bins()
	r.Conformity = binning.Conformity{WronglyAccepted: make([]float64, bins), WronglyRejected: make([]float64, bins), Confident: make([]int, bins)}
	stations := map[string]map[string]float64{}
	for i := 0; i < len(list); i += step {
		m := &list[i]
		u, ok := stations[m.Station]
		if !ok {
			var err error
			if u, err = s.StationUncertainty(ctx, m.Station); err != nil {
				return nil, err
			}
			stations[m.Station] = u
		}
		if !spec.Uncertain(u) {
			continue
		}
		if err := s.addRisk(ctx, r, spec, m, u); err != nil {
			return nil, err
		}
	}
	if r.Wafers == 0 {
		return nil, nil
	}
	return r, nil
}

func (s *Store) addRisk(ctx context.Context, r *Risk, spec *binning.Spec, m *Chosen, u map[string]float64) error {
	have, lacking := m.Split(spec)
	if len(lacking) > 0 {
		return nil
	}
	planes, err := s.Planes(ctx, &m.Measurement, have...)
	if err != nil {
		return err
	}
	picked := binning.PickPlanes(spec, planes)
	codes, counts := make([]uint16, m.Dies), make([]int, len(spec.Cells()))
	if err := spec.Bin(codes, counts, picked, m.Include); err != nil {
		return err
	}
	c, err := spec.Conformity(codes, picked, m.Include, u, binning.Confidence)
	if err != nil {
		return err
	}
	r.Wafers++
	for i, n := range counts {
		r.Counts[i] += n
	}
	for i := range c.Confident {
		r.WronglyAccepted[i] += c.WronglyAccepted[i]
		r.WronglyRejected[i] += c.WronglyRejected[i]
		r.Confident[i] += c.Confident[i]
	}
	return nil
}

// Good is the dies in sellable bins.
func (t *Trial) Good() (n int) {
	for i, c := range t.Spec.Cells() {
		if c.Class == binning.Sellable {
			n += t.Counts[i]
		}
	}
	return n
}

// Value is what the dies in sellable bins bring.
func (t *Trial) Value() (sum float64) {
	for i, c := range t.Spec.Cells() {
		if c.Class == binning.Sellable {
			sum += float64(t.Counts[i]) * c.Price
		}
	}
	return sum
}

// Split parts what a specification needs into what the measurement has and what it
// lacks.
func (m *Measurement) Split(spec *binning.Spec) (have, lacking []string) {
	for _, name := range spec.Quantities() {
		if slices.ContainsFunc(m.Quantities, func(q quantity.Quantity) bool { return q.Name == name }) {
			have = append(have, name)
		} else {
			lacking = append(lacking, name)
		}
	}
	return have, lacking
}

// mostOverlapWafers bounds the wafers on which dies in overlaps are counted.
const mostOverlapWafers = 20

// Findings checks a specification, also against the dies it was tried on; dies in
// overlaps are counted on at most 20 wafers, so many as overlapWafers says.
func (s *Store) Findings(ctx context.Context, t *Trial, list []Chosen) (found []binning.Finding, overlapWafers int, err error) {
	defer wrap(&err, "check specification %s", t.Spec.Name)
	found = t.Spec.Check()
	if t.Spec.HasOverlaps(found) {
		overlapWafers = min(len(list), mostOverlapWafers)
		for i := range list[:overlapWafers] {
			m := &list[i].Measurement
			have, lacking := m.Split(t.Spec)
			if len(lacking) > 0 {
				continue
			}
			planes, err := s.Planes(ctx, m, have...)
			if err != nil {
				return nil, 0, err
			}
			t.Spec.CountOverlaps(found, binning.PickPlanes(t.Spec, planes), list[i].Include)
		}
	}
	return append(found, t.Spec.CheckEmpty(t.Counts, t.Wafers)...), overlapWafers, nil
}
