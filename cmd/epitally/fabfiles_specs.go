package main

// fabSpecifications are the invented customers' documents: file name → text.
// harbour-blue and fjord-blue divide one product between them, so that a wafer
// that has walked out of one serves the other.
func fabSpecifications() map[string]string {
	return map[string]string{
		"harbour-blue": harbourBlue,
		"fjord-blue":   fjordBlue,
		"slate-blue":   slateBlue,
		"meadow-green": meadowGreen,
		"reed-green":   reedGreen,
		"ember-red":    emberRed,
	}
}

const electricalRejects = `rejects:
  - reason: open
    when: forward_voltage_v > 5.5
  - reason: short
    when: low_current_forward_voltage_v < 1.0
  - reason: leaky
    when: reverse_current_ua > 0.5
`

const harbourBlue = `specification: harbour-blue
title: Harbour blue, 455 nm, 350 mA
kind: probe
products: [tarn-105]
` + electricalRejects + `axes:
  - axis: W
    quantity: dominant_wavelength_nm
    edges: [452.5, 453.75, 455, 456.25, 457.5]
    below: off-colour short
    above: off-colour long
  - axis: V
    quantity: forward_voltage_v
    edges: [2.90, 3.10, 3.30]
    below: voltage low
    above: voltage high
  - axis: P
    quantity: radiant_flux_mw
    edges: [450, 486, 525, 567, 612]
    below: dim
    above: bright
bins:
  name: "{W}-{V}-{P}"
  sellable: all
`

const fjordBlue = `specification: fjord-blue
title: Fjord blue, 458 nm, 350 mA
kind: probe
products: [tarn-105]
` + electricalRejects + `axes:
  - axis: W
    quantity: dominant_wavelength_nm
    edges: [455, 457.5, 460, 462.5]
    below: off-colour short
    above: off-colour long
  - axis: P
    quantity: radiant_flux_mw
    edges: [440, 500, 570, 650]
    below: dim
    above: bright
bins:
  name: "{W}-{P}"
  sellable: all
`

const slateBlue = `specification: slate-blue
title: Slate blue, 455 nm, 150 mA
kind: probe
products: [tarn-56, fell-56]
` + electricalRejects + `axes:
  - axis: W
    quantity: dominant_wavelength_nm
    edges: [450, 452.5, 455, 457.5, 460]
    names: [A, B, C, D]
    below: off-colour short
    above: off-colour long
  - axis: V
    quantity: forward_voltage_v
    edges: [2.90, 3.05, 3.15, 3.30]
    below: voltage low
    above: voltage high
  - axis: P
    quantity: radiant_flux_mw
    edges: [182, 197, 213, 230, 248]
    below: dim
    above: bright
bins:
  name: "{W}{V}{P}"
  sellable: ["B*", "C*"]
`

const meadowGreen = `specification: meadow-green
title: Meadow green, 525 nm, 200 mA
kind: probe
products: [moss-76]
` + electricalRejects + `axes:
  - axis: W
    quantity: dominant_wavelength_nm
    edges: [520, 522.5, 525, 527.5, 530]
    below: off-colour short
    above: off-colour long
  - axis: V
    quantity: forward_voltage_v
    edges: [3.05, 3.15, 3.25, 3.40]
    below: voltage low
    above: voltage high
  - axis: L
    quantity: luminous_flux_lm
    edges: [36, 39, 42, 45.4, 49]
    below: dim
    above: bright
bins:
  name: "{W}-{V}-{L}"
  sellable: all
`

const emberRed = `specification: ember-red
title: Ember red, 625 nm, 350 mA
kind: probe
products: [rowan-105]
` + electricalRejects + `axes:
  - axis: W
    quantity: dominant_wavelength_nm
    edges: [622.5, 624.5, 626.5, 628.5]
    guard: 0.1
    below: off-colour short
    above: off-colour long
  - axis: L
    quantity: luminous_flux_lm
    edges: [32.5, 35.5, 38.5, 41.5, 45]
    below: dim
    above: bright
bins:
  name: "{W}-{L}"
  sellable: all
`

// reedGreen is a customer who buys by chromaticity, with a guard band of 1.645
// standard uncertainties: 95 % confidence on one side (JCGM 106:2012, 8.3.2).
const reedGreen = `specification: reed-green
title: Reed green, by chromaticity, 200 mA
kind: probe
products: [moss-76]
uncertainty:
  cie_x: 0.0006
  cie_y: 0.0006
  luminous_flux_lm: 0.4
` + electricalRejects + `regions:
  - region: G
    outside: off-colour
    guard: 1.645 u
    guard_reason: too near a border
    cells:
      - {name: core, priority: 1, circle: {centre: [0.1729, 0.6944], steps: 2}}
      - {name: G1, polygon: [[0.1460, 0.6842], [0.1604, 0.6572], [0.1695, 0.6697], [0.1559, 0.6977]]}
      - {name: G2, polygon: [[0.1559, 0.6977], [0.1695, 0.6697], [0.1793, 0.6800], [0.1665, 0.7088]]}
      - {name: G3, polygon: [[0.1665, 0.7088], [0.1793, 0.6800], [0.1905, 0.6869], [0.1785, 0.7163]]}
      - {name: G4, polygon: [[0.1785, 0.7163], [0.1905, 0.6869], [0.2026, 0.6915], [0.1918, 0.7213]]}
axes:
  - axis: F
    quantity: luminous_flux_lm
    ratios: {from: 34, ratio: 1.14, count: 4, places: 1}
    below: dim
    above: bright
bins:
  name: "{G}-{F}"
  sellable: ["core-*", "G1-*", "G2-*", "G3-*"]
  prices: {"core-*": 0.058, "G?-F3": 0.049, "*": 0.044}
  currency: EUR
`
