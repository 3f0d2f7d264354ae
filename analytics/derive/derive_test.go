package derive

import (
	"math"
	"strings"
	"testing"

	"epitally/analytics/colour"
	"epitally/analytics/wafermap"
)

// decimals packs values as a reader would.
func decimals(name string, places int, values ...float64) wafermap.Plane {
	k := make([]int32, len(values))
	for i, v := range values {
		if k[i] = wafermap.Missing32; !math.IsNaN(v) {
			k[i] = int32(math.Round(v * math.Pow10(places)))
		}
	}
	return wafermap.PackScaled(name, -places, k)
}

func planeOf(t *testing.T, r Result, name string) *wafermap.Plane {
	t.Helper()
	for i := range r.Planes {
		if r.Planes[i].Quantity == name {
			return &r.Planes[i]
		}
	}
	t.Fatalf("%s was not computed: %v", name, r.From)
	return nil
}

func TestComputesWhatFollows(t *testing.T) {
	t.Parallel()
	nan := math.NaN()
	current := 150.0
	var d Deriver
	for range 2 { // the second call finds the buffers of the first
		r, err := d.Compute(Source{DriveCurrentMA: &current, Planes: []wafermap.Plane{
			decimals("peak_wavelength_nm", 2, 452, 455, nan), decimals("fwhm_nm", 2, 19, nan, 19),
			decimals("radiant_flux_mw", 2, 90, 90, 90), decimals("forward_voltage_v", 3, 3.2, nan, 3.2),
		}})
		if err != nil {
			t.Fatal(err)
		}
		want, err := colour.DefaultLineModel(452).Dominant(452, 19, colour.WhiteE)
		if err != nil {
			t.Fatal(err)
		}
		dominant := planeOf(t, r, Dominant)
		if math.Abs(dominant.Value(0)-want) > 0.006 || !math.IsNaN(dominant.Value(1)) || !math.IsNaN(dominant.Value(2)) {
			t.Errorf("dominant %g %g %g, want %g", dominant.Value(0), dominant.Value(1), dominant.Value(2), want)
		}
		if w := planeOf(t, r, WallPlug); w.Value(0) != 0.1875 || !math.IsNaN(w.Value(1)) { // 90 mW / (150 mA · 3.2 V)
			t.Errorf("wall plug %g %g", w.Value(0), w.Value(1))
		}
		if q := planeOf(t, r, QuantumEfficiency); math.Abs(q.Value(0)-90*452/(150*1239.841984)) > 0.0001 {
			t.Errorf("quantum %g", q.Value(0))
		}
		if !strings.Contains(r.From[Dominant], "fitted to 9 measured blue LEDs") || r.From[QuantumEfficiency] != "radiant flux and peak wavelength at 150 mA" {
			t.Errorf("%v", r.From)
		}
	}
}

func TestChromaticityGoesBeforeThePeak(t *testing.T) {
	t.Parallel()
	var d Deriver
	src := Source{Planes: []wafermap.Plane{decimals("cie_x", 5, 0.18745, 0.36), decimals("cie_y", 5, 0.08486, 0.25), decimals("peak_wavelength_nm", 2, 452, 452), decimals("fwhm_nm", 2, 19, 19)}}
	r, err := d.Compute(src)
	if err != nil {
		t.Fatal(err)
	}
	// Reference calculation: 455.0035 nm, purity 0.80001. The second die is purple:
	// its complementary wavelength is no hue to bin.
	dominant, purity := planeOf(t, r, Dominant), planeOf(t, r, Purity)
	if math.Abs(dominant.Value(0)-455.0035) > 0.02 || !math.IsNaN(dominant.Value(1)) || math.Abs(purity.Value(0)-0.8) > 0.001 || math.IsNaN(purity.Value(1)) {
		t.Errorf("%g %g, %g %g", dominant.Value(0), dominant.Value(1), purity.Value(0), purity.Value(1))
	}
	if r.From[Dominant] != "CIE x, y against white E" {
		t.Errorf("%v", r.From)
	}
	if r, err = d.Compute(src, Purity); err != nil || len(r.Planes) != 1 || r.Suspects != nil {
		t.Errorf("purity alone: %v %v", r.From, err)
	}
	measured := Source{Planes: append(src.Planes, decimals(Dominant, 2, 455, 456))}
	if r, err = d.Compute(measured, Dominant); err != nil || len(r.Planes) != 0 {
		t.Errorf("a measured quantity was computed: %v %v", r.From, err)
	}
	if r, err = d.Compute(Source{Planes: []wafermap.Plane{decimals("fwhm_nm", 2, 19)}}); err != nil || len(r.Planes) != 0 {
		t.Errorf("from a width alone: %v %v", r.From, err)
	}
}

func TestRecipesModelIsUsed(t *testing.T) {
	t.Parallel()
	var d Deriver
	model := &colour.PeakModel{ReferenceNM: 452, OffsetNM: 2.5, Slope: -0.1, FittedTo: "9,000 dies"}
	r, err := d.Compute(Source{Model: model, Planes: []wafermap.Plane{decimals("peak_wavelength_nm", 2, 454)}})
	if err != nil {
		t.Fatal(err)
	}
	if got := planeOf(t, r, Dominant).Value(0); math.Abs(got-456.3) > 1e-9 || !strings.Contains(r.From[Dominant], "9,000 dies") {
		t.Errorf("%g, %v", got, r.From)
	}
	if _, err := d.Compute(Source{Model: &colour.PeakModel{Model: "bell"}, Planes: []wafermap.Plane{decimals("peak_wavelength_nm", 2, 454)}}); err == nil {
		t.Error("a model that is none is taken")
	}
}

func TestSuspectsAreFound(t *testing.T) {
	t.Parallel()
	var d Deriver
	current := 150.0
	r, err := d.Compute(Source{DriveCurrentMA: &current, Planes: []wafermap.Plane{decimals("radiant_flux_mw", 0, 90_000, 90_000), decimals("peak_wavelength_nm", 0, 452, 452)}})
	if err != nil || len(r.Suspects) != 1 || r.Suspects[0].Kind != colour.QuantumAboveOne {
		t.Errorf("%+v %v", r.Suspects, err)
	}
}
