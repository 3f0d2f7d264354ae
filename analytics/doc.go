// Package analytics is the root of Epitally's pure computation: no I/O, no
// clock, no database and no HTTP below this folder.
//
// Three kinds of "nothing" are told apart here, once, for every package below:
//
//   - NaN is "no value": the die was not measured for this quantity, or the
//     station said that its reading is not valid. It never counts in n, never
//     passes a rule, and is never good.
//   - Zero is a measured value like any other.
//   - NULL exists only in the database and only for facts of a whole wafer or
//     measurement (no run sheet yet, no drive current stated). It is a nil
//     pointer or an empty string in memory, never a zero and never a NaN.
//
// The package itself holds the error kinds that every layer shares.
package analytics
