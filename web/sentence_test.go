package web

import (
	"math"
	"strings"
	"testing"

	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
)

// plain replaces the thin spaces, so that expectations can be typed.
func plain(s Sentence) string { return strings.ReplaceAll(s.Text(), thinSpace, " ") }

func TestWaferSentence(t *testing.T) {
	t.Parallel()
	dominant, _ := quantity.Lookup("dominant_wavelength_nm")
	voltage, _ := quantity.Lookup("forward_voltage_v")
	hardBin, _ := quantity.Lookup("hard_bin")
	nan := math.NaN()
	at := func(median float64) *uniformity.Summary { return &uniformity.Summary{N: 14516, Median: median} }
	base := WaferFound{Wafer: "K-0412-07", Measured: true, Quantity: dominant, Summary: at(455.8), Target: 455,
		Spec: "harbour-blue v3", Good: 10306, Denominator: 14516, OverLayout: true,
		Loss: Loss{Name: "off-colour long", Class: "reject", Dies: 3194, Place: "in the outer 12 mm"}}
	for _, c := range []struct {
		name   string
		change func(*WaferFound)
		want   string
	}{
		{"long", func(f *WaferFound) {}, "Wafer K-0412-07 sits 0.8 nm long of its 455.0 nm target; 71 % of 14,516 dies sell under harbour-blue v3, 22 % are rejected: off-colour long, mostly in the outer 12 mm."},
		{"short", func(f *WaferFound) { f.Summary = at(453.2) }, "sits 1.8 nm short of its 455.0 nm target;"},
		{"on target", func(f *WaferFound) { f.Summary = at(455.04) }, "sits on its 455.0 nm target in dominant wavelength;"},
		{"no target", func(f *WaferFound) { f.Target = nan }, "has a median dominant wavelength of 455.8 nm and no target to hold it against;"},
		{"no values", func(f *WaferFound) { f.Summary = &uniformity.Summary{Missing: 4, Median: nan} }, "where it sits cannot be told, since no die has a value of dominant wavelength;"},
		{"no summary", func(f *WaferFound) { f.Summary = nil }, "where it sits cannot be told"},
		{"no figures", func(f *WaferFound) { f.Quantity, f.Summary = quantity.Quantity{}, nil }, "where it sits cannot be told, since its figures are still being made;"},
		{"no wavelength", func(f *WaferFound) { f.Quantity, f.Target, f.Summary = voltage, nan, at(3.1234) }, "has a median forward voltage of 3.12 V;"},
		{"category", func(f *WaferFound) {
			f.Quantity, f.Target = hardBin, nan
			f.Summary = &uniformity.Summary{N: 1456, Median: 1, Histogram: uniformity.Histogram{Low: 0.5, Width: 1, Counts: []int{1389, 67}}}
		}, "has 95 % of its 1,456 dies in tester hard bin 1;"},
		{"no spec", func(f *WaferFound) { f.Spec = "" }, "how much of it sells cannot be told, since no specification applies to it."},
		{"no dies", func(f *WaferFound) { f.Denominator = 0 }, "under harbour-blue v3 cannot be told, since there are no dies to count."},
		{"measured dies only", func(f *WaferFound) { f.OverLayout = false }, "71 % of 14,516 measured dies sell"},
		{"nothing lost", func(f *WaferFound) { f.Good, f.Loss = 14516, Loss{} }, "100 % of 14,516 dies sell under harbour-blue v3."},
		{"unsold bin", func(f *WaferFound) { f.Loss.Class, f.Loss.Place = "unsellable", "" }, ", 22 % fall in off-colour long, which is not sold."},
		{"not measured", func(f *WaferFound) { f.Loss = Loss{Class: "unmeasured", Dies: 1452} }, ", 10 % were not measured."},
		{"untested", func(f *WaferFound) { f.Loss = Loss{Class: "untested", Dies: 1452} }, ", 10 % lack a value that it needs."},
		{"unmeasured", func(f *WaferFound) { f.Measured = false }, "Wafer K-0412-07 is unmeasured: where it sits and what of it sells cannot be told until a file with its dies is loaded."},
	} {
		f := base
		c.change(&f)
		if got := plain(WaferSentence(f)); !strings.Contains(got, c.want) {
			t.Errorf("%s:\n got %s\nwant %s", c.name, got, c.want)
		}
	}
}

func TestWafersSentence(t *testing.T) {
	t.Parallel()
	link := func(s string) string { return "/wafers?state=" + s }
	for _, c := range []struct {
		f    WafersFound
		want string
	}{
		{WafersFound{Total: 212, ByState: map[string]int{"on colour": 148, "long": 31, "short": 20, "mixed": 13}}, "212 wafers: 148 on colour, 31 long, 20 short, 13 mixed."},
		{WafersFound{Total: 212, ByState: map[string]int{"on colour": 148}}, "212 wafers: 148 on colour; of 64 it cannot be told, since no target is known for them."},
		{WafersFound{Total: 1, Filtered: true, ByState: map[string]int{"unmeasured": 1}}, "1 wafer fits this filter: 1 unmeasured."},
		{WafersFound{Total: 3}, "3 wafers; whether they are on colour cannot be told, since no target is known for them."},
		{WafersFound{}, "No wafer is stored yet, so nothing can be said of colour or yield."},
		{WafersFound{Filtered: true, AllURL: "/wafers"}, "No wafer fits this filter; show all wafers."},
	} {
		c.f.Link = link
		if got := plain(WafersSentence(c.f)); got != c.want {
			t.Errorf("got %q\nwant %q", got, c.want)
		}
	}
}

func TestLoadsSentence(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		f    LoadsFound
		want string
	}{
		{LoadsFound{}, "Nothing has been loaded yet."},
		{LoadsFound{Ever: true}, "Nothing arrived in the last hour; the loads before it are below."},
		{LoadsFound{Ever: true, Stored: 1}, "1 file was stored in the last hour, and none refused."},
		{LoadsFound{Ever: true, Refused: 3, Sharing: 2, SharedCause: "column Vf reads in millivolts"}, "3 files were refused in the last hour; 2 share one cause: column Vf reads in millivolts."},
		{LoadsFound{Ever: true, Refused: 1, Sharing: 1, SharedCause: "truncated gzip", Stored: 4}, "1 file was refused in the last hour: truncated gzip; 4 were stored."},
	} {
		if got := plain(LoadsSentence(c.f)); got != c.want {
			t.Errorf("got %q\nwant %q", got, c.want)
		}
	}
}

func TestLossPlace(t *testing.T) {
	t.Parallel()
	g, l, _ := discWafer(0.5)
	where := func(lost func(r float64) bool) string {
		codes := make([]uint16, g.Len())
		for i := range codes {
			if lost(l.RadiusMM(int(g.X[i]), int(g.Y[i]))) {
				codes[i] = 7
			}
		}
		return strings.ReplaceAll(LossPlace(g, l, codes, 7), thinSpace, " ")
	}
	// The ring from 38 mm to the dies' limit of 48 mm: 60 % of its area is reached
	// at √(48² − 0.6·(48² − 38²)) = 42.3 mm, so at 8 whole mm from the 50 mm edge.
	if got := where(func(r float64) bool { return r > 38 }); got != "in the outer 8 mm" {
		t.Errorf("edge ring: %q", got)
	}
	if got := where(func(r float64) bool { return r < 10 }); got != "within 8 mm of the centre" {
		t.Errorf("centre disc: %q", got)
	}
	if got := where(func(r float64) bool { return true }); got != "" {
		t.Errorf("everywhere: %q", got)
	}
	if got := where(func(r float64) bool { return r < 0.6 }); got != "" {
		t.Errorf("a handful of dies: %q", got)
	}
}
