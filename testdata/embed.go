// Package testdata holds the published and computed reference figures that tests and `limitary validate` check against.
// README.md tells where each comes from and how far to trust it. The files are embedded, so the built program can be
// validated where it runs.
package testdata

import "embed"

// Files are the reference files by name.
//
//go:embed constants.csv arl.csv michelson-1879.csv worked-examples.json univariate.json
var Files embed.FS
