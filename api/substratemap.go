package api

import (
	"bufio"
	"fmt"

	"github.com/labstack/echo/v4"

	"epitally/analytics/binning"
	"epitally/analytics/substratemap"
	"epitally/analytics/wafermap"
	"epitally/db"
)

const mediaXML = "application/xml"

type substrateMapParams struct {
	binParams
	Origin string `query:"origin" enum:"LowerLeft,LowerRight,UpperLeft,UpperRight" default:"LowerLeft" doc:"where column 0 and row 0 lie"`
	Rows   string `query:"rows" enum:"origin,top" default:"origin" doc:"whether the first row written is the one at the origin or the top of the picture"`
}

// getSubstrateMap writes the bins of every die as a substrate map.
func (s *Server) getSubstrateMap(c echo.Context, p substrateMapParams) error {
	ctx := c.Request().Context()
	m, err := s.measurement(ctx, p.ID)
	if err != nil {
		return err
	}
	place, err := substratemap.PlaceAt(p.Origin, p.Rows == "top")
	if err != nil {
		return err
	}
	b, err := s.binAsked(ctx, p.binParams)
	if err != nil {
		return err
	}
	grid, err := s.store.Grid(ctx, m.GridHash)
	if err != nil {
		return err
	}
	w, err := s.store.Wafer(ctx, m.Wafer)
	if err != nil {
		return err
	}
	out := substrateMapOf(b, m, grid, place)
	out.Lot, out.Product = w.Lot, w.Product
	download(c, fmt.Sprintf("%s-%s.xml", m.Wafer, b.tally.Spec))
	return stream(c, mediaXML, func(to *bufio.Writer) { _ = substratemap.Write(to, &out) }) // the map is whole, and a reader who went away is no fault of ours
}

// substrateMapOf puts dies into columns and rows that grow from the origin.
func substrateMapOf(b *binned, m *db.Measurement, g *wafermap.Grid, place substratemap.Place) substratemap.Map {
	// As the picture has it: right and up.
	right, up := 1, 1
	if m.Layout.XAxis == "left" {
		right = -1
	}
	if m.Layout.YAxis == "down" {
		up = -1
	}
	if place.Origin == "LowerRight" || place.Origin == "UpperRight" {
		right = -right
	}
	if place.Origin == "UpperLeft" || place.Origin == "UpperRight" {
		up = -up
	}
	lowX, lowY, highX, highY := 1<<30, 1<<30, -1<<30, -1<<30
	for i := range g.X {
		x, y := right*int(g.X[i]), up*int(g.Y[i])
		lowX, highX, lowY, highY = min(lowX, x), max(highX, x), min(lowY, y), max(highY, y)
	}
	out := substratemap.Map{Wafer: m.Wafer, Name: fmt.Sprintf("%s v%d", b.tally.Spec, b.tally.Version), Place: place,
		Columns: highX - lowX + 1, Rows: highY - lowY + 1, ZeroColumn: -lowX, ZeroRow: -lowY}
	if !m.Layout.Assumed {
		out.DiameterMM, out.StepXMM, out.StepYMM = m.Layout.WaferDiameterMM, m.Layout.DiePitchXMM, m.Layout.DiePitchYMM
	}
	out.Codes = make([]uint16, out.Columns*out.Rows)
	for i := range out.Codes {
		out.Codes[i] = substratemap.NullCode
	}
	for i := range g.X {
		out.Codes[(up*int(g.Y[i])-lowY)*out.Columns+right*int(g.X[i])-lowX] = b.codes[i]
	}
	for code, cell := range b.cells {
		out.Bins = append(out.Bins, substratemap.Bin{Code: uint16(code), Name: cell.Name, Pass: cell.Class == binning.Sellable})
	}
	return out
}
