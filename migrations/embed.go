// Package migrations carries the schema inside the binary: numbered pairs of SQL, applied in order.
package migrations

import "embed"

// Files holds every migration.
//
//go:embed *.sql
var Files embed.FS
