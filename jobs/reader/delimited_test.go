package reader

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// semicolons is the profile of a prober that writes semicolons, decimal commas,
// millivolts and nanoamperes.
const semicolons = `profile: prober-3
format: delimited
match: ["P3_*.txt"]
file_name: '^P3_(?P<wafer>[^_]+)_'
delimiter: ";"
decimal: ","
header: {with: [ROW, COL]}
skip: 1
stop: END
comment: "//"
columns: {x: COL, y: ROW}
quantities:
  - {quantity: forward_voltage_v, column: "VF (mV)", unit: mV}
  - {quantity: reverse_current_ua, column: IR, unit: nA}
  - {quantity: dominant_wavelength_nm, column: WLD, unit: nm}
  - {quantity: edge_mm, column: EDGE, unit: mil, store_unit: mm, label: Edge, resolution: 0.001}
constants: {kind: probe, station: prober-3}
facts:
  lot: {label: LOT}
  measured_at: {label: STARTED}
  drive_current: {label: CURRENT, unit: mA}
  operator: {line: 1, field: 2}
time: {layouts: ["yyyy-MM-dd HH:mm"], zone: Europe/Berlin}
missing: ["---", "9999"]
coordinates: {negate: y, offset: [10, 0]}
duplicates: last
`

const semicolonText = "PROBE LIST;anna\nLOT;L9\nSTARTED;2026-11-02 06:30\nCURRENT;350\n\nROW;COL;VF (mV);junk;IR;WLD;EDGE\n;;mV;;nA;nm;mil\n" +
	"1;-3;3105;a;12;452,37;10\n1;-2;3110,5;;9999;---;\n// remark\n0;-3;3200;b;1,5;453;20\n1;-3;3106;a;12;452,4;10\nEND;of list\nanything\n"

func parsedProfile(t *testing.T, text string) Profile {
	t.Helper()
	p, err := ParseProfile([]byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func TestDelimitedByProfile(t *testing.T) {
	t.Parallel()
	in := Input{Name: "drop/P3_W-12_x.txt.gz", Profiles: []Profile{parsedProfile(t, semicolons)}}
	for name, text := range map[string]string{"LF": semicolonText, "CRLF": strings.ReplaceAll(semicolonText, "\n", "\r\n")} {
		got, res, err := readAll(t, in, text)
		if err != nil || len(got) != 1 {
			t.Fatalf("%s: %v, %d measurements", name, err, len(got))
		}
		m := got[0]
		at := time.Date(2026, 11, 2, 5, 30, 0, 0, time.UTC) // Berlin is one hour ahead in November
		if m.Wafer != "W-12" || m.Lot != "L9" || m.Station != "prober-3" || m.Kind != "probe" || !m.MeasuredAt.Equal(at) || *m.DriveCurrentMA != 350 || m.Facts["operator"] != "anna" {
			t.Errorf("%s: %+v", name, m)
		}
		if have := fmt.Sprint(m.Grid.X, m.Grid.Y, m.Line, m.Remeasured); have != "[7 8 7] [-1 -1 0] [12 9 11] 1" {
			t.Errorf("%s: grid %s", name, have)
		}
		have := ""
		for i := range m.Planes {
			have += fmt.Sprint(m.Planes[i].Floats(nil))
		}
		if have != "[3.106 3.1105 3.2][0.012 NaN 0.0015][452.4 NaN 453][0.254 NaN 0.508]" {
			t.Errorf("%s: values %s", name, have)
		}
		// The decimal conversion is exact: mV with one decimal are V with four.
		if p := m.Planes[0]; p.Encoding != wafermap.Int16 || p.Exponent != -4 {
			t.Errorf("%s: forward voltage %d, 10^%d", name, p.Encoding, p.Exponent)
		}
		if res.Profile != "prober-3" || res.Format != "delimited" || len(res.Notices) != 0 {
			t.Errorf("%s: %+v", name, res)
		}
	}
}

func TestDelimitedWithoutHeaderInSpacesAndManyWafers(t *testing.T) {
	t.Parallel()
	p := parsedProfile(t, `profile: blanks
format: delimited
match: {regexp: '^m\d+\.dat$'}
delimiter: spaces
header: none
skip: 2
columns: {x: 2, y: 3, wafer: 1}
quantities: [{quantity: peak_wavelength_nm, column: 5, unit: nm}]
constants: {kind: pl}
facts: {measured_at: {line: 1, field: 3}, drive_current: {label: I}}
time: {layouts: "yyyyMMddTHHmmss"}
coordinates: {swap: true}
`)
	text := "mapper run 20261102T063000\nI: x I=20mA\n W1  1 2  zz 452.1 more\nW1\t1\t3 zz   452.25\nW2 1 2 zz 460 \n"
	got, res, err := readAll(t, Input{Name: "m7.dat", Profiles: []Profile{p}}, strings.Replace(text, "I: x ", "", 1))
	if err != nil || len(got) != 2 {
		t.Fatalf("%v, %+v", err, res)
	}
	m := got[0]
	if have := fmt.Sprint(m.Wafer, m.Grid.X, m.Grid.Y, m.Planes[0].Floats(nil), got[1].Wafer, got[1].Grid.Len(), *m.DriveCurrentMA); have != "W1[2 3] [1 1] [452.1 452.25]W21 20" {
		t.Error(have)
	}
	if fmt.Sprint(res.Notices) != "[times have no zone in this file: taken as UTC]" {
		t.Errorf("notices %q", res.Notices)
	}
}

func TestDelimitedEncodings(t *testing.T) {
	t.Parallel()
	const profile = `profile: enc
format: delimited
match: "*.csv"
encoding: ENC
header: {row: 2}
columns: {x: x, y: y}
quantities: [{quantity: thickness_um, column: "Höhe [µm]", unit: µm}]
constants: {kind: thickness, wafer: W1}
facts: {measured_at: {label: Zeit}}
time: {layouts: "yyyy-MM-ddTHH:mm:sszz"}
`
	const text = "Zeit,2026-11-02T06:30:00+01:00\nx,y,Höhe [µm]\n0,0,4.25\n"
	latin, err := charmap.ISO8859_1.NewEncoder().String(text)
	if err != nil {
		t.Fatal(err)
	}
	big, err := unicode.UTF16(unicode.BigEndian, unicode.UseBOM).NewEncoder().String(text)
	if err != nil {
		t.Fatal(err)
	}
	for encoding, text := range map[string]string{"utf-8": text, "latin-1": latin, "utf-16": big} {
		p := parsedProfile(t, strings.Replace(profile, "ENC", encoding, 1))
		got, _, err := readAll(t, Input{Profiles: []Profile{p}}, text)
		if err != nil || len(got) != 1 || got[0].Planes[0].Value(0) != 4.25 {
			t.Errorf("%s: %v", encoding, err)
		}
	}
}

func TestDelimitedRefusesWithPlace(t *testing.T) {
	t.Parallel()
	in := Input{Name: "P3_W-12_x.txt"}
	for _, c := range []struct{ name, profile, text, want string }{
		{"no profile", "", semicolonText, "the format is not known: no line \"# epitally: die readings\", no STDF, no catalogue, specification or profile, and the match of no reading profile fits \"P3_W-12_x.txt\" (none is stored); write a reading profile for this format whose match fits the file name"},
		{"column", strings.Replace(semicolons, "column: IR", "column: IRX", 1), semicolonText, "line 6: there is no column \"IRX\": the header row has \"ROW\", \"COL\", \"VF (mV)\", \"junk\", \"IR\", \"WLD\", \"EDGE\"; correct the column's name, the delimiter or the header row in the reading profile"},
		{"number", strings.Replace(semicolons, "column: IR", "column: 8", 1), semicolonText, "line 6: there is no column 8: the header row has 7; check the column numbers in the reading profile"},
		{"label", strings.Replace(semicolons, "label: LOT", "label: LOS", 1), semicolonText, "line 6: lot: the label \"LOS\" is not found above the header row; correct facts.lot in reading profile prober-3"},
		{"time", semicolons, strings.Replace(semicolonText, "2026-11-02 06:30", "2.11.26", 1), "line 3, column 1: measured_at: the time \"2.11.26\" fits no layout; correct time.layouts in reading profile prober-3"},
		{"header", strings.Replace(semicolons, "[ROW, COL]", "[ROW, COLUMN]", 1), semicolonText, "line 14: the file ends before a header row; check header in reading profile prober-3"},
		{"refuse", strings.Replace(semicolons, "duplicates: last", "duplicates: refuse", 1), semicolonText, "line 12: die (7, -1) stands a second time, first on line 8;"},
		{"word", semicolons, strings.Replace(semicolonText, "---", "--", 1), "line 9, column 19: dominant_wavelength_nm: \"--\" is not a number; write"},
		{"name", strings.Replace(semicolons, "'^P3_", "'^Q3_", 1), semicolonText, "line 6: file_name: the file name \"P3_W-12_x.txt\" does not fit ^Q3_(?P<wafer>[^_]+)_; rename the file, or correct file_name in reading profile prober-3"},
		{"offset", strings.Replace(semicolons, "[10, 0]", "[32767, 0]", 1), strings.Replace(semicolonText, "0;-3;3200", "0;3;3200", 1), "line 11: die (3, 0) becomes (32770, 0), beyond 16-bit coordinates; check coordinates in the reading profile"},
		{"no rows", semicolons, semicolonText[:strings.Index(semicolonText, "1;-3")], "line 6: no die rows follow the header row; check header, skip and stop in reading profile prober-3"},
	} {
		in.Profiles = nil
		if c.profile != "" {
			in.Profiles = []Profile{parsedProfile(t, c.profile)}
		}
		_, _, err := readAll(t, in, c.text)
		var f *analytics.Fault
		if !errors.As(err, &f) || !strings.HasPrefix(err.Error(), c.want) {
			t.Errorf("%s:\n  %v\nwant\n  %s", c.name, err, c.want)
		}
	}
	two := []Profile{parsedProfile(t, semicolons), parsedProfile(t, strings.Replace(semicolons, "prober-3", "other", 1))}
	if _, _, err := readAll(t, Input{Name: in.Name, Profiles: two}, semicolonText); !errors.Is(err, analytics.ErrConflict) {
		t.Errorf("two profiles match: %v", err)
	}
	if _, res, err := readAll(t, Input{Name: in.Name, Profiles: two, ProfileName: "other"}, semicolonText); err != nil || res.Profile != "other" {
		t.Errorf("a forced profile: %v, %+v", err, res)
	}
	if _, _, err := readAll(t, Input{Name: in.Name, Profiles: two, ProfileName: "none"}, semicolonText); !errors.Is(err, analytics.ErrInvalid) {
		t.Errorf("a profile that is not there: %v", err)
	}
}

func TestProfileRefusesByLineAndKey(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ name, from, to, want string }{
		{"unknown key", "skip: 1", "skips: 1", "line 8, column 8: skips: unknown key \"skips\"; use profile, format"},
		{"type", "skip: 1", "skip: many", "line 8, column 7: skip: expected a whole number from 0 to 1000"},
		{"unit", "unit: mV", "unit: mQ", "line 13, column 60: quantities[1].unit: unknown unit \"mQ\": for a value kept in \"V\" use one of kv, mv, uv, v, µv"},
		{"dimension", "unit: mV", "unit: nm", "line 13, column 60: quantities[1].unit: unit \"nm\" is a length, but \"V\" is a voltage"},
		{"no unit", ", unit: mV", "", "line 13, column 5: quantities[1]: the unit of the column is not stated; add the unit that the file writes, for example unit: V"},
		{"quantity", "quantity: forward_voltage_v", "quantity: forward_volts", "line 13, column 16: quantities[1].quantity: the quantity \"forward_volts\" is not built in; correct the name, or declare it with unit, label and resolution"},
		{"layout", "yyyy-MM-dd", "%Y-%m-%d", "line 23, column 17: time.layouts: \"%Y-%m-%d HH:mm\" is not a time layout; use yyyy"},
		{"zone", "Europe/Berlin", "Mars/Base", "line 23, column 45: time.zone: the time zone \"Mars/Base\" is not known; use UTC or a name like Europe/Berlin"},
		{"glob", `["P3_*.txt"]`, `["P3_[.txt"]`, "line 3, column 8: match: \"P3_[.txt\" is not a file-name glob; use * and ? on the base name"},
		{"regexp", `'^P3_(?P<wafer>[^_]+)_'`, `'('`, "line 4, column 12: file_name: \"(\" is not a regular expression"},
		{"no wafer", `'^P3_(?P<wafer>[^_]+)_'`, `'.'`, "line 1, column 8: nothing says where wafer is found; add for example facts: {wafer: {label: WAFER}}"},
		{"twice", "decimal: \",\"", "delimiter: \",\"", "line 6, column 1: delimiter: the key \"delimiter\" stands twice"},
		{"delimiter", "delimiter: \";\"", "delimiter: \",\"", "line 5, column 12: delimiter: the delimiter is the decimal point as well; choose another delimiter or decimal"},
		{"format", "format: delimited", "format: xls", "line 2, column 9: format: \"xls\" is not known here; use delimited, stdf"},
		{"STDF", "format: delimited", "format: stdf", "line 5, column 12: delimiter: \"delimiter\" is for delimited text only; remove it"},
		{"missing", "match: [\"P3_*.txt\"]\n", "", "line 1, column 8: the key \"match\" is missing"},
		{"constant", "station: prober-3", "measured_at: now", "line 17, column 39: constants.measured_at: the time of measurement is no constant"},
		{"YAML", "duplicates: last", "duplicates: [", "line 26"},
	} {
		_, err := ParseProfile([]byte(strings.Replace(semicolons, c.from, c.to, 1)))
		var f *analytics.Fault
		if !errors.As(err, &f) || !strings.HasPrefix(err.Error(), c.want) {
			t.Errorf("%s:\n  %v\nwant\n  %s", c.name, err, c.want)
		}
	}
}

func TestConvertedFloatsKeepTheirValue(t *testing.T) {
	t.Parallel()
	p := parsedProfile(t, semicolons)
	text := strings.Replace(semicolonText, "3105", "3105,123456789012", 1)
	text = strings.Replace(text, "1;-3;3106;a;12;452,4;10\n", "", 1)
	got, _, err := readAll(t, Input{Name: "P3_W-12_x.txt", Profiles: []Profile{p}}, text)
	if err != nil {
		t.Fatal(err)
	}
	const tolerance = 1e-15 // one rounding at 3 V
	if v := got[0].Planes[0].Value(0); math.Abs(v-3.105123456789012) > tolerance {
		t.Errorf("%.17g", v)
	}
}

func FuzzDelimited(f *testing.F) {
	p, err := ParseProfile([]byte(semicolons))
	if err != nil {
		f.Fatal(err)
	}
	spaces := strings.NewReplacer(`delimiter: ";"`, "delimiter: spaces", "header: {with: [ROW, COL]}", "header: {row: 6}", "VF (mV)", "VF").Replace(semicolons)
	q, err := ParseProfile([]byte(spaces))
	if err != nil {
		f.Fatal(err)
	}
	f.Add([]byte(semicolonText))
	f.Add([]byte(strings.ReplaceAll(semicolonText, ";", " \t")))
	f.Fuzz(func(t *testing.T, text []byte) {
		for _, p := range []Profile{p, q} {
			readAll(t, Input{Name: "P3_W_.txt", Profiles: []Profile{p}, MaxBytes: 1 << 20}, string(text))
		}
	})
}

func FuzzProfile(f *testing.F) {
	f.Add([]byte(semicolons))
	f.Add([]byte("profile: a\nformat: stdf\nmatch: {regexp: '.'}\nquantities: [{quantity: hard_bin, test: 1}]\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		if p, err := ParseProfile(text); err == nil {
			readAll(t, Input{Name: "a", Profiles: []Profile{p}, ProfileName: p.Name, MaxBytes: 1 << 20}, semicolonText)
		}
	})
}
