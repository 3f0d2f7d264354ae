package jobs

import (
	"fmt"
	"math"

	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// computed are the planes that follow from the measured ones, with what each was
// computed from.
type computed struct {
	planes     []wafermap.Plane
	quantities []quantity.Quantity
	from       map[string]string
}

// Decimals of what is computed: one more than stations commonly resolve.
const (
	wavelengthPlaces = 3
	sharePlaces      = 4
)

func (c *computed) add(name string, values []float64, places int, from string) {
	scale := math.Pow10(places)
	k, any := make([]int32, len(values)), false
	for i, v := range values {
		if k[i] = wafermap.Missing32; math.Abs(v)*scale < math.MaxInt32 { // false for NaN
			k[i], any = int32(math.Round(v*scale)), true
		}
	}
	if !any {
		return
	}
	q, _ := quantity.Lookup(name)
	c.planes = append(c.planes, wafermap.PackScaled(name, -places, k))
	c.quantities = append(c.quantities, q)
	if c.from == nil {
		c.from = map[string]string{}
	}
	c.from[name] = from
}

// columns gives planes as floats, each made once.
type columns struct {
	planes []wafermap.Plane
	made   map[string][]float64
}

// of is a quantity's values, nil when there is none.
func (c *columns) of(name string) []float64 {
	if v, ok := c.made[name]; ok {
		return v
	}
	for i := range c.planes {
		if c.planes[i].Quantity == name {
			v := c.planes[i].Floats(nil)
			c.made[name] = v
			return v
		}
	}
	return nil
}

// compute works out what a measurement did not measure but its readings tell:
// dominant wavelength and purity from x, y, else dominant wavelength from the
// peak; wall-plug and external quantum efficiency from flux, current and voltage.
func (d *deriver) compute(in dies) (out computed, suspects []colour.Suspect, err error) {
	have := columns{planes: in.planes, made: map[string][]float64{}}
	dies := in.grid.Len()
	if x, y := have.of("cie_x"), have.of("cie_y"); x != nil && y != nil {
		if err := d.fromChromaticity(&out, &have, x, y); err != nil {
			return out, nil, err
		}
	}
	if peak := have.of("peak_wavelength_nm"); peak != nil && have.of("dominant_wavelength_nm") == nil {
		if err := d.fromPeak(&out, &have, in.colour, peak); err != nil {
			return out, nil, err
		}
	}
	current := math.NaN()
	if in.driveCurrentMA != nil {
		current = *in.driveCurrentMA
	}
	flux, volt := have.of("radiant_flux_mw"), have.of("forward_voltage_v")
	wavelength, of := photonWavelength(&have)
	if flux != nil && current > 0 {
		if volt != nil && have.of("wall_plug_efficiency") == nil {
			values := make([]float64, dies)
			colour.WallPlugEfficiencies(values, flux, volt, current)
			out.add("wall_plug_efficiency", values, sharePlaces, fmt.Sprintf("radiant flux and forward voltage at %g mA", current))
		}
		if wavelength != nil && have.of("external_quantum_efficiency") == nil {
			values := make([]float64, dies)
			colour.ExternalQuantumEfficiencies(values, flux, wavelength, current)
			out.add("external_quantum_efficiency", values, sharePlaces, fmt.Sprintf("radiant flux and %s at %g mA", of, current))
		}
	}
	if flux != nil || volt != nil {
		suspects = colour.CheckDies(colour.DieReadings{RadiantFluxMW: flux,
			WavelengthNM: wavelength, ForwardVoltageV: volt, CurrentMA: current})
	}
	return out, suspects, nil
}

func (d *deriver) fromChromaticity(out *computed, have *columns, x, y []float64) error {
	if d.dominant == nil {
		table, err := colour.NewDominantTable(colour.WhiteE)
		if err != nil {
			return err
		}
		d.dominant = table
	}
	const from = "CIE x, y against white E"
	wavelengths, purities := make([]float64, len(x)), make([]float64, len(x))
	d.dominant.Wavelengths(wavelengths, purities, x, y)
	if have.of("dominant_wavelength_nm") == nil {
		for i, v := range wavelengths {
			if v < 0 { // complementary: no spectral hue to bin or chart
				wavelengths[i] = math.NaN()
			}
		}
		out.add("dominant_wavelength_nm", wavelengths, wavelengthPlaces, from)
		have.made["dominant_wavelength_nm"] = wavelengths
	}
	if have.of("excitation_purity") == nil {
		out.add("excitation_purity", purities, sharePlaces, from)
	}
	return nil
}

// fromPeak uses the recipe's own model, else the default line model of the
// wafer's colour.
func (d *deriver) fromPeak(out *computed, have *columns, model *colour.PeakModel, peak []float64) error {
	if model == nil {
		model = colour.DefaultPeakModel(peak)
	}
	values := make([]float64, len(peak))
	if err := d.models.Dominant(values, model, peak, have.of("fwhm_nm")); err != nil {
		return err
	}
	out.add("dominant_wavelength_nm", values, wavelengthPlaces, model.Describe())
	have.made["dominant_wavelength_nm"] = values
	return nil
}

// photonWavelength is the one nearest to the mean photon's: the centroid, else
// the peak, else the dominant wavelength.
func photonWavelength(have *columns) (values []float64, name string) {
	for _, q := range []struct{ quantity, name string }{
		{"centroid_wavelength_nm", "centroid wavelength"}, {"peak_wavelength_nm", "peak wavelength"}, {"dominant_wavelength_nm", "dominant wavelength"},
	} {
		if v := have.of(q.quantity); v != nil {
			return v, q.name
		}
	}
	return nil, ""
}
