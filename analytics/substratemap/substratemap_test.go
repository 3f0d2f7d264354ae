package substratemap

import (
	"bytes"
	"errors"
	"reflect"
	"strings"
	"testing"

	"epitally/analytics"
)

func sample(origin string, topRowFirst bool) *Map {
	p, _ := PlaceAt(origin, topRowFirst)
	return &Map{Wafer: `K-1 <&"`, Lot: "L7", Product: "tarn-105", Name: "harbour-blue v3", DiameterMM: 150, StepXMM: 1.05, StepYMM: 0.76, Place: p,
		Columns: 3, Rows: 2, ZeroColumn: -4, ZeroRow: 12, Codes: []uint16{0, 1, NullCode, 2, 0, 0},
		Bins: []Bin{{0, "W1", true, 3}, {1, "open", false, 1}, {2, "untested", false, 1}}}
}

// What is written is read back the same, from every origin and in either order of
// rows; and the rows stand where the setting says.
func TestRoundTrip(t *testing.T) {
	t.Parallel()
	for _, origin := range []string{"LowerLeft", "LowerRight", "UpperLeft", "UpperRight"} {
		for _, top := range []bool{false, true} {
			m := sample(origin, top)
			var b bytes.Buffer
			if err := Write(&b, m); err != nil {
				t.Fatal(err)
			}
			text := b.String()
			got, err := Read(&b, top)
			if err != nil || len(got) != 1 || !reflect.DeepEqual(got[0], *m) {
				t.Errorf("%s, top row first %v: %v\n%+v\n%+v", origin, top, err, got, *m)
			}
			originRowFirst := strings.Index(text, "00000001FFFF") < strings.Index(text, "000200000000")
			if want := !(top && strings.HasPrefix(origin, "Lower")); originRowFirst != want {
				t.Errorf("%s, top row first %v: the origin's row is first: %v", origin, top, originRowFirst)
			}
			if !strings.Contains(text, "Origin "+origin) || !strings.Contains(text, `OriginLocation="`+origin+`"`) {
				t.Errorf("the file does not say its origin:\n%s", text)
			}
		}
	}
}

// Forms seen in public files: another namespace, hexadecimal codes with a null bin,
// no bin definitions, elements of others.
func TestReadsOtherForms(t *testing.T) {
	t.Parallel()
	file := func(binType, null, rows string) string {
		return `<m:MapData xmlns:m="urn:semi-org:xsd.E142-1.V0211.SubstrateMap"><m:Layouts><m:Layout LayoutId="W" TopLevel="True" DefaultUnits="microns"><m:Dimension X="1" Y="1"/><m:DeviceSize X="100000" Y="100000"/></m:Layout>
<m:Layout LayoutId="D" DefaultUnits="microns"><m:Dimension X="2" Y="2"/><m:StepSize X="380" Y="400"/></m:Layout></m:Layouts><Own><Thing a="b"/></Own>
<m:Substrates><m:Substrate SubstrateType="Wafer" SubstrateId="S1"/></m:Substrates><m:SubstrateMaps><m:SubstrateMap SubstrateType="Wafer" SubstrateId="S1" LayoutSpecifier="W/D">
<m:Overlay MapName="M"><m:BinCodeMap BinType="` + binType + `" NullBin="` + null + `">` + rows + `</m:BinCodeMap></m:Overlay></m:SubstrateMap></m:SubstrateMaps></m:MapData>`
	}
	for _, c := range []struct {
		name, text string
		want       []uint16
	}{
		{"hexadecimal", file("HexaDecimal", "FF", "<m:BinCode>0aFF</m:BinCode><m:BinCode>010B</m:BinCode>"), []uint16{10, NullCode, 1, 11}},
		{"decimal with blanks", file("Decimal", "255", "<m:BinCode>010 255</m:BinCode><m:BinCode> 001 011 </m:BinCode>"), []uint16{10, NullCode, 1, 11}},
		{"characters", file("Ascii", ".", "<m:BinCode>1.</m:BinCode><m:BinCode>AX</m:BinCode>"), []uint16{'1', NullCode, 'A', 'X'}},
	} {
		got, err := Read(strings.NewReader(c.text), false)
		if err != nil || !reflect.DeepEqual(got[0].Codes, c.want) || got[0].DiameterMM != 100 || got[0].StepXMM != 0.38 || len(got[0].Bins) != 3 {
			t.Errorf("%s: %v %+v", c.name, err, got)
		}
	}
	for name, text := range map[string]string{
		"empty": "", "another document": "<Maps/>", "cut off": file("HexaDecimal", "FF", "")[:300], "no map": "<MapData/>",
		"too few rows": file("HexaDecimal", "FF", "<m:BinCode>0aFF</m:BinCode>"), "a short row": file("HexaDecimal", "FF", "<m:BinCode>0a</m:BinCode><m:BinCode>0a0a</m:BinCode>"),
		"no code": file("HexaDecimal", "FF", "<m:BinCode>0aZZ</m:BinCode><m:BinCode>0a0a</m:BinCode>"), "no type": file("Roman", "I", ""),
	} {
		_, err := Read(strings.NewReader(text), false)
		var f *analytics.Fault
		if !errors.As(err, &f) || f.Problem == "" {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestWriteRefuses(t *testing.T) {
	t.Parallel()
	for name, spoil := range map[string]func(*Map){
		"no origin": func(m *Map) { m.Place.Origin = "Middle" }, "axis out of the map": func(m *Map) { m.Place.Axis = "DownLeft" },
		"codes missing": func(m *Map) { m.Codes = m.Codes[1:] }, "a code without a bin": func(m *Map) { m.Bins = m.Bins[1:] }, "no wafer": func(m *Map) { m.Wafer = "" },
	} {
		m := sample("LowerLeft", false)
		spoil(m)
		if err := Write(&bytes.Buffer{}, m); !errors.Is(err, analytics.ErrInvalid) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func FuzzRead(f *testing.F) {
	var b bytes.Buffer
	if err := Write(&b, sample("LowerLeft", true)); err != nil {
		f.Fatal(err)
	}
	f.Add(b.Bytes(), true)
	f.Fuzz(func(t *testing.T, file []byte, top bool) {
		maps, err := Read(bytes.NewReader(file), top)
		if err != nil {
			return
		}
		for i := range maps {
			var again bytes.Buffer
			if err := Write(&again, &maps[i]); err != nil {
				t.Fatalf("a map that was read cannot be written: %v", err)
			}
		}
	})
}
