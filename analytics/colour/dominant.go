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

// newFan builds the outline. At the ends of the spectrum the tabulated locus
// halts and runs back by a few 10⁻⁵; wavelengths there that lead no farther
// around white are left out.
func newFan(white XY) (*fan, error) {
	if !(white.X > 0 && white.Y > 0 && white.X+white.Y < 1) {
		return nil, invalid("white (%g, %g) is no chromaticity: x and y lie above 0 and add up to less than 1", white.X, white.Y)
	}
	f := &fan{white: white}
	type vertex struct{ x, y, nm, sum float64 }
	vertices := make([]vertex, 0, len(observer))
	for i := range observer {
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

func cross(ax, ay, bx, by float64) float64 { return ax*by - ay*bx }

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

// DominantOf gives the dominant wavelength and excitation purity of p against a
// white: the wavelength at which the line from white through p meets the spectral
// locus; where it meets the purple line, the complementary wavelength, at which
// the line meets the locus on the other side, with the purity measured to the
// purple line (CIE 15:2018, 9.4 and 9.5). Purity within rounding above 1 is 1.
//
// Errors wrap analytics.ErrInvalid: p is no chromaticity or lies outside the
// locus by more than 0.005; the white lies on or outside the locus. They wrap
// ErrNotMeaningful where p is within 0.001 of white.
func DominantOf(p, white XY) (Dominant, error) {
	switch {
	case math.IsNaN(p.X+p.Y) || math.IsInf(p.X+p.Y, 0):
		return Dominant{}, invalid("x %g, y %g is not finite", p.X, p.Y)
	case p.Y <= 0 || p.X < 0 || p.X+p.Y > 1:
		return Dominant{}, invalid("x %g, y %g is no chromaticity: y lies above 0, x not below 0, and they add up to at most 1", p.X, p.Y)
	}
	f, err := newFan(white)
	if err != nil {
		return Dominant{}, err
	}
	return f.dominant(p)
}

func (f *fan) dominant(p XY) (Dominant, error) {
	dx, dy := p.X-f.white.X, p.Y-f.white.Y
	away := math.Hypot(dx, dy)
	if away < nearWhite {
		return Dominant{}, notMeaningful("x %.4f, y %.4f is %.4f from white (%.4f, %.4f), too near for a dominant wavelength", p.X, p.Y, away, f.white.X, f.white.Y)
	}
	c := &f.chords[f.find(dx, dy)]
	d := Dominant{ExcitationPurity: c.purity(dx, dy)}
	d.Boundary = XY{f.white.X + dx/d.ExcitationPurity, f.white.Y + dy/d.ExcitationPurity}
	if beyond := away - away/d.ExcitationPurity; beyond > outsideLocus {
		return Dominant{}, invalid("x %.4f, y %.4f lies %.4f outside the spectral locus: no light has this chromaticity; check the columns and the colorimeter", p.X, p.Y, beyond)
	}
	d.ExcitationPurity = min(1, d.ExcitationPurity)
	if c == &f.chords[len(f.chords)-1] {
		d.Complementary = true
		c, dx, dy = &f.chords[f.find(-dx, -dy)], -dx, -dy
	}
	d.WavelengthNM = c.wavelength(dx, dy)
	return d, nil
}
