package db

import (
	"cmp"
	"context"
	"slices"

	"epitally/analytics/binning"
)

// Comparison is what changes when wafers are binned under another specification.
type Comparison struct {
	Before, After *Trial
	Moves         []Move     // between codes of different names, the most dies first
	Wafers        []Transfer // per wafer, in the order of the list
}

// Move is the dies that change from one bin or reason to another.
type Move struct {
	From, To string
	Dies     int
	Wafers   int     // that have such dies
	Value    float64 // what the move is worth: price after minus before, of sellable bins
}

// Transfer is what changes on one wafer.
type Transfer struct {
	Wafer                 string
	Moved                 int // dies whose bin or reason has another name
	GoodBefore, GoodAfter int
	Value                 float64
}

// CompareSpecs bins the same dies under two specifications and tells which change
// bins: compared by name, so that a new version may have other bins. Only
// measurements that the first specification's kind names make sense; progress is
// told the wafers done, nil = nobody.
func (s *Store) CompareSpecs(ctx context.Context, a, b *binning.Spec, list []Chosen, progress func(done, total int)) (c *Comparison, err error) {
	defer wrap(&err, "compare specifications %s and %s", a.Name, b.Name)
	c = &Comparison{Before: &Trial{Spec: a, Counts: make([]int, len(a.Cells()))}, After: &Trial{Spec: b, Counts: make([]int, len(b.Cells()))}}
	moves := map[[2]string]*Move{}
	for i := range list {
		if err := s.compareOne(ctx, c, moves, &list[i]); err != nil {
			return nil, err
		}
		if progress != nil {
			progress(i+1, len(list))
		}
	}
	for _, m := range moves {
		c.Moves = append(c.Moves, *m)
	}
	slices.SortFunc(c.Moves, func(x, y Move) int {
		return cmp.Or(cmp.Compare(y.Dies, x.Dies), cmp.Compare(x.From, y.From), cmp.Compare(x.To, y.To))
	})
	return c, nil
}

func (s *Store) compareOne(ctx context.Context, c *Comparison, moves map[[2]string]*Move, m *Chosen) error {
	codes := [2][]uint16{}
	good := [2]int{}
	for side, t := range []*Trial{c.Before, c.After} {
		counts := make([]int, len(t.Counts))
		codes[side] = make([]uint16, m.Dies)
		if err := s.binOne(ctx, t.Spec, m, codes[side], counts); err != nil {
			return err
		}
		t.Wafers++
		t.Denominator += m.Denominator
		for i, n := range counts {
			t.Counts[i] += n
			if t.Spec.Cells()[i].Class == binning.Sellable {
				good[side] += n
			}
		}
	}
	transfer := Transfer{Wafer: m.Wafer, GoodBefore: good[0], GoodAfter: good[1]}
	here := map[[2]uint16]int{}
	for i := range codes[0] {
		if m.Include == nil || m.Include[i] {
			here[[2]uint16{codes[0][i], codes[1][i]}]++
		}
	}
	for pair, n := range here {
		from, to := c.Before.Spec.Cells()[pair[0]], c.After.Spec.Cells()[pair[1]]
		value := float64(n) * (worth(to) - worth(from))
		transfer.Value += value
		if from.Name == to.Name && from.Class == to.Class {
			continue
		}
		transfer.Moved += n
		key := [2]string{from.Name, to.Name}
		if moves[key] == nil {
			moves[key] = &Move{From: from.Name, To: to.Name}
		}
		k := moves[key]
		k.Dies, k.Wafers, k.Value = k.Dies+n, k.Wafers+1, k.Value+value
	}
	c.Wafers = append(c.Wafers, transfer)
	return nil
}

func worth(c binning.Cell) float64 {
	if c.Class == binning.Sellable {
		return c.Price
	}
	return 0
}

// binOne bins one measurement, which may lack quantities.
func (s *Store) binOne(ctx context.Context, spec *binning.Spec, m *Chosen, codes []uint16, counts []int) error {
	have, _ := m.Split(spec)
	if len(have) == 0 { // none named would mean all
		return spec.Bin(codes, counts, binning.PickPlanes(spec, nil), m.Include)
	}
	planes, err := s.Planes(ctx, &m.Measurement, have...)
	if err != nil {
		return err
	}
	return spec.Bin(codes, counts, binning.PickPlanes(spec, planes), m.Include)
}
