package colour

import (
	"math"
	"strings"
)

// LineModel is the shape of an LED's emission line over wavelength: a curve whose
// highest point and full width at half maximum are exactly those asked for, with
// shape parameters of its own. The zero value is no model; take one by name.
type LineModel struct {
	Name string
	// Ratio is the half width at half maximum on the long-wave side over that on
	// the short-wave side; 1 = symmetric.
	Ratio float64
	// ShortTail and LongTail are the exponents of the two flanks of "split-pearson":
	// 1 is a Lorentzian's far-reaching tail, 50 all but a Gaussian's.
	ShortTail, LongTail float64
	// ResidualNM is the rms error in dominant wavelength of what the shape was
	// fitted to; NaN when it was not fitted.
	ResidualNM float64
	// FittedTo says to what, "" when it was not fitted.
	FittedTo string
}

// Line models by name.
//
//   - gaussian: exp(−4 ln 2 ((λ − λp)/Δ)²). Too slim at its foot for a real LED.
//   - ohno: (g + 2g⁵)/3 with g = exp(−((λ − λp)/w)²) (Ohno, Opt. Eng. 44 (2005) 111302);
//     w is set so that the full width at half maximum is Δ.
//   - split-gaussian: two Gaussian halves of different widths.
//   - split-ohno: the same of Ohno's line.
//   - split-pearson: two Pearson VII halves, (1 + (2^(1/m) − 1)((λ − λp)/h)²)^(−m) with h
//     and m of either side, among the shapes that Reifegerste and Lienig (J. Light Vis.
//     Environ. 32 (2008) 288, from memory) compare on measured LEDs. With m near 1 it
//     has the tail that real lines have.
var lineModels = []LineModel{
	{Name: "gaussian", Ratio: 1, ResidualNM: math.NaN()},
	{Name: "ohno", Ratio: 1, ResidualNM: math.NaN()},
	{Name: "split-gaussian", Ratio: 1.3, ResidualNM: math.NaN()},
	{Name: "split-ohno", Ratio: 1.3, ResidualNM: math.NaN()},
	{Name: "split-pearson", Ratio: 1.2, ShortTail: 3, LongTail: 2, ResidualNM: math.NaN()},
}

// LineModelNames lists the names that LineModelByName takes.
func LineModelNames() []string {
	var names []string
	for _, m := range lineModels {
		names = append(names, m.Name)
	}
	return names
}

// LineModelByName finds a model with shape parameters of no fit. The error wraps
// analytics.ErrInvalid and lists the names.
func LineModelByName(name string) (LineModel, error) {
	for _, m := range lineModels {
		if m.Name == name {
			return m, nil
		}
	}
	return LineModel{}, invalid("no line model is called %q: use %s", name, strings.Join(LineModelNames(), ", "))
}

// measuredLines are split-pearson lines fitted to measured spectra of packaged
// LEDs, by colour; a test fits them again from the spectra.
var measuredLines = []struct {
	toNM float64 // peaks up to here
	line LineModel
}{
	{480, LineModel{Name: "split-pearson", Ratio: 1.041, ShortTail: 3.66, LongTail: 1.73, ResidualNM: 0.5, FittedTo: "9 measured blue LEDs"}},
	{575, LineModel{Name: "split-pearson", Ratio: 1.096, ShortTail: 2.87, LongTail: 1.38, ResidualNM: 0.24, FittedTo: "8 measured cyan and green LEDs"}},
	{math.Inf(1), LineModel{Name: "split-pearson", Ratio: 0.695, ShortTail: 2.1, LongTail: 1.66, ResidualNM: 0.62, FittedTo: "7 measured amber and red LEDs"}},
}

// Range of peaks that the default lines are for, in nm: what they were fitted to and
// some 15 nm more. Beyond, the tails of the nearest line would decide, which nobody
// has measured.
const (
	LowestDefaultNM  = 420
	HighestDefaultNM = 680
)

// DefaultLineModel is the line fitted to measured LEDs of the peak's colour.
func DefaultLineModel(peakNM float64) LineModel {
	for _, m := range measuredLines {
		if peakNM <= m.toNM {
			return m.line
		}
	}
	return measuredLines[len(measuredLines)-1].line
}

// Limits of lines.
const (
	lowestPeak, highestPeak     = 360, 780
	narrowestFWHM, broadestFWHM = 4, 150
	lowestRatio, highestRatio   = 0.2, 5
	lowestTail, highestTail     = 0.8, 50
	halfOfOhno                  = 0.808609263209 // g at half maximum: (g + 2g⁵)/3 = 1/2
)

// Check refuses parameters out of range with analytics.ErrInvalid.
func (m LineModel) Check() error {
	if _, err := LineModelByName(m.Name); err != nil {
		return err
	}
	if !(m.Ratio >= lowestRatio && m.Ratio <= highestRatio) {
		return invalid("line model %s: a ratio of half widths of %g: use %g to %g", m.Name, m.Ratio, lowestRatio, float64(highestRatio))
	}
	if m.Name != "split-pearson" {
		return nil
	}
	for _, tail := range []float64{m.ShortTail, m.LongTail} {
		if !(tail >= lowestTail && tail <= highestTail) {
			return invalid("line model %s: a tail exponent of %g: use %g (far-reaching) to %g (Gaussian)", m.Name, tail, lowestTail, float64(highestTail))
		}
	}
	return nil
}

func checkLine(peakNM, fwhmNM float64) error {
	if !(peakNM >= lowestPeak && peakNM <= highestPeak) {
		return invalid("a peak at %g nm: line models serve %d nm to %d nm", peakNM, lowestPeak, highestPeak)
	}
	if !(fwhmNM >= narrowestFWHM && fwhmNM <= broadestFWHM) {
		return invalid("a full width at half maximum of %g nm: line models serve %d nm to %d nm", fwhmNM, narrowestFWHM, broadestFWHM)
	}
	return nil
}

// Power is the line at a wavelength, 1 at its peak.
func (m LineModel) Power(nm, peakNM, fwhmNM float64) float64 {
	half, tail := fwhmNM/(1+m.Ratio), m.ShortTail
	if nm > peakNM {
		half, tail = half*m.Ratio, m.LongTail
	}
	z := (nm - peakNM) / half
	switch m.Name {
	case "ohno", "split-ohno":
		g := math.Exp(math.Log(halfOfOhno) * z * z)
		g2 := g * g
		return (g + 2*g2*g2*g) / 3
	case "split-pearson":
		return math.Pow(1+(math.Exp2(1/tail)-1)*z*z, -tail)
	}
	return math.Exp(-math.Ln2 * z * z)
}

// Spectrum is the line over the observer's range at 1 nm; errors wrap
// analytics.ErrInvalid for a peak or width that no model serves.
func (m LineModel) Spectrum(peakNM, fwhmNM float64) (*Spectrum, error) {
	if err := checkLine(peakNM, fwhmNM); err != nil {
		return nil, err
	}
	s := &Spectrum{make([]float64, len(observer)), make([]float64, len(observer))}
	for i := range observer {
		s.nm[i] = float64(firstNM + i)
		s.power[i] = m.Power(s.nm[i], peakNM, fwhmNM)
	}
	return s, nil
}

// Dominant is the dominant wavelength of the line against a white. A line whose
// chromaticity has none, in the far violet or red, gives NaN.
func (m LineModel) Dominant(peakNM, fwhmNM float64, white XY) (float64, error) {
	s, err := m.Spectrum(peakNM, fwhmNM)
	if err != nil {
		return math.NaN(), err
	}
	d, err := DominantOf(s.XYZ().XY(), white)
	if err != nil || d.Complementary {
		return math.NaN(), err
	}
	return d.WavelengthNM, nil
}
