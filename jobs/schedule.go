package jobs

import (
	"context"
	"fmt"
	"log/slog"
	"sync"
	"time"

	"github.com/robfig/cron/v3"

	"epitally/db"
)

// Schedule runs the scan and the upkeep of the database at their times.
type Schedule struct {
	cron    *cron.Cron
	scanner *Scanner
	store   *db.Store
	log     *slog.Logger
	now     func() time.Time

	scanning sync.Mutex // one scan at a time
	ctx      context.Context
	stop     context.CancelFunc
	running  sync.WaitGroup
}

// ScheduleConfig says when.
type ScheduleConfig struct {
	Scanner *Scanner
	Store   *db.Store
	Logger  *slog.Logger
	Now     func() time.Time
	Scan    string // cron expression, five fields or a descriptor such as "@every 1m"
}

// NewSchedule checks the expression and makes the schedule; Start starts it.
func NewSchedule(c ScheduleConfig) (*Schedule, error) {
	s := &Schedule{cron: cron.New(), scanner: c.Scanner, store: c.Store, log: c.Logger, now: c.Now}
	if _, err := s.cron.AddFunc(c.Scan, s.Scan); err != nil {
		return nil, fmt.Errorf("scan schedule %q: %w; write five cron fields (\"* * * * *\" is every minute) or \"@every 30s\"", c.Scan, err)
	}
	if _, err := s.cron.AddFunc("@every 6h", s.partitions); err != nil {
		return nil, err
	}
	return s, nil
}

// Start makes the partitions, scans once at once, and then by the clock.
func (s *Schedule) Start(ctx context.Context) {
	s.ctx, s.stop = context.WithCancel(ctx)
	s.running.Go(func() {
		s.partitions()
		s.Scan()
	})
	s.cron.Start()
}

// Stop ends the schedule and waits for what is running; a load under way is
// rolled back and read again at the next start. Harmless when called twice.
func (s *Schedule) Stop() {
	if s.stop == nil {
		return
	}
	s.stop()
	<-s.cron.Stop().Done()
	s.running.Wait()
}

// Scan loads what has settled. A scan still running makes this one a no-op: the
// files it would find are the other's too, or will be there at the next tick.
func (s *Schedule) Scan() {
	if !s.scanning.TryLock() {
		return
	}
	defer s.scanning.Unlock()
	result, err := s.scanner.Scan(s.ctx)
	switch {
	case s.ctx.Err() != nil:
	case err != nil:
		s.scanner.Metrics.jobFailed("scan")
		s.log.Error("scan of the drop folder failed; the next one tries again", "error", err)
	case result.Stored+result.Refused > 0:
		s.log.Info("scanned", "stored", result.Stored, "refused", result.Refused, "left", result.Left, "dies", result.Dies, "took", result.Took)
	}
}

// ScanSoon scans when what came in has settled, beside the schedule; it returns at
// once. A schedule that does not run yet or no more does nothing.
func (s *Schedule) ScanSoon() {
	if s.ctx == nil || s.ctx.Err() != nil {
		return
	}
	s.running.Go(func() {
		select {
		case <-time.After(s.scanner.folder.settle + 50*time.Millisecond):
			s.Scan()
		case <-s.ctx.Done():
		}
	})
}

// partitions keeps the months around today ready, so that loading seldom has to
// make one.
func (s *Schedule) partitions() {
	now := s.now()
	if err := s.store.EnsurePartitions(s.ctx, now.AddDate(0, -1, 0), now.AddDate(0, 2, 0)); err != nil && s.ctx.Err() == nil {
		s.scanner.Metrics.jobFailed("partitions")
		s.log.Error("partitions could not be made ahead; loading makes them when needed", "error", err)
	}
}
