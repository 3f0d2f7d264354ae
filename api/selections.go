package api

import (
	"context"
	"fmt"
	"strconv"
	"strings"
	"sync"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/db"
)

// Limits of a trial.
const (
	lastWafers     = 20 // a specification is looked at with, unless more are asked for
	mostWafers     = 500
	keptSelections = 8
)

// selections keeps what was chosen lately: an edge that is moved asks for the same
// wafers many times a second.
type selections struct {
	mu   sync.Mutex
	kept map[string][]db.Chosen
}

// choose finds the measurements of a trial: those named, else the last ones, of a
// lot if one is named, that the specification is for.
func (s *Server) choose(ctx context.Context, spec *binning.Spec, ids []string, lot string, last int) ([]db.Chosen, error) {
	if len(ids) > mostWafers || last > mostWafers {
		return nil, fmt.Errorf("a specification is tried on at most %d wafers at once: %w", mostWafers, analytics.ErrTooLarge)
	}
	if len(ids) == 0 {
		ms, err := s.store.SelectMeasurements(ctx, db.Selection{Kind: spec.Kind, Products: spec.Products, Lot: lot, Last: last})
		if err != nil {
			return nil, err
		}
		return s.store.Counting(ctx, ms)
	}
	key := strings.Join(ids, ",")
	s.chosen.mu.Lock()
	list, ok := s.chosen.kept[key]
	s.chosen.mu.Unlock()
	if ok {
		return list, nil
	}
	numbers, err := numbersOf(ids)
	if err != nil {
		return nil, err
	}
	ms, err := s.store.MeasurementsByID(ctx, numbers)
	if err != nil {
		return nil, err
	}
	if list, err = s.store.Counting(ctx, ms); err != nil {
		return nil, err
	}
	s.chosen.mu.Lock()
	defer s.chosen.mu.Unlock()
	if s.chosen.kept == nil || len(s.chosen.kept) >= keptSelections {
		s.chosen.kept = map[string][]db.Chosen{}
	}
	s.chosen.kept[key] = list
	return list, nil
}

// numbersOf reads measurements' numbers.
func numbersOf(ids []string) ([]int64, error) {
	numbers := make([]int64, len(ids))
	for i, id := range ids {
		n, err := strconv.ParseInt(id, 10, 64)
		if err != nil {
			return nil, fmt.Errorf("measurements: %q is not a measurement's number: %w", id, analytics.ErrInvalid)
		}
		numbers[i] = n
	}
	return numbers, nil
}
