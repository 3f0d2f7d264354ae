package web

import (
	"bytes"
	"encoding/base64"
	"encoding/binary"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"

	"epitally/analytics/wafermap"
)

// WriteGallery writes the gallery into the folder dir, making it when missing.
func (p *Pages) WriteGallery(dir string) error {
	files, err := p.Gallery()
	if err != nil {
		return err
	}
	if err := os.MkdirAll(filepath.Join(dir, "assets"), 0o755); err != nil {
		return err
	}
	for name, b := range files {
		if err := os.WriteFile(filepath.Join(dir, filepath.FromSlash(name)), b, 0o644); err != nil {
			return err
		}
	}
	return nil
}

// Gallery renders every page from canned data, without a database: file name →
// contents. Pages stand side by side with an assets folder and carry the data of
// their maps inside themselves, so that a folder of them opens in any browser.
func (p *Pages) Gallery() (map[string][]byte, error) {
	pages, err := newPages(p.assets, "assets/")
	if err != nil {
		return nil, err
	}
	files := map[string][]byte{}
	for name, b := range p.assets.files {
		files["assets/"+name] = b
	}
	var index strings.Builder
	for _, p := range galleryPages() {
		b, err := pages.bytes(p.view, p.page)
		if err != nil {
			return nil, err
		}
		files[p.name+".html"] = b
		fmt.Fprintf(&index, "<li><a href=\"%s.html\">%s</a></li>\n", p.name, p.name)
	}
	files["index.html"] = []byte("<!doctype html><meta charset=\"utf-8\"><title>Gallery · Epitally</title>\n<ul>\n" + index.String() + "</ul>\n")
	return files, nil
}

type galleryPage struct {
	name, view string
	page       any
}

func galleryPages() []galleryPage {
	values, bins := cannedWafer(), cannedWafer()
	bins.View = "bins"
	magnitude := cannedWafer()
	magnitude.Shown = "forward_voltage_v"
	silicon := cannedWafer()
	silicon.Wafer, silicon.Spec, silicon.SpecChoices, silicon.Growth = "W-91", nil, nil, Growth{}
	silicon.Planes = silicon.Planes[1:]
	layout := *silicon.Measurement.Layout
	layout.Assumed, layout.Mark, layout.MarkAngleDeg = true, "notch", 90
	silicon.Measurement.Layout = &layout
	return []galleryPage{
		{"wafers", "wafers", cannedWafers()},
		{"wafers-empty", "wafers", WafersPage{Base: dated(Base{Title: "Wafers", Section: "wafers", Finding: WafersSentence(WafersFound{})}), Empty: true}},
		{"wafer-values", "wafer", finished(values)},
		{"wafer-bins", "wafer", finished(bins)},
		{"wafer-voltage", "wafer", finished(magnitude)},
		{"wafer-unknown", "wafer", finished(silicon)},
		{"wafer-unmeasured", "wafer", finished(WaferInput{Wafer: "K-0413-01", Growth: values.Growth, Zone: galleryZone})},
		{"bins", "bins", cannedSpecs()},
		{"bin", "bin", cannedSpec()},
		{"loads", "loads", cannedLoads()},
		{"load", "load", cannedLoad()},
		{"error-404", "error", NewErrorPage(404, "There is no wafer K-0412-99.")},
		{"error-500", "error", NewErrorPage(500, "")},
	}
}

// finished builds a wafer's page and puts its data inside it.
func finished(in WaferInput) WaferPage {
	p := NewWaferPage(in)
	p.Base = dated(p.Base)
	if p.Map == nil {
		return p
	}
	p.Map.Grid = dataURI(gridBytes(in.Grid))
	for i := range p.Map.Quantities {
		p.Map.Quantities[i].Plane = dataURI(planeBytes(cannedPlane(p.Map.Quantities[i].Name, in.Grid, in.Measurement.Layout)))
	}
	if p.Map.Bins != nil {
		p.Map.Bins.URL = dataURI(codeBytes(in.Spec.Codes))
	}
	var picture bytes.Buffer
	q := in.pick(p.Map.Shown)
	low, high := ScaleRange(q.Summary, q.Quantity, ScaleTarget(q.Quantity, q.Target))
	plane := cannedPlane(q.Quantity.Name, in.Grid, in.Measurement.Layout)
	if err := PaintMap(&picture, MapPicture{Grid: in.Grid, Layout: in.Measurement.Layout, Plane: &plane, Low: low, High: high,
		Target: ScaleTarget(q.Quantity, q.Target), Size: 720}); err == nil {
		p.MapPNG = dataURI(picture.Bytes())
	}
	return p
}

func dataURI(b []byte) string {
	return "data:application/octet-stream;base64," + base64.StdEncoding.EncodeToString(b)
}

// planeBytes writes an int16 plane in the wire format of the API.
func planeBytes(p wafermap.Plane) []byte {
	b := wireHeader(len(p.K16), float64(p.BaseK)*p.Resolution(), p.Resolution())
	for shift := 0; shift < 16; shift += 8 {
		for _, k := range p.K16 {
			b = append(b, byte(uint16(k)>>shift))
		}
	}
	return b
}

func codeBytes(codes []uint16) []byte {
	p := wafermap.Plane{Encoding: wafermap.Int16, K16: make([]int16, len(codes))}
	for i, c := range codes {
		p.K16[i] = int16(c)
	}
	return planeBytes(p)
}

func wireHeader(n int, base, resolution float64) []byte {
	b := append([]byte("EPLN"), 1, 1, 0, 0)
	b = binary.LittleEndian.AppendUint32(b, uint32(n))
	b = append(b, 0, 0, 0, 0)
	b = binary.LittleEndian.AppendUint64(b, math.Float64bits(base))
	return binary.LittleEndian.AppendUint64(b, math.Float64bits(resolution))
}

func gridBytes(g *wafermap.Grid) []byte {
	runs := g.Runs()
	b := append([]byte("EGRD"), 1, 0, 0, 0)
	b = binary.LittleEndian.AppendUint32(b, uint32(len(runs)))
	b = binary.LittleEndian.AppendUint32(b, uint32(g.Len()))
	return append(b, wafermap.EncodeRuns(runs)...)
}
