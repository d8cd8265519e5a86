// Package arrowfile reads numeric columns of Arrow IPC files and streams as
// float64 batches, and writes plain Arrow IPC files.
//
// Notation: a message is one block of an IPC stream, metadata and body; a
// record batch is a message of rows; a leaf is a column that holds values, a
// struct's members named by their dotted path.
//
// Units: values come out as stored, decimals divided by their power of ten,
// 64-bit integers rounded to the nearest float64.
//
// Messages are framed here: lengths are checked against the limits and what is
// left of the input before anything is allocated, and the library that decodes
// them (apache/arrow/go v17, bodies plain, lz4 or zstd) allocates through an
// allocator with a cap; a panic below becomes an error. A file is read as the
// stream it holds between its magic words, in order, so it is one part.
//
// Cost: O(rows) time; memory per Read is one record batch, unpacked, and the
// batch. Nothing is held open between calls.
//
// Source: the Arrow columnar format, version 1.4, sections on IPC.
package arrowfile
