package main

import (
	"bytes"
	"compress/gzip"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"sync"

	"github.com/klauspost/compress/zstd"
	"golang.org/x/sync/errgroup"

	"epitally/analytics/simfab"
)

// truthFile holds what the demo fab was grown from. It begins with a dot so
// that a drop folder leaves it alone.
const truthFile = ".truth.json"

// writeFab writes the whole fab as the files its stations and people would have
// dropped: catalogue, specifications, a reading profile, run sheets and two
// measurements per wafer; and the truth beside them. Every file appears under
// its name only when it is whole. progress is told the wafers done, one call at
// a time.
func writeFab(ctx context.Context, f *simfab.Fab, dir string, progress func(done, total int)) error {
	for _, sub := range []string{"", "documents", "runs", "pl", "probe"} {
		if err := os.MkdirAll(filepath.Join(dir, sub), 0o755); err != nil {
			return fmt.Errorf("write the demo fab: %w", err)
		}
	}
	for name, text := range fabDocuments(f) {
		if err := writeWhole(filepath.Join(dir, name), text); err != nil {
			return err
		}
	}
	if err := writeWafers(ctx, f, dir, progress); err != nil {
		return err
	}
	return writeTruth(f, filepath.Join(dir, truthFile))
}

func writeWafers(ctx context.Context, f *simfab.Fab, dir string, progress func(done, total int)) error {
	var mu sync.Mutex
	next, done, total := 0, 0, len(f.Wafers)
	take := func() int {
		mu.Lock()
		defer mu.Unlock()
		next++
		return next - 1
	}
	group, ctx := errgroup.WithContext(ctx)
	for range max(runtime.GOMAXPROCS(0), 1) {
		group.Go(func() error {
			var buf []byte
			for i := take(); i < total; i = take() {
				if err := ctx.Err(); err != nil {
					return err
				}
				var err error
				if buf, err = writeWafer(f, i, dir, buf); err != nil {
					return err
				}
				mu.Lock()
				done++
				if progress != nil {
					progress(done, total)
				}
				mu.Unlock()
			}
			return nil
		})
	}
	return group.Wait()
}

// writeWafer measures wafer i and writes both files. It gives buf back for reuse.
func writeWafer(f *simfab.Fab, i int, dir string, buf []byte) ([]byte, error) {
	pl, probe := f.Measure(i)
	buf = appendReading(buf[:0], pl)
	if err := writeWhole(filepath.Join(dir, "pl", pl.Wafer.Name+".csv"), buf); err != nil {
		return buf, err
	}
	if probe.Station == otherStation {
		buf = appendOtherReading(buf[:0], probe)
		return buf, writeWhole(filepath.Join(dir, "probe", otherName(probe)), buf)
	}
	buf = appendReading(buf[:0], probe)
	name := filepath.Join(dir, "probe", probe.Wafer.Name+".csv")
	// Some stations compress what they write.
	switch {
	case i%10 == 4:
		packed, err := gzipped(buf)
		if err != nil {
			return buf, err
		}
		return buf, writeWhole(name+".gz", packed)
	case i%10 == 7:
		packed, err := zstdPacked(buf)
		if err != nil {
			return buf, err
		}
		return buf, writeWhole(name+".zst", packed)
	}
	return buf, writeWhole(name, buf)
}

func gzipped(text []byte) ([]byte, error) {
	var out bytes.Buffer
	z, err := gzip.NewWriterLevel(&out, gzip.BestSpeed)
	if err != nil {
		return nil, fmt.Errorf("gzip: %w", err)
	}
	return packed(&out, z, text)
}

func zstdPacked(text []byte) ([]byte, error) {
	var out bytes.Buffer
	// One goroutine: the wafers are spread over the cores already.
	z, err := zstd.NewWriter(&out, zstd.WithEncoderLevel(zstd.SpeedFastest), zstd.WithEncoderConcurrency(1))
	if err != nil {
		return nil, fmt.Errorf("zstd: %w", err)
	}
	return packed(&out, z, text)
}

func packed(out *bytes.Buffer, z io.WriteCloser, text []byte) ([]byte, error) {
	if _, err := z.Write(text); err != nil {
		return nil, fmt.Errorf("compress: %w", err)
	}
	if err := z.Close(); err != nil {
		return nil, fmt.Errorf("compress: %w", err)
	}
	return out.Bytes(), nil
}

func writeTruth(f *simfab.Fab, path string) error {
	text, err := json.MarshalIndent(f.Truth(), "", " ")
	if err != nil {
		return fmt.Errorf("truth of the demo fab: %w", err)
	}
	return writeWhole(path, append(text, '\n'))
}

// writeWhole writes a file under a hidden name and then renames it, so that a
// scan of the folder never meets half of it.
func writeWhole(path string, content []byte) error {
	hidden := filepath.Join(filepath.Dir(path), "."+filepath.Base(path)+".tmp")
	err := os.WriteFile(hidden, content, 0o644)
	if err == nil {
		err = os.Rename(hidden, path)
	}
	if err != nil {
		os.Remove(hidden)
		return fmt.Errorf("write the demo fab: %w", err)
	}
	return nil
}
