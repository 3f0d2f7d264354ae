// Package derive computes what a measurement did not measure but its readings
// tell: dominant wavelength and purity from x, y, else dominant wavelength from
// the peak; wall-plug and external quantum efficiency from flux, current and
// voltage. Computed planes are never stored, only what is made of them: they
// follow from the measured ones at any time.
package derive

import (
	"fmt"
	"math"
	"slices"

	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// The quantities that can be computed.
const (
	Dominant          = "dominant_wavelength_nm"
	Purity            = "excitation_purity"
	WallPlug          = "wall_plug_efficiency"
	QuantumEfficiency = "external_quantum_efficiency"
	wavelengthPlaces  = 3 // decimals of wavelengths: one more than stations commonly resolve
	sharePlaces       = 4 // of ratios
)

// Names lists the quantities that can be computed.
func Names() []string { return []string{Dominant, Purity, WallPlug, QuantumEfficiency} }

// Needs lists the quantities that they are computed from.
func Needs() []string {
	return []string{"cie_x", "cie_y", "peak_wavelength_nm", "centroid_wavelength_nm", "fwhm_nm", "radiant_flux_mw", "forward_voltage_v", Dominant, Purity, WallPlug, QuantumEfficiency}
}

// Source is what there is of one measurement. All planes have one length.
type Source struct {
	Planes         []wafermap.Plane  // measured
	DriveCurrentMA *float64          // nil: not stated
	Model          *colour.PeakModel // the recipe's; nil = the default line model
}

// Result is what was computed.
type Result struct {
	Planes     []wafermap.Plane
	Quantities []quantity.Quantity // of the planes
	From       map[string]string   // per quantity: what it was computed from
	Suspects   []colour.Suspect    // what in the measurement breaks physics; only when everything was asked for
}

// Deriver keeps the tables that it makes. The zero value is ready; it is not for
// concurrent use.
type Deriver struct {
	dominant *colour.DominantTable
	models   colour.PeakTables
	floats   [][]float64 // of the call before, for use again
	k        []int32
}

// Compute works out the quantities wanted, none named = all, that were not
// measured and can be computed from what was.
func (d *Deriver) Compute(src Source, wanted ...string) (Result, error) {
	w := &work{Source: src, wanted: wanted, made: map[string][]float64{}, d: d, spare: d.floats}
	if err := d.fromChromaticity(w); err != nil {
		return Result{}, err
	}
	if err := d.fromPeak(w); err != nil {
		return Result{}, err
	}
	w.efficiencies()
	return w.out, nil
}

// work is one call of Compute.
type work struct {
	Source
	wanted []string
	made   map[string][]float64 // planes as floats, each made once
	d      *Deriver
	spare  [][]float64 // what is left of d.floats
	out    Result
}

func (w *work) wants(name string) bool {
	return (len(w.wanted) == 0 || slices.Contains(w.wanted, name)) && w.values(name) == nil
}

// values are those of a quantity, nil when there is none.
func (w *work) values(name string) []float64 {
	if v, ok := w.made[name]; ok {
		return v
	}
	for i := range w.Planes {
		if w.Planes[i].Quantity == name {
			v := w.Planes[i].Floats(w.buffer(w.Planes[i].Len())[:0])
			w.made[name] = v
			return v
		}
	}
	return nil
}

// buffer gives room for n values that lasts until the Deriver is used again.
func (w *work) buffer(n int) []float64 {
	if len(w.spare) > 0 && cap(w.spare[0]) >= n {
		b := w.spare[0][:n]
		w.spare = w.spare[1:]
		return b
	}
	b := make([]float64, n)
	if w.spare = nil; len(w.d.floats) < maxBuffers {
		w.d.floats = append(w.d.floats, b)
	}
	return b
}

// maxBuffers bounds what a Deriver keeps: more than all quantities that anything
// is computed from.
const maxBuffers = 16

func (w *work) add(name string, values []float64, places int, from string) {
	w.made[name] = values
	scale := math.Pow10(places)
	if cap(w.d.k) < len(values) {
		w.d.k = make([]int32, len(values))
	}
	k, some := w.d.k[:len(values)], false
	for i, v := range values {
		if k[i] = wafermap.Missing32; math.Abs(v)*scale < math.MaxInt32 { // false for NaN
			k[i], some = int32(math.Round(v*scale)), true
		}
	}
	if !some {
		return
	}
	q, _ := quantity.Lookup(name)
	p := wafermap.PackScaled(name, -places, k)
	if p.Encoding == wafermap.Int32 {
		w.d.k = nil // the plane has taken it over
	}
	w.out.Planes = append(w.out.Planes, p)
	w.out.Quantities = append(w.out.Quantities, q)
	if w.out.From == nil {
		w.out.From = map[string]string{}
	}
	w.out.From[name] = from
}

func (d *Deriver) fromChromaticity(w *work) error {
	x, y := w.values("cie_x"), w.values("cie_y")
	dominant, purity := w.wants(Dominant), w.wants(Purity)
	if x == nil || y == nil || !dominant && !purity {
		return nil
	}
	if d.dominant == nil {
		table, err := colour.NewDominantTable(colour.WhiteE)
		if err != nil {
			return err
		}
		d.dominant = table
	}
	wavelengths, purities := w.buffer(len(x)), w.buffer(len(x))
	d.dominant.Wavelengths(wavelengths, purities, x, y)
	for i, v := range wavelengths {
		if v < 0 { // complementary: no spectral hue to bin or chart
			wavelengths[i] = math.NaN()
		}
	}
	const from = "CIE x, y against white E"
	if dominant {
		w.add(Dominant, wavelengths, wavelengthPlaces, from)
	}
	if purity {
		w.add(Purity, purities, sharePlaces, from)
	}
	return nil
}

// fromPeak uses the recipe's own model, else the default line model of the
// wafer's colour.
func (d *Deriver) fromPeak(w *work) error {
	peak := w.values("peak_wavelength_nm")
	if peak == nil || !w.wants(Dominant) {
		return nil
	}
	model := w.Model
	if model == nil {
		if model = colour.DefaultPeakModel(peak); model == nil {
			return nil
		}
	}
	values := w.buffer(len(peak))
	if err := d.models.Dominant(values, model, peak, w.values("fwhm_nm")); err != nil {
		return err
	}
	w.add(Dominant, values, wavelengthPlaces, model.Describe())
	return nil
}

func (w *work) efficiencies() {
	current := math.NaN()
	if w.DriveCurrentMA != nil {
		current = *w.DriveCurrentMA
	}
	flux, volt := w.values("radiant_flux_mw"), w.values("forward_voltage_v")
	wavelength, of := w.photonWavelength()
	if flux != nil && volt != nil && current > 0 && w.wants(WallPlug) {
		values := w.buffer(len(flux))
		colour.WallPlugEfficiencies(values, flux, volt, current)
		w.add(WallPlug, values, sharePlaces, fmt.Sprintf("radiant flux and forward voltage at %g mA", current))
	}
	if flux != nil && wavelength != nil && current > 0 && w.wants(QuantumEfficiency) {
		values := w.buffer(len(flux))
		colour.ExternalQuantumEfficiencies(values, flux, wavelength, current)
		w.add(QuantumEfficiency, values, sharePlaces, fmt.Sprintf("radiant flux and %s at %g mA", of, current))
	}
	if len(w.wanted) == 0 {
		w.out.Suspects = colour.CheckDies(colour.DieReadings{RadiantFluxMW: flux, WavelengthNM: wavelength, ForwardVoltageV: volt, CurrentMA: current})
	}
}

// photonWavelength is the one nearest to the mean photon's: the centroid, else
// the peak, else the dominant wavelength.
func (w *work) photonWavelength() (values []float64, name string) {
	for _, q := range []struct{ quantity, name string }{
		{"centroid_wavelength_nm", "centroid wavelength"}, {"peak_wavelength_nm", "peak wavelength"}, {Dominant, "dominant wavelength"},
	} {
		if v := w.values(q.quantity); v != nil {
			return v, q.name
		}
	}
	return nil, ""
}
