package reader

import (
	"errors"
	"strings"
	"testing"
	"time"

	"epitally/analytics"
)

const runSheetHead = runSheetMark + "\nwafer,lot,reactor,run,grown_at,carrier,ring,pocket,recipe,product\n"

func readRunSheetText(t *testing.T, text string, zone *time.Location) (held, error) {
	t.Helper()
	return readHeld(t.Context(), Input{Name: "runs.csv", R: strings.NewReader(text), Zone: zone})
}

func TestRunSheet(t *testing.T) {
	t.Parallel()
	zone := time.FixedZone("fab", 8*3600)
	text := "\xef\xbb\xbf" + strings.ReplaceAll(runSheetHead, "\n", "\r\n") +
		"W-0001,L-1,Tern,7,2026-11-01T06:30:00+02:00,C1,A,3,blue,tern-10\r\n" +
		"# a remark\n\n" +
		"\"W-\"\"2\"\"\",,Tern,7,2026-11-01 06:30,,,,,\n" +
		"W-0003,,,,2026-11-02,,,,,,,\n" +
		runSheetMark + "\nproduct,wafer\ntern-10,W-0004"
	h, err := readRunSheetText(t, text, zone)
	if err != nil {
		t.Fatal(err)
	}
	if h.result.Format != "run-sheet" || len(h.rows) != 4 {
		t.Fatalf("format %q, rows %+v", h.result.Format, h.rows)
	}
	first := h.rows[0]
	at := first.GrownAt
	first.GrownAt = nil
	if want := (RunSheetRow{Line: 3, Wafer: "W-0001", Lot: "L-1", Reactor: "Tern", Run: 7, Carrier: "C1", Ring: "A", Pocket: "3",
		Recipe: "blue", Product: "tern-10"}); first != want {
		t.Errorf("first row %+v\nwant %+v", first, want)
	}
	if want := time.Date(2026, 11, 1, 4, 30, 0, 0, time.UTC); !at.Equal(want) {
		t.Errorf("grown at %v, want %v", at, want)
	}
	// A time without a zone, and a date alone, are the fab's own.
	if want := time.Date(2026, 10, 31, 22, 30, 0, 0, time.UTC); h.rows[1].Wafer != `W-"2"` || !h.rows[1].GrownAt.Equal(want) {
		t.Errorf("second row %+v, grown at %v, want %v", h.rows[1], h.rows[1].GrownAt, want)
	}
	if want := time.Date(2026, 11, 1, 16, 0, 0, 0, time.UTC); !h.rows[2].GrownAt.Equal(want) {
		t.Errorf("third row grown at %v, want %v", h.rows[2].GrownAt, want)
	}
	if last := h.rows[3]; last.Wafer != "W-0004" || last.Product != "tern-10" || last.Line != 10 {
		t.Errorf("row under the second header %+v", last)
	}
}

func TestRunSheetFaults(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ name, text, want string }{
		{"no rows", runSheetHead, "line 2: the run sheet names no wafer; write a header row with the column wafer, then one row per wafer"},
		{"no wafer column", runSheetMark + "\nlot,run\nL,1\n", "line 2, column 1: wafer: the header row has no such column; add it: every row says which wafer it is about"},
		{"unknown column", runSheetMark + "\nwafer,slot\nW,1\n", `line 2, column 7: "slot" is not a column of a run sheet; use ` + runSheetNames},
		{"column twice", runSheetMark + "\nwafer,lot,lot\nW,1,1\n", "line 2, column 11: lot: the column stands twice; remove one of them"},
		{"short row", runSheetHead + "W-1,L\nW-2,L\n", "line 3, column 5: the line has 2 fields where the header has 10; write one field per column; empty means not known"},
		{"cut file", runSheetHead + "W-1,L", "line 3, column 5: the file ends in the middle of the line, after 2 of 10 fields; copy the file again from where it was made"},
		{"long row", runSheetMark + "\nwafer,lot\nW-1,L,3\n", "line 3, column 7: the line has 3 fields where the header has 2; write one field per column; empty means not known"},
		{"wafer twice", runSheetMark + "\nwafer\nW-1\nW-2\nW-1\n", "line 5, column 1: wafer: wafer W-1 stands a second time, first on line 3; keep one row per wafer"},
		{"run", runSheetHead + "W-1,L,Tern,seven,,,,,,\n", `line 3, column 12: run: "seven" is not the number of a run; write a whole number from 1 to 2147483647`},
		{"run zero", runSheetHead + "W-1,L,Tern,0,,,,,,\n", `line 3, column 12: run: "0" is not the number of a run; write a whole number from 1 to 2147483647`},
		{"run alone", runSheetHead + "W-1,L,,7,,,,,,\n", "line 3, column 7: reactor: the run is stated without its reactor; state both or neither"},
		{"reactor alone", runSheetHead + "W-1,L,Tern,,,,,,,\n", "line 3, column 12: run: the reactor is stated without the number of its run; state both or neither"},
		{"quote", runSheetMark + "\nwafer,lot\nW\"1,L\n", `line 3, column 2: a stray quote; quote the whole field, and write "" for a quote inside it`},
		{"NUL", runSheetMark + "\nwafer,lot\nW-1,L\x00\n", "line 3, column 6: a NUL byte stands in the text; export the file again as plain text, or state its encoding in a reading profile"},
	} {
		h, err := readRunSheetText(t, c.text, nil)
		if err == nil || err.Error() != c.want {
			t.Errorf("%s: %v\nwant %s", c.name, err, c.want)
		}
		if !errors.Is(err, analytics.ErrInvalid) || h.rows != nil {
			t.Errorf("%s: %v with rows %v; want invalid input and none", c.name, err, h.rows)
		}
	}
	// Messages of names and times are those of die readings.
	for name, text := range map[string]string{
		"no name": runSheetMark + "\nwafer,lot\n,L\n", "control": runSheetMark + "\nwafer\nW\t1\n", "not UTF-8": runSheetMark + "\nwafer\nW\xff\n",
		"long": runSheetMark + "\nwafer\n" + strings.Repeat("W", 129) + "\n", "time": runSheetHead + "W-1,,,,yesterday,,,,,\n", "year": runSheetHead + "W-1,,,,1970-01-01,,,,,\n",
	} {
		_, err := readRunSheetText(t, text, nil)
		var f *analytics.Fault
		if !errors.As(err, &f) || f.Line != 3 || f.Column == 0 || f.Key == "" {
			t.Errorf("%s: %v; want a fault on line 3 with column and key", name, err)
		}
	}
}

func FuzzRunSheet(f *testing.F) {
	f.Add(runSheetHead + "W-0001,L-1,Tern,7,2026-11-01T06:30:00+02:00,C1,A,3,blue,tern-10\n")
	f.Add(runSheetMark + "\r\nwafer,lot\r\n\"W \"\"1\",\r\n" + runSheetMark + "\nlot,wafer\n,2\n")
	f.Fuzz(func(t *testing.T, text string) {
		h, err := readHeld(t.Context(), Input{Name: "runs.csv", R: strings.NewReader(runSheetMark + "\n" + text), MaxBytes: 1 << 20})
		requireFault(t, err)
		seen := map[string]bool{}
		for _, r := range h.rows {
			if checkName("wafer", r.Wafer) != nil || seen[r.Wafer] || r.Line < 2 {
				t.Errorf("row %+v", r)
			}
			seen[r.Wafer] = true
		}
	})
}

// requireFault holds an error to be bad input with a message that says something.
func requireFault(t *testing.T, err error) {
	t.Helper()
	var f *analytics.Fault
	if err != nil && (!errors.As(err, &f) || f.Problem == "") {
		t.Fatalf("%v is no located fault", err)
	}
}
