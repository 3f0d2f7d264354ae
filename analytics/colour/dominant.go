package colour

import "math"

// Dominant is the dominant wavelength of a chromaticity with its excitation
// purity, against a white.
type Dominant struct {
	WavelengthNM     float64 // of the dominant, or of the complementary light
	Complementary    bool    // the chromaticity lies towards the purple line: WavelengthNM is complementary
	ExcitationPurity float64 // distance from white over that of the boundary, 0 to 1
	Boundary         XY      // where the line from white through the chromaticity meets the locus or the purple line
}

// Limits of meaning, in x, y. Both are a few times what good instruments repeat
// to (common practice).
const (
	nearWhite    = 0.001 // closer to white the direction is noise
	outsideLocus = 0.005 // farther outside the locus the reading is wrong, not noisy
)

// reddestNM is where the locus ends: all light from here on has one chromaticity,
// within 10⁻⁷. Beyond, the table only goes to and fro by its rounding.
const reddestNM = 699

// nearEnd is how near the purple line may be met to an end of the locus, in x, y,
// and still be that end: the last digit of printed chromaticities. Without it deep
// red would turn complementary by rounding.
const nearEnd = 0.0001

// chord is a part of the spectral locus or the purple line, seen from white.
type chord struct {
	ax, ay, bx, by float64 // from white to its ends
	nm, span       float64 // wavelength at a, and how much it grows to b
	perCross       float64 // 1 / (a × b)
	share          float64 // (x̄ + ȳ + z̄) at a over that at b: how chord and wavelength keep step
}

// fan is the outline of all colours seen from a white: the chords of the locus in
// the order of wavelength, clockwise, then the purple line.
type fan struct {
	white  XY
	chords []chord // the last is the purple line
}

// newFan builds the outline, from 360 nm to 699 nm. Where the tabulated locus halts
// or runs back by its rounding, wavelengths that lead no farther around white are
// left out.
func newFan(white XY) (*fan, error) {
	if !(white.X > 0 && white.Y > 0 && white.X+white.Y < 1) {
		return nil, invalid("white (%g, %g) is no chromaticity: x and y lie above 0 and add up to less than 1", white.X, white.Y)
	}
	f := &fan{white: white}
	type vertex struct{ x, y, nm, sum float64 }
	vertices := make([]vertex, 0, reddestNM-firstNM+1)
	for i := range observer[:reddestNM-firstNM+1] {
		sum := observer[i][0] + observer[i][1] + observer[i][2]
		v := vertex{observer[i][0]/sum - white.X, observer[i][1]/sum - white.Y, float64(firstNM + i), sum}
		if n := len(vertices); n > 0 && cross(vertices[n-1].x, vertices[n-1].y, v.x, v.y) >= 0 {
			continue
		}
		vertices = append(vertices, v)
	}
	for i := range vertices {
		a, b := vertices[i], vertices[(i+1)%len(vertices)]
		c := chord{a.x, a.y, b.x, b.y, a.nm, b.nm - a.nm, 1 / cross(a.x, a.y, b.x, b.y), a.sum / b.sum}
		if distance := math.Abs(cross(a.x, a.y, b.x, b.y)) / math.Hypot(b.x-a.x, b.y-a.y); c.perCross >= 0 || distance < nearWhite {
			return nil, invalid("white (%g, %g) lies on or outside the spectral locus; give a white inside it, such as E (0.3333, 0.3333)", white.X, white.Y)
		}
		f.chords = append(f.chords, c)
	}
	return f, nil
}

// cross is a × b. The conversions forbid fused operations, whose one rounding less
// would let a ray through a corner miss both of its chords.
func cross(ax, ay, bx, by float64) float64 { return float64(ax*by) - float64(ay*bx) }

// meets reports whether the ray from white along d passes the chord.
func (c *chord) meets(dx, dy float64) bool {
	return cross(c.ax, c.ay, dx, dy) <= 0 && cross(dx, dy, c.bx, c.by) < 0
}

// purity is the length of d over that of its extension to the chord.
func (c *chord) purity(dx, dy float64) float64 {
	return (cross(dx, dy, c.bx, c.by) - cross(dx, dy, c.ax, c.ay)) * c.perCross
}

// wavelength is where the ray along d meets the chord: with the observer linear
// between its points a part s of the chord is a part s·σ/(1 − s(1 − σ)) of the
// wavelength, σ being share.
func (c *chord) wavelength(dx, dy float64) float64 {
	a, b := cross(c.ax, c.ay, dx, dy), cross(c.bx, c.by, dx, dy)
	return c.nm + c.span*a*c.share/(a*c.share-b)
}

// find looks for the chord that the ray along d meets.
func (f *fan) find(dx, dy float64) int {
	for i := range f.chords {
		if f.chords[i].meets(dx, dy) {
			return i
		}
	}
	return len(f.chords) - 1
}

// endMet gives the wavelength of the end of the locus that a ray along d, which
// meets the purple line, passes within nearEnd of; 0 when it passes neither.
func (f *fan) endMet(dx, dy, purity float64) float64 {
	purple := &f.chords[len(f.chords)-1]
	x, y := dx/purity, dy/purity
	near := func(ex, ey float64) bool { return (x-ex)*(x-ex)+(y-ey)*(y-ey) <= nearEnd*nearEnd }
	switch {
	case near(purple.ax, purple.ay):
		return purple.nm
	case near(purple.bx, purple.by):
		return purple.nm + purple.span
	}
	return 0
}

// sound reports whether p can be a reading of light: finite, x not below 0 and y
// above it. Whether it is inside the locus is a question of its own.
func (p XY) sound() bool { return p.X >= 0 && p.Y > 0 && !math.IsInf(p.X+p.Y, 0) }

// DominantOf gives the dominant wavelength and excitation purity of p against a
// white: the wavelength at which the line from white through p meets the spectral
// locus; where it meets the purple line, the complementary wavelength, at which
// the line meets the locus on the other side, with the purity measured to the
// purple line (CIE 15:2018, 9.4 and 9.5). Purity within rounding above 1 is 1.
// Light from 699 nm on has 699 nm; the purple line within 0.0001 of an end of the
// locus counts as that end.
//
// Errors wrap analytics.ErrInvalid: p is no chromaticity or lies outside the
// locus by more than 0.005; the white lies on or outside the locus. They wrap
// ErrNotMeaningful where p is within 0.001 of white.
func DominantOf(p, white XY) (Dominant, error) {
	f, err := newFan(white)
	if err != nil {
		return Dominant{}, err
	}
	return f.dominant(p)
}

func (f *fan) dominant(p XY) (Dominant, error) {
	switch {
	case math.IsNaN(p.X+p.Y) || math.IsInf(p.X+p.Y, 0):
		return Dominant{}, invalid("x %g, y %g is not finite", p.X, p.Y)
	case !p.sound():
		return Dominant{}, invalid("x %g, y %g is no chromaticity: y lies above 0 and x not below 0", p.X, p.Y)
	}
	dx, dy := p.X-f.white.X, p.Y-f.white.Y
	away := math.Hypot(dx, dy)
	if away < nearWhite {
		return Dominant{}, notMeaningful("x %.4f, y %.4f is %.4f from white (%.4f, %.4f), too near for a dominant wavelength", p.X, p.Y, away, f.white.X, f.white.Y)
	}
	c := &f.chords[f.find(dx, dy)]
	purity := c.purity(dx, dy)
	d := Dominant{ExcitationPurity: min(1, purity), Boundary: XY{f.white.X + dx/purity, f.white.Y + dy/purity}}
	if beyond := away - away/purity; beyond > outsideLocus {
		return Dominant{}, invalid("x %.4f, y %.4f lies %.4f outside the spectral locus: no light has this chromaticity; check the columns and the colorimeter", p.X, p.Y, beyond)
	}
	if c != &f.chords[len(f.chords)-1] {
		d.WavelengthNM = c.wavelength(dx, dy)
	} else if d.WavelengthNM = f.endMet(dx, dy, purity); d.WavelengthNM == 0 {
		d.Complementary = true
		d.WavelengthNM = f.chords[f.find(-dx, -dy)].wavelength(-dx, -dy)
	}
	return d, nil
}
