package substratemap

import (
	"bufio"
	"encoding/xml"
	"fmt"
	"io"
	"strconv"
)

// namespace of the schema's edition that the written elements are of.
const namespace = "urn:semi-org:xsd.E142-1.V1005.SubstrateMap"

// Write writes the map: four hexadecimal digits a die, one row an element. Errors
// are those of the map (analytics.ErrInvalid) and of w.
func Write(w io.Writer, m *Map) error {
	if err := m.check(); err != nil {
		return err
	}
	out := &writer{Writer: bufio.NewWriter(w)}
	first := "the row at the origin"
	if m.Place.TopRowFirst {
		first = "the top of the picture"
	}
	out.put("<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n")
	out.put("<!-- Origin %s, axes %s; the first row is %s. The reference device \"die 0 0\" says where the die (0, 0) lies. -->\n", m.Place.Origin, m.Place.Axis, first)
	out.put("<MapData xmlns=\"%s\">\n", namespace)
	out.layouts(m)
	out.put(" <Substrates>\n  <Substrate SubstrateType=\"Wafer\" SubstrateId=%s>", quoted(m.Wafer))
	if m.Lot != "" {
		out.put("<LotId>%s</LotId>", escaped(m.Lot))
	}
	out.put("</Substrate>\n </Substrates>\n")
	out.put(" <SubstrateMaps>\n  <SubstrateMap SubstrateType=\"Wafer\" SubstrateId=%s LayoutSpecifier=\"Wafer/Dies\" SubstrateSide=\"TopSide\" Orientation=\"0\" OriginLocation=\"%s\" AxisDirection=\"%s\">\n",
		quoted(m.Wafer), m.Place.Origin, m.Place.Axis)
	out.put("   <Overlay MapName=%s MapVersion=\"1\">\n", quoted(m.Name))
	out.put("    <ReferenceDevices><ReferenceDevice Name=\"die 0 0\"><Coordinates X=\"%d\" Y=\"%d\"/></ReferenceDevice></ReferenceDevices>\n", m.ZeroColumn, m.ZeroRow)
	out.codes(m)
	out.put("   </Overlay>\n  </SubstrateMap>\n </SubstrateMaps>\n</MapData>\n")
	if out.err != nil {
		return out.err
	}
	return out.Flush()
}

type writer struct {
	*bufio.Writer
	err error
}

func (w *writer) put(format string, args ...any) {
	if _, err := fmt.Fprintf(w.Writer, format, args...); err != nil && w.err == nil {
		w.err = err
	}
}

func (w *writer) layouts(m *Map) {
	number := func(v float64) string { return strconv.FormatFloat(v, 'f', -1, 64) }
	w.put(" <Layouts>\n  <Layout LayoutId=\"Wafer\" DefaultUnits=\"mm\" TopLevel=\"true\"><Dimension X=\"1\" Y=\"1\"/>")
	if m.DiameterMM > 0 {
		w.put("<DeviceSize X=\"%s\" Y=\"%[1]s\"/>", number(m.DiameterMM))
	}
	w.put("<ChildLayouts><ChildLayout LayoutId=\"Dies\"/></ChildLayouts></Layout>\n")
	w.put("  <Layout LayoutId=\"Dies\" DefaultUnits=\"mm\"><Dimension X=\"%d\" Y=\"%d\"/>", m.Columns, m.Rows)
	if m.StepXMM > 0 && m.StepYMM > 0 {
		w.put("<StepSize X=\"%s\" Y=\"%s\"/>", number(m.StepXMM), number(m.StepYMM))
	}
	if m.Product != "" {
		w.put("<ProductId>%s</ProductId>", escaped(m.Product))
	}
	w.put("</Layout>\n </Layouts>\n")
}

func (w *writer) codes(m *Map) {
	counts := map[uint16]int{}
	for _, c := range m.Codes {
		counts[c]++
	}
	w.put("    <BinCodeMap BinType=\"Integer2\" NullBin=\"%04X\" MapType=\"2DArray\">\n     <BinDefinitions>\n", NullCode)
	for _, b := range m.Bins {
		quality := "Fail"
		if b.Pass {
			quality = "Pass"
		}
		w.put("      <BinDefinition BinCode=\"%04X\" BinCount=\"%d\" BinQuality=\"%s\" BinDescription=%s/>\n", b.Code, counts[b.Code], quality, quoted(b.Name))
	}
	w.put("     </BinDefinitions>\n")
	line := make([]byte, 0, 4*m.Columns)
	for i := range m.Rows {
		row := i
		if m.Place.reversed() {
			row = m.Rows - 1 - i
		}
		line = line[:0]
		for _, c := range m.Codes[row*m.Columns : (row+1)*m.Columns] {
			line = fmt.Appendf(line, "%04X", c)
		}
		w.put("     <BinCode>%s</BinCode>\n", line)
	}
	w.put("    </BinCodeMap>\n")
}

func quoted(s string) string { return "\"" + escaped(s) + "\"" }

func escaped(s string) string {
	var b escapeBuffer
	xml.EscapeText(&b, []byte(s)) // a buffer takes everything
	return string(b)
}

type escapeBuffer []byte

func (b *escapeBuffer) Write(p []byte) (int, error) {
	*b = append(*b, p...)
	return len(p), nil
}
