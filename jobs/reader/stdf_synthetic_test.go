package reader

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"epitally/analytics"
	"epitally/analytics/quantity"
)

// checkMeasurement holds a measurement to its own rules.
func checkMeasurement(t testing.TB, m *Measurement) {
	t.Helper()
	if err := m.Grid.Check(); err != nil {
		t.Error(err)
	}
	if len(m.Planes) != len(m.Quantities) {
		t.Fatalf("%d planes of %d quantities", len(m.Planes), len(m.Quantities))
	}
	names := map[string]bool{}
	for i := range m.Planes {
		p, q := &m.Planes[i], m.Quantities[i]
		if err := p.Validate(); err != nil {
			t.Error(err)
		}
		if p.Quantity != q.Name || !quantity.ValidName(q.Name) || names[q.Name] || p.Len() != m.Grid.Len() {
			t.Errorf("plane %q of %d values for quantity %+v and %d dies", p.Quantity, p.Len(), q, m.Grid.Len())
		}
		names[q.Name] = true
	}
}

func TestSTDFInterleavedSitesInBothByteOrders(t *testing.T) {
	t.Parallel()
	zone := time.FixedZone("CET", 3600)
	for name, order := range byteOrders {
		got, err := readText(t, twoSites(order), Input{Zone: zone})
		if err != nil || len(got.measurements) != 1 {
			t.Fatalf("%s: %v, %+v", name, err, got.result)
		}
		m := got.measurements[0]
		checkMeasurement(t, m)
		var planes []string
		for i, q := range m.Quantities {
			planes = append(planes, fmt.Sprint(q.Name, " ", q.Unit, " ", m.Planes[i].Floats(nil)))
		}
		have := fmt.Sprint(m.Wafer, " ", m.Lot, " ", m.Station, " ", m.Kind, " ", m.MeasuredAt.UTC().Format(time.DateTime), m.Grid.X, m.Grid.Y, m.Remeasured,
			" ", m.Facts["part type"], " ", m.Facts["test program"], " ", m.Facts["job revision"], " ", m.Facts["operator"])
		if want := "W-1 L7 node-3 probe 2001-09-09 11:00:00[-5 -5 -4] [4 5 5] 1 P-9 job-1 rev B anna"; have != want {
			t.Errorf("%s:\n %s, want\n %s", name, have, want)
		}
		want := []string{"t7_vf_20_ma_v V [3.5 3.75 3.25]", "t8_ir_a A [NaN NaN 1e-06]", "tester_pass  [NaN 1 1]", "hard_bin  [1 1 1]", "soft_bin  [10 10 NaN]", "test_time_ms ms [11 10 NaN]"}
		planes[1] = strings.Replace(planes[1], fmt.Sprint(float64(float32(1e-6))), "1e-06", 1)
		if fmt.Sprint(planes) != fmt.Sprint(want) {
			t.Errorf("%s:\n %q, want\n %q", name, planes, want)
		}
		if len(m.Notices) != 1 || !strings.Contains(m.Notices[0], "2 tests") || !strings.Contains(m.Notices[0], "t9_never_v, t10_aborted_v") {
			t.Errorf("%s: notices %q; want one of the tests left out", name, m.Notices)
		}
		if len(got.result.Notices) != 1 || !strings.Contains(got.result.Notices[0], "zone") {
			t.Errorf("%s: notices %q; want one of the zone", name, got.result.Notices)
		}
	}
}

// TestSTDFFirstTestWins reads the other verdict of a die measured twice.
func TestSTDFFirstTestWins(t *testing.T) {
	t.Parallel()
	got, err := readText(t, twoSites(binary.BigEndian), Input{Profiles: []Profile{parsedProfile(t, firstWinsProfile)}})
	if err != nil {
		t.Fatal(err)
	}
	m := got.measurements[0]
	if have := fmt.Sprint(planeOf(m, "hard_bin"), planeOf(m, testerPass), planeOf(m, "t9_never_v")); have != "[1 3 1] [NaN 0 1] [NaN 7 NaN]" {
		t.Error(have)
	}
}

// TestSTDFCutAtEveryByte: whatever is missing at the end is noticed and located.
func TestSTDFCutAtEveryByte(t *testing.T) {
	t.Parallel()
	for name, order := range byteOrders {
		whole := twoSites(order)
		for cut := 4; cut < len(whole.b); cut++ {
			_, err := readText(t, &stdfWriter{b: whole.b[:cut]}, Input{})
			var f *analytics.Fault
			if !errors.As(err, &f) || f.Offset <= 0 || f.Offset > int64(cut) || f.Remedy == "" {
				t.Fatalf("%s, cut at %d: %v", name, cut, err)
			}
		}
	}
}

func TestSTDFRefused(t *testing.T) {
	t.Parallel()
	begin := func() *stdfWriter { return newSTDFText(binary.LittleEndian).mir(noon, "L", "", "") }
	many := begin().wir(1, noon, "W").pir(1, 1)
	for k := range uint32(maxTests + 1) {
		many.ptr(k, 1, 1, 1)
	}
	sparse := begin().wir(1, noon, "W").pir(1, 1)
	for k := range uint32(maxTests) {
		sparse.ptr(k, 1, 1, 1)
	}
	for k := range int16(maxValues/maxTests + 1) {
		sparse.prr(1, 1, 0, 1, 1, k, 0, 0)
	}
	for _, c := range []struct {
		says string
		w    *stdfWriter
		kind error
	}{
		{"belongs to no wafer", begin().die(1, 2, 3), analytics.ErrInvalid},
		{"belongs to no wafer", begin().wir(1, noon, "W").die(1, 2, 3).wrr(1, 1, "W").die(2, 2, 3).mrr(), analytics.ErrInvalid},
		{"packaged parts", begin().pir(1, 1).prr(1, 1, 0, 1, 1, noCoordinate, noCoordinate, 0), analytics.ErrInvalid},
		{"none of the 2 parts", begin().wir(1, noon, "W").die(noCoordinate, noCoordinate, 1).die(noCoordinate, 5, 1).wrr(1, 2, "W").mrr(), analytics.ErrInvalid},
		{"all 3 parts", begin().wir(1, noon, "W").die(0, 0, 1).die(0, 0, 2).die(0, 0, 3).wrr(1, 3, "W").mrr(), analytics.ErrInvalid},
		{"no wafer with dies", begin().wir(1, noon, "W").wrr(1, 0, "W").mrr(), analytics.ErrInvalid},
		{"VAX", (&stdfWriter{order: binary.LittleEndian}).rec(recFAR, uint8(0), uint8(4)), analytics.ErrInvalid},
		{"version 3", (&stdfWriter{order: binary.BigEndian}).rec(recFAR, uint8(1), uint8(3)), analytics.ErrInvalid},
		{"several STDF files", twoSites(binary.LittleEndian).rec(recFAR, uint8(2), uint8(4)), analytics.ErrInvalid},
		{"second MIR", begin().mir(noon, "M", "", ""), analytics.ErrInvalid},
		{"stands a second time", begin().wir(1, noon, "W").die(1, 2, 3).wrr(1, 1, "").wir(1, noon, "W").die(1, 2, 3).wrr(1, 1, "").mrr(), analytics.ErrInvalid},
		{"in the year 1970", newSTDFText(binary.LittleEndian).mir(9, "L", "", "").wir(1, 0, "W").die(1, 2, 3).wrr(1, 1, "").mrr(), analytics.ErrInvalid},
		{"the wafer name \"\" is empty", begin().wir(1, noon, "").die(1, 2, 3).wrr(1, 1, "").mrr(), analytics.ErrInvalid},
		{"parametric tests", many, analytics.ErrTooLarge},
		{"too many results", sparse.wrr(1, 1, "").mrr(), analytics.ErrTooLarge},
	} {
		got, err := readText(t, c.w, Input{})
		var f *analytics.Fault
		if !errors.As(err, &f) || f.Offset <= 0 || f.Remedy == "" || !strings.Contains(f.Problem, c.says) || !errors.Is(err, c.kind) {
			t.Errorf("%s: %v", c.says, err)
		}
		if c.kind == analytics.ErrTooLarge && len(got.measurements) != 0 {
			t.Errorf("%s: handed over", c.says)
		}
	}
}

// TestSTDFSurvives reads logs that break a rule of the format without loss.
func TestSTDFSurvives(t *testing.T) {
	t.Parallel()
	begin := func() *stdfWriter { return newSTDFText(binary.LittleEndian).mir(noon, "L", "", "") }
	for says, w := range map[string]*stdfWriter{
		"1 parts have no die coordinates": begin().wir(1, noon, "W").die(noCoordinate, noCoordinate, 9).die(1, 1, 3).wrr(1, 2, "").mrr(),
		"(no WRR record)":                 begin().wir(1, noon, "W").die(1, 1, 3).mrr(),
		"the tester counts 7 parts":       begin().wir(1, noon, "W").die(1, 1, 3).wrr(1, 7, "").mrr(),
		"1 parts were not opened":         begin().wir(1, noon, "W").prr(1, 1, 0, 1, 1, 2, 2, 0).die(1, 1, 3).wrr(1, 2, "").mrr(),
		"1 parts were not closed":         begin().wir(1, noon, "W").pir(1, 1).ptr(7, 1, 1, 9, "Vf").die(1, 1, 3).wrr(1, 1, "").mrr(),
		"1 results stand outside":         begin().wir(1, noon, "W").die(1, 1, 3).ptr(7, 1, 1, 9).flagged(7, 1, 1, testNotExecuted, 0, 0).wrr(1, 1, "").mrr(),
		"1 WRR records":                   begin().wir(1, noon, "W").die(1, 1, 3).wrr(1, 1, "").wrr(1, 0, "").mrr(),
		"no MIR and MRR":                  newSTDFText(binary.BigEndian).wir(1, noon, "W").die(1, 1, 3).wrr(1, 1, ""),
		"1 wafers have no dies":           begin().wir(1, noon, "V").wrr(1, 0, "").wir(1, noon, "W").die(1, 1, 3).wrr(1, 1, "").mrr(),
		"zone":                            begin().wir(2, 0, "W").die(1, 1, 3).wrr(2, 1, "").mrr(), // the time is the MIR's, head 1 the only wafer's
	} {
		got, err := readText(t, w, Input{})
		if err != nil || len(got.measurements) != 1 {
			t.Errorf("%s: %v", says, err)
			continue
		}
		m := got.measurements[0]
		checkMeasurement(t, m)
		told := strings.Join(append(got.result.Notices, m.Notices...), "\n")
		if !strings.Contains(told, says) || m.Wafer != "W" || !m.MeasuredAt.Equal(time.Unix(int64(noon), 0)) {
			t.Errorf("%s: wafer %s at %v, notices %q", says, m.Wafer, m.MeasuredAt, told)
		}
		for _, v := range planeOf(m, "t7_vf_v") {
			if v == 9 {
				t.Errorf("%s: a result of no part was taken", says)
			}
		}
	}
}

// TestSTDFTwoHeads keeps wafers apart that are tested at the same time.
func TestSTDFTwoHeads(t *testing.T) {
	t.Parallel()
	w := newSTDFText(binary.LittleEndian).mir(noon, "L", "", "").wir(1, noon, "W-1").wir(2, noon, "W-2").
		pir(1, 1).pir(2, 1).ptr(7, 2, 1, 22, "v").ptr(7, 1, 1, 11, "v").
		prr(2, 1, 0, 2, 2, 1, 1, 0).prr(1, 1, 0, 1, 1, 1, 1, 0).wrr(2, 1, "").wrr(1, 1, "").mrr()
	got, err := readText(t, w, Input{})
	if err != nil || len(got.measurements) != 2 {
		t.Fatal(err)
	}
	have := ""
	for _, m := range got.measurements {
		have += fmt.Sprint(m.Wafer, planeOf(m, "t7_v"), planeOf(m, "hard_bin"), " ")
	}
	if have != "W-2[22] [2] W-1[11] [1] " {
		t.Error(have)
	}
}

func TestSTDFGeometry(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		size, height, width float32
		units, flat         uint8
		want                string // diameter, pitch x, pitch y, mark, angle
		notices             int    // besides the zone's
	}{
		{4, 0.02, 0.01, 1, 'U', "101.6 0.254 0.508 flat 90", 0},
		{15, 0.4439, 0.4392, 2, 'D', "150 4.392 4.439 flat 270", 0},
		{150, 1.5, 0.3, 3, 'L', "150 0.3 1.5 flat 180", 0},
		{3937, 40, 20, 4, 'R', "99.9998 0.508 1.016 flat 0", 0},
		{15, 0, 0, 0, 'R', "0 0 0 flat 0", 1},
		{100, 200, -1, 3, ' ', "100 0 0  0", 2},
		{math.MaxFloat32, 1, float32(math.NaN()), 255, 'U', "0 0 0 flat 90", 2},
	} {
		for _, late := range []bool{false, true} {
			w := newSTDFText(binary.BigEndian).mir(noon, "L", "", "")
			wcr := func() {
				w.rec(recWCR, c.size, c.height, c.width, c.units, c.flat, int16(3), int16(4), uint8('L'), uint8('D'))
			}
			if !late {
				wcr()
			}
			w.wir(1, noon, "W").die(1, 1, 3).die(5, 7, 3).wrr(1, 2, "")
			if late { // behind the dies
				wcr()
			}
			got, err := readText(t, w.mrr(), Input{})
			if err != nil {
				t.Fatal(err)
			}
			l := got.measurements[0].Layout
			have := fmt.Sprint(l.WaferDiameterMM, l.DiePitchXMM, l.DiePitchYMM, " ", l.Mark, " ", l.MarkAngleDeg)
			if have != c.want || l.XAxis != "left" || l.YAxis != "down" || l.CentreX != 3 || l.CentreY != 4 || !l.Assumed || len(got.result.Notices) != 1+c.notices {
				t.Errorf("%+v, late %v: %s, %+v, notices %q", c, late, have, l, got.result.Notices)
			}
		}
	}
}

// TestSTDFGeometryByProfile turns the axes with the dies, and lets what the
// profile states stand.
func TestSTDFGeometryByProfile(t *testing.T) {
	t.Parallel()
	p := parsedProfile(t, "profile: p\nformat: stdf\nmatch: '*'\nconstants: {diameter: 100 mm, notch: down}\ncoordinates: {negate: [x], offset: [10, 0]}\n")
	w := newSTDFText(binary.LittleEndian).mir(noon, "L", "", "").
		rec(recWCR, float32(150), float32(2), float32(1), uint8(3), uint8('U'), int16(3), int16(4), uint8('L'), uint8('D')).
		wir(1, noon, "W").die(1, 1, 3).die(5, 7, 4).wrr(1, 2, "").mrr()
	got, err := readText(t, w, Input{Profiles: []Profile{p}})
	if err != nil {
		t.Fatal(err)
	}
	m := got.measurements[0]
	l := *m.Layout
	if have := fmt.Sprint(m.Grid.X, l.WaferDiameterMM, l.DiePitchXMM, l.DiePitchYMM, l.Mark, l.MarkAngleDeg, l.XAxis, l.YAxis, l.CentreX, l.CentreY); have != "[9 5] 100 1 2notch270rightdown7 4" {
		t.Error(have)
	}
}

// TestSTDFTestNames: every test becomes a quantity with a valid name of its own.
func TestSTDFTestNames(t *testing.T) {
	t.Parallel()
	long := strings.Repeat("Leakage current ", 12)
	w := newSTDFText(binary.LittleEndian).mir(noon, "L", "", "").wir(1, noon, "W").pir(1, 1)
	for i, d := range []struct{ text, unit string }{{"", ""}, {"\xb5 \x01\x00", "\xb5A"}, {long, "A"}, {"Vf", "V"}} {
		w.ptr(uint32(100*i), 1, 1, float32(i), defaults(d.text, d.unit)...)
	}
	w.ptr(300, 1, 1, 8, defaults("vF", "V")...).ptr(300, 1, 1, 9, defaults("other pin", "V")...) // one number, several tests
	w.ptr(0, 1, 1, 10, "text at last").ptr(math.MaxUint32, 1, 1, 11, defaults(long, long)...)
	got, err := readText(t, w.prr(1, 1, 0, 1, 1, 0, 0, 0).wrr(1, 1, "").mrr(), Input{})
	if err != nil {
		t.Fatal(err)
	}
	m := got.measurements[0]
	checkMeasurement(t, m)
	var names, labels []string
	for i, q := range m.Quantities {
		if q.Declared {
			names = append(names, fmt.Sprint(q.Name, "=", m.Planes[i].Floats(nil)[0]))
			labels = append(labels, q.Label)
		}
		if strings.ContainsAny(q.Label+q.Unit, "\x00\x01") {
			t.Errorf("%q holds what does not print", q.Label+q.Unit)
		}
	}
	want := "t0=10 t100_a=1 t200_leakage_current_leakage_current_leakage_current_le_a=2 t300_vf_v=3 t300_vf_v_2=8 t300_other_pin_v=9"
	if have := strings.Join(names[:6], " "); have != want || !strings.HasPrefix(names[6], "t4294967295_leakage") ||
		labels[1] != "µ (test 100)" || !strings.HasSuffix(labels[6], " (test 4294967295)") {
		t.Errorf("%s\n%q", have, labels)
	}
}

func FuzzSTDF(f *testing.F) {
	for _, order := range byteOrders {
		f.Add(twoSites(order).b)
		f.Add(newSTDFText(order).wir(1, noon, "W").die(1, 2, 3).wrr(1, 1, "").
			rec(recWCR, float32(4), float32(1), float32(1), uint8(2), uint8('D'), int16(0), int16(0), uint8('R'), uint8('U')).b)
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		if !isSTDF(text) {
			return
		}
		got, err := readText(t, &stdfWriter{b: text}, Input{MaxBytes: 1 << 20})
		var fault *analytics.Fault
		if err != nil && !errors.As(err, &fault) {
			t.Fatalf("%T: %v", err, err)
		}
		for _, m := range got.measurements {
			checkMeasurement(t, m)
		}
	})
}
