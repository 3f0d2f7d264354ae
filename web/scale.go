package web

import (
	"math"
	"strings"
	"sync"

	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
)

// scaleSteps is the number of shades of a map scale.
const scaleSteps = 256

// Palette is every colour a map is drawn with on one ground.
type Palette struct {
	Deviation string   `json:"deviation"` // 256 × rrggbb, short of target first
	Magnitude string   `json:"magnitude"` // 256 × rrggbb, low first
	Bins      []string `json:"bins"`      // eight fills, rrggbb
	Reject    []string `json:"reject"`    // fills of dies that are not sold
	Paper     string   `json:"paper"`
	Ink       string   `json:"ink"`
	Wafer     string   `json:"wafer"` // bare wafer between and beyond the dies
	Hatch     string   `json:"hatch"` // lines over dies without a value
}

// Palettes holds the palette of the light and of the dark ground.
type Palettes struct {
	Light Palette `json:"light"`
	Dark  Palette `json:"dark"`
}

// Hues of the deviation scale in CIELAB LCh, degrees.
const (
	tealHue  = 208 // short of target
	ochreHue = 79  // long of target
)

// deviationScale runs from teal (short) through the neutral ground at the
// target to ochre (long): L* linear in the deviation and the same on both sides,
// so that equal deviations look equally strong. ends is L* of both ends, middle
// that of the target.
func deviationScale(middle, ends, chroma float64) string {
	var b strings.Builder
	for i := range scaleSteps {
		t := 2*float64(i)/(scaleSteps-1) - 1 // -1 to 1
		l, hue := middle+(ends-middle)*math.Abs(t), float64(ochreHue)
		if t < 0 {
			hue = tealHue
		}
		// Chroma rises faster than lightness falls, so that the side can be
		// told already near the target.
		b.WriteString(fromLChInGamut(l, 2+chroma*math.Pow(math.Abs(t), 0.8), hue).Hex())
	}
	return b.String()
}

// NewPalettes makes the palettes. The eight bin fills step evenly in lightness
// and turn in hue besides, so that they stay apart in grey and for every kind
// of colour vision.
func NewPalettes() Palettes {
	fills := func(from, to float64) []string {
		hues := [8]float64{85, 210, 50, 170, 280, 110, 330, 240}
		out := make([]string, len(hues))
		for i, h := range hues {
			out[i] = fromLChInGamut(from+(to-from)*float64(i)/7, 38, h).Hex()
		}
		return out
	}
	return Palettes{
		Light: Palette{
			Deviation: deviationScale(96, 34, 62), Magnitude: cividis, Bins: fills(90, 34),
			Reject: []string{"1d2329", "5d646b", "8d9296"},
			Paper:  "f7f5f0", Ink: "1d2329", Wafer: "e4dfd4", Hatch: "8b8579",
		},
		Dark: Palette{
			Deviation: deviationScale(24, 84, 62), Magnitude: cividis, Bins: fills(88, 36),
			Reject: []string{"e8e4da", "a9aaa6", "7b8084"},
			Paper:  "14181c", Ink: "e8e4da", Wafer: "262d33", Hatch: "77808a",
		},
	}
}

// palettes are made once: they are constants that take arithmetic.
var palettes = sync.OnceValue(NewPalettes)

// shades splits a scale of rrggbb.
func shades(scale string) []RGB {
	out := make([]RGB, len(scale)/6)
	for i := range out {
		out[i] = mustHex(scale[6*i : 6*i+6])
	}
	return out
}

// BinLook is how a bin is drawn: a fill, and a pattern over it once the fills
// are used up.
type BinLook struct {
	Fill    int    `json:"fill"`    // index of Palette.Bins, or of Palette.Reject
	Reject  bool   `json:"reject"`  // true: the fill is of Palette.Reject
	Pattern string `json:"pattern"` // "", "rise", "fall", "level", "dots"
	Missing bool   `json:"missing"` // true: hatched like a die without a value
}

var patterns = [...]string{"", "rise", "fall", "level", "dots"}

// LooksOf gives the look of each cell by its class word. Sellable bins take the
// eight fills, then the fills again under each pattern; what is not sold takes
// the greys in the same way; untested dies are hatched.
func LooksOf(classes []string) []BinLook {
	looks := make([]BinLook, len(classes))
	sold, unsold := 0, 0
	for i, class := range classes {
		switch class {
		case "sellable":
			looks[i] = BinLook{Fill: sold % 8, Pattern: patterns[sold/8%len(patterns)]}
			sold++
		case "untested":
			looks[i] = BinLook{Missing: true}
		default:
			// Patterns turn first, so that the few greys part early.
			looks[i] = BinLook{Reject: true, Fill: unsold % 3, Pattern: patterns[(unsold/3+unsold%3)%len(patterns)]}
			unsold++
		}
	}
	return looks
}

// ScaleRange is the range of a map's scale: the 1st to the 99th percentile, and
// for a deviation the same length on both sides of the target. target is NaN
// for the magnitude scale. A range without length is widened by the resolution.
func ScaleRange(s uniformity.Summary, q quantity.Quantity, target float64) (low, high float64) {
	low, high = s.Q01, s.Q99
	if s.N == 0 || math.IsNaN(low) || math.IsNaN(high) {
		low, high = 0, 0
		if !math.IsNaN(target) {
			low, high = target, target
		}
	}
	if !math.IsNaN(target) {
		half := max(math.Abs(low-target), math.Abs(high-target))
		low, high = target-half, target+half
	}
	if !(high > low) {
		step := max(q.Resolution, math.Abs(low)*1e-9, 1e-12)
		low, high = low-step, high+step
	}
	return low, high
}

// ScaleTarget is the target that a map of q is drawn about: the recipe's for
// quantities that show as a deviation, NaN for all others.
func ScaleTarget(q quantity.Quantity, target float64) float64 {
	if q.Scale != quantity.Deviation {
		return math.NaN()
	}
	return target
}

// flatChordMM are the lengths of the primary flat by wafer diameter in mm (SEMI
// M1 for silicon, common practice for 50.8 mm sapphire).
var flatChordMM = [...][2]float64{{50.8, 15.9}, {76.2, 22.2}, {100, 32.5}, {125, 42.5}, {150, 57.5}}

// flatOffsetMM is the distance of the flat's chord from the wafer's centre.
func flatOffsetMM(diameterMM float64) float64 {
	chord := 0.35 * diameterMM
	for _, f := range flatChordMM {
		if math.Abs(f[0]-diameterMM) < 2.5 {
			chord = f[1]
		}
	}
	r := diameterMM / 2
	return math.Sqrt(r*r - chord*chord/4)
}
