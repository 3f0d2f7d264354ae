package api

import (
	"bufio"
	"context"
	"encoding/binary"
	"fmt"
	"math"
	"net/http"
	"slices"
	"strconv"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
	"epitally/db"
)

// planeHeader is the length of the binary plane's header in bytes.
const planeHeader = 32

// appendPlaneHeader writes "EPLN", version, encoding, number of dies, base and
// resolution, little-endian; the plane's bytes follow as they are stored.
func appendPlaneHeader(b []byte, p *db.StoredPlane) []byte {
	b = append(b, 'E', 'P', 'L', 'N', 1, byte(p.Encoding), 0, 0)
	b = binary.LittleEndian.AppendUint32(b, uint32(p.N))
	b = binary.LittleEndian.AppendUint32(b, 0)
	b = binary.LittleEndian.AppendUint64(b, math.Float64bits(p.Base))
	return binary.LittleEndian.AppendUint64(b, math.Float64bits(p.Resolution))
}

func answerPlane(c echo.Context, p *db.StoredPlane) error {
	h := c.Response().Header()
	h.Set("Content-Type", mediaPlane)
	h.Set("Content-Length", strconv.Itoa(planeHeader+len(p.Data)))
	if _, err := c.Response().Write(appendPlaneHeader(make([]byte, 0, planeHeader), p)); err != nil {
		return err
	}
	_, err := c.Response().Write(p.Data)
	return err
}

// codesPlane puts bin codes into the form of a plane. Codes stay below 32768
// (package binning), so that none reads as "no value".
func codesPlane(codes []uint16) *db.StoredPlane {
	n := len(codes)
	p := &db.StoredPlane{Encoding: wafermap.Int16, Resolution: 1, N: n, Data: make([]byte, 2*n)}
	low, high := p.Data[:n], p.Data[n:]
	for i, code := range codes {
		low[i], high[i] = byte(code), byte(code>>8)
	}
	return p
}

type planeParams struct {
	measurementParams
	Quantity string `path:"quantity" doc:"name of the quantity"`
	Format   string `query:"format" enum:"plane,json,csv" doc:"overrides the Accept header"`
}

type planeOut struct {
	Quantity string     `json:"quantity"`
	Unit     string     `json:"unit"`
	Values   []*float64 `json:"values" doc:"per die in the grid's order; null = no value"`
}

// named is a test for the quantity called name.
func named(name string) func(quantity.Quantity) bool {
	return func(q quantity.Quantity) bool { return q.Name == name }
}

// quantityIn finds a quantity of the measurement.
func quantityIn(m *db.Measurement, name string) (quantity.Quantity, error) {
	i := slices.IndexFunc(m.Quantities, named(name))
	if i < 0 {
		return quantity.Quantity{}, fmt.Errorf("measurement %d has no quantity %q: /api/v1/measurements/%d lists those it has: %w", m.ID, name, m.ID, analytics.ErrNotFound)
	}
	return m.Quantities[i], nil
}

// measured is a measurement and one of its quantities.
func (s *Server) measured(ctx context.Context, id int64, name string) (*db.Measurement, quantity.Quantity, error) {
	m, err := s.measurement(ctx, id)
	if err != nil {
		return nil, quantity.Quantity{}, err
	}
	q, err := quantityIn(m, name)
	return m, q, err
}

func (s *Server) getPlane(c echo.Context, p planeParams) error {
	ctx := c.Request().Context()
	m, q, err := s.measured(ctx, p.ID, p.Quantity)
	if err != nil {
		return err
	}
	format := chooseFormat(c, p.Format, "plane", "json", "csv")
	if unchanged(c, tagOf(append(identity(m), q.Name, format)...), keepNumber) {
		return notModified(c)
	}
	stored, err := s.store.StoredPlane(ctx, m, q.Name)
	if err != nil {
		return err
	}
	if format == "plane" {
		return answerPlane(c, stored)
	}
	plane, err := db.DecodePlane(q.Name, *stored)
	if err != nil {
		return fmt.Errorf("stored plane %s of measurement %d: %v", q.Name, m.ID, err) // ours, not the reader's
	}
	if format == "csv" {
		grid, err := s.store.Grid(ctx, m.GridHash)
		if err != nil {
			return err
		}
		download(c, fmt.Sprintf("%s-%d-%s.csv", m.Wafer, m.ID, q.Name))
		return stream(c, mediaCSV, func(w *bufio.Writer) { writePlaneCSV(w, grid, &plane) })
	}
	return stream(c, mediaJSON, func(w *bufio.Writer) {
		fmt.Fprintf(w, `{"quantity":%q,"unit":%s,"values":`, q.Name, jsonText(q.Unit))
		writeValues(w, &plane)
		w.WriteString("}\n")
	})
}

// stream answers with what write writes: answers of a million values are not
// held in memory twice. A bufio.Writer keeps its first error until it is flushed.
func stream(c echo.Context, media string, write func(*bufio.Writer)) error {
	c.Response().Header().Set("Content-Type", media)
	w := bufio.NewWriterSize(c.Response(), 1<<16)
	write(w)
	return w.Flush()
}

// writePlaneCSV writes x, y and value of every die, with the decimals its source
// wrote; no value is an empty cell.
func writePlaneCSV(w *bufio.Writer, g *wafermap.Grid, p *wafermap.Plane) {
	w.WriteString("x,y,value\n")
	line := make([]byte, 0, 64)
	for i := range g.X {
		line = strconv.AppendInt(line[:0], int64(g.X[i]), 10)
		line = strconv.AppendInt(append(line, ','), int64(g.Y[i]), 10)
		line = db.AppendValue(append(line, ','), p, i)
		w.Write(append(line, '\n'))
	}
}

// writeValues writes a JSON array, null for no value. Infinities, which a float
// plane may hold, are no JSON either.
func writeValues(w *bufio.Writer, p *wafermap.Plane) {
	text := make([]byte, 0, 32)
	w.WriteByte('[')
	for i, n := 0, p.Len(); i < n; i++ {
		text = text[:0]
		if i > 0 {
			text = append(text, ',')
		}
		if v := p.Value(i); math.IsNaN(v) || math.IsInf(v, 0) {
			text = append(text, "null"...)
		} else {
			text = strconv.AppendFloat(text, v, 'g', -1, 64)
		}
		w.Write(text)
	}
	w.WriteByte(']')
}

type gridParams struct {
	Hash   string `path:"hash" doc:"hex SHA-256 of the grid's runs, as measurements name it"`
	Format string `query:"format" enum:"grid,json" doc:"overrides the Accept header"`
}

type gridOut struct {
	X []int16 `json:"x" doc:"per die"`
	Y []int16 `json:"y" doc:"per die"`
}

func (s *Server) getGrid(c echo.Context, p gridParams) error {
	format := chooseFormat(c, p.Format, "grid", "json")
	grid, err := s.store.Grid(c.Request().Context(), p.Hash)
	if err != nil {
		return missing(err, "there is no die grid %q: measurements name theirs under \"grid\"", p.Hash)
	}
	if unchanged(c, tagOf(p.Hash, format), keepContent) {
		return notModified(c)
	}
	if format == "json" {
		return answerJSON(c, http.StatusOK, mediaJSON, gridOut{full(grid.X), full(grid.Y)})
	}
	return c.Blob(http.StatusOK, mediaGrid, encodeGrid(grid))
}

// encodeGrid writes "EGRD", version, the number of runs and of dies, little-endian,
// and the runs.
func encodeGrid(g *wafermap.Grid) []byte {
	runs := g.Runs()
	b := append(make([]byte, 0, 16+8*len(runs)), 'E', 'G', 'R', 'D', 1, 0, 0, 0)
	b = binary.LittleEndian.AppendUint32(b, uint32(len(runs)))
	b = binary.LittleEndian.AppendUint32(b, uint32(g.Len()))
	return append(b, wafermap.EncodeRuns(runs)...)
}
