package jobs

import (
	"compress/gzip"
	"context"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"epitally/analytics"
	"epitally/db"
	"epitally/db/dbtest"
)

func TestMain(m *testing.M) { dbtest.Main(m) }

// testBundle is a drop folder over an own database.
type testBundle struct {
	store   *db.Store
	dir     string
	folder  *Folder
	scanner *Scanner
}

func setup(t *testing.T) *testBundle {
	t.Helper()
	b := &testBundle{store: dbtest.New(t), dir: t.TempDir()}
	var err error
	if b.folder, err = OpenFolder(b.dir, 0, time.Now); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { b.folder.Close() })
	b.scanner = NewScanner(b.folder, b.loaderConfig(), 2)
	return b
}

func (b *testBundle) loaderConfig() LoaderConfig {
	return LoaderConfig{Store: b.store, Logger: slog.New(slog.DiscardHandler), Zone: time.UTC, Now: time.Now}
}

func (b *testBundle) drop(t *testing.T, name, text string) {
	t.Helper()
	path := filepath.Join(b.dir, name)
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	// An earlier time, so that the file has settled whatever the clock's grain.
	if err := os.Chtimes(path, time.Time{}, time.Now().Add(-time.Minute)); err != nil {
		t.Fatal(err)
	}
}

func (b *testBundle) scan(t *testing.T) ScanResult {
	t.Helper()
	r, err := b.scanner.Scan(context.Background())
	if err != nil {
		t.Fatalf("scan: %v", err)
	}
	return r
}

func (b *testBundle) exists(name string) bool {
	_, err := os.Lstat(filepath.Join(b.dir, name))
	return err == nil
}

func (b *testBundle) refusal(t *testing.T, name string) db.Source {
	t.Helper()
	rows, _, err := b.store.Sources(context.Background(), db.SourceRefused, 100, "")
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range rows {
		if r.Name == name {
			return r
		}
	}
	t.Fatalf("no refused source %s among %d", name, len(rows))
	return db.Source{}
}

const testCatalogue = `catalogue: test
products:
  - product: tern-10
    layout:
      wafer_diameter_mm: 50
      die_pitch_x_mm: 10
      die_pitch_y_mm: 10
      edge_exclusion_mm: 2
      mark: flat
      mark_angle_deg: 270
      x_axis: right
      y_axis: up
      centre_x: 0
      centre_y: 0
recipes:
  - recipe: blue
    targets:
      - {quantity: dominant_wavelength_nm, value: 455, window: 2.5}
`

const testSpec = `specification: harbour
kind: probe
products: [tern-10]
rejects:
  - {reason: open, when: forward_voltage_v > 4.5}
axes:
  - {axis: W, quantity: dominant_wavelength_nm, edges: [450, 455, 460], below: short, above: long}
bins:
  name: "{W}"
  sellable: all
`

const testRunSheet = "# epitally: run sheet\nwafer,lot,reactor,run,grown_at,carrier,ring,pocket,recipe,product\n" +
	"T-0001,L1,Tern,7,2026-11-01T00:00:00Z,C1,A,3,blue,tern-10\n"

// readings is a probe measurement of nine dies; five lie inside the layout's
// edge exclusion (the corners of the 3 × 3 block reach 21.2 mm; its limit is 23 mm,
// so all nine are inside).
func readings(wafer string, hour int, lines ...string) string {
	head := fmt.Sprintf("# epitally: die readings\n# wafer: %s\n# kind: probe\n# station: P1\n# measured at: 2026-11-02T%02d:00:00Z\nx,y,dominant_wavelength_nm,forward_voltage_v\n", wafer, hour)
	if lines == nil {
		for y := -1; y <= 1; y++ {
			for x := -1; x <= 1; x++ {
				lines = append(lines, fmt.Sprintf("%d,%d,%d.25,3.1%d", x, y, 453+x+y, y+1))
			}
		}
	}
	return head + strings.Join(lines, "\n") + "\n"
}

func TestScanLoadsBinsAndFilesAway(t *testing.T) {
	t.Parallel()
	b := setup(t)
	b.drop(t, "probe/t1.csv", readings("T-0001", 5))
	b.drop(t, "zz-catalogue.yaml", testCatalogue) // by name last, by rank first
	b.drop(t, "harbour.yaml", testSpec)
	b.drop(t, "runs.csv", testRunSheet)
	if r := b.scan(t); r.Stored != 4 || r.Refused != 0 || r.Left != 0 {
		t.Fatalf("scan: %+v", r)
	}
	for _, name := range []string{"loaded/probe/t1.csv", "loaded/zz-catalogue.yaml", "loaded/harbour.yaml", "loaded/runs.csv"} {
		if !b.exists(name) {
			t.Errorf("%s is missing", name)
		}
	}
	page, err := b.store.Wafers(context.Background(), db.WaferFilter{})
	if err != nil || len(page.Rows) != 1 {
		t.Fatalf("wafers: %v, %+v", err, page)
	}
	row := page.Rows[0]
	if row.Wafer.Reactor != "Tern" || row.State != "on colour" {
		t.Errorf("reactor %q, state %q; want Tern, on colour", row.Wafer.Reactor, row.State)
	}
	// 453.25 + x + y ≥ 455 only at (1, 1): 455.25 is in the second cell; all nine sell.
	if row.Tally == nil || row.Tally.Good != 9 || !row.Tally.OverLayout || row.Tally.Denominator < 9 {
		t.Errorf("tally %+v; want 9 good over the layout", row.Tally)
	}
}

// TestScanBinsAgainWhenDocumentsComeLater drops readings first: tallies and
// state follow once the documents are there.
func TestScanBinsAgainWhenDocumentsComeLater(t *testing.T) {
	t.Parallel()
	b := setup(t)
	b.drop(t, "t1.csv", readings("T-0001", 5))
	b.scan(t)
	for _, later := range []struct{ name, text string }{{"c.yaml", testCatalogue}, {"s.yaml", testSpec}, {"r.csv", testRunSheet}} {
		b.drop(t, later.name, later.text)
		b.scan(t)
	}
	page, err := b.store.Wafers(context.Background(), db.WaferFilter{})
	if err != nil || len(page.Rows) != 1 || page.Rows[0].Tally == nil || page.Rows[0].Tally.Good != 9 || page.Rows[0].State != "on colour" {
		t.Fatalf("%v: %+v", err, page)
	}
}

func TestBadFilesAreRefusedWithReasonAndPlace(t *testing.T) {
	t.Parallel()
	b := setup(t)
	b.drop(t, "c.yaml", testCatalogue)
	b.drop(t, "r.csv", testRunSheet)
	cut := gzipped(t, readings("T-0002", 6))
	for _, c := range []struct{ name, text, says string }{
		{"duplicate.csv", readings("T-0003", 5, "0,0,453.1,3.1", "1,0,453.1,3.1", "0,0,453.2,3.1"), "(0, 0)"},
		{"off-wafer.csv", readings("T-0001", 5, "0,0,453.1,3.1", "9,0,453.1,3.1"), "90.0 mm"},
		{"stray.csv", readings("T-0003", 5, "0,0,453.1,3\"1"), "line 7"},
		{"nul.csv", readings("T-0003", 5, "0,0,453\x00.1,3.1"), "line 7"},
		{"notfinite.csv", readings("T-0003", 5, "0,0,inf,3.1"), "line 7"},
		{"empty.csv", "", "empty"},
		{"cut.csv.gz", cut[:len(cut)-9], "gzip"},
		{"unit.csv", "# epitally: die readings\n# wafer: T-9\n# kind: probe\n# measured at: 2026-11-02T05:00:00Z\nx,y,forward_voltage_furlong\n0,0,1\n", "forward_voltage_furlong"},
		{"strange.bin", "\x01\x02\x03 nothing known", "strange.bin"},
	} {
		b.drop(t, c.name, c.text)
		r := b.scan(t)
		if r.Refused != 1 && c.name != "duplicate.csv" {
			t.Errorf("%s: scan %+v; want one refused", c.name, r)
		}
		src := b.refusal(t, c.name)
		if !strings.Contains(src.Reason, c.says) {
			t.Errorf("%s: reason %q does not say %q", c.name, src.Reason, c.says)
		}
		if !b.exists("rejected/"+c.name) || !b.exists("rejected/"+c.name+".reason.txt") || b.exists(c.name) {
			t.Errorf("%s is not filed in rejected/ with its reason", c.name)
		}
	}
	page, err := b.store.Wafers(context.Background(), db.WaferFilter{})
	if err != nil {
		t.Fatal(err)
	}
	for _, row := range page.Rows {
		if row.Measurement != nil {
			t.Errorf("wafer %s has a measurement out of a refused file", row.Wafer.Name)
		}
	}
}

func gzipped(t *testing.T, text string) string {
	t.Helper()
	var out strings.Builder
	z := gzip.NewWriter(&out)
	if _, err := z.Write([]byte(text)); err != nil {
		t.Fatal(err)
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	return out.String()
}

func TestLinksAndFoldersStayHarmless(t *testing.T) {
	t.Parallel()
	b := setup(t)
	outside := filepath.Join(t.TempDir(), "outside.csv")
	if err := os.WriteFile(outside, []byte(readings("T-0004", 5)), 0o644); err != nil {
		t.Fatal(err)
	}
	if err := os.Symlink(outside, filepath.Join(b.dir, "link.csv")); err != nil {
		t.Fatal(err)
	}
	if err := os.Mkdir(filepath.Join(b.dir, "folder.csv"), 0o755); err != nil {
		t.Fatal(err)
	}
	if r := b.scan(t); r.Refused != 1 || r.Stored != 0 {
		t.Fatalf("scan: %+v; want the link refused and the folder walked", r)
	}
	if src := b.refusal(t, "link.csv"); !strings.Contains(src.Reason, "drop folder") {
		t.Errorf("reason %q does not say that links stay inside the drop folder", src.Reason)
	}
	if _, err := os.Stat(outside); err != nil {
		t.Errorf("the file behind the link was touched: %v", err)
	}
}

func TestTheSameBytesAreStoredOnce(t *testing.T) {
	t.Parallel()
	b := setup(t)
	text := readings("T-0001", 5)
	b.drop(t, "a.csv", text)
	b.scan(t)
	b.drop(t, "b.csv", text)
	if r := b.scan(t); r.Refused != 1 {
		t.Fatalf("second name: %+v", r)
	}
	if src := b.refusal(t, "b.csv"); !strings.Contains(src.Reason, "a.csv") {
		t.Errorf("reason %q does not name the earlier source", src.Reason)
	}
	// The process was stopped between the commit and the move: the file is still
	// there under its own name, and is only moved.
	b.drop(t, "a.csv", text)
	if r := b.scan(t); r.Stored != 1 || r.Refused != 0 || b.exists("a.csv") {
		t.Fatalf("own name again: %+v", r)
	}
	w, err := b.store.Wafer(context.Background(), "T-0001")
	if err != nil {
		t.Fatal(err)
	}
	ms, err := b.store.Measurements(context.Background(), w.ID)
	if err != nil || len(ms) != 1 {
		t.Fatalf("%d measurements, %v; want 1", len(ms), err)
	}
}

// slowReader gives a file's bytes, and changes the file before the last ones.
type slowReader struct {
	r      *strings.Reader
	change func()
}

func (s *slowReader) Read(p []byte) (int, error) {
	n, err := s.r.Read(p)
	if err != nil && s.change != nil {
		s.change()
		s.change = nil
	}
	return n, err
}

func TestAFileWrittenWhileReadIsLeftAlone(t *testing.T) {
	t.Parallel()
	b := setup(t)
	text := readings("T-0001", 5)
	b.drop(t, "growing.csv", text)
	before, err := os.Stat(filepath.Join(b.dir, "growing.csv"))
	if err != nil {
		t.Fatal(err)
	}
	in := &slowReader{r: strings.NewReader(text), change: func() { b.drop(t, "growing.csv", text+"2,0,453.1,3.1\n") }}
	_, err = NewLoader(b.loaderConfig()).Load(context.Background(), Incoming{Name: "growing.csv", R: in,
		Unchanged: func() error { return b.folder.unchanged("growing.csv", before) }})
	if !errors.Is(err, errChanged) {
		t.Fatalf("load: %v; want errChanged", err)
	}
	if _, err := b.store.Wafer(context.Background(), "T-0001"); !errors.Is(err, analytics.ErrNotFound) {
		t.Fatalf("wafer: %v; want nothing stored", err)
	}
}

func TestUnsettledFilesWait(t *testing.T) {
	t.Parallel()
	b := setup(t)
	b.folder.settle = time.Hour
	b.drop(t, "fresh.csv", readings("T-0001", 5))
	if r := b.scan(t); r.Left != 1 || r.Stored != 0 {
		t.Fatalf("fresh: %+v", r)
	}
	ahead := time.Now().Add(24 * time.Hour)
	if err := os.Chtimes(filepath.Join(b.dir, "fresh.csv"), ahead, ahead); err != nil {
		t.Fatal(err)
	}
	if r := b.scan(t); r.Left != 1 {
		t.Fatalf("dated ahead, first look: %+v", r)
	}
	if r := b.scan(t); r.Stored != 1 {
		t.Fatalf("dated ahead, second look: %+v", r)
	}
}

func TestAFileTakenAwayIsNoRefusal(t *testing.T) {
	t.Parallel()
	b := setup(t)
	b.drop(t, "gone.csv", readings("T-0001", 5))
	listed, _, err := b.folder.list()
	if err != nil || len(listed) != 1 {
		t.Fatalf("%v, %d files", err, len(listed))
	}
	if err := os.Remove(filepath.Join(b.dir, "gone.csv")); err != nil {
		t.Fatal(err)
	}
	src, err := b.scanner.one(context.Background(), b.scanner.loaders[0], listed[0], nil)
	if !errors.Is(err, errGone) || src.State == db.SourceRefused {
		t.Errorf("%v, state %q; want errGone and no refusal", err, src.State)
	}
}
