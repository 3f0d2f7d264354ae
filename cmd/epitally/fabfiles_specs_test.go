package main

import (
	"math"
	"slices"
	"strings"
	"testing"

	"epitally/analytics/binning"
	"epitally/analytics/simfab"
	"epitally/analytics/wafermap"
)

func TestFabSpecificationsGiveYieldsLikeAFabs(t *testing.T) {
	t.Parallel()
	// Median yield over the wafers of the fab, dies on the layout as denominator:
	// good wafers of a running fab lie between 60 and 95 %; fjord-blue takes
	// only wafers that a walking reactor has moved to long wavelengths.
	want := map[string][2]float64{"harbour-blue": {0.6, 0.95}, "fjord-blue": {0.05, 0.6}, "slate-blue": {0.6, 0.95},
		"meadow-green": {0.6, 0.95}, "reed-green": {0.4, 0.8}, // a narrow one, with a guard band
		"ember-red": {0.6, 0.95}}
	specs := map[string]*binning.Spec{}
	yields := map[string][]float64{}
	reasons := map[string]int{}
	for name, text := range fabSpecifications() {
		s, err := binning.Parse([]byte(text))
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		if s.Name != name || !strings.HasPrefix(text, "specification:") {
			t.Errorf("%s is named %s", name, s.Name)
		}
		specs[name] = s
	}
	f := simfab.New(simfab.Config{Seed: 1, Wafers: 120})
	for i := range f.Wafers {
		_, probe := f.Measure(i)
		for name, s := range specs {
			if slices.Contains(s.Products, probe.Wafer.Product.Name) {
				yields[name] = append(yields[name], binYield(t, s, probe, reasons))
			}
		}
	}
	for name, y := range yields {
		slices.Sort(y)
		middle := y[len(y)/2]
		t.Logf("%s: %d wafers, yield %.2f to %.2f, median %.2f", name, len(y), y[0], y[len(y)-1], middle)
		if middle < want[name][0] || middle > want[name][1] {
			t.Errorf("%s: median yield %.3f, want %v", name, middle, want[name])
		}
	}
	for _, r := range []string{"leaky", "off-colour short", "off-colour long", "dim"} {
		if reasons[r] == 0 {
			t.Errorf("no die is rejected as %s: %v", r, reasons)
		}
	}
	// Opens and shorts give no light: they are rejected as such, or lack a value.
	if reasons["open"]+reasons["short"]+reasons[binning.UntestedName] == 0 {
		t.Errorf("no die is open, short or untested: %v", reasons)
	}
}

func binYield(t *testing.T, s *binning.Spec, m *simfab.Reading, reasons map[string]int) float64 {
	t.Helper()
	var planes []wafermap.Plane
	for _, c := range m.Columns {
		p := wafermap.Plane{Quantity: c.Quantity, Encoding: wafermap.Int32, Exponent: -c.Decimals, K32: c.K}
		planes = append(planes, p)
	}
	cells := s.Cells()
	codes, counts := make([]uint16, len(m.X)), make([]int, len(cells))
	if err := s.Bin(codes, counts, binning.PickPlanes(s, planes), nil); err != nil {
		t.Fatal(err)
	}
	sellable := 0
	for i, n := range counts {
		switch cells[i].Class {
		case binning.Sellable:
			sellable += n
		case binning.Reject, binning.Untested:
			reasons[cells[i].Name] += n
		}
	}
	return float64(sellable) / float64(layoutDies(m.Layout))
}

func layoutDies(l *wafermap.Layout) (n int) {
	reach := int(math.Ceil(l.WaferDiameterMM / min(l.DiePitchXMM, l.DiePitchYMM)))
	for y := -reach; y <= reach; y++ {
		for x := -reach; x <= reach; x++ {
			if l.Inside(x, y) {
				n++
			}
		}
	}
	return n
}
