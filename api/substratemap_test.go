package api

import (
	"net/http"
	"strconv"
	"testing"

	"epitally/analytics/substratemap"
)

// TestSubstrateMapsHoldTheBins reads back what is written and finds every die's bin
// at its place, from two origins.
func TestSubstrateMapsHoldTheBins(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	root := "/api/v1/measurements/" + strconv.FormatInt(f.id, 10)
	bins := decoded[binsOut](t, k.get(t, root+"/bins?specification=harbour-blue&format=json"))
	for _, origin := range []string{"LowerLeft", "UpperRight"} {
		w := k.get(t, root+"/substrate-map.xml?specification=harbour-blue&rows=top&origin="+origin)
		maps, err := substratemap.Read(w.Body, true)
		if err != nil || len(maps) != 1 {
			t.Fatalf("%d: %v", w.Code, err)
		}
		m := maps[0]
		if m.Wafer != "K-1" || m.Place.Origin != origin || m.StepXMM != f.layout.DiePitchXMM || m.DiameterMM != f.layout.WaferDiameterMM || m.Name != "harbour-blue v1" {
			t.Errorf("%+v", m.Place)
		}
		found := 0
		for i := range f.grid.X {
			col, row := m.ZeroColumn+int(f.grid.X[i]), m.ZeroRow+int(f.grid.Y[i])
			if origin == "UpperRight" {
				col, row = m.ZeroColumn-int(f.grid.X[i]), m.ZeroRow-int(f.grid.Y[i])
			}
			if m.Codes[row*m.Columns+col] != bins.Codes[i] {
				t.Fatalf("%s: die (%d, %d) has code %d, want %d", origin, f.grid.X[i], f.grid.Y[i], m.Codes[row*m.Columns+col], bins.Codes[i])
			}
			found++
		}
		dies := 0
		for _, c := range m.Codes {
			if c != substratemap.NullCode {
				dies++
			}
		}
		if dies != found {
			t.Errorf("%d dies in the map, %d on the grid", dies, found)
		}
	}
	k.problem(t, request("GET", root+"/substrate-map.xml?specification=harbour-blue&origin=Middle", ""), http.StatusBadRequest)
	k.problem(t, request("GET", root+"/substrate-map.xml?specification=nothing", ""), http.StatusNotFound)
}
