package reader

import (
	"bytes"
	"compress/gzip"
	"context"
	"crypto/sha256"
	"encoding/base64"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
	"testing"
	"testing/iotest"
	"time"

	"github.com/klauspost/compress/zstd"

	"epitally/analytics"
)

// smallReadings is two dies of one wafer.
const smallReadings = "# epitally: die readings\n# wafer: W-1\n# kind: probe\n# measured at: 2026-11-05T06:00:00Z\n" +
	"x,y,forward_voltage_v\n0,0,3.101\n1,0,3.2\n"

// smallBzip2 is smallReadings as the bzip2 program packs it, in base64.
const smallBzip2 = "QlpoOTFBWSZTWWdqjEMAAAjbgAAQSAd7EASQt6/f4CAAciJMmmjammIyBiDRhFT/ST1PTVNHqeptqQGRptNSMX+7QxmXYceAU2IpKCtaGT0JepYFfPHLkRhUe4OjEIitZ06J3Y3QWYgaVOuF2emuqVF/5aBpbDdUlvBQDPFh7Ly0SlhwEf6BgrrNFRdyRThQkGdqjEM="

// held is everything a source gave.
type held struct {
	result       Result
	measurements []*Measurement
	rows         []RunSheetRow
	kind, name   string
	text         string
}

func readHeld(ctx context.Context, in Input) (held, error) {
	var h held
	var err error
	h.result, err = Read(ctx, in, Sink{
		Measurement: func(m *Measurement) error { h.measurements = append(h.measurements, m); return nil },
		RunSheet:    func(rows []RunSheetRow) error { h.rows = append(h.rows, rows...); return nil },
		Document:    func(kind, name, text string) error { h.kind, h.name, h.text = kind, name, text; return nil },
	})
	return h, err
}

func packGzip(t *testing.T, text string) string {
	t.Helper()
	var out bytes.Buffer
	z := gzip.NewWriter(&out)
	if _, err := io.WriteString(z, text); err != nil {
		t.Fatal(err)
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	return out.String()
}

func packZstd(t *testing.T, text string) string {
	t.Helper()
	z, err := zstd.NewWriter(nil, zstd.WithEncoderConcurrency(1))
	if err != nil {
		t.Fatal(err)
	}
	defer z.Close()
	return string(z.EncodeAll([]byte(text), nil))
}

func unpackedBzip2(t *testing.T) string {
	t.Helper()
	b, err := base64.StdEncoding.DecodeString(smallBzip2)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

func TestEveryCompressionGivesTheSameMeasurement(t *testing.T) {
	t.Parallel()
	half := len(smallReadings) / 2
	for name, packed := range map[string]string{
		"plain": smallReadings, "gzip": packGzip(t, smallReadings), "zstd": packZstd(t, smallReadings), "bzip2": unpackedBzip2(t),
		"gzip in two members": packGzip(t, smallReadings[:half]) + packGzip(t, smallReadings[half:]),
	} {
		for _, r := range []io.Reader{strings.NewReader(packed), iotest.OneByteReader(strings.NewReader(packed))} {
			h, err := readHeld(t.Context(), Input{Name: "w.csv", R: r})
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			if len(h.measurements) != 1 || h.measurements[0].Planes[0].Value(1) != 3.2 {
				t.Errorf("%s: %+v", name, h.measurements)
			}
			sum := sha256.Sum256([]byte(smallReadings))
			if h.result.SHA256 != hex.EncodeToString(sum[:]) || h.result.Bytes != int64(len(smallReadings)) {
				t.Errorf("%s: %d bytes, hash %s; want those of the decompressed text", name, h.result.Bytes, h.result.SHA256)
			}
		}
	}
}

func TestDamagedCompressionSaysWhereItEnds(t *testing.T) {
	t.Parallel()
	var rows strings.Builder
	rows.WriteString(smallReadings)
	for i := range 40_000 {
		fmt.Fprintf(&rows, "%d,%d,3.%d\n", i%200, i/200+1, 100+i*7919%900)
	}
	long := rows.String()
	flip := func(s string, at int) string {
		b := []byte(s)
		b[at] ^= 0x55
		return string(b)
	}
	for _, c := range []struct {
		name, packed, says string
	}{
		{"gzip cut", packGzip(t, long)[:len(packGzip(t, long))/2], "the gzip data is cut short"},
		{"gzip without its check sum", packGzip(t, long)[:len(packGzip(t, long))-5], "the gzip data is cut short"},
		{"gzip header only", "\x1f\x8b", "the gzip data is cut short"},
		{"gzip flipped", flip(packGzip(t, long), len(packGzip(t, long))-6), "the gzip data is damaged"},
		{"gzip with a tail", packGzip(t, long) + "bytes that are no gzip member", "the gzip data is damaged"},
		{"zstd cut", packZstd(t, long)[:len(packZstd(t, long))/2], "the zstd data is cut short"},
		{"bzip2 cut", unpackedBzip2(t)[:60], "the bzip2 data is cut short"},
		{"bzip2 flipped", flip(unpackedBzip2(t), 50), "the bzip2 data is damaged"},
	} {
		_, err := readHeld(t.Context(), Input{Name: "w.csv", R: strings.NewReader(c.packed)})
		var f *analytics.Fault
		if !errors.As(err, &f) || !strings.Contains(f.Problem, c.says) || !errors.Is(err, analytics.ErrInvalid) {
			t.Errorf("%s: error %v; want a fault that says %q", c.name, err, c.says)
		}
	}
}

// endless gives the same byte for ever and counts what is taken of it.
type endless struct {
	head  string
	fill  byte
	taken int64
}

func (e *endless) Read(p []byte) (int, error) {
	n := copy(p, e.head)
	e.head = e.head[n:]
	if n == 0 {
		for i := range p {
			p[i] = e.fill
		}
		n = len(p)
	}
	e.taken += int64(n)
	return n, nil
}

func TestALineWithoutEndIsRefusedWithoutBeingHeld(t *testing.T) {
	t.Parallel()
	for name, head := range map[string]string{"head": "# epitally: die readings\n# wafer: ", "row": smallReadings, "run sheet": runSheetMark + "\nwafer\n"} {
		in := &endless{head: head, fill: '7'}
		_, err := readHeld(t.Context(), Input{Name: "w.csv", R: in, MaxBytes: 8 << 20})
		var f *analytics.Fault
		if !errors.As(err, &f) || !errors.Is(err, analytics.ErrTooLarge) || !strings.Contains(f.Problem, "line is over") {
			t.Fatalf("%s: error %v; want a line that is too long", name, err)
		}
		if want := strings.Count(head, "\n") + 1; f.Line != want {
			t.Errorf("%s: line %d, want %d", name, f.Line, want)
		}
	}
}

func TestALimitEndsReading(t *testing.T) {
	t.Parallel()
	const limit = 4 << 20
	plain := &endless{head: smallReadings, fill: '\n'}
	_, err := readHeld(t.Context(), Input{Name: "w.csv", R: plain, MaxBytes: limit})
	if !errors.Is(err, analytics.ErrTooLarge) || plain.taken > 2*limit {
		t.Errorf("plain: %v after %d bytes", err, plain.taken)
	}
	// 64 MB of line ends pack into 64 kB: a bomb is cut off at the limit too.
	bomb := packGzip(t, smallReadings+strings.Repeat("\n", 64<<20))
	if _, err := readHeld(t.Context(), Input{Name: "w.csv.gz", R: strings.NewReader(bomb), MaxBytes: limit}); !errors.Is(err, analytics.ErrTooLarge) {
		t.Errorf("bomb: %v", err)
	}
	if _, err := readHeld(t.Context(), Input{Name: "w.csv", R: strings.NewReader(smallReadings), MaxBytes: int64(len(smallReadings))}); err != nil {
		t.Errorf("a source of just the limit: %v", err)
	}
}

func TestFaultsOfTheInputItself(t *testing.T) {
	t.Parallel()
	broken := errors.New("the disk is gone")
	_, err := readHeld(t.Context(), Input{Name: "w.csv", R: io.MultiReader(strings.NewReader(smallReadings), iotest.ErrReader(broken))})
	if !errors.Is(err, analytics.ErrUnavailable) || !strings.Contains(err.Error(), "the disk is gone") {
		t.Errorf("failing disk: %v", err)
	}
	dir, err := os.Open(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	defer dir.Close()
	if _, err := readHeld(t.Context(), Input{Name: "d", R: dir}); !errors.Is(err, analytics.ErrInvalid) || !strings.Contains(err.Error(), "directory") {
		t.Errorf("directory: %v", err)
	}
	if _, err := readHeld(t.Context(), Input{Name: "e", R: strings.NewReader("")}); !errors.Is(err, analytics.ErrInvalid) || !strings.Contains(err.Error(), "empty") {
		t.Errorf("empty file: %v", err)
	}
}

// TestABadFileIsStillHashed: a refused file is told from others by its bytes.
func TestABadFileIsStillHashed(t *testing.T) {
	t.Parallel()
	text := smallReadings + "oops\n" + strings.Repeat("5,5,3.1\n", 200_000)
	h, err := readHeld(t.Context(), Input{Name: "w.csv", R: strings.NewReader(text)})
	sum := sha256.Sum256([]byte(text))
	if err == nil || h.result.SHA256 != hex.EncodeToString(sum[:]) || h.result.Bytes != int64(len(text)) {
		t.Errorf("%v, hash %q of %d bytes", err, h.result.SHA256, h.result.Bytes)
	}
}

// cancelling cancels a context when it is read.
type cancelling struct {
	from   io.Reader
	cancel func()
	after  int
}

func (c *cancelling) Read(p []byte) (int, error) {
	if c.after--; c.after < 0 {
		c.cancel()
	}
	return c.from.Read(p)
}

func TestCancelAndSinkErrorsEndReading(t *testing.T) {
	t.Parallel()
	ctx, cancel := context.WithCancel(t.Context())
	defer cancel()
	in := &cancelling{from: &endless{head: smallReadings, fill: '\n'}, cancel: cancel, after: 5}
	if _, err := readHeld(ctx, Input{Name: "w.csv", R: in}); !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled: %v", err)
	}
	late, stop := context.WithTimeout(t.Context(), -time.Second)
	defer stop()
	if _, err := readHeld(late, Input{Name: "w.csv", R: strings.NewReader(smallReadings)}); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("too late: %v", err)
	}
	full := errors.New("no room")
	_, err := Read(t.Context(), Input{Name: "w.csv", R: strings.NewReader(smallReadings)}, Sink{Measurement: func(*Measurement) error { return full }})
	if err != full {
		t.Errorf("sink: %v, want its own error", err)
	}
}
