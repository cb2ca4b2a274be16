// Package migrations embeds the schema: numbered files, one purpose each, never edited once released.
package migrations

import "embed"

// Files holds NNNN_what.sql, applied in the order of their numbers.
//
//go:embed *.sql
var Files embed.FS
