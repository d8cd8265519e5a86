// Package bundle writes the folder a run hands over: all files and the record,
// complete and verified, or nothing.
//
// Files go to a hidden folder beside the target while their SHA-256 is taken.
// Commit reads them back and compares, writes run.json last, flushes
// everything to the disk and renames the folder once. Until then the target is
// untouched; after an error, a cancelled context or Abort nothing is left. What
// a killed process left is cleared by the next writer of the same target, and
// an earlier bundle that it had moved aside is put back.
//
// Sizes are bytes. Cost: one write, one read back (from the page cache) and two
// passes of SHA-256 (over 1 GB/s here) per byte, one flush per file.
//
// Sources: POSIX.1-2017 rename() and fsync(); FIPS 180-4.
package bundle
