package web

import (
	"bytes"
	"encoding/json"
	"math"
	"strings"
	"testing"
	"time"
)

func decoded(t *testing.T, c *Chart) map[string]any {
	t.Helper()
	var m map[string]any
	if err := json.Unmarshal([]byte(c.Options.(scriptJSON)), &m); err != nil {
		t.Fatal(err)
	}
	return m
}

func TestHistogramOptions(t *testing.T) {
	t.Parallel()
	p := cannedWafer().Planes[0]
	c := HistogramChart(p)
	m := decoded(t, c)
	series := m["series"].([]any)[0].(map[string]any)
	points := series["data"].([]any)
	if len(points) != len(p.Summary.Histogram.Counts) || len(c.Table.Rows) != len(points) || len(c.Table.Raw) != len(points) {
		t.Fatalf("%d points, %d rows, want %d", len(points), len(c.Table.Rows), len(p.Summary.Histogram.Counts))
	}
	total := p.Summary.Histogram.Below + p.Summary.Histogram.Above
	for _, pt := range points {
		total += int(pt.(map[string]any)["value"].([]any)[1].(float64))
	}
	if total != p.Summary.N {
		t.Errorf("the bars hold %d dies, want n = %d", total, p.Summary.N)
	}
	line := series["markLine"].(map[string]any)["data"].([]any)[0].(map[string]any)
	if line["xAxis"].(float64) != 455 {
		t.Errorf("target line at %v, want 455", line["xAxis"])
	}
	x := m["xAxis"].([]any)[0].(map[string]any)
	if x["name"] != "Dominant wavelength / nm" {
		t.Errorf("axis title %v has no unit", x["name"])
	}
	if !strings.Contains(c.Caption, Count(p.Summary.N)) {
		t.Errorf("caption %q has no sample size", c.Caption)
	}
	if strings.Contains(string(c.Options.(scriptJSON)), "function") {
		t.Error("options hold a function")
	}
}

func TestChartsWithoutTargetOrValues(t *testing.T) {
	t.Parallel()
	p := cannedWafer().Planes[1]
	if s := string(HistogramChart(p).Options.(scriptJSON)); strings.Contains(s, "markLine") {
		t.Error("a target is drawn though none is known")
	}
	p.Summary.Histogram.Counts, p.Summary.Radial = nil, nil
	if HistogramChart(p) != nil || RadialChart(p) != nil || BinChart(Binned{}) != nil || YieldsChart("s", nil, time.UTC, "") != nil {
		t.Error("a chart of nothing is drawn")
	}
}

func TestRadialLeavesOutEmptyRings(t *testing.T) {
	t.Parallel()
	p := cannedWafer().Planes[0]
	p.Summary.Radial[0].N, p.Summary.Radial[0].Mean, p.Summary.Radial[0].SD = 0, math.NaN(), math.NaN()
	c := RadialChart(p)
	points := decoded(t, c)["series"].([]any)[0].(map[string]any)["data"].([]any)
	if len(points) != len(p.Summary.Radial)-1 || len(c.Table.Rows) != len(p.Summary.Radial) {
		t.Errorf("%d points and %d rows of %d rings, the first empty", len(points), len(c.Table.Rows), len(p.Summary.Radial))
	}
}

func TestBinChartDrawsTheFullestOfMany(t *testing.T) {
	t.Parallel()
	b := Binned{Spec: "s v1", Denominator: 5000}
	for i := range 100 {
		b.Cells = append(b.Cells, MapCell{Name: "B", Class: "sellable", Dies: i})
	}
	b.Cells = append(b.Cells, MapCell{Name: "leaky", Class: "reject", Dies: 80}, MapCell{Name: "open", Class: "reject", Dies: 90})
	c := BinChart(b)
	points := decoded(t, c)["series"].([]any)[0].(map[string]any)["data"].([]any)
	if len(points) != mostBars || len(c.Table.Rows) != 102 || !strings.Contains(c.Caption, "24 fullest") {
		t.Errorf("%d bars, %d rows, caption %q", len(points), len(c.Table.Rows), c.Caption)
	}
	for i, want := range []string{"open · reject: 90", "leaky · reject: 80"} {
		if name := points[i].(map[string]any)["name"].(string); !strings.HasPrefix(name, want) {
			t.Errorf("bar %d is %q, want %q: the lost dies come first", i, name, want)
		}
	}
}

func TestTableCSVIsForPrograms(t *testing.T) {
	t.Parallel()
	table := Table{Head: []string{"bin, reason", "dies", "share", "mean / nm"}}
	table.add(textCell(`a "b"`), countCell(14516), shareCell(1, 4), numberCell(-0.84, 2))
	table.add(textCell("c"), countCell(0), shareCell(0, 0), numberCell(math.NaN(), 2))
	var b bytes.Buffer
	if err := table.WriteCSV(&b); err != nil {
		t.Fatal(err)
	}
	const want = "\"bin, reason\",dies,share,mean / nm\n\"a \"\"b\"\"\",14516,0.250000,-0.84\nc,0,,\n"
	if b.String() != want {
		t.Errorf("got %q\nwant %q", b.String(), want)
	}
}
