// Package cql2 reads row filters in the text form of OGC's Common Query
// Language and applies them to batches of events.
//
// Read are the comparisons =, <>, <, <=, >, >= of a column with a value or of
// two columns, [NOT] BETWEEN, [NOT] IN, [NOT] LIKE (% any text, _ any letter,
// \ before either to mean itself), IS [NOT] NULL, AND, OR, NOT and brackets.
// Values are numbers, 'text' (a quote within is doubled), TRUE, FALSE,
// DATE('2025-03-01') and TIMESTAMP('2025-03-01T12:00:00Z'). A column whose name
// is a word of the language or has odd letters stands in "double quotes".
// Words of the language are read in any case of letters.
//
// Notation: a row passes when the filter is true of it; a comparison with an
// absent value, a NaN, or a text that is no time where one is compared, is
// unknown, and so is its negation.
//
// Units: times without an offset, and dates, are of the zone given to Bind.
//
// Cost: O(rows × comparisons) time, some nanoseconds each; a text is looked at
// once for every word of a batch, not for every row. No memory is kept but a
// byte a row and comparison.
//
// Source: OGC 21-065r2, Common Query Language (CQL2), text encoding.
package cql2
