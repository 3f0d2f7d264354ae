package colour

import "math"

// DominantTable gives dominant wavelength and purity of many dies. It computes
// what DominantOf does, and finds the chord of the locus by the direction from
// white instead of by search. It does not change and may be shared.
type DominantTable struct {
	fan   *fan
	first [directions + 1]int32 // chord that the direction's first ray meets
}

// directions is how many equal parts the turn about white is divided into.
const directions = 1 << 13

// NewDominantTable makes the table of a white; errors are those of DominantOf
// about the white.
func NewDominantTable(white XY) (*DominantTable, error) {
	f, err := newFan(white)
	if err != nil {
		return nil, err
	}
	t := &DominantTable{fan: f}
	for i := range t.first {
		dx, dy := ray(4 * float64(i) / directions)
		t.first[i] = int32(f.find(dx, dy))
	}
	return t, nil
}

// turnOf is a direction as a number from 0 to 4 that grows clockwise from (1, 0):
// the way around a square standing on its corner, which needs no arc tangent.
func turnOf(dx, dy float64) float64 {
	r := dy / (math.Abs(dx) + math.Abs(dy))
	if dx < 0 {
		return 2 + r
	}
	if dy > 0 {
		return 4 - r
	}
	return -r
}

// ray is the direction of a turn.
func ray(turn float64) (dx, dy float64) {
	switch {
	case turn < 1:
		return 1 - turn, -turn
	case turn < 3:
		return math.Abs(turn-2) - 1, turn - 2
	}
	return turn - 3, 4 - turn
}

// chordOf finds the chord that the ray along d meets.
func (t *DominantTable) chordOf(dx, dy float64) int {
	part := min(int(turnOf(dx, dy)*(directions/4)), directions-1)
	i, n := int(t.first[part]), len(t.fan.chords)
	for range n {
		if t.fan.chords[i].meets(dx, dy) {
			return i
		}
		if i++; i == n {
			i = 0
		}
	}
	return n - 1
}

// farAway is farther from any white than a chromaticity can be.
const farAway = 2

// Wavelengths writes the dominant wavelength in nm of every die to dst, a
// complementary one negative; NaN where DominantOf gives an error: x or y missing
// or no chromaticity, within 0.001 of white, or outside the locus by more than
// 0.005. Purities, unless nil, takes the excitation purity. All slices are as long
// as dst.
func (t *DominantTable) Wavelengths(dst, purities, x, y []float64) {
	white, chords := t.fan.white, t.fan.chords
	purple := len(chords) - 1
	x, y = x[:len(dst)], y[:len(dst)]
	for i := range dst {
		dx, dy := x[i]-white.X, y[i]-white.Y
		square := dx*dx + dy*dy
		wavelength, purity := math.NaN(), math.NaN()
		if square >= nearWhite*nearWhite && square < farAway*farAway && x[i] >= 0 && y[i] > 0 { // false for NaN
			c := t.chordOf(dx, dy)
			full := chords[c].purity(dx, dy)
			beyond := max(0, 1-1/full)
			switch {
			case beyond*beyond*square > outsideLocus*outsideLocus:
			case c != purple:
				wavelength, purity = chords[c].wavelength(dx, dy), min(1, full)
			default:
				wavelength, purity = t.acrossPurple(dx, dy, full), min(1, full)
			}
		}
		dst[i] = wavelength
		if purities != nil {
			purities[i] = purity
		}
	}
}

// acrossPurple is the wavelength for a ray that meets the purple line.
func (t *DominantTable) acrossPurple(dx, dy, purity float64) float64 {
	if end := t.fan.endMet(dx, dy, purity); end != 0 {
		return end
	}
	return -t.fan.chords[t.chordOf(-dx, -dy)].wavelength(-dx, -dy)
}
