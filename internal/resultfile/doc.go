// Package resultfile reads files of control results: delimited text with a header.
//
// # Dialects
//
// Columns are separated by commas, semicolons or tabs; a file of one column needs no separator. The decimal is a point
// or a comma, the same in the whole file. Fields may be quoted, a quote inside a quoted field is doubled, and a quoted
// field may hold separators and line ends. Lines end in LF or CRLF. The text is UTF-8, with or without a byte order
// mark. Separator and decimal are found from the file or given in Options. Where the file can be read in two ways it is
// refused with the line and column, both readings, and what to say instead: "1,234" alone may be 1.234 or 1234. One
// value that can be read one way only ("0,98", "12,5") settles the decimal of the whole file. A point before three
// digits is taken for a thousands separator only in files separated by semicolons, where the comma is the usual decimal
// (common practice, no source). Thousands separators themselves are never read.
//
// # Rows
//
// One row is one result. Its readings stand in several columns (wide), or each row holds one reading and a subgroup
// column groups consecutive rows into one result (long). A subgroup that comes back after another one is refused, since
// rows sorted differently would make other subgroups without a word. An empty field is no reading; a row with no
// reading stays a row, without readings, and is counted. An empty line is such a row in a file of one column and
// skipped in others. Anything else that is not a reading ("NaN", a word) is refused with line, column and value.
//
// In the long form, time, name and break of a result are those of its first row, and a reason for exclusion and the
// material must be the same in all its rows.
//
// Counts stand in the value column, and how much was inspected for each in a column of its own, as a number above zero.
// A row with one of the two has both, except that a sample without a count is a row without a result.
//
// # Columns
//
// Columns are chosen by their exact names. Without a choice the value column is the only one that holds numbers; where
// there are several, or none, the error lists the columns. A column name that is a number is refused, so that a file
// without a header never loses its first result.
//
// # Errors
//
// Whatever is wrong with the file or the choice of columns is an *Error. Its advice speaks of the command line's flags:
// --delimiter, --decimal, --value, --subgroup, --id, --time, --break, --exclude, --material and --inspected. Read keeps nothing of a file that it
// refuses.
package resultfile
