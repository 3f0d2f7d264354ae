package api

import (
	"bytes"
	"errors"
	"io"
	"math"
	"net/http"
	"slices"
	"strconv"
	"testing"

	"github.com/parquet-go/parquet-go"
	"github.com/xuri/excelize/v2"
)

// TestDiesAsParquetAndXLSX reads both back and holds them to the planes.
func TestDiesAsParquetAndXLSX(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	address := "/api/v1/measurements/" + strconv.FormatInt(f.id, 10) + "/dies"
	want := decoded[diesOut](t, k.get(t, address+"?format=json"))

	w := k.get(t, address+"?format=parquet")
	file, err := parquet.OpenFile(bytes.NewReader(w.Body.Bytes()), int64(w.Body.Len()))
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, c := range file.Schema().Columns() {
		names = append(names, c[0])
	}
	if !slices.Equal(names, []string{dominant, voltage, "x", "y"}) || file.NumRows() != int64(len(want.X)) {
		t.Fatalf("%v, %d rows", names, file.NumRows())
	}
	rows := parquet.NewReader(file)
	defer rows.Close()
	batch, die := make([]parquet.Row, 100), 0
	for {
		n, err := rows.ReadRows(batch)
		for _, row := range batch[:n] {
			if row[2].Int32() != int32(want.X[die]) || row[3].Int32() != int32(want.Y[die]) || !same(row[0], want.Values[dominant][die]) || !same(row[1], want.Values[voltage][die]) {
				t.Fatalf("die %d: %v", die, row)
			}
			die++
		}
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	if die != len(want.X) {
		t.Errorf("%d dies in the file, want %d", die, len(want.X))
	}

	book, err := excelize.OpenReader(k.get(t, address+"?format=xlsx&quantities="+voltage).Body)
	if err != nil {
		t.Fatal(err)
	}
	defer book.Close()
	cells, err := book.GetRows("dies")
	if err != nil || len(cells) != len(want.X)+1 || !slices.Equal(cells[0], []string{"x", "y", voltage}) {
		t.Fatalf("%v: %d rows, %v", err, len(cells), cells[0])
	}
	for i, row := range cells[1:] {
		value := math.NaN()
		if len(row) > 2 {
			value, _ = strconv.ParseFloat(row[2], 64)
		}
		v := want.Values[voltage][i]
		if row[0] != strconv.Itoa(int(want.X[i])) || row[1] != strconv.Itoa(int(want.Y[i])) || (v == nil) != math.IsNaN(value) || v != nil && *v != value {
			t.Fatalf("row %d: %v", i+2, row)
		}
	}
	k.problem(t, request("GET", address+"?format=ods", ""), http.StatusBadRequest)
}

func same(v parquet.Value, want *float64) bool {
	return v.IsNull() == (want == nil) && (want == nil || v.Double() == *want)
}
