package api

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"net/http"
	"slices"
	"strconv"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
	"epitally/db"
)

type diesParams struct {
	measurementParams
	Quantities []string `query:"quantities" doc:"names of quantities, separated by commas; else all"`
	Format     string   `query:"format" enum:"csv,json,parquet,xlsx" doc:"overrides the Accept header"`
}

type diesOut struct {
	Quantities []quantityOut         `json:"quantities"`
	X          []int16               `json:"x" doc:"per die"`
	Y          []int16               `json:"y" doc:"per die"`
	Values     map[string][]*float64 `json:"values" doc:"by quantity, per die; null = no value"`
}

func (s *Server) listDies(c echo.Context, p diesParams) error {
	ctx := c.Request().Context()
	m, err := s.measurement(ctx, p.ID)
	if err != nil {
		return err
	}
	for i, name := range p.Quantities {
		if _, err := quantityIn(m, name); err != nil {
			return err
		}
		if slices.Contains(p.Quantities[:i], name) {
			return invalidParam("quantities", "name it once", "%s stands twice", name)
		}
	}
	format := chooseFormat(c, p.Format, "csv", "json", "parquet", "xlsx")
	if format != "json" {
		download(c, fmt.Sprintf("%s-%d.%s", m.Wafer, m.ID, format))
	}
	if format == "csv" {
		c.Response().Header().Set("Content-Type", mediaCSV)
		return s.store.WriteDiesCSV(ctx, c.Response(), m, p.Quantities...)
	}
	planes, err := s.store.Planes(ctx, m, p.Quantities...)
	if err != nil {
		return err
	}
	grid, err := s.store.Grid(ctx, m.GridHash)
	if err != nil {
		return err
	}
	switch format {
	case "parquet", "xlsx":
		var b bytes.Buffer
		write, media := writeParquet, mediaParquet
		if format == "xlsx" {
			write, media = writeXLSX, mediaXLSX
		}
		if err := write(&b, grid, planes); err != nil {
			return err
		}
		return c.Blob(http.StatusOK, media, b.Bytes())
	}
	return stream(c, mediaJSON, func(w *bufio.Writer) { writeDiesJSON(w, m, grid, planes) })
}

// writeDiesJSON writes a diesOut without holding it.
func writeDiesJSON(w *bufio.Writer, m *db.Measurement, g *wafermap.Grid, planes []wafermap.Plane) {
	quantities := make([]quantityOut, len(planes))
	for i := range planes {
		quantities[i] = quantityOut{Name: planes[i].Quantity, Label: planes[i].Quantity}
		if q, err := quantityIn(m, planes[i].Quantity); err == nil {
			quantities[i] = wireQuantity(q)
		}
	}
	w.WriteString(`{"quantities":`)
	w.WriteString(jsonText(quantities))
	for _, axis := range []struct {
		key string
		k   []int16
	}{{"x", g.X}, {"y", g.Y}} {
		fmt.Fprintf(w, ",%q:[", axis.key)
		text := make([]byte, 0, 8)
		for i, k := range axis.k {
			text = text[:0]
			if i > 0 {
				text = append(text, ',')
			}
			w.Write(strconv.AppendInt(text, int64(k), 10))
		}
		w.WriteByte(']')
	}
	w.WriteString(`,"values":{`)
	for i := range planes {
		if i > 0 {
			w.WriteByte(',')
		}
		fmt.Fprintf(w, "%q:", planes[i].Quantity)
		writeValues(w, &planes[i])
	}
	w.WriteString("}}\n")
}

// jsonText is JSON of a value that always has one.
func jsonText(v any) string {
	b, err := json.Marshal(v)
	if err != nil {
		return "null"
	}
	return string(b)
}

type dieParams struct {
	measurementParams
	X       int    `path:"x" min:"-32768" max:"32767" doc:"die coordinate"`
	Y       int    `path:"y" min:"-32768" max:"32767" doc:"die coordinate"`
	Spec    string `query:"specification" doc:"name of a stored specification to bin the die under"`
	Version int    `query:"version" min:"1" max:"2000000000" doc:"its version; else the latest"`
}

type dieOut struct {
	Wafer         string     `json:"wafer"`
	MeasurementID int64      `json:"measurement_id"`
	X             int        `json:"x"`
	Y             int        `json:"y"`
	PositionMM    *placeOut  `json:"position_mm" doc:"of the die's centre from the wafer's, x to the right and y up; null when the pitch is not known"`
	Counts        bool       `json:"counts" doc:"false: in the edge exclusion, so in no summary and no tally"`
	Values        []valueOut `json:"values"`
	Spec          string     `json:"specification,omitempty"`
	Version       int        `json:"version,omitempty"`
	Bin           string     `json:"bin,omitempty" doc:"bin, reject reason or untested"`
	Class         string     `json:"class,omitempty" doc:"sellable, unsellable, reject or untested"`
}

type placeOut struct {
	X float64 `json:"x"`
	Y float64 `json:"y"`
}

type valueOut struct {
	Quantity string   `json:"quantity"`
	Label    string   `json:"label"`
	Unit     string   `json:"unit"`
	Value    *float64 `json:"value" doc:"null = no value"`
}

func (s *Server) getDie(c echo.Context, p dieParams) error {
	ctx := c.Request().Context()
	if p.Version > 0 && p.Spec == "" {
		return invalidParam("version", "add specification=NAME", "names a version of no specification")
	}
	m, err := s.measurement(ctx, p.ID)
	if err != nil {
		return err
	}
	grid, err := s.store.Grid(ctx, m.GridHash)
	if err != nil {
		return err
	}
	i := grid.Find(int16(p.X), int16(p.Y))
	if i < 0 {
		return fmt.Errorf("measurement %d has no die (%d, %d): it has the dies of /api/v1/grids/%s: %w", m.ID, p.X, p.Y, m.GridHash, analytics.ErrNotFound)
	}
	planes, err := s.store.Planes(ctx, m)
	if err != nil {
		return err
	}
	out := dieOut{Wafer: m.Wafer, MeasurementID: m.ID, X: p.X, Y: p.Y, Counts: true, Values: make([]valueOut, 0, len(planes))}
	if l := m.Layout; l.Name != wafermap.AssumedUnits {
		x, y := l.PositionMM(p.X, p.Y)
		out.PositionMM = &placeOut{roundMM(x), roundMM(y)}
		out.Counts = l.Assumed || l.Inside(p.X, p.Y)
	}
	for j := range planes {
		q, err := quantityIn(m, planes[j].Quantity)
		if err != nil {
			return err
		}
		out.Values = append(out.Values, valueOut{q.Name, q.Label, q.Unit, float(planes[j].Value(i))})
	}
	if p.Spec != "" {
		stored, err := s.specNamed(ctx, p.Spec, p.Version)
		if err != nil {
			return err
		}
		spec, err := s.specs.parse(stored)
		if err != nil {
			return err
		}
		cell, err := binOne(spec, planes, i)
		if err != nil {
			return err
		}
		out.Spec, out.Version, out.Bin, out.Class = stored.Name, stored.Version, cell.Name, cell.Class.String()
	}
	return answerJSON(c, http.StatusOK, mediaJSON, out)
}

// roundMM takes off what binary fractions add behind a picometre.
func roundMM(mm float64) float64 { return math.Round(mm*1e9) / 1e9 }

// binOne bins die i alone.
func binOne(spec *binning.Spec, planes []wafermap.Plane, i int) (binning.Cell, error) {
	one := make([]wafermap.Plane, len(planes))
	for j := range planes {
		one[j] = dieOf(&planes[j], i)
	}
	code := make([]uint16, 1)
	if err := spec.Bin(code, make([]int, len(spec.Cells())), binning.PickPlanes(spec, one), nil); err != nil {
		return binning.Cell{}, err
	}
	return spec.Cells()[code[0]], nil
}

// dieOf is a plane of die i alone.
func dieOf(p *wafermap.Plane, i int) wafermap.Plane {
	one := *p
	switch p.Encoding {
	case wafermap.Int16:
		one.K16 = p.K16[i : i+1]
	case wafermap.Int32:
		one.K32 = p.K32[i : i+1]
	case wafermap.Float32:
		one.F32 = p.F32[i : i+1]
	default:
		one.F64 = p.F64[i : i+1]
	}
	return one
}
