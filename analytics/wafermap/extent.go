package wafermap

import "math"

// Span gives the dies of row y that count, first to last x inclusive, as Inside
// decides; last < first when there is none.
func (l *Layout) Span(y int) (first, last int) {
	_, yMM := l.PositionMM(0, y)
	r := l.WaferDiameterMM/2 - l.EdgeExclusionMM
	h := math.Abs(yMM) + l.DiePitchYMM/2
	half := math.Sqrt(max(0, r*r-h*h)) // half the chord at the row's far side
	reach := (half - l.DiePitchXMM/2) / l.DiePitchXMM
	if h > r*(1+1e-12) || reach < -1 || math.IsNaN(reach+l.CentreX) {
		return 0, -1
	}
	// The estimate is right to rounding; Inside settles the die at either end.
	first, last = int(math.Ceil(l.CentreX-reach))-1, int(math.Floor(l.CentreX+reach))+1
	for first <= last && !l.Inside(first, y) {
		first++
	}
	for first <= last && !l.Inside(last, y) {
		last--
	}
	return first, last
}

// Dies counts the dies of the whole lattice that lie Inside, measured or not. It
// costs one chord per row, not one test per die.
func (l *Layout) Dies() int {
	if l.Validate() != nil {
		return 0
	}
	reach := min(l.WaferDiameterMM/2/l.DiePitchYMM, 4*maxCentre) // bounds an absurd assumed layout
	total := 0
	for y := int(math.Floor(l.CentreY - reach)); y <= int(math.Ceil(l.CentreY+reach)); y++ {
		if first, last := l.Span(y); last >= first {
			total += last - first + 1
		}
	}
	return total
}

// Names of assumed layouts: they say what the millimetres are worth.
const (
	AssumedFromSource = "assumed from the source"  // pitch and diameter as the source states them
	AssumedFromExtent = "assumed from the dies"    // one of pitch and diameter stated, the other from the extent of the dies
	AssumedUnits      = "assumed, one die = 1 × 1" // neither stated: lengths are in dies, not mm
)

// AssumeLayout makes a layout for a measurement whose product is not known. What
// hint (may be nil) states is kept: zero and empty fields are "not stated", and a
// centre counts as stated when it is not (0, 0) and lies among the dies. What is
// not stated comes from the grid: the centre of its extent, a circle about its
// outermost die corners, and 1 × 1 "die units" when neither pitch nor diameter is
// known. A stated diameter that leaves the centre of a die off the wafer gives
// way to that circle. Assumed is true in the result.
func AssumeLayout(grid *Grid, hint *Layout) Layout {
	l := Layout{Mark: "none", XAxis: "right", YAxis: "up"}
	if hint != nil {
		l = *hint
	}
	l.Assumed = true
	assumeAxes(&l)
	xMin, yMin, xMax, yMax := grid.Bounds()
	stated := l.CentreX != 0 || l.CentreY != 0
	if !stated || !between(l.CentreX, xMin, xMax) || !between(l.CentreY, yMin, yMax) {
		l.CentreX, l.CentreY = float64(xMin+xMax)/2, float64(yMin+yMax)/2
	}
	assumeLengths(&l, grid)
	if !(l.EdgeExclusionMM > 0 && l.EdgeExclusionMM < l.WaferDiameterMM/2) {
		l.EdgeExclusionMM = 0
	}
	return l
}

func between(v float64, low, high int) bool { return v >= float64(low)-0.5 && v <= float64(high)+0.5 }

func assumeAxes(l *Layout) {
	if l.Mark != "flat" && l.Mark != "notch" {
		l.Mark = "none"
	}
	if l.XAxis != "left" {
		l.XAxis = "right"
	}
	if l.YAxis != "down" {
		l.YAxis = "up"
	}
	if math.IsNaN(l.MarkAngleDeg) || math.IsInf(l.MarkAngleDeg, 0) {
		l.MarkAngleDeg = 0
	}
}

// assumeLengths settles pitch and diameter.
func assumeLengths(l *Layout, grid *Grid) {
	if !(l.DiePitchXMM > minPitchMM && l.DiePitchXMM <= maxDiameterMM) {
		l.DiePitchXMM = 0
	}
	if !(l.DiePitchYMM > minPitchMM && l.DiePitchYMM <= maxDiameterMM) {
		l.DiePitchYMM = 0
	}
	// One pitch stated alone is taken for both.
	l.DiePitchXMM, l.DiePitchYMM = orElse(l.DiePitchXMM, l.DiePitchYMM), orElse(l.DiePitchYMM, l.DiePitchXMM)
	havePitch := l.DiePitchXMM > 0
	if !havePitch {
		l.DiePitchXMM, l.DiePitchYMM = 1, 1
	}
	corner, centre := farthest(l, grid)
	haveDiameter := l.WaferDiameterMM > 0 && l.WaferDiameterMM <= maxDiameterMM
	switch {
	case havePitch && haveDiameter && centre <= l.WaferDiameterMM/2:
		l.Name = AssumedFromSource
	case havePitch:
		l.Name, l.WaferDiameterMM = AssumedFromExtent, 2*corner
	case haveDiameter && l.WaferDiameterMM/(2*corner) > minPitchMM:
		l.Name = AssumedFromExtent
		l.DiePitchXMM = l.WaferDiameterMM / (2 * corner)
		l.DiePitchYMM = l.DiePitchXMM
	default:
		l.Name, l.WaferDiameterMM = AssumedUnits, 2*corner
	}
}

func orElse(v, other float64) float64 {
	if v > 0 {
		return v
	}
	return other
}

// farthest is the distance from the wafer's centre to the farthest die corner
// and to the farthest die centre, in units of the pitch given. An empty grid
// counts as one die at the centre.
func farthest(l *Layout, grid *Grid) (corner, centre float64) {
	corner = math.Hypot(l.DiePitchXMM/2, l.DiePitchYMM/2)
	for i := range grid.X {
		// Only the ends of a row can be farthest.
		if i > 0 && i+1 < len(grid.X) && grid.Y[i-1] == grid.Y[i] && grid.Y[i+1] == grid.Y[i] {
			continue
		}
		xMM, yMM := l.PositionMM(int(grid.X[i]), int(grid.Y[i]))
		xMM, yMM = math.Abs(xMM), math.Abs(yMM)
		centre = max(centre, math.Hypot(xMM, yMM))
		corner = max(corner, math.Hypot(xMM+l.DiePitchXMM/2, yMM+l.DiePitchYMM/2))
	}
	return corner, centre
}
