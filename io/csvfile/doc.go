// Package csvfile reads columns of delimited text as float64 batches: numbers as
// they are, text as places in a list of words.
//
// Notation: the first line names the columns; the delimiter is the comma,
// semicolon or tab that the first line holds most of; a cell that is empty, NA
// or null becomes events.Null, and one that is no number in a numeric column
// becomes events.NotAValue. A column is numeric when at least nine in ten of
// the cells that are not null in the leading rows are numbers.
//
// Units: none; numbers use a point and no thousands separator.
//
// Cost: O(bytes) time, one pass per Read; memory is one batch and one row, and
// a row is at most 1 MiB. A file is one part.
package csvfile
