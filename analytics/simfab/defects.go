package simfab

import (
	"math"
	"math/rand/v2"
)

// damage is what befell one wafer, beside its growth.
type damage struct {
	hazard              []float32 // per die: chance that a particle or scratch spoils it
	absent              []bool    // per die: not there, or not reached by the prober
	clusters, scratches int
	chipped, strip      bool
}

// newDamage draws particles (clusters of spoilt dies), scratches, a broken edge
// and what the prober leaves out. The random draws do not depend on the layout.
func newDamage(r *rand.Rand, d *dice, p *Product) damage {
	dm := damage{hazard: make([]float32, len(d.x)), absent: make([]bool, len(d.x))}
	expected := 4.0
	if r.Float64() < 0.05 { // a dirty wafer
		expected = 14
	}
	dm.clusters = poisson(r, expected)
	for range dm.clusters {
		x, y := inDisk(r, d.radiusMM)
		dm.strike(d, x, y, 0.7+1.6*r.Float64(), 0.3+0.5*r.Float64())
	}
	if r.Float64() < 0.22 {
		dm.scratches = 1
		dm.scratch(r, d)
	}
	if dm.chipped = r.Float64() < 0.04; dm.chipped {
		angle, size := 2*math.Pi*r.Float64(), 4+5*r.Float64()
		d.near(d.radiusMM*math.Cos(angle), d.radiusMM*math.Sin(angle), size, func(i int, _ float64) { dm.absent[i] = true })
	}
	if dm.strip = r.Float64() < 0.015; dm.strip { // the prober was stopped early
		from := d.rows[len(d.rows)*(80+r.IntN(15))/100].first
		for i := from; i < len(dm.absent); i++ {
			dm.absent[i] = true
		}
	}
	// Five process-control sites stand in place of dies.
	reach := 0.6 * max(p.Layout.DiePitchXMM, p.Layout.DiePitchYMM)
	for _, s := range [][2]float64{{0, 0}, {0.5, 0}, {-0.5, 0}, {0, 0.5}, {0, -0.5}} {
		d.near(s[0]*d.radiusMM, s[1]*d.radiusMM, reach, func(i int, _ float64) { dm.absent[i] = true })
	}
	return dm
}

// strike raises the hazard around a place: a Gaussian of the given width and height.
func (dm *damage) strike(d *dice, xMM, yMM, sigmaMM, height float64) {
	d.near(xMM, yMM, 3*sigmaMM, func(i int, d2 float64) {
		h := float32(height * math.Exp(-d2/(2*sigmaMM*sigmaMM)))
		dm.hazard[i] = max(dm.hazard[i], h)
	})
}

// scratch lays an arc over the wafer.
func (dm *damage) scratch(r *rand.Rand, d *dice) {
	x, y := inDisk(r, d.radiusMM)
	heading, length, curvature := 2*math.Pi*r.Float64(), 15+50*r.Float64(), 0.03*r.NormFloat64()
	const step = 0.3
	for s := 0.0; s < length; s += step {
		d.near(x, y, 0.5, func(i int, _ float64) { dm.hazard[i] = max(dm.hazard[i], 0.75) })
		x, y = x+step*math.Cos(heading), y+step*math.Sin(heading)
		heading += curvature * step
	}
}

// inDisk is a place on a wafer, evenly spread.
func inDisk(r *rand.Rand, radiusMM float64) (x, y float64) {
	radius, angle := radiusMM*math.Sqrt(r.Float64()), 2*math.Pi*r.Float64()
	return radius * math.Cos(angle), radius * math.Sin(angle)
}

// poisson draws a count by multiplying uniform numbers (Knuth, The Art of
// Computer Programming, vol. 2, 3.4.1 F); mean up to about 100.
func poisson(r *rand.Rand, mean float64) int {
	limit, product, n := math.Exp(-mean), r.Float64(), 0
	for product > limit {
		product *= r.Float64()
		n++
	}
	return n
}

// fate is what a die turned out to be.
type fate uint8

const (
	whole fate = iota
	open
	short
	leaky
)

// draw decides a die's fate. Edge dies suffer more: rim is e^(−d/2 mm).
func (dm *damage) draw(r *rand.Rand, i int, rim float64) fate {
	h := float64(dm.hazard[i])
	u := r.Float64()
	if u -= 0.002 + 0.05*rim + 0.45*h; u < 0 {
		return open
	}
	if u -= 0.003 + 0.04*rim + 0.25*h; u < 0 {
		return short
	}
	if u -= 0.02 + 0.15*rim + 0.2*h; u < 0 {
		return leaky
	}
	return whole
}
