// Package simfab grows an invented LED fab: reactors, runs, wafers and what a
// photoluminescence mapper and a die prober would read on every die. It is pure
// computation: the same Config gives the same numbers, wafer by wafer, in
// whatever order and on however many goroutines the wafers are measured.
//
// # Physics
//
// A die's wavelength follows the growth temperature where it grew:
//
//	λ = target − S·ΔT(x, y) + run offset
//	ΔT = ring + pocket + wafer + bow·(ρ²−½) + tilt·ρ·cos(θ−φ) + edge·e^(−d/ℓ) + flat + texture
//
// with S the recipe's sensitivity in nm per °C, ρ the radius over the wafer's
// radius, d the distance to the edge. The texture is a smooth random field of
// two correlation lengths. The run offset holds what changes from run to run:
// scatter, a walking reactor's drift, a step at a maintenance.
//
// The emission peak under current is the photoluminescence peak plus a shift
// fixed by the structure, with a small wafer-to-wafer scatter; the dominant
// wavelength is the peak plus an offset linear in the peak, since real lines
// are skewed and a Gaussian gives far too little. Forward voltage follows the
// photon energy plus series resistance plus a smooth field; light output
// follows wavelength, radius and a field of its own; reverse current is
// log-normal with a leaky tail. Opens, shorts and leaky dies cluster at the
// edge, around particles and along scratches.
//
// Magnitudes are those published for, or common practice in, such fabs: spread
// inside a wafer of about 2 nm sd in blue (doi 10.1007/s11431-010-4180-4) and
// 3 to 6 nm in green; 1 to 1.5 nm per °C in blue, 1.5 to 2.5 in green; pocket
// offsets that repeat while the carrier is in. Nothing in it is a real fab.
package simfab
