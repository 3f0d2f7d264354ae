// Package wafermap holds where dies are and what was measured on them: the
// layout of a product, the die grid of a measurement, and planes (one quantity
// over all dies of a grid) as scaled integers.
//
// # Invariants
//
// A Grid is in canonical order: y ascending, then x ascending, each coordinate
// once. Planes are indexed by the grid's order. Die coordinates are integers
// counted in dies; millimetres come only from a Layout, with x to the right and
// y up, the wafer's centre at (0, 0).
package wafermap
