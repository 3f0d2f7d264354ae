package api

import (
	"context"
	"fmt"
	"strconv"
	"strings"
	"sync"

	"golang.org/x/sync/errgroup"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
	"epitally/db"
)

// Limits of a trial.
const (
	lastWafers     = 20        // a specification is looked at with, unless more are asked for
	mostWafers     = 500       //
	mostRiskDies   = 1_000_000 // that risks are worked out over; more wafers are thinned evenly
	keptSelections = 8
)

// chosen is one measurement that a specification is tried on.
type chosen struct {
	db.Measurement
	include     []bool // dies that count; shared, read only; nil = all
	counted     int    // of them
	denominator int
}

// selections keeps what was chosen lately: an edge that is moved asks for the same
// wafers many times a second.
type selections struct {
	mu   sync.Mutex
	kept map[string][]chosen
}

// choose finds the measurements of a trial: those named, else the last ones that
// the specification is for.
func (s *Server) choose(ctx context.Context, spec *binning.Spec, ids []string, last int) ([]chosen, error) {
	if len(ids) > mostWafers || last > mostWafers {
		return nil, fmt.Errorf("a specification is tried on at most %d wafers at once: %w", mostWafers, analytics.ErrTooLarge)
	}
	if len(ids) == 0 {
		ms, err := s.store.SelectMeasurements(ctx, db.Selection{Kind: spec.Kind, Products: spec.Products, Last: last})
		if err != nil {
			return nil, err
		}
		return s.counting(ctx, ms)
	}
	key := strings.Join(ids, ",")
	s.chosen.mu.Lock()
	list, ok := s.chosen.kept[key]
	s.chosen.mu.Unlock()
	if ok {
		return list, nil
	}
	numbers := make([]int64, len(ids))
	for i, id := range ids {
		n, err := strconv.ParseInt(id, 10, 64)
		if err != nil {
			return nil, fmt.Errorf("measurements: %q is not a measurement's number: %w", id, analytics.ErrInvalid)
		}
		numbers[i] = n
	}
	ms, err := s.store.MeasurementsByID(ctx, numbers)
	if err != nil {
		return nil, err
	}
	if list, err = s.counting(ctx, ms); err != nil {
		return nil, err
	}
	s.chosen.mu.Lock()
	defer s.chosen.mu.Unlock()
	if s.chosen.kept == nil || len(s.chosen.kept) >= keptSelections {
		s.chosen.kept = map[string][]chosen{}
	}
	s.chosen.kept[key] = list
	return list, nil
}

// counting finds which dies of each measurement count; wafers of one grid and
// layout share the answer.
func (s *Server) counting(ctx context.Context, ms []db.Measurement) ([]chosen, error) {
	type place struct {
		grid   string
		layout wafermap.Layout
	}
	known := map[place][]bool{}
	list := make([]chosen, len(ms))
	for i, m := range ms {
		c := chosen{Measurement: m, counted: m.Dies, denominator: m.Dies}
		at := place{m.GridHash, *m.Layout}
		include, ok := known[at]
		if !ok {
			g, err := s.store.Grid(ctx, m.GridHash)
			if err != nil {
				return nil, err
			}
			include = counted(g, m.Layout)
			known[at] = include
		}
		if include != nil {
			c.include, c.counted, c.denominator = include, 0, m.LayoutDies
			for _, in := range include {
				if in {
					c.counted++
				}
			}
		}
		list[i] = c
	}
	return list, nil
}

// trial is a specification tried on wafers.
type trial struct {
	spec        *binning.Spec
	wafers      int
	counts      []int // dies per code, of those that count
	denominator int
	risk        *risk // nil = not asked for, or no uncertainty is known
}

// risk is what the uncertainty of measurement does to the bins, over some of the
// wafers.
type risk struct {
	binning.Conformity
	wafers int
	counts []int // dies per code of those wafers
}

// try bins all the wafers, on both halves of the list at once, and the risks over
// as many of them as have a million dies.
func (s *Server) try(ctx context.Context, spec *binning.Spec, list []chosen, risks bool) (*trial, error) {
	t := &trial{spec: spec, wafers: len(list), counts: make([]int, len(spec.Cells()))}
	group, both := errgroup.WithContext(ctx)
	var mu sync.Mutex
	for _, half := range [][]chosen{list[:len(list)/2], list[len(list)/2:]} {
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
				t.counts[i] += n
			}
			return nil
		})
	}
	for i := range list {
		t.denominator += list[i].denominator
	}
	if err := group.Wait(); err != nil {
		return nil, err
	}
	if risks {
		var err error
		t.risk, err = s.risks(ctx, spec, list)
		return t, err
	}
	return t, nil
}

// countAll sums the dies per code over measurements, straight from the planes as
// they are stored.
func (s *Server) countAll(ctx context.Context, spec *binning.Spec, list []chosen) ([]int, error) {
	total, counts := make([]int, len(spec.Cells())), make([]int, len(spec.Cells()))
	binner := spec.NewBinner()
	byID, ids := make(map[int64]*chosen, len(list)), make([]int64, len(list))
	for i := range list {
		byID[list[i].ID], ids[i] = &list[i], list[i].ID
	}
	lanes := make([]binning.Lanes, len(spec.Quantities()))
	err := s.store.EachStoredPlanes(ctx, ids, spec.Quantities(), func(id int64, planes []db.StoredPlane) error {
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
			total[len(total)-1] += c.counted
			return nil
		}
		if err := binner.BinLanes(nil, counts, lanes, c.include); err != nil {
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
func (s *Server) risks(ctx context.Context, spec *binning.Spec, list []chosen) (*risk, error) {
	dies := 0
	for i := range list {
		dies += list[i].counted
	}
	step := max(1, (dies+mostRiskDies-1)/mostRiskDies)
	r := &risk{counts: make([]int, len(spec.Cells()))}
	bins := spec.Bins()
	r.Conformity = binning.Conformity{WronglyAccepted: make([]float64, bins), WronglyRejected: make([]float64, bins), Confident: make([]int, bins)}
	stations := map[string]map[string]float64{}
	for i := 0; i < len(list); i += step {
		m := &list[i]
		u, ok := stations[m.Station]
		if !ok {
			var err error
			if u, err = s.store.StationUncertainty(ctx, m.Station); err != nil {
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
	if r.wafers == 0 {
		return nil, nil
	}
	return r, nil
}

func (s *Server) addRisk(ctx context.Context, r *risk, spec *binning.Spec, m *chosen, u map[string]float64) error {
	have, lacking := parts(&m.Measurement, spec)
	if len(lacking) > 0 {
		return nil
	}
	planes, err := s.store.Planes(ctx, &m.Measurement, have...)
	if err != nil {
		return err
	}
	picked := binning.PickPlanes(spec, planes)
	codes, counts := make([]uint16, m.Dies), make([]int, len(spec.Cells()))
	if err := spec.Bin(codes, counts, picked, m.include); err != nil {
		return err
	}
	c, err := spec.Conformity(codes, picked, m.include, u, binning.Confidence)
	if err != nil {
		return err
	}
	r.wafers++
	for i, n := range counts {
		r.counts[i] += n
	}
	for i := range c.Confident {
		r.WronglyAccepted[i] += c.WronglyAccepted[i]
		r.WronglyRejected[i] += c.WronglyRejected[i]
		r.Confident[i] += c.Confident[i]
	}
	return nil
}

// good is the dies in sellable bins.
func (t *trial) good() (n int) {
	for i, c := range t.spec.Cells() {
		if c.Class == binning.Sellable {
			n += t.counts[i]
		}
	}
	return n
}

// value is what the dies in sellable bins bring.
func (t *trial) value() (sum float64) {
	for i, c := range t.spec.Cells() {
		if c.Class == binning.Sellable {
			sum += float64(t.counts[i]) * c.Price
		}
	}
	return sum
}
