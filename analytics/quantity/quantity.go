// Package quantity is the registry of measured and derived physical values:
// their names (which carry the unit), units, resolutions, plausible ranges and
// labels, and the conversions between units of one dimension.
//
// A quantity that is not built in (a leakage test of a silicon wafer, say) is
// declared by a reading profile and behaves like any other.
package quantity

import (
	"fmt"
	"math"
	"regexp"
	"sort"

	"epitally/analytics"
)

// Quantity describes one physical value that dies have.
type Quantity struct {
	Name       string  // snake case with its unit: peak_wavelength_nm
	Label      string  // for people: "Peak wavelength"
	Unit       string  // as printed: "nm", "V", "mW", "" for a ratio
	Resolution float64 // what a station of common practice resolves, in Unit; a display hint, never a rounding rule
	Low, High  float64 // plausible range in Unit; a value outside is shown but counted as implausible
	Scale      Scale   // how maps paint it
	Declared   bool    // true: declared by a reading profile, not built in
}

// Scale says how a quantity is painted on a map.
type Scale int

const (
	// Magnitude paints on a sequential, perceptually even scale.
	Magnitude Scale = iota
	// Deviation paints the difference from a target on a diverging scale.
	Deviation
	// Category paints integer codes (a tester's bin numbers).
	Category
)

// builtin plausible ranges and resolutions are common practice for LED dies
// unless a quantity is bounded by its definition.
var builtin = []Quantity{
	{Name: "peak_wavelength_nm", Label: "Peak wavelength", Unit: "nm", Resolution: 0.01, Low: 200, High: 2000, Scale: Deviation},
	{Name: "dominant_wavelength_nm", Label: "Dominant wavelength", Unit: "nm", Resolution: 0.01, Low: 380, High: 780, Scale: Deviation},
	{Name: "centroid_wavelength_nm", Label: "Centroid wavelength", Unit: "nm", Resolution: 0.01, Low: 200, High: 2000, Scale: Deviation},
	{Name: "fwhm_nm", Label: "Spectral width (FWHM)", Unit: "nm", Resolution: 0.01, Low: 1, High: 200},
	{Name: "pl_intensity", Label: "Photoluminescence intensity", Unit: "a.u.", Resolution: 0.1, Low: 0, High: 1e9},
	{Name: "forward_voltage_v", Label: "Forward voltage", Unit: "V", Resolution: 0.001, Low: 0, High: 20},
	{Name: "low_current_forward_voltage_v", Label: "Forward voltage at low current", Unit: "V", Resolution: 0.001, Low: 0, High: 20},
	{Name: "reverse_current_ua", Label: "Reverse current", Unit: "µA", Resolution: 0.001, Low: 0, High: 1e5},
	{Name: "reverse_voltage_v", Label: "Reverse voltage", Unit: "V", Resolution: 0.01, Low: 0, High: 500},
	{Name: "radiant_flux_mw", Label: "Radiant flux", Unit: "mW", Resolution: 0.01, Low: 0, High: 1e5},
	{Name: "luminous_flux_lm", Label: "Luminous flux", Unit: "lm", Resolution: 0.001, Low: 0, High: 1e5},
	{Name: "luminous_intensity_mcd", Label: "Luminous intensity", Unit: "mcd", Resolution: 0.1, Low: 0, High: 1e7},
	{Name: "cie_x", Label: "CIE x", Unit: "", Resolution: 0.0001, Low: 0, High: 0.75},
	{Name: "cie_y", Label: "CIE y", Unit: "", Resolution: 0.0001, Low: 0, High: 0.85},
	{Name: "cie_u_prime", Label: "CIE u′", Unit: "", Resolution: 0.0001, Low: 0, High: 0.65},
	{Name: "cie_v_prime", Label: "CIE v′", Unit: "", Resolution: 0.0001, Low: 0, High: 0.6},
	{Name: "excitation_purity", Label: "Excitation purity", Unit: "", Resolution: 0.001, Low: 0, High: 1},
	{Name: "cct_k", Label: "Correlated colour temperature", Unit: "K", Resolution: 1, Low: 1000, High: 20000},
	{Name: "wall_plug_efficiency", Label: "Wall-plug efficiency", Unit: "", Resolution: 0.001, Low: 0, High: 1},
	{Name: "external_quantum_efficiency", Label: "External quantum efficiency", Unit: "", Resolution: 0.001, Low: 0, High: 1},
	{Name: "thickness_um", Label: "Layer thickness", Unit: "µm", Resolution: 0.001, Low: 0, High: 2000},
	{Name: "reflectance", Label: "Reflectance", Unit: "", Resolution: 0.001, Low: 0, High: 1},
	{Name: "hard_bin", Label: "Tester hard bin", Unit: "", Resolution: 1, Low: 0, High: 32767, Scale: Category},
	{Name: "soft_bin", Label: "Tester soft bin", Unit: "", Resolution: 1, Low: 0, High: 65534, Scale: Category},
	{Name: "test_time_ms", Label: "Test time", Unit: "ms", Resolution: 1, Low: 0, High: 1e7},
}

var builtinByName = func() map[string]Quantity {
	m := make(map[string]Quantity, len(builtin))
	for _, q := range builtin {
		m[q.Name] = q
	}
	return m
}()

// Builtin lists the built-in quantities in their display order.
func Builtin() []Quantity { return append([]Quantity(nil), builtin...) }

// Lookup finds a built-in quantity by name.
func Lookup(name string) (Quantity, bool) {
	q, ok := builtinByName[name]
	return q, ok
}

var nameRule = regexp.MustCompile(`^[a-z][a-z0-9_]{0,62}$`)

// ValidName reports whether name may name a quantity: 1 to 63 characters,
// lower-case letters, digits and underscores, a letter first.
func ValidName(name string) bool { return nameRule.MatchString(name) }

// Declare makes a quantity that is not built in. Errors are analytics.ErrInvalid.
func Declare(name, label, unit string, resolution float64) (Quantity, error) {
	if !ValidName(name) {
		return Quantity{}, fmt.Errorf("quantity name %q: use 1 to 63 lower-case letters, digits and underscores, a letter first: %w", name, analytics.ErrInvalid)
	}
	if _, ok := Lookup(name); ok {
		return Quantity{}, fmt.Errorf("quantity %q is built in and cannot be declared again: %w", name, analytics.ErrConflict)
	}
	if !(resolution > 0 && resolution <= math.MaxFloat64) {
		return Quantity{}, fmt.Errorf("quantity %q: resolution %g is not a number above zero: %w", name, resolution, analytics.ErrInvalid)
	}
	if label == "" {
		label = name
	}
	return Quantity{Name: name, Label: label, Unit: unit, Resolution: resolution, Low: -1e300, High: 1e300, Declared: true}, nil
}

// Sort orders quantities for display: built-in order first, then by name.
func Sort(qs []Quantity) {
	order := make(map[string]int, len(builtin))
	for i, q := range builtin {
		order[q.Name] = i + 1
	}
	sort.SliceStable(qs, func(i, j int) bool {
		a, b := order[qs[i].Name], order[qs[j].Name]
		if a != b {
			return b == 0 || (a != 0 && a < b)
		}
		return qs[i].Name < qs[j].Name
	})
}
