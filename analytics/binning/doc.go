// Package binning puts dies into the bins of a specification.
//
// # The document
//
// A specification is a YAML document:
//
//	specification: harbour-blue        # its name: letters, digits, - _ and .
//	title: Harbour blue, 455 nm family # for people; may be left out
//	kind: probe                        # the kind of measurement it bins
//	products: [blue-455]               # the products it is for; may be left out
//	rejects:                           # tried in this order; may be left out
//	  - reason: open
//	    when: forward_voltage_v > 4.5
//	  - reason: leaky
//	    when: reverse_current_ua > 2 or reverse_voltage_v outside [5, 60]
//	valid: {from: 2026-12-01, until: 2027-11-30} # first and last day (UTC) of measurement; may be left out
//	uncertainty: {cie_x: 0.0006, cie_y: 0.0006}  # standard uncertainty of one reading; may be left out
//	regions:                           # cells over two quantities, before the axes; may be left out
//	  - region: C
//	    quantities: [cie_x, cie_y]     # default; any two may be named
//	    space: xy                      # what the cells are drawn in: xy, uv (u′, v′), own (the two quantities)
//	    cells:
//	      - {name: A, polygon: [[0.30, 0.30], [0.32, 0.30], [0.32, 0.32]], holes: [], priority: 0}
//	      - {name: K, circle: {centre: [0.31, 0.31], steps: 3}}
//	      - {name: N, quadrangle: {cct: 4000, edition: 2015, steps: 7}}
//	      - {name: M, any_of: [{polygon: […]}, {circle: {…}}]}
//	    outside: off-colour            # reject reason in no cell; default "C outside"
//	    guard: 0.0005                  # or "1.645 u": standard uncertainties; may be left out
//	    guard_reason: guard            # default "guard"
//	axes:                              # tried in this order; may be left out
//	  - axis: W
//	    quantity: dominant_wavelength_nm
//	    edges: [450, 452.5, 455, 457.5, 460] # or steps: {from: 450, step: 2.5, count: 4}
//	                                         # or ratios: {from: 18, ratio: 1.14, count: 4, places: 1}
//	    names: [W1, W2, W3, W4]        # default: the axis and a number from 1
//	    below: short                   # reject reason under the lowest edge; default "W below"
//	    above: long                    # reject reason over the highest edge; default "W above"
//	    guard: 0.05                    # may be left out; see below
//	    guard_reason: guard            # default "guard"
//	  - axis: V
//	    quantity: forward_voltage_v
//	    edges: [3.0, 3.2, 3.4, 3.6]
//	bins:
//	  name: "{W}{V}"                   # default: every axis in order; without axes "good"
//	  sellable: ["W2*", "W3*"]         # all (the default), or patterns: * any text, ? one character
//	  prices: {"W2*": 0.031, "*": 0.02} # of one die, the first pattern that fits; may be left out
//	  currency: EUR
//
// At least one of rejects, regions and axes is needed. An unknown key, a key given twice,
// an edge out of order or a pattern that matches no bin is refused with its line
// and column. A quantity that is not built in may be used: it is declared where
// its values are read.
//
// # Conditions
//
// A condition compares quantities with decimal numbers, in the unit that the
// quantity's name carries:
//
//	q < 1    q <= 1    q > 1    q >= 1    q == 1    q != 1
//	q between [1, 2]   1 ≤ q ≤ 2
//	q outside [1, 2]   q < 1 or q > 2
//
// joined by "and" and "or" ("and" binds closer) and grouped by parentheses.
//
// # How a die is binned
//
//  1. A die without a value for any quantity that the specification names is
//     untested: never rejected, never binned, never good. So an open die whose
//     wavelength could not be measured is untested, not open.
//  2. The reject rules are tried in order; the first that holds gives the reason.
//  3. The regions are tried in order. Of the cells that hold the die's point the one
//     of the highest priority has it, then the first listed; in none the reason is
//     outside.
//  4. The axes are tried in order. Under the lowest edge the reason is the axis's
//     below, over the highest its above.
//  5. What is left has a cell of every region and axis, and these name its bin.
//
// Cells are half-open, [low, high); the highest edge of an axis is closed. A
// guard takes its width off both sides of every cell before that test, outermost
// sides included: a die between the lowest and the highest edge that is then in
// no cell is rejected for guard_reason.
//
// The outline of a cell is half-open too: a point on an edge that two cells share
// belongs to the one on its right, or above it. A point on an outline that no cell
// holds belongs to the first cell it bounds, so that the outer edge of the whole is
// closed. Circles are closed. A region's guard takes its width off inside every
// outline.
//
// What the uncertainty of measurement does to the bins is worked out by
// [Spec.Conformity].
//
// Numbers are compared as decimals, exactly: an edge of 452.5 is met by a value
// written 452.50 and missed by 452.49. Values that are binary floats in their
// source are compared with the float of the same width nearest to the edge.
//
// # Worked example
//
// Under the document above the bins are W1V1, W1V2, W1V3, W2V1, … W4V3, twelve in
// all, of which the six of W2 and W3 are sellable. Four dies:
//
//	452.50 nm is in [452.5, 455) but within 0.05 nm of its edge   → guard
//	453.20 nm, 3.20 V                                             → W2V2
//	459.00 nm, 3.60 V: the highest edge is closed                 → W4V3, not sellable
//	no wavelength, 4.80 V                                         → untested
package binning
