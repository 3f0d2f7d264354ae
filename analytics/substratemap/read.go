package substratemap

import (
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"

	"epitally/analytics"
)

// maxBytes bounds a file.
const maxBytes = 256 << 20

// Read reads the maps of a file, whatever edition's namespace its elements are of;
// what it does not know is passed over. topRowFirst says which row the file's first
// one is, since the file does not. Codes of one to four characters are read by
// their BinType: HexaDecimal, Integer2, Decimal and Ascii, the last as their
// characters' numbers. Errors are analytics.Fault with an offset.
func Read(r io.Reader, topRowFirst bool) ([]Map, error) {
	d := xml.NewDecoder(io.LimitReader(r, maxBytes))
	var file xmlFile
	if err := d.Decode(&file); err != nil {
		return nil, fault(d, "use a substrate map of SEMI E142", "not a substrate map: %v", withoutEOF(err))
	}
	if file.XMLName.Local != "MapData" {
		return nil, fault(d, "use a substrate map of SEMI E142", "the document is a %s, not a MapData", file.XMLName.Local)
	}
	var maps []Map
	for i := range file.Maps {
		m, err := file.mapOf(&file.Maps[i], topRowFirst)
		if err != nil {
			return nil, fault(d, "", "map %d of wafer %s: %v", i+1, file.Maps[i].ID, err)
		}
		maps = append(maps, m)
	}
	if len(maps) == 0 {
		return nil, fault(d, "", "the document holds no map")
	}
	return maps, nil
}

func withoutEOF(err error) error {
	if errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) {
		return errors.New("the document ends before it is whole")
	}
	return err
}

func fault(d *xml.Decoder, remedy, problem string, args ...any) error {
	line, column := d.InputPos()
	return &analytics.Fault{Line: line, Column: column, Offset: d.InputOffset(), Problem: fmt.Sprintf(problem, args...), Remedy: remedy}
}

// xmlFile is what is read of a document; names without a namespace match any.
type xmlFile struct {
	XMLName    xml.Name
	Layouts    []xmlLayout    `xml:"Layouts>Layout"`
	Substrates []xmlSubstrate `xml:"Substrates>Substrate"`
	Maps       []xmlMap       `xml:"SubstrateMaps>SubstrateMap"`
}

type xmlPair struct {
	X string `xml:"X,attr"`
	Y string `xml:"Y,attr"`
}

type xmlLayout struct {
	ID        string  `xml:"LayoutId,attr"`
	Units     string  `xml:"DefaultUnits,attr"`
	Dimension xmlPair `xml:"Dimension"`
	Size      xmlPair `xml:"DeviceSize"`
	Step      xmlPair `xml:"StepSize"`
	Product   string  `xml:"ProductId"`
	TopLevel  string  `xml:"TopLevel,attr"`
}

type xmlSubstrate struct {
	ID  string `xml:"SubstrateId,attr"`
	Lot string `xml:"LotId"`
}

type xmlMap struct {
	ID        string `xml:"SubstrateId,attr"`
	Specifier string `xml:"LayoutSpecifier,attr"`
	Origin    string `xml:"OriginLocation,attr"`
	Axis      string `xml:"AxisDirection,attr"`
	Overlay   struct {
		Name       string `xml:"MapName,attr"`
		References []struct {
			Name string  `xml:"Name,attr"`
			At   xmlPair `xml:"Coordinates"`
		} `xml:"ReferenceDevices>ReferenceDevice"`
		Codes struct {
			Type    string `xml:"BinType,attr"`
			Null    string `xml:"NullBin,attr"`
			MapType string `xml:"MapType,attr"`
			Bins    []struct {
				Code        string `xml:"BinCode,attr"`
				Count       int    `xml:"BinCount,attr"`
				Quality     string `xml:"BinQuality,attr"`
				Description string `xml:"BinDescription,attr"`
			} `xml:"BinDefinitions>BinDefinition"`
			Rows []string `xml:"BinCode"`
		} `xml:"BinCodeMap"`
	} `xml:"Overlay"`
}

func (f *xmlFile) mapOf(x *xmlMap, topRowFirst bool) (m Map, err error) {
	m = Map{Wafer: x.ID, Name: x.Overlay.Name, Place: Place{x.Origin, x.Axis, topRowFirst}}
	if m.Place.Origin == "" {
		m.Place.Origin = DefaultPlace.Origin
	}
	if m.Place.Axis == "" {
		m.Place.Axis = axisOf[m.Place.Origin]
	}
	for _, s := range f.Substrates {
		if s.ID == x.ID {
			m.Lot = s.Lot
		}
	}
	if err := f.layoutOf(x, &m); err != nil {
		return m, err
	}
	for _, r := range x.Overlay.References {
		if r.Name == "die 0 0" {
			if m.ZeroColumn, err = strconv.Atoi(r.At.X); err == nil {
				m.ZeroRow, err = strconv.Atoi(r.At.Y)
			}
			if err != nil {
				return m, fmt.Errorf("the reference device has no whole coordinates")
			}
		}
	}
	if err := x.codesInto(&m); err != nil {
		return m, err
	}
	return m, m.check()
}

// layoutOf takes dimension and step from the layout that the map names last, and
// the wafer's size from the top level.
func (f *xmlFile) layoutOf(x *xmlMap, m *Map) error {
	name := x.Specifier[strings.LastIndexByte(x.Specifier, '/')+1:]
	for _, l := range f.Layouts {
		millimetres := 1.0
		if l.Units == "microns" {
			millimetres = 1e-3
		}
		if strings.EqualFold(l.TopLevel, "true") {
			m.DiameterMM = millimetres * numberOr0(l.Size.X)
		}
		if l.ID != name {
			continue
		}
		var errX, errY error
		m.Columns, errX = strconv.Atoi(l.Dimension.X)
		m.Rows, errY = strconv.Atoi(l.Dimension.Y)
		if errX != nil || errY != nil {
			return fmt.Errorf("layout %s has no whole dimension", l.ID)
		}
		m.StepXMM, m.StepYMM, m.Product = millimetres*numberOr0(l.Step.X), millimetres*numberOr0(l.Step.Y), l.Product
	}
	if m.Columns < 1 || m.Rows < 1 || m.Columns > maxSide || m.Rows > maxSide {
		return fmt.Errorf("the layout %q with %d × %d dies is not there or out of range", name, m.Columns, m.Rows)
	}
	return nil
}

func numberOr0(text string) float64 {
	v, err := strconv.ParseFloat(strings.TrimSpace(text), 64)
	if err != nil {
		return 0
	}
	return v
}

func (x *xmlMap) codesInto(m *Map) error {
	c := &x.Overlay.Codes
	if c.MapType != "" && c.MapType != "2DArray" && c.MapType != "Row" {
		return fmt.Errorf("a map of type %s is not read; rows of codes are", c.MapType)
	}
	width, parse, err := codeReader(c.Type)
	if err != nil {
		return err
	}
	if len(c.Rows) != m.Rows {
		return fmt.Errorf("%d rows of codes for a layout of %d", len(c.Rows), m.Rows)
	}
	m.Codes = make([]uint16, m.Columns*m.Rows)
	for i, text := range c.Rows {
		text = strings.Join(strings.Fields(text), "")
		if len(text) != width*m.Columns {
			return fmt.Errorf("row %d has %d characters for %d codes of %d", i+1, len(text), m.Columns, width)
		}
		row := i
		if m.Place.reversed() {
			row = m.Rows - 1 - i
		}
		for col := range m.Columns {
			one := text[col*width : (col+1)*width]
			code := uint16(NullCode)
			if one != c.Null {
				if code, err = parse(one); err != nil {
					return fmt.Errorf("row %d, column %d: %q is no code", i+1, col+1, one)
				}
			}
			m.Codes[row*m.Columns+col] = code
		}
	}
	for _, b := range c.Bins {
		code, err := parse(b.Code)
		if err != nil {
			return fmt.Errorf("the bin code %q is not of type %s", b.Code, c.Type)
		}
		if b.Code != c.Null {
			m.Bins = append(m.Bins, Bin{code, b.Description, strings.EqualFold(b.Quality, "Pass"), b.Count})
		}
	}
	m.explain()
	return nil
}

// explain adds bins for codes that the file does not define.
func (m *Map) explain() {
	known := map[uint16]bool{NullCode: true}
	for _, b := range m.Bins {
		known[b.Code] = true
	}
	for _, c := range m.Codes {
		if !known[c] {
			known[c] = true
			m.Bins = append(m.Bins, Bin{Code: c, Name: fmt.Sprintf("%04X", c)})
		}
	}
}

// codeReader tells how wide codes of a type are and reads them.
func codeReader(binType string) (width int, parse func(string) (uint16, error), err error) {
	radix := func(base int) func(string) (uint16, error) {
		return func(s string) (uint16, error) {
			v, err := strconv.ParseUint(s, base, 16)
			return uint16(v), err
		}
	}
	switch binType {
	case "HexaDecimal":
		return 2, radix(16), nil
	case "Integer2":
		return 4, radix(16), nil
	case "Decimal":
		return 3, radix(10), nil
	case "Ascii":
		return 1, func(s string) (uint16, error) {
			if len(s) != 1 {
				return 0, errors.New("one character a code")
			}
			return uint16(s[0]), nil
		}, nil
	}
	return 0, nil, fmt.Errorf("codes of type %q are not read; use Ascii, Decimal, HexaDecimal or Integer2", binType)
}
