package web

import (
	"math"

	"epitally/analytics/binning"
)

const cannedDocument = `specification: harbour-white
title: Harbour white, general lighting
kind: probe
uncertainty: {cie_x: 0.0008, cie_y: 0.0008, luminous_flux_lm: 0.3}
regions:
  - region: C
    outside: off-colour
    guard: 0.0006
    cells:
      - {name: A, polygon: [[0.3700, 0.3700], [0.3800, 0.3760], [0.3780, 0.3660], [0.3690, 0.3610]]}
      - {name: B, polygon: [[0.3800, 0.3760], [0.3900, 0.3820], [0.3870, 0.3710], [0.3780, 0.3660]]}
      - {name: K, priority: 1, circle: {centre: [0.3790, 0.3710], steps: 3}}
axes:
  - {axis: F, quantity: luminous_flux_lm, ratios: {from: 18, ratio: 1.14, count: 4, places: 1}}
bins: {sellable: ["A*", "K*"], prices: {"K*": 0.031, "*": 0.024}, currency: EUR}
`

// cannedLook is a specification with made-up counts.
func cannedLook() SpecLook {
	spec, err := binning.Parse([]byte(cannedDocument))
	if err != nil {
		panic("gallery: " + err.Error()) // a fault of the program
	}
	n := BinNumbers{Spec: spec, Counts: make([]int, len(spec.Cells())), Denominator: 290_320, Wafers: 20, RiskWafers: 20, RiskCounts: make([]int, len(spec.Cells()))}
	bins := spec.Bins()
	n.Risk = &binning.Conformity{WronglyAccepted: make([]float64, bins), WronglyRejected: make([]float64, bins), Confident: make([]int, bins)}
	for i := range n.Counts {
		n.Counts[i] = int(12_000 * (1 + math.Sin(float64(i))))
		n.RiskCounts[i] = n.Counts[i]
		if i < bins {
			n.Risk.WronglyAccepted[i], n.Risk.WronglyRejected[i], n.Risk.Confident[i] = 0.031*float64(n.Counts[i]), 0.004*float64(n.Counts[i]), n.Counts[i]*9/10
		}
	}
	look := SpecLook{Wafers: "the last 20 wafers", Bins: NewBinTable(n), Verdict: TrialSentence(183_204, 290_320, 180_114, 0.58, "the last 20 wafers")}
	look.Plots = BinPlots{Spec: spec, Counts: n.Counts, Edit: true}.Draw()
	for _, f := range spec.Check() {
		look.Findings = append(look.Findings, SpecFinding{Kind: string(f.Kind), Says: f.Says, Line: f.Line})
	}
	return look
}
