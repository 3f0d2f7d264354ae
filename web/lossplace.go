package web

import (
	"math"

	"epitally/analytics/wafermap"
)

// Shares that make a ring a place worth naming: it holds most of the lost dies
// though it is the smaller part of the wafer.
const (
	mostOfLoss   = 0.6
	partOfWafer  = 0.45
	fewestToTell = 20
)

// LossPlace says where the dies with a code lie: "in the outer 12 mm" for the
// narrowest ring at the edge, or "within 9 mm of the centre" for the smallest
// disc about it, of whole millimetres, that holds 60 % of them and less than 45 % of
// all dies. "" when there is none, or under 20 such dies. codes has one entry per
// die of the grid.
func LossPlace(g *wafermap.Grid, l *wafermap.Layout, codes []uint16, code uint16) string {
	if l == nil || len(codes) != g.Len() {
		return ""
	}
	rings := int(math.Ceil(l.WaferDiameterMM/2)) + 1
	lost, all := make([]int, rings), make([]int, rings) // by whole mm from the edge
	total := 0
	for i := range codes {
		depth := l.WaferDiameterMM/2 - l.RadiusMM(int(g.X[i]), int(g.Y[i]))
		ring := min(max(int(depth), 0), rings-1)
		all[ring]++
		if codes[i] == code {
			lost[ring]++
			total++
		}
	}
	if total < fewestToTell {
		return ""
	}
	if w := narrowest(lost, all, total, g.Len()); w > 0 {
		return "in the outer " + With(float64(w), 0, lengthUnit(l))
	}
	reverse(lost)
	reverse(all)
	// The innermost ring may reach beyond the centre by part of a millimetre.
	if w := narrowest(lost, all, total, g.Len()); w > 1 {
		return "within " + With(float64(w-1), 0, lengthUnit(l)) + " of the centre"
	}
	return ""
}

func narrowest(lost, all []int, lostTotal, allTotal int) int {
	var l, a int
	for i := range lost {
		l, a = l+lost[i], a+all[i]
		if float64(l) >= mostOfLoss*float64(lostTotal) {
			if float64(a) < partOfWafer*float64(allTotal) {
				return i + 1
			}
			return 0
		}
	}
	return 0
}

func reverse(s []int) {
	for i, j := 0, len(s)-1; i < j; i, j = i+1, j-1 {
		s[i], s[j] = s[j], s[i]
	}
}
