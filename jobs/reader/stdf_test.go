package reader

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"epitally/analytics"
	"epitally/testdata/sharedtest"
)

// expectedFile is what ../shared/data/stdf/expected.json says of one file.
type expectedFile struct {
	File   string `json:"file"`
	Bytes  int64  `json:"uncompressed_bytes"`
	SHA256 string `json:"uncompressed_sha256"`
	MIR    struct {
		Lot     string `json:"LOT_ID"`
		Station string `json:"NODE_NAM"`
	}
	Wafers []struct {
		ID        string `json:"wafer_id"`
		Start     int64  `json:"start_t"`
		Distinct  int    `json:"distinct_xy"`
		Repeated  int    `json:"xy_tested_more_than_once"`
		LastPass  int    `json:"pass_last_wins"`
		FirstPass int    `json:"pass_first_wins"`
		X         []int  `json:"x_range"`
		Y         []int  `json:"y_range"`
		WRR       struct {
			ID string `json:"WAFER_ID"`
		} `json:"wrr"`
	} `json:"wafers"`
	Endian        string `json:"endian"`
	Parts         int    `json:"parts"`
	Outside       int    `json:"PTR_outside_a_part"`
	Passed        int    `json:"parts_pass"`
	DistinctTests int    `json:"distinct_PTR_tests"`
	Tests         []struct {
		Number int64    `json:"test_num"`
		Name   string   `json:"name"`
		Units  string   `json:"units"`
		N      int      `json:"n_usable"`
		Min    *float64 `json:"min"`
		Max    *float64 `json:"max"`
		Mean   *float64 `json:"mean"`
	} `json:"first_PTR_tests"`
}

// sharedSTDF finds the public STDF files beside the checkout.
func sharedSTDF(t testing.TB) (dir string, files map[string]expectedFile) {
	t.Helper()
	dir = sharedtest.Path(t, "data/stdf")
	var list []expectedFile
	if err := json.Unmarshal(sharedtest.Read(t, "data/stdf/expected.json"), &list); err != nil {
		t.Fatal(err)
	}
	files = map[string]expectedFile{}
	for _, f := range list {
		files[f.File] = f
	}
	return dir, files
}

func readSTDFFile(t *testing.T, path string, in Input) (held, error) {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	in.Name, in.R = filepath.Base(path), f
	return readHeld(t.Context(), in)
}

func planeOf(m *Measurement, name string) (values []float64) {
	for i := range m.Planes {
		if m.Planes[i].Quantity == name {
			return m.Planes[i].Floats(nil)
		}
	}
	return nil
}

func count(values []float64, of float64) (n int) {
	for _, v := range values {
		if v == of {
			n++
		}
	}
	return n
}

const firstWinsProfile = "profile: first\nformat: stdf\nmatch: '*'\nduplicates: first\ntime: {zone: UTC}\n"

// TestPublicSTDFFilesByField checks wafers, dies, retests, passes (hard bin 1
// in these files) and coordinates against expected.json.
func TestPublicSTDFFilesByField(t *testing.T) {
	t.Parallel()
	dir, files := sharedSTDF(t)
	first := []Profile{parsedProfile(t, firstWinsProfile)}
	for _, name := range []string{"three-wafers.stdf", "one-wafer.stdf.gz", "extremes.std"} {
		want := files[name]
		last, err := readSTDFFile(t, filepath.Join(dir, name), Input{})
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		byFirst, err := readSTDFFile(t, filepath.Join(dir, name), Input{Profiles: first})
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if last.result.SHA256 != want.SHA256 || last.result.Bytes != want.Bytes || last.result.Format != "stdf" || len(last.measurements) != len(want.Wafers) {
			t.Fatalf("%s: %+v", name, last.result)
		}
		for i, w := range want.Wafers {
			m := last.measurements[i]
			xMin, yMin, xMax, yMax := m.Grid.Bounds()
			have := fmt.Sprint(m.Wafer, m.Lot, m.Station, m.Kind, m.MeasuredAt.Unix(), m.Grid.Len(), m.Remeasured, []int{xMin, xMax}, []int{yMin, yMax})
			expect := fmt.Sprint(w.WRR.ID, want.MIR.Lot, want.MIR.Station, "probe", w.Start, w.Distinct, w.Repeated, w.X, w.Y)
			if have != expect {
				t.Errorf("%s, wafer %d:\n %s\nwant\n %s", name, i, have, expect)
			}
			if n := count(planeOf(m, testerPass), 1); n != w.LastPass {
				t.Errorf("%s, wafer %s: the tester passes %d by the last test, want %d", name, m.Wafer, n, w.LastPass)
			}
			if name == "extremes.std" { // its part passes in bin 21862
				continue
			}
			if n := count(planeOf(m, "hard_bin"), 1); n != w.LastPass {
				t.Errorf("%s, wafer %s: %d pass by the last test, want %d", name, m.Wafer, n, w.LastPass)
			}
			if n := count(planeOf(byFirst.measurements[i], "hard_bin"), 1); n != w.FirstPass {
				t.Errorf("%s, wafer %s: %d pass by the first test, want %d", name, m.Wafer, n, w.FirstPass)
			}
			checkMeasurement(t, m)
		}
	}
}

// TestPublicSTDFRecords checks the usable results of the tests that expected.json
// lists, in every file, whether it makes a map or not. Its statistics are over
// all parts, retests included: they are taken from each part before it closes.
func TestPublicSTDFRecords(t *testing.T) {
	t.Parallel()
	const tolerance = 1e-8 // expected.json prints 9 digits
	dir, files := sharedSTDF(t)
	for name, want := range files {
		got := walkSTDF(t, filepath.Join(dir, name))
		have := fmt.Sprint(got.prr, got.tests.seen, got.passed, got.order)
		order := map[string]string{"little": "LittleEndian", "big": "BigEndian"}[want.Endian]
		if expect := fmt.Sprint(want.Parts, want.DistinctTests, want.Passed, order); have != expect {
			t.Errorf("%s: parts, tests, passed, order: %s, want %s", name, have, expect)
		}
		for _, one := range want.Tests {
			known := got.tests.byNumber[uint32(one.Number)]
			if known == nil {
				t.Errorf("%s: no test %d", name, one.Number)
				continue
			}
			test := known.test
			if latin1([]byte(known.text)) != one.Name {
				test = known.other[one.Name]
			}
			if unit := got.tests.list[test].quantity.Unit; unit != one.Units {
				t.Errorf("%s, test %d: unit %q, want %q", name, one.Number, unit, one.Units)
			}
			s := got.sums[test]
			if s.n+want.Outside != one.N && s.n != one.N { // it counts results outside any part, too
				t.Errorf("%s, test %d: %d usable results, want %d", name, one.Number, s.n, one.N)
			}
			if s.n == 0 || s.n != one.N {
				continue
			}
			near := func(a, b float64) bool { return math.Abs(a-b) <= tolerance*max(math.Abs(*one.Min), math.Abs(*one.Max)) }
			if !near(s.low, *one.Min) || !near(s.high, *one.Max) || !near(s.sum/float64(s.n), *one.Mean) {
				t.Errorf("%s, test %d: %g … %g, mean %g; want %g … %g, mean %g", name, one.Number, s.low, s.high, s.sum/float64(s.n), *one.Min, *one.Max, *one.Mean)
			}
		}
	}
}

type walkedSum struct {
	n              int
	low, high, sum float64
}

// walked is what a file's records hold, wafer or no wafer.
type walked struct {
	prr, passed int
	tests       stdfTests
	order       string
	sums        map[int]walkedSum // by test
}

// walkSTDF takes a file record by record through the reader and looks at every
// part just before its PRR. What the reader refuses is passed over.
func walkSTDF(t *testing.T, path string) walked {
	t.Helper()
	file, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	src, err := openSource(file, DefaultMaxBytes)
	if err != nil {
		t.Fatal(err)
	}
	defer src.close()
	r, err := (&job{in: Input{Zone: time.UTC}, res: &Result{}, src: src}).newSTDF()
	if err != nil {
		t.Fatal(err)
	}
	f := newFeed(t.Context(), src)
	defer f.close()
	r.rec = &records{feed: f}
	if err := r.begin(); err != nil {
		t.Fatal(err)
	}
	got := walked{order: fmt.Sprint(r.rec.order), sums: map[int]walkedSum{}}
	for {
		f, err := r.rec.next()
		if errors.Is(err, io.EOF) {
			got.tests = r.tests
			return got
		}
		if err != nil {
			t.Fatal(err)
		}
		if r.rec.kindNow == recPRR {
			got.prr++
			if f.b[2]&(partFailed|partNoVerdict) == 0 {
				got.passed++
			}
			part := r.parts[site{f.b[0], f.b[1]}]
			if part == nil { // a PRR without a PIR
				part = &stdfPart{}
			}
			for _, test := range part.ran {
				s, v := got.sums[test], float64(part.values[test])
				if s.n == 0 {
					s.low, s.high = v, v
				}
				got.sums[test] = walkedSum{s.n + 1, min(s.low, v), max(s.high, v), s.sum + v}
			}
		}
		var fault *analytics.Fault
		if err := r.take(&f); err != nil && !errors.As(err, &fault) {
			t.Fatal(err)
		}
	}
}

func TestPublicSTDFFilesRefused(t *testing.T) {
	t.Parallel()
	dir, _ := sharedSTDF(t)
	for name, says := range map[string]string{
		"packaged-parts.std":    "packaged parts",
		"four-sites.stdf.gz":    "belongs to no wafer",
		"tiny-no-part.stdf":     "it is cut",
		"tiny-one-part.stdf":    "belongs to no wafer",
		"every-record.stdf.bz2": "belongs to no wafer",
	} {
		got, err := readSTDFFile(t, filepath.Join(dir, name), Input{})
		var f *analytics.Fault
		if !errors.As(err, &f) || f.Offset <= 0 || f.Remedy == "" || !strings.Contains(f.Problem, says) || len(got.measurements) != 0 {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// TestSTDFCutAnywhereIsRefused cuts a file at many places.
func TestSTDFCutAnywhereIsRefused(t *testing.T) {
	t.Parallel()
	dir, _ := sharedSTDF(t)
	whole, err := os.ReadFile(filepath.Join(dir, "three-wafers.stdf"))
	if err != nil {
		t.Fatal(err)
	}
	for cut := 1; cut < len(whole); cut += 1 + cut/3 + len(whole)/150 {
		for _, at := range []int{cut, len(whole) - cut} {
			_, err := readHeld(t.Context(), Input{Name: "a.stdf", R: strings.NewReader(string(whole[:at]))})
			var f *analytics.Fault
			if !errors.As(err, &f) || at > 6 && (f.Offset <= 0 || f.Offset > int64(at)) {
				t.Fatalf("cut at %d: %v", at, err)
			}
		}
	}
}

// TestSTDFByProfile maps tests by number and name, with units converted.
func TestSTDFByProfile(t *testing.T) {
	t.Parallel()
	dir, files := sharedSTDF(t)
	want := files["three-wafers.stdf"].Tests[0]
	profile := parsedProfile(t, fmt.Sprintf(`profile: wafers
format: stdf
match: {regexp: '^three'}
quantities:
  - {quantity: first_mv, test: %d, unit: %s, store_unit: %s, label: First, resolution: 0.1}
  - {quantity: forward_voltage_v, test_name: no such test, unit: V}
constants: {kind: final, station: T9}
coordinates: {negate: y}
time: {zone: Europe/Berlin}
`, want.Number, want.Units, "m"+want.Units))
	got, err := readSTDFFile(t, filepath.Join(dir, "three-wafers.stdf"), Input{Profiles: []Profile{profile}})
	if err != nil {
		t.Fatal(err)
	}
	m := got.measurements[0]
	names := ""
	for _, q := range m.Quantities {
		names += q.Name + " "
	}
	if m.Kind != "final" || m.Station != "T9" || names != "first_mv tester_pass hard_bin soft_bin " {
		t.Errorf("%s, %s: %s", m.Kind, m.Station, names)
	}
	if _, yMin, _, yMax := m.Grid.Bounds(); yMin != -25 || yMax != -14 {
		t.Errorf("y from %d to %d; negated it is from -25 to -14", yMin, yMax)
	}
	low := math.Inf(1)
	for _, m := range got.measurements {
		for _, v := range planeOf(m, "first_mv") {
			if v == v {
				low = min(low, v)
			}
		}
	}
	const tolerance = 1e-6 // binary32
	if math.Abs(low-*want.Min*1000) > tolerance*math.Abs(*want.Min*1000) {
		t.Errorf("lowest %g m%s, want %g", low, want.Units, *want.Min*1000)
	}
	if l := m.Layout; l == nil || l.WaferDiameterMM != 150 || l.DiePitchXMM != 4.392 || l.DiePitchYMM != 4.439 || l.Mark != "flat" || l.MarkAngleDeg != 270 || l.XAxis != "right" || l.YAxis != "up" {
		t.Errorf("layout %+v; the WCR states 15 cm, 0.4392 × 0.4439 cm, flat down, X right, Y down, which the profile turns up", l)
	}
	if len(got.result.Notices) != 1 || !strings.Contains(got.result.Notices[0], "forward_voltage_v") {
		t.Errorf("notices %q; want one for the test that is not there", got.result.Notices)
	}
}
