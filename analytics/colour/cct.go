package colour

import (
	"math"
	"sync"
)

// CCT is a correlated colour temperature with the distance from the Planckian
// locus.
type CCT struct {
	K   float64 // kelvin
	Duv float64 // distance in the CIE 1960 u, v diagram, positive above the locus
}

// secondRadiation is c₂ of Planck's law in m·K, the value of ITS-90 that CIE 15
// uses.
const secondRadiation = 1.4388e-2

// Range of colour temperatures, and how far from the locus one has a meaning
// (CIE 15:2018, 9.7).
const (
	lowestCCT  = 1000
	highestCCT = 100_000
	farthest   = 0.05
)

// Planckian is the chromaticity of a black body at a temperature in kelvin, by
// summation over the 1 nm observer.
func Planckian(kelvin float64) XY {
	var c XYZ
	for i := range observer {
		metres := float64(firstNM+i) * 1e-9
		power := math.Pow(metres*1e9/560, -5) / math.Expm1(secondRadiation/(metres*kelvin))
		c.X += power * observer[i][0]
		c.Y += power * observer[i][1]
		c.Z += power * observer[i][2]
	}
	return c.XY()
}

// uv60 is the CIE 1960 u, v diagram, in which colour temperatures are defined:
// u = u′, v = 2v′/3.
func (p XY) uv60() (u, v float64) {
	q := p.UV()
	return q.U, 2 * q.V / 3
}

// node is a point of the Planckian locus in CIE 1960 u, v.
type node struct{ kelvin, u, v float64 }

func nodeAt(kelvin float64) node {
	u, v := Planckian(kelvin).uv60()
	return node{kelvin, u, v}
}

// planckianTable has the locus in steps of 1 % of the temperature.
var planckianTable = sync.OnceValue(func() (table []node) {
	for t := lowestCCT / 1.01; t < highestCCT*1.03; t *= 1.01 {
		table = append(table, nodeAt(t))
	}
	return table
})

// CCTOf gives the correlated colour temperature and D_uv of p by the combined
// method of Ohno (Leukos 10 (2014) 47, doi 10.1080/15502724.2014.839020): three
// neighbours of a table of the Planckian locus, the triangular solution near the
// locus and the parabolic one away from it. The table is then refined about the
// answer to steps of 0.02 %, which leaves errors under 0.1 K below 20,000 K.
//
// The error wraps ErrNotMeaningful more than 0.05 from the locus, or below 1000 K
// or above 100,000 K, and analytics.ErrInvalid where p is no chromaticity.
func CCTOf(p XY) (CCT, error) {
	if !p.sound() || p.X+p.Y > 1+outsideLocus {
		return CCT{}, invalid("x %g, y %g is no chromaticity: y lies above 0, x not below 0, and they add up to at most 1", p.X, p.Y)
	}
	u, v := p.uv60()
	table := planckianTable()
	nearest := 0
	for i, n := range table {
		if math.Hypot(u-n.u, v-n.v) < math.Hypot(u-table[nearest].u, v-table[nearest].v) {
			nearest = i
		}
	}
	if away := math.Hypot(u-table[nearest].u, v-table[nearest].v); away > 2*farthest {
		return CCT{}, farFromLocus(p, away)
	}
	if nearest == 0 || nearest == len(table)-1 {
		return CCT{}, notMeaningful("x %.4f, y %.4f has a colour temperature outside %d K to %d K", p.X, p.Y, lowestCCT, highestCCT)
	}
	c := threePoints(u, v, table[nearest-1], table[nearest], table[nearest+1])
	for _, step := range []float64{0.001, 0.0002} {
		c = threePoints(u, v, nodeAt(c.K*(1-step)), nodeAt(c.K), nodeAt(c.K*(1+step)))
	}
	switch {
	case math.Abs(c.Duv) > farthest:
		return CCT{}, farFromLocus(p, math.Abs(c.Duv))
	case !(c.K >= lowestCCT && c.K <= highestCCT):
		return CCT{}, notMeaningful("x %.4f, y %.4f has a colour temperature outside %d K to %d K", p.X, p.Y, lowestCCT, highestCCT)
	}
	return c, nil
}

func farFromLocus(p XY, away float64) error {
	return notMeaningful("x %.4f, y %.4f is %.3f from the Planckian locus in u, v, more than %g: it has no colour temperature", p.X, p.Y, away, farthest)
}

// threePoints is the combined solution from three points of the locus.
func threePoints(u, v float64, a, m, b node) CCT {
	da, dm, db := math.Hypot(u-a.u, v-a.v), math.Hypot(u-m.u, v-m.v), math.Hypot(u-b.u, v-b.v)
	length := math.Hypot(b.u-a.u, b.v-a.v)
	along := (da*da - db*db + length*length) / (2 * length)
	kelvin := a.kelvin + (b.kelvin-a.kelvin)*along/length
	footV := a.v + (b.v-a.v)*along/length
	duv := math.Copysign(math.Sqrt(max(0, da*da-along*along)), v-footV)
	if math.Abs(duv) < 0.002 {
		return CCT{kelvin, duv}
	}
	// The parabola through the three distances; its lowest point is the answer.
	x := (b.kelvin - m.kelvin) * (a.kelvin - b.kelvin) * (m.kelvin - a.kelvin)
	p := (a.kelvin*(db-dm) + m.kelvin*(da-db) + b.kelvin*(dm-da)) / x
	q := -(a.kelvin*a.kelvin*(db-dm) + m.kelvin*m.kelvin*(da-db) + b.kelvin*b.kelvin*(dm-da)) / x
	r := -(da*(b.kelvin-m.kelvin)*m.kelvin*b.kelvin + dm*(a.kelvin-b.kelvin)*a.kelvin*b.kelvin + db*(m.kelvin-a.kelvin)*a.kelvin*m.kelvin) / x
	kelvin = -q / (2 * p)
	return CCT{kelvin, math.Copysign(p*kelvin*kelvin+q*kelvin+r, v-footV)}
}

// XYFromCCT is the chromaticity of a colour temperature and D_uv: from the locus
// along its normal in CIE 1960 u, v. Errors wrap analytics.ErrInvalid outside
// 1000 K to 100,000 K and |D_uv| ≤ 0.05, and where that leads out of all colours, as
// it does above low temperatures.
func XYFromCCT(c CCT) (XY, error) {
	if !(c.K >= lowestCCT && c.K <= highestCCT) || !(math.Abs(c.Duv) <= farthest) {
		return XY{}, invalid("%g K with D_uv %g: colour temperatures lie between %d K and %d K, D_uv within ±%g", c.K, c.Duv, lowestCCT, highestCCT, farthest)
	}
	const step = 1e-4
	a, m, b := nodeAt(c.K*(1-step)), nodeAt(c.K), nodeAt(c.K*(1+step))
	du, dv := a.u-b.u, a.v-b.v // towards lower temperatures: u grows, so that the left-hand normal points up
	length := math.Hypot(du, dv)
	u, v := m.u-c.Duv*dv/length, m.v+c.Duv*du/length
	p := UV{u, 1.5 * v}.XY()
	if !p.sound() || p.X+p.Y > 1 {
		return XY{}, invalid("%g K with D_uv %g lies outside the spectral locus: no light has this colour temperature so far from the Planckian locus", c.K, c.Duv)
	}
	return p, nil
}
