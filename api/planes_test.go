package api

import (
	"encoding/binary"
	"encoding/csv"
	"fmt"
	"image/png"
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"

	"epitally/analytics/wafermap"
	"epitally/db"
)

// readPlane is the wire format read as a client would, by its description alone.
func readPlane(t testing.TB, b []byte) (encoding byte, values []float64) {
	t.Helper()
	if len(b) < 32 || string(b[:4]) != "EPLN" || b[4] != 1 {
		t.Fatalf("no plane: % x", b[:min(32, len(b))])
	}
	n := int(binary.LittleEndian.Uint32(b[8:]))
	base, resolution := math.Float64frombits(binary.LittleEndian.Uint64(b[16:])), math.Float64frombits(binary.LittleEndian.Uint64(b[24:]))
	data := b[32:]
	if b[5] != 1 || len(data) != 2*n {
		t.Fatalf("encoding %d with %d bytes for %d dies", b[5], len(data), n)
	}
	perUnit := math.Round(1 / resolution)
	for i := range n {
		k := int16(uint16(data[i]) | uint16(data[n+i])<<8)
		if k == math.MinInt16 {
			values = append(values, math.NaN())
			continue
		}
		values = append(values, (math.Round(base/resolution)+float64(k))/perUnit)
	}
	return b[5], values
}

func alike(a, b float64) bool { return a == b || (math.IsNaN(a) && math.IsNaN(b)) }

// The three forms of a plane say the same, to the last bit.
func TestPlaneForms(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	for q, plane := range probeOf(t, "K-1", noon, f.grid, f.layout).Planes {
		at := fmt.Sprintf("/api/v1/measurements/%d/planes/%s", f.id, plane.Quantity)
		w := k.get(t, at)
		if got := w.Header().Get("Content-Length"); got != strconv.Itoa(w.Body.Len()) {
			t.Errorf("Content-Length %s for %d bytes", got, w.Body.Len())
		}
		_, binaryForm := readPlane(t, w.Body.Bytes())
		jsonForm := decoded[planeOut](t, k.get(t, at+"?format=json"))
		rows, err := csv.NewReader(k.get(t, at, "Accept", "text/csv").Body).ReadAll()
		if err != nil || len(rows) != f.grid.Len()+1 || !slices.Equal(rows[0], []string{"x", "y", "value"}) {
			t.Fatalf("CSV: %v, %d rows", err, len(rows))
		}
		if len(binaryForm) != f.grid.Len() || len(jsonForm.Values) != f.grid.Len() || jsonForm.Quantity != plane.Quantity || jsonForm.Unit != []string{"nm", "V"}[q] {
			t.Fatalf("%d and %d values of %s in %s for %d dies", len(binaryForm), len(jsonForm.Values), jsonForm.Quantity, jsonForm.Unit, f.grid.Len())
		}
		for i := range f.grid.X {
			want, text := plane.Value(i), rows[i+1][2]
			fromJSON, fromCSV := math.NaN(), math.NaN()
			if jsonForm.Values[i] != nil {
				fromJSON = *jsonForm.Values[i]
			}
			if text != "" {
				fromCSV, err = strconv.ParseFloat(text, 64)
			}
			if err != nil || !alike(want, binaryForm[i]) || !alike(want, fromJSON) || !alike(want, fromCSV) {
				t.Fatalf("die %d: %v; binary %v, JSON %v, CSV %q", i, want, binaryForm[i], fromJSON, text)
			}
		}
	}
}

func TestGridForms(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	at := fmt.Sprintf("/api/v1/grids/%x", f.grid.Hash())
	b := k.get(t, at).Body.Bytes()
	runs, err := wafermap.DecodeRuns(b[16:])
	if err != nil || string(b[:4]) != "EGRD" || b[4] != 1 || int(binary.LittleEndian.Uint32(b[8:])) != len(runs) || int(binary.LittleEndian.Uint32(b[12:])) != f.grid.Len() {
		t.Fatalf("% x: %v", b[:16], err)
	}
	grid, err := wafermap.GridFromRuns(runs)
	if err != nil || grid.Hash() != f.grid.Hash() {
		t.Errorf("another grid: %v", err)
	}
	got := decoded[gridOut](t, k.get(t, at+"?format=json"))
	if !slices.Equal(got.X, f.grid.X) || !slices.Equal(got.Y, f.grid.Y) {
		t.Error("JSON has other coordinates")
	}
}

func TestDiesInBothForms(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	at := fmt.Sprintf("/api/v1/measurements/%d/dies", f.id)
	text := k.get(t, at).Body.String()
	if want := "x,y," + dominant + "," + voltage + "\n"; !strings.HasPrefix(text, want) {
		t.Errorf("CSV begins %.60q, want %q", text, want)
	}
	got := decoded[diesOut](t, k.get(t, at+"?format=json&quantities="+voltage+","+dominant))
	if len(got.Quantities) != 2 || got.Quantities[0].Name != voltage || got.Quantities[0].Unit != "V" || len(got.X) != f.grid.Len() {
		t.Fatalf("%+v", got.Quantities)
	}
	if got.Values[voltage][0] != nil || got.Values[voltage][1] == nil || len(got.Values[dominant]) != f.grid.Len() {
		t.Errorf("voltages %v and %v of the first two dies; only the first has none", got.Values[voltage][0], got.Values[voltage][1])
	}
}

func TestBinsAndTalliesAgree(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	one := fmt.Sprintf("/api/v1/measurements/%d", f.id)
	stored := decoded[talliesOut](t, k.get(t, one+"/tallies")).Rows[0]
	now := decoded[rebinnedOut](t, k.get(t, one+"/tally?specification=harbour-blue"))
	posted := decoded[rebinnedOut](t, k.call(t, request("POST", one+"/tally", fixtureSpec, "Content-Type", "text/yaml; charset=utf-8")))
	for name, got := range map[string]db.Tally{"now": now.Tally, "posted": posted.Tally} {
		if !slices.Equal(got.Cells, stored.Cells) || got.Good != stored.Good || got.Denominator != stored.Denominator || !got.OverLayout {
			t.Errorf("%s: %+v, stored %+v", name, got, stored)
		}
	}
	if now.Version != 1 || posted.Version != 0 || len(now.Notices) != 0 {
		t.Errorf("versions %d and %d, notices %v", now.Version, posted.Version, now.Notices)
	}
	if stored.Denominator != f.layout.Dies() || stored.Good == 0 {
		t.Errorf("stored %+v; the layout has %d dies", stored, f.layout.Dies())
	}

	bins := decoded[binsOut](t, k.get(t, one+"/bins?specification=harbour-blue&format=json"))
	encoding, codes := readPlane(t, k.get(t, one+"/bins?specification=harbour-blue").Body.Bytes())
	counts := make([]int, len(bins.Cells))
	for i, code := range bins.Codes {
		if encoding != 1 || codes[i] != float64(code) {
			t.Fatalf("die %d: %v in binary, %d in JSON", i, codes[i], code)
		}
		if f.layout.Inside(int(f.grid.X[i]), int(f.grid.Y[i])) {
			counts[code]++
		}
	}
	for i, cell := range stored.Cells {
		if cell.Dies != counts[i] || cell.Name != bins.Cells[i].Name {
			t.Errorf("%s: %d dies in the tally, %d codes", cell.Name, cell.Dies, counts[i])
		}
	}
}

func TestTalliesSayWhatTheyMustBeReadWith(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	document := "specification: broad\nkind: pl\naxes: [{axis: P, quantity: peak_wavelength_nm, edges: [450, 460]}]\n"
	got := decoded[rebinnedOut](t, k.call(t, request("POST", fmt.Sprintf("/api/v1/measurements/%d/tally", f.odd), document, "Content-Type", mediaYAML)))
	all := strings.Join(got.Notices, " ")
	for _, want := range []string{"for pl measurements", "no peak_wavelength_nm", "No layout is known"} {
		if !strings.Contains(all, want) {
			t.Errorf("notices %q do not say %q", all, want)
		}
	}
	if got.Tested != 0 || got.Good != 0 || got.OverLayout || got.Denominator != f.grid.Len() {
		t.Errorf("%+v", got.Tally)
	}
}

func TestOneDie(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	got := decoded[dieOut](t, k.get(t, fmt.Sprintf("/api/v1/measurements/%d/dies/-3/4?specification=harbour-blue", f.id)))
	// Pitch 2.4 mm; the bowl of probeOf: 453.50 + 4.50·r² nm, r = 12/25.4 of the radius.
	if got.PositionMM.X != -7.2 || got.PositionMM.Y != 9.6 || !got.Counts || *got.Values[0].Value != 454.5 || got.Values[1].Unit != "V" {
		t.Errorf("%+v at %+v: %v", got, got.PositionMM, *got.Values[0].Value)
	}
	if got.Bin != "W1" || got.Class != "sellable" || got.Version != 1 {
		t.Errorf("bin %s (%s) of version %d", got.Bin, got.Class, got.Version)
	}
	first := decoded[dieOut](t, k.get(t, fmt.Sprintf("/api/v1/measurements/%d/dies/%d/%d?specification=harbour-blue", f.id, f.grid.X[0], f.grid.Y[0])))
	if first.Values[1].Value != nil || first.Bin != "untested" || first.Counts {
		t.Errorf("the die without a voltage: %+v", first)
	}
	odd := decoded[dieOut](t, k.get(t, fmt.Sprintf("/api/v1/measurements/%d/dies/0/0", f.odd)))
	if odd.PositionMM != nil || !odd.Counts || odd.Bin != "" {
		t.Errorf("without a layout: %+v", odd)
	}
}

func TestMapsArePicturesOfTheSizeAsked(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	one := fmt.Sprintf("/api/v1/measurements/%d", f.id)
	tags := map[string]string{}
	for _, c := range []struct {
		target string
		size   int
	}{
		{one + "/map.png?size=100&quantity=" + dominant, 100},
		{one + "/map.png?size=100&quantity=" + dominant + "&scale=magnitude", 100},
		{one + "/map.png?size=100&quantity=" + dominant + "&theme=dark", 100},
		{one + "/map.png?quantity=" + voltage, 640},
		{one + "/map.png?size=32&specification=harbour-blue", 32},
		{one + "/small-map.png?quantity=" + dominant, 48},
		{one + "/small-map.png?quantity=" + dominant + "&theme=dark", 48},
		{fmt.Sprintf("/api/v1/measurements/%d/map.png?size=100&quantity=%s", f.odd, dominant), 100},
	} {
		w := k.get(t, c.target, "Accept-Encoding", "gzip")
		picture, err := png.Decode(w.Body)
		if err != nil || picture.Bounds().Dx() != c.size || picture.Bounds().Dy() != c.size {
			t.Errorf("%s: %v, want %d pixels a side", c.target, err, c.size)
		}
		tag := w.Header().Get("ETag")
		if other, ok := tags[tag]; ok {
			t.Errorf("%s and %s share an ETag", c.target, other)
		}
		tags[tag] = c.target
		if w.Header().Get("Content-Encoding") != "" {
			t.Errorf("%s: a picture was compressed again", c.target)
		}
	}
}
