package api

import (
	"fmt"
	"io"
	"math"
	"slices"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/compress/zstd"
	"github.com/xuri/excelize/v2"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

const (
	mediaParquet = "application/vnd.apache.parquet"
	mediaXLSX    = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"
)

// exportRows is how many dies go into a Parquet file at once.
const exportRows = 4096

// writeParquet writes dies as rows: x and y as integers, every quantity as an
// optional double under its own name.
func writeParquet(w io.Writer, g *wafermap.Grid, planes []wafermap.Plane) error {
	group := parquet.Group{"x": parquet.Int(32), "y": parquet.Int(32)}
	names := []string{"x", "y"}
	for i := range planes {
		group[planes[i].Quantity] = parquet.Optional(parquet.Leaf(parquet.DoubleType))
		names = append(names, planes[i].Quantity)
	}
	slices.Sort(names) // the columns of a group are in the order of their names
	out := parquet.NewWriter(w, parquet.NewSchema("dies", group), parquet.Compression(&zstd.Codec{}))
	column := make(map[string]int, len(names))
	for i, name := range names {
		column[name] = i
	}
	rows := make([]parquet.Row, 0, exportRows)
	for die := range g.X {
		row := make(parquet.Row, len(names))
		row[column["x"]] = parquet.Int32Value(int32(g.X[die])).Level(0, 0, column["x"])
		row[column["y"]] = parquet.Int32Value(int32(g.Y[die])).Level(0, 0, column["y"])
		for i := range planes {
			at := column[planes[i].Quantity]
			if v := planes[i].Value(die); math.IsNaN(v) {
				row[at] = parquet.NullValue().Level(0, 0, at)
			} else {
				row[at] = parquet.DoubleValue(v).Level(0, 1, at)
			}
		}
		if rows = append(rows, row); len(rows) == exportRows || die == len(g.X)-1 {
			if _, err := out.WriteRows(rows); err != nil {
				return err
			}
			rows = rows[:0]
		}
	}
	return out.Close()
}

// mostSheetRows is what a sheet holds, its head included.
const mostSheetRows = 1_048_576

// writeXLSX writes dies as rows of one sheet, streamed.
func writeXLSX(w io.Writer, g *wafermap.Grid, planes []wafermap.Plane) (err error) {
	if g.Len() >= mostSheetRows {
		return fmt.Errorf("%d dies do not fit a sheet of %d rows: ask for csv or parquet: %w", g.Len(), mostSheetRows, analytics.ErrTooLarge)
	}
	file := excelize.NewFile()
	defer file.Close()
	if err := file.SetSheetName("Sheet1", "dies"); err != nil {
		return err
	}
	sheet, err := file.NewStreamWriter("dies")
	if err != nil {
		return err
	}
	row := []any{"x", "y"}
	for i := range planes {
		row = append(row, planes[i].Quantity)
	}
	for line := 1; ; line++ {
		if err := sheet.SetRow(fmt.Sprintf("A%d", line), row); err != nil {
			return err
		}
		die := line - 1
		if die == g.Len() {
			break
		}
		row = append(row[:0], g.X[die], g.Y[die])
		for i := range planes {
			if v := planes[i].Value(die); math.IsNaN(v) {
				row = append(row, nil)
			} else {
				row = append(row, v)
			}
		}
	}
	if err := sheet.Flush(); err != nil {
		return err
	}
	return file.Write(w)
}
