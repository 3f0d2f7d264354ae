// Package db is everything that speaks SQL: one Store, its methods grouped by
// file, and the codec of planes.
//
// # Invariants
//
//   - A source is stored in one transaction (Load); its SHA-256 is unique among
//     stored sources, so the same bytes are stored once whoever loads them.
//   - plane, measurement, summary, small_map and tally lead with wafer_id and
//     are partitioned by month of measurement. No query joins two wafers' planes.
//   - Lists, trends and charts read summary, tally and small_map, never planes.
//   - Driver errors become the kinds of package analytics in errors.go, by code
//     and constraint name, never by message text.
package db
