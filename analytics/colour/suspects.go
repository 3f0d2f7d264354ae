package colour

import (
	"fmt"
	"math"
	"slices"
	"strconv"
)

// Suspect is a measurement that breaks physics: its numbers cannot all be right.
type Suspect struct {
	Kind        SuspectKind `json:"kind"`
	Says        string      `json:"says"`         // what was found, with its numbers
	LikelyCause string      `json:"likely_cause"` // what to look at first
	Dies        int         `json:"dies"`         // that break the rule
	Of          int         `json:"of"`           // dies that could be judged
}

// SuspectKind is the rule that is broken.
type SuspectKind string

// The rules.
const (
	QuantumAboveOne  SuspectKind = "quantum efficiency above 1"
	WallPlugAboveOne SuspectKind = "wall-plug efficiency above 1"
	VoltageTooLow    SuspectKind = "voltage below the photon's energy"
	FluxAlone        SuspectKind = "flux changed alone"
)

const (
	// lowVoltage is the part of the photon's energy under which a forward voltage
	// at operating current is suspect. Carriers bring some energy as heat, so that
	// voltages a little under the photon's occur at low current (common practice).
	lowVoltage = 0.8
	// suspectShare of the dies must break a rule before a measurement is suspect:
	// shorted and misread dies break it one by one.
	suspectShare = 0.02
	// Limits on a change of medians between two measurements of a wafer (common
	// practice: a few times what one tester repeats to).
	fluxChange       = 0.10 // relative
	voltageChangeV   = 0.02 //
	wavelengthChange = 0.5  // nm
)

// DieReadings are what the rules look at; nil slices were not measured, the others
// have one length. NaN is no value.
type DieReadings struct {
	RadiantFluxMW   []float64
	WavelengthNM    []float64 // centroid, else peak, else dominant
	ForwardVoltageV []float64
	CurrentMA       float64 // NaN: not stated
}

// CheckDies finds what breaks physics in one measurement: a quantum or wall-plug
// efficiency above 1, or a forward voltage far below the photon's energy, on more
// than 2 % of the dies.
func CheckDies(in DieReadings) []Suspect {
	var found []Suspect
	flux, wavelength, volt, current := in.RadiantFluxMW, in.WavelengthNM, in.ForwardVoltageV, in.CurrentMA
	const fluxCause = "the unit of flux (µW read as mW), the sphere's calibration factor, or the current setting"
	if flux != nil && wavelength != nil && current > 0 {
		found = judge(found, QuantumAboveOne, product{flux, wavelength, 1 / (current * photonEVNM)}, func(v float64) bool { return v > 1 },
			"more photons come out than electrons go in at %[2]g mA (quantum efficiency %.2[1]f)", current, fluxCause)
	}
	if flux != nil && volt != nil && current > 0 {
		found = judge(found, WallPlugAboveOne, quotient{flux, volt, 1 / current}, func(v float64) bool { return v > 1 },
			"more light comes out than power goes in at %[2]g mA (wall-plug efficiency %.2[1]f)", current, fluxCause)
	}
	if volt != nil && wavelength != nil {
		found = judge(found, VoltageTooLow, product{volt, wavelength, 1 / photonEVNM}, func(v float64) bool { return v < lowVoltage },
			"the forward voltage is only %.2[1]f of the photon's energy", current,
			"the unit of voltage (mV read as V), the current setting (a reading at a small test current), or shorted contacts")
	}
	return found
}

// product and quotient are a value per die of two readings times a factor.
type product struct {
	a, b   []float64
	factor float64
}

func (p product) len() int         { return len(p.a) }
func (p product) at(i int) float64 { return p.a[i] * p.b[i] * p.factor }

type quotient struct {
	a, b   []float64
	factor float64
}

func (q quotient) len() int { return len(q.a) }
func (q quotient) at(i int) float64 {
	if !(q.b[i] > 0) {
		return math.NaN()
	}
	return q.a[i] / q.b[i] * q.factor
}

// judge adds a suspect when more than 2 % of the dies that can be judged break a
// rule. says takes the median of what they have and the current.
func judge[V interface {
	len() int
	at(i int) float64
}](found []Suspect, kind SuspectKind, values V, breaks func(v float64) bool, says string, currentMA float64, cause string) []Suspect {
	of, broken := 0, 0
	for i := range values.len() {
		v := values.at(i)
		if v == v {
			of++
		}
		if breaks(v) { // false for NaN
			broken++
		}
	}
	if float64(broken) <= suspectShare*float64(of) {
		return found
	}
	those := make([]float64, 0, broken)
	for i := range values.len() {
		if v := values.at(i); breaks(v) {
			those = append(those, v)
		}
	}
	text := fmt.Sprintf(says, median(those), currentMA)
	if kind == VoltageTooLow {
		text = fmt.Sprintf(says, median(those))
	}
	return append(found, Suspect{kind, fmt.Sprintf("%s of %s dies: %s", thousands(broken), thousands(of), text), cause, broken, of})
}

// CompareMeasurements looks at two measurements of one wafer: flux that changes by
// more than 10 % while voltage and wavelength stay (within 20 mV and 0.5 nm of the
// medians) is the tester's doing. Quantities that either lacks are not asked.
func CompareMeasurements(before, after DieReadings) []Suspect {
	f1, f2 := medianOf(before.RadiantFluxMW), medianOf(after.RadiantFluxMW)
	ratio := f2 / f1
	if !(f1 > 0 && math.Abs(ratio-1) > fluxChange) {
		return nil
	}
	if before.CurrentMA > 0 && after.CurrentMA > 0 && before.CurrentMA != after.CurrentMA {
		return nil
	}
	v := medianOf(after.ForwardVoltageV) - medianOf(before.ForwardVoltageV)
	w := medianOf(after.WavelengthNM) - medianOf(before.WavelengthNM)
	if math.IsNaN(v) && math.IsNaN(w) || math.Abs(v) > voltageChangeV || math.Abs(w) > wavelengthChange {
		return nil
	}
	n := len(after.RadiantFluxMW)
	return []Suspect{{FluxAlone,
		fmt.Sprintf("the median flux went from %.4g mW to %.4g mW (×%.2f) since the last measurement while voltage and wavelength stayed", f1, f2, ratio),
		"the integrating sphere: its height over the wafer, its coating or its calibration factor", n, n}}
}

// medianOf is the median of the values there are; NaN of none.
func medianOf(values []float64) float64 {
	some := slices.DeleteFunc(slices.Clone(values), math.IsNaN)
	if len(some) == 0 {
		return math.NaN()
	}
	return median(some)
}

func thousands(n int) string {
	s := strconv.Itoa(n)
	for i := len(s) - 3; i > 0; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	return s
}
