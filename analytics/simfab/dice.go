package simfab

import "math"

// dice is where the dies of a product lie on a wafer, row by row in canonical
// order, with what the growth field needs of the place.
type dice struct {
	radiusMM float64
	rows     []diceRow
	x, y     []int16
	xMM      []float64
	rho2     []float64 // radius over the wafer's radius, squared
	rim      []float64 // e^(−d/2 mm), d the distance to the wafer's round edge
	flat     []float64 // the same to the flat; 0 without one
}

// diceRow is dies that follow each other: those of index first to first+n−1,
// the k-th at xMM + k·stepMM.
type diceRow struct {
	first, n    int
	xMM, stepMM float64
	yMM         float64
}

// rimMM is the decay length of the roll-off at the edge, and unprintedMM the
// margin to the physical edge inside which a die is not whole.
const (
	rimMM       = 2.0
	unprintedMM = 0.4
)

// newDice lists the dies of the layout that exist on the wafer when the print
// is shifted by (dx, dy) mm: dies cut by the flat, or shifted over the edge, do not.
func newDice(p *Product, dx, dy float64) *dice {
	l := &p.Layout
	d := &dice{radiusMM: l.WaferDiameterMM / 2}
	chord := math.Inf(1) // distance of the flat from the centre
	if p.flatMM > 0 {
		chord = math.Sqrt(d.radiusMM*d.radiusMM - p.flatMM*p.flatMM/4)
	}
	reachX, reachY := int(d.radiusMM/l.DiePitchXMM)+1, int(d.radiusMM/l.DiePitchYMM)+1
	for y := int(l.CentreY) - reachY; y <= int(l.CentreY)+reachY; y++ {
		row := diceRow{first: len(d.x)}
		for x := int(l.CentreX) - reachX; x <= int(l.CentreX)+reachX; x++ {
			if !l.Inside(x, y) {
				continue
			}
			xMM, yMM := l.PositionMM(x, y)
			xMM, yMM = xMM+dx, yMM+dy
			far := math.Hypot(math.Abs(xMM)+l.DiePitchXMM/2, math.Abs(yMM)+l.DiePitchYMM/2)
			if far > d.radiusMM-unprintedMM || -yMM+l.DiePitchYMM/2 > chord-unprintedMM {
				continue
			}
			if row.n == 0 {
				row.xMM, row.yMM, row.stepMM = xMM, yMM, l.DiePitchXMM
				if l.XAxis == "left" {
					row.stepMM = -l.DiePitchXMM
				}
			}
			row.n++
			d.add(x, y, xMM, yMM, chord)
		}
		if row.n > 0 {
			d.rows = append(d.rows, row)
		}
	}
	return d
}

func (d *dice) add(x, y int, xMM, yMM, chord float64) {
	r := math.Hypot(xMM, yMM)
	d.x, d.y, d.xMM = append(d.x, int16(x)), append(d.y, int16(y)), append(d.xMM, xMM)
	d.rho2 = append(d.rho2, r*r/(d.radiusMM*d.radiusMM))
	d.rim = append(d.rim, math.Exp(-(d.radiusMM-r)/rimMM))
	d.flat = append(d.flat, math.Exp(-(chord+yMM)/rimMM))
}

// near calls do with the index and the squared distance, mm², of every die
// within reach mm of a place.
func (d *dice) near(xMM, yMM, reach float64, do func(i int, distance2 float64)) {
	for _, row := range d.rows {
		dy := row.yMM - yMM
		if dy < -reach || dy > reach {
			continue
		}
		a, b := (xMM-reach-row.xMM)/row.stepMM, (xMM+reach-row.xMM)/row.stepMM
		lo, hi := max(int(math.Ceil(min(a, b))), 0), min(int(math.Floor(max(a, b))), row.n-1)
		for k := lo; k <= hi; k++ {
			dx := row.xMM + float64(k)*row.stepMM - xMM
			if d2 := dx*dx + dy*dy; d2 <= reach*reach {
				do(row.first+k, d2)
			}
		}
	}
}
