package reader

import (
	"context"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"
	"time"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// readAll reads text and gathers what comes out.
func readAll(t *testing.T, in Input, text string) ([]*Measurement, Result, error) {
	t.Helper()
	var got []*Measurement
	in.R = strings.NewReader(text)
	if in.Name == "" {
		in.Name = "a.csv"
	}
	res, err := Read(context.Background(), in, Sink{Measurement: func(m *Measurement) error {
		if err := m.Grid.Check(); err != nil {
			t.Errorf("wafer %s: %v", m.Wafer, err)
		}
		for _, p := range m.Planes {
			if err := p.Validate(); err != nil {
				t.Errorf("wafer %s: %v", m.Wafer, err)
			}
			if p.Len() != m.Grid.Len() || len(m.Line) != m.Grid.Len() || len(m.Quantities) != len(m.Planes) {
				t.Errorf("wafer %s: %d values and %d lines for %d dies", m.Wafer, p.Len(), len(m.Line), m.Grid.Len())
			}
		}
		got = append(got, m)
		return nil
	}})
	return got, res, err
}

const ownHead = "# epitally: die readings\n# wafer: W-1\n# kind: probe\n# measured at: 2026-11-02T05:00:00+01:00\n"

func TestOwnCSVGivesWhatTheTextSays(t *testing.T) {
	t.Parallel()
	text := ownHead + "# lot: L7\n# station: P1\n# drive current: 0.02 A\n# pitch: 400 x 500 um\n# diameter: 4 inch\n# flat: down\n" +
		"# centre: 0.5, -0.5\n# operator: night shift\n# quantity: leakage_na; Leakage; nA; 0.01\n" +
		"y,x,dominant_wavelength_nm,leakage_na,forward_voltage_v\n" +
		"1,0,452.4,-0.5,3.1\n0,5,452.37,,\"3.25\"\n0, -3 ,453,1e-2,+3\n"
	for name, text := range map[string]string{"LF": text, "CRLF": strings.ReplaceAll(text, "\n", "\r\n"), "mark": "\ufeff" + text} {
		got, res, err := readAll(t, Input{}, text)
		if err != nil || len(got) != 1 || len(res.Notices) != 0 {
			t.Fatalf("%s: %d measurements, %v, %v", name, len(got), res.Notices, err)
		}
		m := got[0]
		at := time.Date(2026, 11, 2, 4, 0, 0, 0, time.UTC)
		if m.Wafer != "W-1" || m.Lot != "L7" || m.Kind != "probe" || m.Station != "P1" || !m.MeasuredAt.Equal(at) || *m.DriveCurrentMA != 20 {
			t.Errorf("%s: %+v", name, m)
		}
		want := wafermap.Layout{DiePitchXMM: 0.4, DiePitchYMM: 0.5, WaferDiameterMM: 101.6, Mark: "flat", MarkAngleDeg: 270, CentreX: 0.5, CentreY: -0.5, Assumed: true}
		if *m.Layout != want || m.Facts["operator"] != "night shift" {
			t.Errorf("%s: layout %+v, facts %v", name, *m.Layout, m.Facts)
		}
		if fmt.Sprint(m.Grid.X, m.Grid.Y, m.Line) != "[-3 5 0] [0 0 1] [17 16 15]" {
			t.Errorf("%s: grid %v %v lines %v", name, m.Grid.X, m.Grid.Y, m.Line)
		}
		values := ""
		for i := range m.Planes {
			values += fmt.Sprint(m.Planes[i].Floats(nil))
		}
		if values != "[453 452.37 452.4][0.01 NaN -0.5][3 3.25 3.1]" || !m.Quantities[1].Declared {
			t.Errorf("%s: values %s", name, values)
		}
		if res.Format != "epitally-csv" || res.Wafers != 1 || res.Dies != 3 || res.Bytes != int64(len(text)) || len(res.SHA256) != 64 {
			t.Errorf("%s: %+v", name, res)
		}
	}
}

// TestEveryValueIsItsText writes numbers of every shape and expects the float64
// nearest to each, whatever the column had held before.
func TestEveryValueIsItsText(t *testing.T) {
	t.Parallel()
	columns := [][]string{
		{"452.37", "452.4", "453", "-0.001", "", "0", "999999.999"},
		{"1", "2.5", "3.25", "4.125", "5.0625", "-6.03125", "7.015625"},
		{"2147483647", "-2147483647", "2147483648", "0.5", "9007199254740993", "", "1"},
		{"1.2e-9", "3E-12", "1e3", "-4.5e+2", "0e-30", "1e-30", "100"},
		{"452.36999999999995", "3.141592653589793238462643", ".5", "5.", "+7", "00012.50", "-0"},
		{"1e300", "1e-300", "", "12345678.9", "123456789012345678901234567890", "0.1", "0.30000000000000004"},
		{"12345678", "1234567.8", "123456.78", "1234.5678", "-1234567", "-123456.7", "99999999.5"},
	}
	names := []string{"peak_wavelength_nm", "fwhm_nm", "pl_intensity", "reverse_current_ua", "forward_voltage_v", "radiant_flux_mw", "luminous_flux_lm"}
	text := ownHead + "x,y," + strings.Join(names, ",") + "\n"
	for row := range columns[0] {
		text += fmt.Sprintf("%d,0", row)
		for _, c := range columns {
			text += "," + c[row]
		}
		text += "\n"
	}
	got, _, err := readAll(t, Input{}, text)
	if err != nil {
		t.Fatal(err)
	}
	for c, column := range columns {
		for row, written := range column {
			want, v := math.NaN(), got[0].Planes[c].Value(row)
			if written != "" {
				if want, err = strconv.ParseFloat(written, 64); err != nil {
					t.Fatal(err)
				}
			}
			if v != want && !(math.IsNaN(v) && math.IsNaN(want)) {
				t.Errorf("column %d: %q came back as %v", c, written, v)
			}
		}
	}
	if p := got[0].Planes[0]; p.Exponent != -3 || p.Encoding != wafermap.Int32 {
		t.Errorf("three decimals are the finest of column 0, not %d (encoding %d)", p.Exponent, p.Encoding)
	}
}

func TestOwnCSVHoldsManyWafers(t *testing.T) {
	t.Parallel()
	text := "# epitally: die readings\n# kind: pl\n# lot: L1\n# measured at: 2026-11-02T05:00:00Z\nx,wafer,y,fwhm_nm\n" +
		"0,A,0,18.1\n1,A,0,18.25\n0,B,0,19\n# measured at: 2026-11-02T06:00:00Z\n# wafer: A\n# kind: probe\n\nx,y,forward_voltage_v\n0,0,3\n" +
		ownHead + "x,y,forward_voltage_v\n0,0,3\n"
	got, res, err := readAll(t, Input{}, text)
	if err != nil || res.Wafers != 4 || res.Dies != 5 {
		t.Fatalf("%+v, %v", res, err)
	}
	for i, want := range []string{"A L1 pl 5 2", "B L1 pl 5 1", "A L1 probe 6 1", "W-1  probe 4 1"} {
		m := got[i]
		if have := fmt.Sprintf("%s %s %s %d %d", m.Wafer, m.Lot, m.Kind, m.MeasuredAt.UTC().Hour(), m.Grid.Len()); have != want {
			t.Errorf("measurement %d is %q, not %q", i, have, want)
		}
	}
}

func TestDuplicatesByPolicy(t *testing.T) {
	t.Parallel()
	rows := "x,y,forward_voltage_v\n0,0,3.1\n1,0,3.2\n0,0,3.3\n0,0,3.4\n"
	for policy, want := range map[string]string{"first": "[3.1 3.2] 1 [6 7]", "last": "[3.4 3.2] 1 [9 7]"} {
		got, _, err := readAll(t, Input{}, ownHead+"# duplicates: "+policy+"\n"+strings.Replace(rows, "x,y", "x,y", 1))
		if err != nil {
			t.Fatal(err)
		}
		m := got[0]
		have := fmt.Sprint(m.Planes[0].Floats(nil), m.Remeasured, []int32{m.Line[0] - 1, m.Line[1] - 1})
		if have != want {
			t.Errorf("%s: %s, want %s", policy, have, want)
		}
	}
}

func TestOwnCSVRefusesWithPlace(t *testing.T) {
	t.Parallel()
	head := ownHead + "x,y,forward_voltage_v\n" // rows begin on line 6
	for _, c := range []struct{ name, text, want string }{
		{"empty", "", "the file is empty; export it again"},
		{"only the mark", "# epitally: die readings\n", "line 1: the file ends before a header row; write `x,y` and the quantities' names, then one row per die"},
		{"cut head", "# epitally: die readings\n# waf", "line 2, column 1: \"# waf\" is not `# key: value`; write `# note: …` for a remark"},
		{"only header", head, "line 5: no die rows follow the header row; write one row per die below it"},
		{"other kind", "# epitally: dreams\n", "line 1, column 1: \"# epitally: dreams\" is not a kind of file that is read; begin with \"# epitally: die readings\" or \"# epitally: run sheet\""},
		{"duplicate", head + "0,0,3\n1,0,3\n0,0,3\n", "line 8: die (0, 0) stands a second time, first on line 6; remove one of the two, or state `duplicates: last` (or first) to keep one"},
		{"stray quote", head + "0,0,3\"1\n", "line 6, column 6: forward_voltage_v: a stray quote; quote the whole field, and write \"\" for a quote inside it"},
		{"open quote", head + "0,0,\"31\n1,0,3\"\n", "line 6, column 5: forward_voltage_v: the quote is not closed on its line; close it, and write \"\" for a quote inside the field"},
		{"after quote", head + "0,0,\"3\"1\n", "line 6, column 8: forward_voltage_v: text stands after the closing quote; write \"\" for a quote inside the field"},
		{"NUL", head + "0,0,3\n1,0,\x003\n", "line 7, column 5: a NUL byte stands in the text; export the file again as plain text, or state its encoding in a reading profile"},
		{"nan", head + "0,0,nan\n", "line 6, column 5: forward_voltage_v: \"nan\" is not a finite number; leave the field empty when there is no value"},
		{"inf", head + "0,0,-Infinity\n", "line 6, column 5: forward_voltage_v: \"-Infinity\" is not a finite number; leave the field empty when there is no value"},
		{"huge", head + "0,0,1e999\n", "line 6, column 5: forward_voltage_v: \"1e999\" is out of range; leave the field empty when there is no value"},
		{"word", head + "0,0,open\n", "line 6, column 5: forward_voltage_v: \"open\" is not a number; write a decimal number, or leave the field empty when there is no value"},
		{"far x", head + "32768,0,3\n", "line 6, column 1: x: \"32768\" is not a die coordinate; a coordinate is a whole number from -32768 to 32767"},
		{"half y", head + "0,0.5,3\n", "line 6, column 3: y: \"0.5\" is not a die coordinate; a coordinate is a whole number from -32768 to 32767"},
		{"few", head + "0,0\n1,0,3\n", "line 6, column 4: the line has 2 of 3 fields; write one field per column of the header; empty means no value"},
		{"cut row", head + "0,0,3\n1,0", "line 7, column 4: the file ends in the middle of the line, after 2 of 3 fields; copy the file again from where it was made"},
		{"many", head + "0,0,3,1\n", "line 6, column 7: the line has 4 fields where the header has 3; check the delimiter and the decimal point"},
		{"no kind", strings.Replace(head, "# kind: probe\n", "", 1) + "0,0,3\n", "line 4, column 1: kind: no `# kind:` line stands above the header row; add `# kind: probe`"},
		{"no wafer", strings.Replace(head, "# wafer: W-1\n", "", 1) + "0,0,3\n", "line 4, column 1: wafer: no `# wafer:` line stands above the header row; add `# wafer: W-0001`"},
		{"no zone", strings.Replace(head, "+01:00", "", 1) + "0,0,3\n", "line 4, column 15: measured at: the time \"2026-11-02T05:00:00\" has no zone; add the zone: 2026-11-05T06:00:00Z or 2026-11-05T07:00:00+01:00"},
		{"no time", strings.Replace(head, "2026-11-02T05:00:00+01:00", "Tuesday", 1) + "0,0,3\n", "line 4, column 15: measured at: \"Tuesday\" is not a time; write it as 2026-11-05T06:00:00Z or 2026-11-05T07:00:00+01:00"},
		{"year", strings.Replace(head, "2026", "0026", 1) + "0,0,3\n", "line 4, column 15: measured at: the time \"0026-11-02T05:00:00+01:00\" is in the year 26; check the station's clock; years from 1980 to 2199 are read"},
		{"slash", strings.Replace(head, "W-1", "../W", 1) + "0,0,3\n", "line 2, column 9: wafer: the wafer name \"../W\" holds a slash or is only dots; a wafer name is 1 to 128 printable characters without / and \\"},
		{"kind", strings.Replace(head, "probe", "Probe 1", 1) + "0,0,3\n", "line 3, column 8: kind: the measurement kind \"Probe 1\" is not a name; use pl, probe or another name of lower-case letters, digits and underscores, a letter first"},
		{"unit", ownHead + "# drive current: 20 furlong\nx,y,fwhm_nm\n", "line 5, column 17: drive current: unknown unit \"furlong\": for a value kept in \"mA\" use one of a, ma, na, pa, ua, µa; write it like 20 mA"},
		{"no unit", ownHead + "# drive current: 20\nx,y,fwhm_nm\n", "line 5, column 17: drive current: \"20\" is not a number with a unit; write it like 20 mA"},
		{"no x", ownHead + "a,y,fwhm_nm\n", "line 5, column 1: a: the quantity \"a\" is not known; declare it with"},
		{"no y", ownHead + "x,fwhm_nm\n", "line 5, column 1: the header row has no columns x and y; name the columns of the die coordinates x and y"},
		{"twice", ownHead + "x,y,fwhm_nm,fwhm_nm\n", "line 5, column 13: fwhm_nm: the quantity fwhm_nm stands in two columns"},
		{"nothing measured", ownHead + "x,y\n", "line 5, column 1: the header row names no quantity; add a column for each measured quantity"},
		{"both", ownHead + "wafer,x,y,fwhm_nm\nA,0,0,1\n", "line 5, column 1: wafer: the wafer is stated both above the header row and in a column; keep one of them"},
		{"comes back", strings.Replace(ownHead, "# wafer: W-1\n", "", 1) + "wafer,x,y,fwhm_nm\nA,0,0,1\nB,0,0,1\nA,1,0,1\n", "line 7, column 1: wafer: wafer A begins a second time, first on line 5, with the same kind and time; keep the rows of one wafer together, or state another `# measured at:`"},
		{"block again", head + "0,0,3\n# lot: L2\nx,y,fwhm_nm\n0,0,3\n", "line 8: wafer: wafer W-1 begins a second time, first on line 5, with the same kind and time; keep the rows of one wafer together, or state another `# measured at:`"},
		{"declared", ownHead + "# quantity: Leak; Leakage; nA; 0.01\n", "line 5, column 12: quantity: quantity name \"Leak\": use 1 to 63"},
	} {
		got, res, err := readAll(t, Input{}, c.text)
		var f *analytics.Fault
		if err == nil || !errors.As(err, &f) || !strings.HasPrefix(err.Error(), c.want) {
			t.Errorf("%s: %d measurements and\n  %v\nwant\n  %s", c.name, len(got), err, c.want)
		}
		if len(c.text) > 0 && res.SHA256 == "" {
			t.Errorf("%s: a refused file has no hash", c.name)
		}
	}
}

var ones = strings.Repeat("1", 1<<20)

// oneLine gives one line without end, in no memory.
type oneLine struct{ n, limit int64 }

func (e *oneLine) Read(p []byte) (int, error) {
	if e.n == 0 {
		e.n = int64(copy(p, ownHead+"x,y,fwhm_nm\n0,0,"))
		return int(e.n), nil
	}
	if e.n >= e.limit {
		return 0, errors.New("read to the end")
	}
	n := copy(p, ones)
	e.n += int64(n)
	return n, nil
}

func TestLineOfTwoGigabytesIsRefusedUnread(t *testing.T) {
	t.Parallel()
	line := &oneLine{limit: 2 << 30}
	_, err := Read(context.Background(), Input{Name: "a.csv", R: line}, Sink{})
	const want = "line 6: the line is over 1048576 bytes; check that this is a text file with one die a line"
	if err == nil || err.Error() != want || !errors.Is(err, analytics.ErrTooLarge) {
		t.Errorf("%v, want %s", err, want)
	}
}

// TestRowsCrossBlocks reads more text than a block holds, with lines of every
// length, and finds every value again.
func TestRowsCrossBlocks(t *testing.T) {
	t.Parallel()
	const side = 300
	b := []byte(ownHead + "x,y,fwhm_nm,pl_intensity\n")
	value := func(x, y int) float64 { return float64((x*31+y*17)%10007) / 100 }
	for y := range side {
		for x := range side {
			b = fmt.Appendf(b, "%d,%d,%.2f,%d\n", x-side/2, y, value(x, y), (x*y)%int(math.Pow10(1+x%7)))
		}
	}
	got, _, err := readAll(t, Input{}, string(b))
	if err != nil {
		t.Fatal(err)
	}
	m := got[0]
	if m.Grid.Len() != side*side {
		t.Fatalf("%d dies", m.Grid.Len())
	}
	for i := range m.Grid.X {
		x, y := int(m.Grid.X[i])+side/2, int(m.Grid.Y[i])
		if v := m.Planes[0].Value(i); v != value(x, y) {
			t.Fatalf("die (%d, %d): %v, want %v", x, y, v, value(x, y))
		}
		if v := m.Planes[1].Value(i); v != float64((x*y)%int(math.Pow10(1+x%7))) {
			t.Fatalf("die (%d, %d): %v", x, y, v)
		}
	}
}

func TestSinkErrorEndsReading(t *testing.T) {
	t.Parallel()
	stop := errors.New("the store is full")
	_, err := Read(context.Background(), Input{R: strings.NewReader(ownHead + "x,y,fwhm_nm\n0,0,1\n")},
		Sink{Measurement: func(*Measurement) error { return stop }})
	if !errors.Is(err, stop) {
		t.Errorf("%v, want the sink's error", err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := Read(ctx, Input{R: strings.NewReader(ownHead + "x,y,fwhm_nm\n0,0,1\n")}, Sink{}); !errors.Is(err, context.Canceled) {
		t.Errorf("%v, want a cancelled context", err)
	}
}

func FuzzOwnCSV(f *testing.F) {
	f.Add([]byte(ownHead + "x,y,fwhm_nm\n0,0,1.5\n1,0,\n"))
	f.Add([]byte(ownHead + "# duplicates: last\nx,wafer,y,fwhm_nm,pl_intensity\r\n0,\"A\",0,-12.25e3,1\r\n0,B,0,.5,99999999999999999999\r\n"))
	f.Add([]byte("# epitally: die readings\n# quantity: a; b; c; 1\n# pitch: 1 x 2 mm\n# flat: 270 deg\nx,y,a\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		readAll(t, Input{MaxBytes: 1 << 20}, string(text))
	})
}
