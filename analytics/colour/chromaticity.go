package colour

import "math"

// XYZ is a colour in CIE 1931 tristimulus values; Y carries the photometric
// quantity where one is stated.
type XYZ struct{ X, Y, Z float64 }

// XY gives the chromaticity; NaN where X + Y + Z is 0.
func (c XYZ) XY() XY {
	sum := c.X + c.Y + c.Z
	return XY{c.X / sum, c.Y / sum}
}

// XY is a CIE 1931 chromaticity x, y.
type XY struct{ X, Y float64 }

// UV is a CIE 1976 chromaticity u′, v′.
type UV struct{ U, V float64 }

// UV gives u′ = 4x/(−2x + 12y + 3), v′ = 9y/(−2x + 12y + 3) (CIE 15:2018, 8.1).
func (p XY) UV() UV {
	d := -2*p.X + 12*p.Y + 3
	return UV{4 * p.X / d, 9 * p.Y / d}
}

// XY gives x = 9u′/(6u′ − 16v′ + 12), y = 4v′/(6u′ − 16v′ + 12), the inverse of
// XY.UV. The map is projective: straight lines stay straight.
func (p UV) XY() XY {
	d := 6*p.U - 16*p.V + 12
	return XY{9 * p.U / d, 4 * p.V / d}
}

// distance is the length from p to q in the diagram they are in.
func (p XY) distance(q XY) float64 { return math.Hypot(p.X-q.X, p.Y-q.Y) }

// White points, CIE 1931 2°. E is exact; D65 and A are the five decimals of
// CIE 15:2018.
var (
	WhiteE   = XY{1.0 / 3, 1.0 / 3}
	WhiteD65 = XY{0.31272, 0.32903}
	WhiteA   = XY{0.44758, 0.40745}
)

// WhiteByName finds a white point by the illuminant's letter: E, D65 or A.
func WhiteByName(name string) (XY, bool) {
	switch name {
	case "E":
		return WhiteE, true
	case "D65":
		return WhiteD65, true
	case "A":
		return WhiteA, true
	}
	return XY{}, false
}
