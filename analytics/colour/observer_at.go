package colour

import (
	"errors"
	"fmt"

	"epitally/analytics"
)

// KM is the maximum luminous efficacy of radiation in lm/W, at 555 nm (540 THz).
const KM = 683.0

// Range of the observer's table in nm.
const (
	firstNM = 360
	lastNM  = 830
)

// ErrNotMeaningful: the input is sound, but the answer asked for has no meaning
// there, as a dominant wavelength next to white. It wraps analytics.ErrInvalid.
var ErrNotMeaningful = fmt.Errorf("not meaningful here: %w", analytics.ErrInvalid)

// notMeaningful says why.
func notMeaningful(format string, args ...any) error {
	return fmt.Errorf(format+": %w", append(args, ErrNotMeaningful)...)
}

func invalid(format string, args ...any) error {
	return fmt.Errorf(format+": %w", append(args, analytics.ErrInvalid)...)
}

// Meaningless reports whether err says that an answer has no meaning, and gives
// its words without the kind.
func Meaningless(err error) (why string, is bool) {
	if !errors.Is(err, ErrNotMeaningful) {
		return "", false
	}
	text := err.Error()
	return text[:len(text)-len(": "+ErrNotMeaningful.Error())], true
}

// observerAt gives x̄, ȳ, z̄ at a wavelength, linear between the 1 nm points and 0
// outside 360 nm to 830 nm.
func observerAt(nm float64) (x, y, z float64) {
	if !(nm >= firstNM && nm <= lastNM) {
		return 0, 0, 0
	}
	i := min(int(nm)-firstNM, len(observer)-2)
	t := nm - firstNM - float64(i)
	a, b := &observer[i], &observer[i+1]
	return a[0] + t*(b[0]-a[0]), a[1] + t*(b[1]-a[1]), a[2] + t*(b[2]-a[2])
}

// LuminousEfficiency is V(λ), the spectral luminous efficiency for photopic vision
// (CIE 018:2019, table 1), 0 outside 360 nm to 830 nm.
func LuminousEfficiency(nm float64) float64 {
	_, y, _ := observerAt(nm)
	return y
}

// Locus is the chromaticity of monochromatic light; wavelengths outside 360 nm to
// 830 nm count as the end of the range.
func Locus(nm float64) XY {
	x, y, z := observerAt(max(firstNM, min(lastNM, nm)))
	return XYZ{x, y, z}.XY()
}
