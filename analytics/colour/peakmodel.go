package colour

import (
	"fmt"
	"math"
)

// PeakModel says how a recipe's dominant wavelength follows from its peak: by a
// line model with the die's own width, or by a relation fitted to dies measured
// both ways, which needs no width. Exactly one of the two is given: Model, or
// ReferenceNM with OffsetNM.
type PeakModel struct {
	Model       string  `json:"model,omitempty"`        // a line model's name
	Ratio       float64 `json:"ratio,omitempty"`        // its shape parameters; 0 = the model's own
	ShortTail   float64 `json:"short_tail,omitempty"`   //
	LongTail    float64 `json:"long_tail,omitempty"`    //
	ReferenceNM float64 `json:"reference_nm,omitempty"` // dominant = peak + offset + slope·(peak − reference)
	OffsetNM    float64 `json:"offset_nm,omitempty"`
	Slope       float64 `json:"slope,omitempty"`
	ResidualNM  float64 `json:"residual_nm,omitempty"` // standard error in dominant wavelength; 0 = not stated
	FittedTo    string  `json:"fitted_to,omitempty"`   // what it was fitted to
}

// Relation reports whether the model is a relation rather than a line.
func (m *PeakModel) Relation() bool { return m.Model == "" }

// line is the line model with the parameters given.
func (m *PeakModel) line() (LineModel, error) {
	l, err := LineModelByName(m.Model)
	for _, p := range []struct {
		given float64
		to    *float64
	}{{m.Ratio, &l.Ratio}, {m.ShortTail, &l.ShortTail}, {m.LongTail, &l.LongTail}} {
		if p.given != 0 {
			*p.to = p.given
		}
	}
	return l, err
}

// Check refuses what cannot be worked with; errors wrap analytics.ErrInvalid.
func (m *PeakModel) Check() error {
	if !m.Relation() {
		if m.ReferenceNM != 0 || m.OffsetNM != 0 || m.Slope != 0 {
			return invalid("a line model and a relation at once: give model, or reference_nm and offset_nm")
		}
		l, err := m.line()
		if err != nil {
			return err
		}
		return l.Check()
	}
	if m.Ratio != 0 || m.ShortTail != 0 || m.LongTail != 0 {
		return invalid("shape parameters without a line model: add model: split-pearson")
	}
	if !(m.ReferenceNM >= lowestPeak && m.ReferenceNM <= highestPeak) {
		return invalid("reference_nm %g: give the peak wavelength that the offset holds at, %d to %d nm", m.ReferenceNM, lowestPeak, highestPeak)
	}
	if !(math.Abs(m.OffsetNM) <= 50 && math.Abs(m.Slope) <= 1) {
		return invalid("an offset of %g nm with a slope of %g is no relation of an LED: offsets lie within ±50 nm, slopes within ±1", m.OffsetNM, m.Slope)
	}
	if !(m.ResidualNM >= 0) {
		return invalid("residual_nm %g is below 0", m.ResidualNM)
	}
	return nil
}

// Describe names the model with its error, for a derived value's origin.
func (m *PeakModel) Describe() string {
	text := "peak and width by line model " + m.Model
	if m.Relation() {
		text = fmt.Sprintf("peak %+.2f nm at %.1f nm, slope %+.3f", m.OffsetNM, m.ReferenceNM, m.Slope)
	}
	if m.FittedTo != "" {
		text += ", fitted to " + m.FittedTo
	}
	if m.ResidualNM > 0 {
		text += fmt.Sprintf(", residual ±%.2g nm", m.ResidualNM)
	}
	return text
}

// DefaultPeakModel is the line model fitted to measured LEDs of the colour that
// most of the peaks have; nil when most lie where no default line holds.
func DefaultPeakModel(peakNM []float64) *PeakModel {
	best, most := 0, -1
	var counts [8]int
	within, of := 0, 0
	for _, p := range peakNM {
		if p == p {
			of++
		}
		if p >= LowestDefaultNM && p <= HighestDefaultNM {
			within++
		}
		for i := range measuredLines {
			if p <= measuredLines[i].toNM {
				counts[i]++
				break
			}
		}
	}
	if 2*within < of {
		return nil
	}
	for i := range measuredLines {
		if counts[i] > most {
			best, most = i, counts[i]
		}
	}
	l := measuredLines[best].line
	return &PeakModel{Model: l.Name, Ratio: l.Ratio, ShortTail: l.ShortTail, LongTail: l.LongTail, ResidualNM: l.ResidualNM, FittedTo: l.FittedTo}
}

// PeakTables keeps the tables that it makes, by line and range. The zero value is
// ready; it is not for concurrent use.
type PeakTables struct {
	tables map[peakKey]*PeakTable
}

type peakKey struct {
	line               string
	ratio, short, long float64
	peakLow, peakHigh  float64
	fwhmLow, fwhmHigh  float64
}

// maxPeakTables bounds what PeakTables keeps.
const maxPeakTables = 16

// Dominant writes the dominant wavelength of every die against E to dst. fwhm may
// be nil for a relation; a line model without widths gives NaN throughout.
func (k *PeakTables) Dominant(dst []float64, m *PeakModel, peak, fwhm []float64) error {
	if err := m.Check(); err != nil {
		return err
	}
	if m.Relation() {
		for i, p := range peak[:len(dst)] {
			dst[i] = p + m.OffsetNM + m.Slope*(p-m.ReferenceNM)
		}
		return nil
	}
	peakLow, peakHigh, some := rangeOf(peak, lowestPeak, highestPeak, 10)
	fwhmLow, fwhmHigh, wide := rangeOf(fwhm, narrowestFWHM, broadestFWHM, 5)
	if !some || !wide {
		for i := range dst {
			dst[i] = math.NaN()
		}
		return nil
	}
	l, err := m.line()
	if err != nil {
		return err
	}
	key := peakKey{l.Name, l.Ratio, l.ShortTail, l.LongTail, peakLow, peakHigh, fwhmLow, fwhmHigh}
	t, ok := k.tables[key]
	if !ok {
		if t, err = NewPeakTable(l, WhiteE, peakLow, peakHigh, fwhmLow, fwhmHigh); err != nil {
			return err
		}
		if k.tables == nil || len(k.tables) >= maxPeakTables {
			k.tables = map[peakKey]*PeakTable{}
		}
		k.tables[key] = t
	}
	t.Dominant(dst, peak, fwhm)
	return nil
}

// rangeOf is the range of the values within limits, rounded outward to a grain so
// that wafers of one recipe share tables.
func rangeOf(values []float64, lowest, highest, grain float64) (low, high float64, some bool) {
	low, high = math.Inf(1), math.Inf(-1)
	for _, v := range values {
		if v >= lowest && v <= highest {
			low, high = min(low, v), max(high, v)
		}
	}
	return max(lowest, math.Floor(low/grain)*grain), min(highest, math.Ceil(high/grain)*grain), low <= high
}
