// Package jobs loads sources into the store and keeps the schedules.
//
// # The life of a source
//
//	waiting ── settled ──▶ reading ──▶ stored   (file moves to loaded/)
//	   ▲                      │
//	   └── changed while read ┤
//	                          └─────▶ refused   (file moves to rejected/, a
//	                                             reason file beside it)
//
// A source is read, summarised, binned and stored in one transaction, so that
// nothing half is ever visible. Its SHA-256 (of the decompressed bytes) makes it
// happen once: a process killed between the commit and the move finds the file
// again, is told that the bytes are stored, and only moves it.
//
// # Invariants
//
//   - Memory is bounded by a few wafers, whatever the size of a file: reading,
//     deriving and storing are three goroutines that hand over one measurement
//     at a time.
//   - A source never stops the server: every failure is a refused source with
//     its place and reason, or a source left waiting when the fault is ours
//     (the database does not answer).
//   - Files are opened through os.Root: a symlink that leaves the drop folder is
//     refused, never followed.
package jobs
