// Package migrations holds the schema as numbered SQL, up and down, embedded in
// the binary. The numbers have no gaps; a migration never changes once it has
// landed.
package migrations

import "embed"

// FS holds the files.
//
//go:embed *.sql
var FS embed.FS
