package quantity

import (
	"fmt"
	"sort"
	"strings"

	"epitally/analytics"
)

// A unit is a dimension and a factor to its base unit. Decimal factors are kept
// as a power of ten so that text converts without rounding.
type unit struct {
	dimension string
	power     int     // factor = multiple · 10^power
	multiple  float64 // 1 for decimal units
}

var units = map[string]unit{
	"nm": {"length", -9, 1}, "um": {"length", -6, 1}, "µm": {"length", -6, 1}, "mm": {"length", -3, 1},
	"cm": {"length", -2, 1}, "m": {"length", 0, 1}, "angstrom": {"length", -10, 1}, "å": {"length", -10, 1},
	"inch": {"length", -4, 254}, "mil": {"length", -7, 254},
	"v": {"voltage", 0, 1}, "mv": {"voltage", -3, 1}, "uv": {"voltage", -6, 1}, "µv": {"voltage", -6, 1}, "kv": {"voltage", 3, 1},
	"a": {"current", 0, 1}, "ma": {"current", -3, 1}, "ua": {"current", -6, 1}, "µa": {"current", -6, 1},
	"na": {"current", -9, 1}, "pa": {"current", -12, 1},
	"w": {"power", 0, 1}, "mw": {"power", -3, 1}, "uw": {"power", -6, 1}, "µw": {"power", -6, 1},
	"lm": {"luminous flux", 0, 1}, "mlm": {"luminous flux", -3, 1},
	"cd": {"luminous intensity", 0, 1}, "mcd": {"luminous intensity", -3, 1},
	"k": {"temperature difference", 0, 1},
	"s": {"time", 0, 1}, "ms": {"time", -3, 1}, "us": {"time", -6, 1}, "µs": {"time", -6, 1},
	"ohm": {"resistance", 0, 1}, "mohm": {"resistance", -3, 1}, "kohm": {"resistance", 3, 1},
	"":     {"ratio", 0, 1},
	"a.u.": {"arbitrary", 0, 1}, "counts": {"arbitrary", 0, 1},
	"%": {"ratio", -2, 1}, "percent": {"ratio", -2, 1}, "ratio": {"ratio", 0, 1},
}

// Conversion turns a value in one unit into another: y = x · Multiple · 10^Power.
// Multiple is 1 for purely decimal conversions, which are then exact on decimal
// text and on scaled integers.
type Conversion struct {
	Power    int
	Multiple float64
}

// Convert finds the conversion from one unit to another. Unit names are
// compared without case (mW and MW would collide: megawatts do not occur on a
// die). An unknown unit, or two units of different dimension, is
// analytics.ErrInvalid with the units that would do.
func Convert(from, to string) (Conversion, error) {
	a, ok := units[folded(from)]
	b, okTo := units[folded(to)]
	if strings.EqualFold(from, to) {
		return Conversion{0, 1}, nil
	}
	if !okTo {
		return Conversion{}, fmt.Errorf("unit %q has no known conversions: write the same unit, %q, for both: %w", to, to, analytics.ErrInvalid)
	}
	if !ok {
		return Conversion{}, fmt.Errorf("unknown unit %q: for a value kept in %q use one of %s: %w", from, to, unitsOf(b.dimension), analytics.ErrInvalid)
	}
	if a.dimension != b.dimension {
		return Conversion{}, fmt.Errorf("unit %q is a %s, but %q is a %s: use one of %s: %w", from, a.dimension, to, b.dimension, unitsOf(b.dimension), analytics.ErrInvalid)
	}
	return Conversion{Power: a.power - b.power, Multiple: a.multiple / b.multiple}, nil
}

// folded is a unit's key in the table: lower case, with the Greek letter mu
// (U+03BC) written as the micro sign (U+00B5) that looks like it.
func folded(name string) string {
	return strings.ReplaceAll(strings.ToLower(name), "\u03bc", "\u00b5")
}

func unitsOf(dimension string) string {
	var names []string
	for name, u := range units {
		if u.dimension == dimension && name != "" {
			names = append(names, name)
		}
	}
	sort.Strings(names)
	return strings.Join(names, ", ")
}
