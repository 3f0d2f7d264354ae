// Package localpg runs a private PostgreSQL for one data folder, so that
// Epitally needs no database set up by hand.
//
// # Invariants
//
//   - Only one process manages a data folder: it holds a lock on DATA/lock.
//   - The server listens on a Unix socket only, in a folder of mode 0700.
//   - A cluster is made under another name and renamed when it is whole, so a
//     killed initdb leaves nothing that looks like a cluster.
//   - Server programs never run as root: a process of root runs them as the
//     account postgres, else nobody, and gives it the folder.
//   - Settings are given at each start, never written to the cluster's files, so
//     a newer binary brings its own.
//
// # States
//
//	Start: lock → (initdb) → end a server left over → start → answers → Cluster
//	the server dies: start again after a wait that doubles from 50 ms to 5 s
//	Attach: a second program uses the cluster while the first runs it
//	Stop: fast shutdown, within the context given; then immediate shutdown
//	the process is killed: on Linux the kernel asks the server to stop; what is
//	left of it is ended at the next Start
package localpg
