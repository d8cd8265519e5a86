// Package atomicfile makes a file or a folder appear whole or not at all, and
// keeps two writers from the same name.
//
// Everything is written under a hidden name beside the target (same parent, so
// a rename stays within one file system), flushed to the disk, and renamed
// once. Names: .drumlin-<base>-<16 hex>.partial for what is being written,
// .drumlin-<base>-<16 hex>.aside for what is being replaced,
// .drumlin-<base>.lock for the lock. Whoever holds the lock may clear what a
// killed process left under these names.
//
// Cost: one flush per file and folder, two renames; no copy of the data.
//
// Sources: POSIX.1-2017 rename(), fsync(); flock(2) as in the BSDs and Linux.
package atomicfile
