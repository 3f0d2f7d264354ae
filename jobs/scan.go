package jobs

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"log/slog"
	"os"
	"sync"
	"time"

	"epitally/analytics"
	"epitally/db"
	"epitally/jobs/reader"
)

// Scanner loads what lies in a drop folder.
type Scanner struct {
	folder  *Folder
	store   *db.Store
	log     *slog.Logger
	loaders []*Loader
	// Done, when not nil, is told of every source filed away, and of how many
	// the scan set out to load. It is called from several goroutines.
	Done func(src db.Source, err error, total int)
	// Metrics counts what is loaded; nil = nothing is counted.
	Metrics *Metrics
	now     func() time.Time
}

// ScanResult is what one scan did.
type ScanResult struct {
	Stored, Refused, Left int // Left: not settled, or to be tried again
	Dies                  int64
	Took                  time.Duration
}

// NewScanner makes a scanner with the given number of workers.
func NewScanner(folder *Folder, c LoaderConfig, workers int) *Scanner {
	s := &Scanner{folder: folder, store: c.Store, log: c.Logger, now: c.Now}
	for range max(workers, 1) {
		s.loaders = append(s.loaders, NewLoader(c))
	}
	return s
}

// Scan loads every settled file of the folder: first the documents, one by one,
// since they say how the rest is read and binned, then the rest in parallel.
// It returns an error only when the folder or the database cannot be used at
// all; a bad file is a refused source.
func (s *Scanner) Scan(ctx context.Context) (ScanResult, error) {
	start := time.Now()
	files, waiting, err := s.folder.list()
	if err != nil {
		s.log.Warn("part of the drop folder could not be listed", "error", err)
	}
	result := ScanResult{Left: waiting}
	documents := 0
	for documents < len(files) && files[documents].rank < rankReadings {
		documents++
	}
	var mu sync.Mutex
	count := func(src db.Source, err error) {
		mu.Lock()
		defer mu.Unlock()
		switch {
		case err == nil:
			result.Stored++
			result.Dies += src.Dies
		case src.State == db.SourceRefused:
			result.Refused++
		default:
			result.Left++
		}
		if s.Done != nil {
			s.Done(src, err, len(files))
		}
	}
	profiles, err := s.loaders[0].Profiles(ctx)
	if err != nil {
		return result, err
	}
	for _, f := range files[:documents] {
		if ctx.Err() != nil {
			return result, ctx.Err()
		}
		count(s.one(ctx, s.loaders[0], f, profiles))
	}
	if documents > 0 {
		if profiles, err = s.loaders[0].Profiles(ctx); err != nil {
			return result, err
		}
	}
	s.parallel(ctx, files[documents:], profiles, count)
	if err := s.loaders[0].RecomputeStale(ctx); err != nil {
		return result, err
	}
	result.Took = time.Since(start)
	s.Metrics.scanned(result)
	return result, ctx.Err()
}

func (s *Scanner) parallel(ctx context.Context, files []dropped, profiles []reader.Profile, count func(db.Source, error)) {
	queue := make(chan dropped)
	var workers sync.WaitGroup
	for _, l := range s.loaders {
		workers.Go(func() {
			for f := range queue {
				count(s.one(ctx, l, f, profiles))
			}
		})
	}
feed:
	for _, f := range files {
		select {
		case queue <- f:
		case <-ctx.Done():
			break feed
		}
	}
	close(queue)
	workers.Wait()
}

// one loads one file and files it away.
func (s *Scanner) one(ctx context.Context, l *Loader, f dropped, profiles []reader.Profile) (filed db.Source, failed error) {
	src, err := s.read(ctx, l, f, profiles)
	defer func() { s.Metrics.filed(filed, failed, f.info.ModTime(), s.now()) }()
	log := s.log.With("source", f.name, "bytes", f.info.Size())
	switch {
	case err == nil:
		log.Info("stored", "wafers", src.Wafers, "dies", src.Dies, "source_id", src.ID)
		if _, err := s.folder.fileAway(f.name, loadedFolder); err != nil {
			// The bytes are stored; the next scan finds them stored and moves the file.
			log.Warn("stored, but not moved to loaded/", "error", err)
		}
		return src, nil
	case errors.Is(err, errChanged), errors.Is(err, errGone), transient(err):
		log.Info("left for the next scan", "reason", err)
		src.State = db.SourceWaiting
		return src, err
	case errors.Is(err, analytics.ErrDuplicate) && s.storedAs(ctx, src):
		if _, err := s.folder.fileAway(f.name, loadedFolder); err != nil {
			src.State = db.SourceWaiting
			return src, err
		}
		return src, nil
	}
	return s.refuse(ctx, src, f, err)
}

func (s *Scanner) read(ctx context.Context, l *Loader, f dropped, profiles []reader.Profile) (src db.Source, err error) {
	defer func() {
		if r := recover(); r != nil { // a reader's bug must not stop the server
			err = fmt.Errorf("%s: the reader failed on this file (%v): %w", f.name, r, analytics.ErrInvalid)
			src.Name, src.Offset, src.SeenAt = f.name, -1, l.now()
			s.log.Error("reader failed", "source", f.name, "panic", r)
		}
	}()
	src = db.Source{Name: f.name, Bytes: f.info.Size(), Offset: -1, SeenAt: l.now()}
	if !f.info.Mode().IsRegular() && f.info.Mode()&os.ModeSymlink == 0 {
		return src, fmt.Errorf("%s is not a file (%s); put plain files into the drop folder: %w", f.name, f.info.Mode().Type(), analytics.ErrInvalid)
	}
	file, err := s.folder.root.Open(f.name)
	if _, there := s.folder.root.Lstat(f.name); errors.Is(there, fs.ErrNotExist) {
		return src, fmt.Errorf("%s: %w", f.name, errGone)
	}
	if err != nil {
		return src, fmt.Errorf("%s cannot be opened: %w; check its permissions, and that a link stays inside the drop folder: %w", f.name, err, analytics.ErrInvalid)
	}
	defer file.Close()
	before, err := file.Stat()
	if err != nil {
		return src, fmt.Errorf("%s: %w: %w", f.name, err, analytics.ErrInvalid)
	}
	if !before.Mode().IsRegular() {
		return src, fmt.Errorf("%s leads to something that is not a file (%s); put plain files into the drop folder: %w", f.name, before.Mode().Type(), analytics.ErrInvalid)
	}
	return l.Load(ctx, Incoming{Name: f.name, R: file, Bytes: before.Size(), Profiles: profiles,
		Unchanged: func() error { return s.folder.unchanged(f.name, before) }})
}

// storedAs reports whether the bytes were stored from this very name before: a
// process was stopped between the commit and the move.
func (s *Scanner) storedAs(ctx context.Context, src db.Source) bool {
	earlier, err := s.store.SourceByHash(ctx, src.SHA256)
	return err == nil && earlier.Name == src.Name
}

// refuse records why a source is not loaded and moves the file to rejected/.
// When the database cannot record it, the file stays for the next scan.
func (s *Scanner) refuse(ctx context.Context, src db.Source, f dropped, why error) (db.Source, error) {
	src.Name, src.State, src.Reason = f.name, db.SourceRefused, why.Error()
	var fault *analytics.Fault
	if errors.As(why, &fault) {
		src.Line, src.Column, src.Offset = fault.Line, fault.Column, fault.Offset
	}
	id, err := s.store.RefuseSource(ctx, src)
	if err != nil {
		src.State = db.SourceWaiting
		return src, fmt.Errorf("record refusal of %s: %w", f.name, err)
	}
	src.ID = id
	s.log.Warn("refused", "source", f.name, "source_id", id, "reason", why)
	if err := s.folder.reject(f.name, why.Error()); err != nil {
		s.log.Error("refused, but not moved to rejected/", "source", f.name, "error", err)
	}
	return src, why
}
