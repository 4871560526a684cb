// Package migrations holds the numbered SQL files that make and change the
// database. They are run at start by internal/store and never edited once merged.
package migrations

import "embed"

// Files holds NNNN_title.up.sql and .down.sql.
//
//go:embed *.sql
var Files embed.FS
