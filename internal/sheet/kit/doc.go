// Package kit holds what a spreadsheet user copies: formulas to paste, macros, a script and a query, for the programs that
// are common at benches.
//
// Every file says in its own first lines what it is, how it is installed, what its limits are and whether it was run by the
// tests of this package or not; the listing is read from there, so that the two cannot differ. Files name one address as
// that of the service, [Service]; what is served names the one that the caller reached. The workbook is made from the page
// of formulas.
//
// No file holds a key. Formulas take one from a cell, where only a key that can do no more than read belongs; the macros,
// the script and the query keep theirs outside the document, each for the one address that it was given for.
package kit
