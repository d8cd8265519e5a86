// Package parquetfile reads numeric columns of Parquet files as float64
// batches, one row group at a time, and writes plain Parquet extracts.
//
// Notation: a row group is a part; a chunk is one column of one row group; a
// page is the unit of compression within a chunk; a leaf is a column that holds
// values, named by its dotted path; a definition level below the leaf's highest
// marks a null.
//
// Units: values come out as stored, decimals divided by their power of ten,
// 64-bit integers rounded to the nearest float64.
//
// The footer, the schema and the statistics go through apache/arrow/go v17,
// after this package has walked the footer itself: lengths and nesting are
// checked before anything is allocated, and logical types the library does not
// know are cut out so that the rest of the file stays readable. Pages are
// fetched, checked against their CRC, decompressed and decoded here, because
// the library's own path panics on corrupt pages, skips the CRC, ends silently
// on byte-stream-split pages and lacks LZ4_RAW. Its column readers are the
// oracle of the tests.
//
// Cost: O(rows × columns asked) time; memory per Read is one page, one
// compressed page and a small window per column, plus the batch, whatever the
// size of the row group. Nothing is held open between calls.
package parquetfile
