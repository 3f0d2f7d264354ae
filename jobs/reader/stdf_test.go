package reader

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"epitally/analytics"
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
	DistinctTests int `json:"distinct_PTR_tests"`
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
	at, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	for ; at != filepath.Dir(at); at = filepath.Dir(at) {
		dir = filepath.Join(at, "shared", "data", "stdf")
		text, err := os.ReadFile(filepath.Join(dir, "expected.json"))
		if err != nil {
			continue
		}
		var list []expectedFile
		if err := json.Unmarshal(text, &list); err != nil {
			t.Fatal(err)
		}
		files = map[string]expectedFile{}
		for _, f := range list {
			files[f.File] = f
		}
		return dir, files
	}
	t.Skip("shared/data/stdf is not beside the checkout")
	return "", nil
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
			if name == "extremes.std" { // its part passes in bin 21862
				continue
			}
			if n := count(planeOf(m, "hard_bin"), 1); n != w.LastPass {
				t.Errorf("%s, wafer %s: %d pass by the last test, want %d", name, m.Wafer, n, w.LastPass)
			}
			if n := count(planeOf(byFirst.measurements[i], "hard_bin"), 1); n != w.FirstPass {
				t.Errorf("%s, wafer %s: %d pass by the first test, want %d", name, m.Wafer, n, w.FirstPass)
			}
			if err := m.Grid.Check(); err != nil {
				t.Error(err)
			}
		}
	}
}

// TestPublicSTDFResults checks the usable results of the tests that
// expected.json lists. Retests are in its statistics, so that three-wafers,
// which has none, is compared exactly, and one-wafer by bounds.
func TestPublicSTDFResults(t *testing.T) {
	t.Parallel()
	const tolerance = 1e-6 // expected.json prints 9 digits of binary32 results
	dir, files := sharedSTDF(t)
	for _, name := range []string{"three-wafers.stdf", "one-wafer.stdf.gz"} {
		got, err := readSTDFFile(t, filepath.Join(dir, name), Input{})
		if err != nil {
			t.Fatal(err)
		}
		tests := 0
		for _, q := range got.measurements[0].Quantities {
			if q.Declared {
				tests++
			}
		}
		if tests > files[name].DistinctTests || tests < 60 {
			t.Errorf("%s: %d tests became quantities, of %d", name, tests, files[name].DistinctTests)
		}
		for _, want := range files[name].Tests {
			n, low, high, sum, unit := 0, math.Inf(1), math.Inf(-1), 0.0, ""
			for _, m := range got.measurements {
				for i, q := range m.Quantities {
					if !strings.HasPrefix(q.Name, fmt.Sprintf("t%d_", want.Number)) {
						continue
					}
					unit = q.Unit
					for _, v := range m.Planes[i].Floats(nil) {
						if v == v {
							n, low, high, sum = n+1, min(low, v), max(high, v), sum+v
						}
					}
				}
			}
			if unit != want.Units {
				t.Errorf("%s, test %d: unit %q, want %q", name, want.Number, unit, want.Units)
			}
			if want.N == 0 {
				continue
			}
			close := func(a, b float64) bool { return math.Abs(a-b) <= tolerance*max(math.Abs(a), math.Abs(b), 1e-9) }
			exact := name == "three-wafers.stdf"
			if exact && (n != want.N || !close(low, *want.Min) || !close(high, *want.Max) || !close(sum/float64(n), *want.Mean)) {
				t.Errorf("%s, test %d: n %d, %g … %g, mean %g; want %d, %g … %g, mean %g", name, want.Number, n, low, high, sum/float64(n), want.N, *want.Min, *want.Max, *want.Mean)
			}
			if !exact && (n > want.N || n < want.N/2 || low < *want.Min-1e-6*math.Abs(*want.Min) || high > *want.Max+1e-6*math.Abs(*want.Max)) {
				t.Errorf("%s, test %d: n %d, %g … %g; want within %d, %g … %g", name, want.Number, n, low, high, want.N, *want.Min, *want.Max)
			}
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
	if m.Kind != "final" || m.Station != "T9" || names != "first_mv hard_bin soft_bin test_time_ms " && names != "first_mv hard_bin soft_bin " {
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
	if l := m.Layout; l == nil || l.WaferDiameterMM != 150 || l.DiePitchXMM != 4.392 || l.DiePitchYMM != 4.439 || l.Mark != "flat" || l.MarkAngleDeg != 270 || l.XAxis != "right" || l.YAxis != "down" {
		t.Errorf("layout %+v; the WCR states 15 cm, 0.4392 × 0.4439 cm, flat down, X right, Y down", l)
	}
	if len(got.result.Notices) != 1 || !strings.Contains(got.result.Notices[0], "forward_voltage_v") {
		t.Errorf("notices %q; want one for the test that is not there", got.result.Notices)
	}
}

// tinySTDF is FAR, WIR, PIR, PTR, PRR and WRR of one die at (2, 3), little-endian.
const tinySTDF = "\x02\x00\x00\x0a\x02\x04" +
	"\x0a\x00\x02\x0a\x01\xff\x00\x00\x00\x40\x03W-1" +
	"\x02\x00\x05\x0a\x01\x01" +
	"\x15\x00\x0f\x0a\xe8\x03\x00\x00\x01\x01\x00\x00\x00\x00\x48\x40\x02Vf\x00\x00\x00\x00\x00\x00" +
	"\x0e\x00\x05\x14\x01\x01\x00\x01\x00\x01\x00\xff\xff\x02\x00\x03\x00\x00" +
	"\x06\x00\x02\x14\x01\xff\x00\x00\x00\x40"

func TestTinySTDFInBothByteOrders(t *testing.T) {
	t.Parallel()
	big := bigEndian(tinySTDF)
	for name, text := range map[string]string{"little": tinySTDF, "big": big} {
		got, err := readHeld(t.Context(), Input{Name: "a.stdf", R: strings.NewReader(text)})
		if err != nil || len(got.measurements) != 1 {
			t.Fatalf("%s: %v, %+v", name, err, got.result)
		}
		m := got.measurements[0]
		// 0x40480000 is 3.125; 0x40000000 s after 1970 is 2004-01-10.
		if have := fmt.Sprint(m.Wafer, m.Grid.X, m.Grid.Y, m.Quantities[0].Name, m.Planes[0].F32, planeOf(m, "hard_bin"), planeOf(m, "soft_bin"), m.MeasuredAt.Format("2006-01-02")); have != "W-1[2] [3]t1000_vf[3.125] [1] []2004-01-10" {
			t.Errorf("%s: %s", name, have)
		}
	}
	for name, text := range map[string]string{"version": "\x02\x00\x00\x0a\x02\x03", "VAX": "\x02\x00\x00\x0a\x00\x04"} {
		var f *analytics.Fault
		if _, err := readHeld(t.Context(), Input{R: strings.NewReader(text)}); !errors.As(err, &f) || f.Offset <= 0 {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// bigEndian turns tinySTDF's numbers over.
func bigEndian(text string) string {
	b := []byte(text)
	swap := func(at, n int) { slices.Reverse(b[at : at+n]) }
	for at := 0; at < len(b); {
		n := int(b[at]) | int(b[at+1])<<8
		kind, body := recordKind{b[at+2], b[at+3]}, at+4
		swap(at, 2)
		switch kind {
		case recWIR, recWRR:
			swap(body+2, 4)
		case recPTR:
			swap(body, 4)
			swap(body+8, 4)
		case recPRR:
			for _, k := range []int{3, 5, 7, 9, 11} {
				swap(body+k, 2)
			}
		}
		at = body + n
	}
	return string(b)
}

func FuzzSTDF(f *testing.F) {
	f.Add([]byte(tinySTDF))
	f.Add([]byte(bigEndian(tinySTDF)))
	f.Fuzz(func(t *testing.T, text []byte) {
		readHeld(t.Context(), Input{Name: "a.stdf", R: strings.NewReader(string(text)), MaxBytes: 1 << 20})
	})
}
