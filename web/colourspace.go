package web

import (
	"fmt"
	"math"
	"strconv"
)

// RGB is a colour in sRGB, 8 bits a channel.
type RGB struct{ R, G, B uint8 }

// Hex is rrggbb.
func (c RGB) Hex() string { return fmt.Sprintf("%02x%02x%02x", c.R, c.G, c.B) }

// D65 white of sRGB, Y = 1 (IEC 61966-2-1).
const whiteX, whiteY, whiteZ = 0.95047, 1.0, 1.08883

// fromLCh gives the sRGB colour of CIELAB lightness L* (0 to 100), chroma and
// hue angle in degrees (CIE 15:2018, section 8; IEC 61966-2-1), and whether it
// lies inside the sRGB gamut.
func fromLCh(l, c, hueDeg float64) (RGB, bool) {
	h := hueDeg * math.Pi / 180
	fy := (l + 16) / 116
	fx, fz := fy+c*math.Cos(h)/500, fy-c*math.Sin(h)/200
	inverse := func(t float64) float64 {
		if t > 6.0/29 {
			return t * t * t
		}
		return 3 * (6.0 / 29) * (6.0 / 29) * (t - 4.0/29)
	}
	x, y, z := whiteX*inverse(fx), whiteY*inverse(fy), whiteZ*inverse(fz)
	r := 3.2404542*x - 1.5371385*y - 0.4985314*z
	g := -0.9692660*x + 1.8760108*y + 0.0415560*z
	b := 0.0556434*x - 0.2040259*y + 1.0572252*z
	const slack = 1e-3
	inside := min(r, g, b) > -slack && max(r, g, b) < 1+slack
	return RGB{encodeSRGB(r), encodeSRGB(g), encodeSRGB(b)}, inside
}

// fromLChInGamut lowers the chroma until the colour can be shown, keeping
// lightness and hue.
func fromLChInGamut(l, c, hueDeg float64) RGB {
	for ; c > 0; c -= 0.25 {
		if rgb, ok := fromLCh(l, c, hueDeg); ok {
			return rgb
		}
	}
	rgb, _ := fromLCh(l, 0, hueDeg)
	return rgb
}

func encodeSRGB(v float64) uint8 {
	v = min(max(v, 0), 1)
	if v <= 0.0031308 {
		v *= 12.92
	} else {
		v = 1.055*math.Pow(v, 1/2.4) - 0.055
	}
	return uint8(math.Round(255 * v))
}

func decodeSRGB(c uint8) float64 {
	v := float64(c) / 255
	if v <= 0.04045 {
		return v / 12.92
	}
	return math.Pow((v+0.055)/1.055, 2.4)
}

// luminance is the relative luminance Y of a colour (IEC 61966-2-1).
func (c RGB) luminance() float64 {
	return 0.2126*decodeSRGB(c.R) + 0.7152*decodeSRGB(c.G) + 0.0722*decodeSRGB(c.B)
}

// lightness is CIELAB L* (CIE 15:2018).
func (c RGB) lightness() float64 {
	y := c.luminance()
	if y > 216.0/24389 {
		return 116*math.Cbrt(y) - 16
	}
	return y * 24389 / 27
}

// contrast is the contrast ratio of two colours (WCAG 2.2, 1.4.3).
func contrast(a, b RGB) float64 {
	x, y := a.luminance(), b.luminance()
	return (max(x, y) + 0.05) / (min(x, y) + 0.05)
}

// mustHex reads rrggbb of a table of ours.
func mustHex(s string) RGB {
	v, err := strconv.ParseUint(s, 16, 24)
	if err != nil {
		panic("colour table: " + s)
	}
	return RGB{uint8(v >> 16), uint8(v >> 8), uint8(v)}
}
