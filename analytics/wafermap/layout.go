package wafermap

import (
	"fmt"
	"math"

	"epitally/analytics"
)

// Layout is the die grid of a product on its wafer.
type Layout struct {
	Name            string  `json:"name"`
	WaferDiameterMM float64 `json:"wafer_diameter_mm"`
	DiePitchXMM     float64 `json:"die_pitch_x_mm"`
	DiePitchYMM     float64 `json:"die_pitch_y_mm"`
	EdgeExclusionMM float64 `json:"edge_exclusion_mm"` // ring inside the edge where no die is counted
	Mark            string  `json:"mark"`              // "flat", "notch" or "none"
	MarkAngleDeg    float64 `json:"mark_angle_deg"`    // direction of the mark from the centre; 0 = right, 90 = up, 270 = down
	XAxis           string  `json:"x_axis"`            // where die x grows: "right" or "left"
	YAxis           string  `json:"y_axis"`            // where die y grows: "up" or "down"
	CentreX         float64 `json:"centre_x"`          // die coordinates (may be fractional) of the wafer's centre
	CentreY         float64 `json:"centre_y"`
	Assumed         bool    `json:"assumed"` // true: guessed from the measurement, no product layout is known
}

// Limits of a layout. Die coordinates are 16-bit, so a centre lies among them;
// an assumed layout may count in dies instead of millimetres, which takes more
// than any wafer's diameter.
const (
	minPitchMM       = 0.01
	maxDiameterMM    = 500
	maxAssumedLength = 1e6
	maxCentre        = 1 << 15
)

// Validate returns an analytics.ErrInvalid error naming the field and the rule.
func (l *Layout) Validate() error {
	bad := func(field string, rule string, args ...any) error {
		return fmt.Errorf("layout %q: %s: %s: %w", l.Name, field, fmt.Sprintf(rule, args...), analytics.ErrInvalid)
	}
	longest := float64(maxDiameterMM)
	if l.Assumed {
		longest = maxAssumedLength
	}
	switch {
	case !(l.WaferDiameterMM > 0 && l.WaferDiameterMM <= longest):
		return bad("wafer_diameter_mm", "%g is not between 0 and %g", l.WaferDiameterMM, longest)
	case !(l.DiePitchXMM > minPitchMM && l.DiePitchXMM <= l.WaferDiameterMM):
		return bad("die_pitch_x_mm", "%g is not between 0.01 and the diameter", l.DiePitchXMM)
	case !(l.DiePitchYMM > minPitchMM && l.DiePitchYMM <= l.WaferDiameterMM):
		return bad("die_pitch_y_mm", "%g is not between 0.01 and the diameter", l.DiePitchYMM)
	case !(l.EdgeExclusionMM >= 0 && l.EdgeExclusionMM < l.WaferDiameterMM/2):
		return bad("edge_exclusion_mm", "%g is not between 0 and the radius", l.EdgeExclusionMM)
	case l.Mark != "flat" && l.Mark != "notch" && l.Mark != "none":
		return bad("mark", "%q is not flat, notch or none", l.Mark)
	case l.XAxis != "right" && l.XAxis != "left":
		return bad("x_axis", "%q is not right or left", l.XAxis)
	case l.YAxis != "up" && l.YAxis != "down":
		return bad("y_axis", "%q is not up or down", l.YAxis)
	case !(math.Abs(l.CentreX) <= maxCentre && math.Abs(l.CentreY) <= maxCentre):
		return bad("centre_x, centre_y", "(%g, %g) is not among die coordinates, which lie within ±%d", l.CentreX, l.CentreY, maxCentre)
	case !(math.Abs(l.MarkAngleDeg) <= 360):
		return bad("mark_angle_deg", "%g is not between -360 and 360", l.MarkAngleDeg)
	}
	return nil
}

// PositionMM is the centre of die (x, y) in mm from the wafer's centre, x to
// the right and y up.
func (l *Layout) PositionMM(x, y int) (xMM, yMM float64) {
	xMM, yMM = (float64(x)-l.CentreX)*l.DiePitchXMM, (float64(y)-l.CentreY)*l.DiePitchYMM
	if l.XAxis == "left" {
		xMM = -xMM
	}
	if l.YAxis == "down" {
		yMM = -yMM
	}
	return xMM, yMM
}

// RadiusMM is the distance of the centre of die (x, y) from the wafer's centre.
func (l *Layout) RadiusMM(x, y int) float64 {
	xMM, yMM := l.PositionMM(x, y)
	return math.Hypot(xMM, yMM)
}

// Inside reports whether die (x, y) counts: all four of its corners lie within
// the circle that the edge exclusion leaves (radius = diameter/2 − exclusion).
// A flat is not cut out.
func (l *Layout) Inside(x, y int) bool {
	xMM, yMM := l.PositionMM(x, y)
	r := l.WaferDiameterMM/2 - l.EdgeExclusionMM
	far := math.Hypot(math.Abs(xMM)+l.DiePitchXMM/2, math.Abs(yMM)+l.DiePitchYMM/2)
	return far <= r*(1+1e-12)
}

// OnWafer reports whether the centre of die (x, y) lies on the wafer at all.
func (l *Layout) OnWafer(x, y int) bool {
	return l.RadiusMM(x, y) <= l.WaferDiameterMM/2*(1+1e-12)
}

// Counted says which dies of a grid count for a tally, nil for all: those inside
// the edge exclusion, unless the layout is only assumed (or nil, or not valid).
func (l *Layout) Counted(g *Grid) []bool {
	if l == nil || l.Assumed || l.Validate() != nil {
		return nil
	}
	include := make([]bool, g.Len())
	var first, last int
	for i := range include {
		if i == 0 || g.Y[i] != g.Y[i-1] {
			first, last = l.Span(int(g.Y[i]))
		}
		x := int(g.X[i])
		include[i] = first <= x && x <= last
	}
	return include
}
