// Package record holds what a run says about itself: run.json. Everything a
// reader needs to judge or repeat a map is in it, and nothing else is.
//
// Layout: one JSON object, two-space indent, fixed field order. The members
// inputs, workers and times come last; all bytes before "inputs" are the same
// for the same events and settings, whatever the machine, the workers, or the
// way the input was split. A file that repeats those three members (the
// report) has its digest under times.files, so that files stays identical too.
//
// Units are in the field names: metres (_m), square metres (_m2), kilometres
// (_km2), degrees (_deg), seconds (_s); shares lie between 0 and 1.
//
// Cost: writing and reading are linear in the record, a few kilobytes. Digest
// cost is that of crypto/sha256, above a gigabyte a second with the processor's
// SHA instructions; see FileDigest for the sampled scope of large files.
//
// Sources: RFC 8259 (JSON), RFC 7493 (I-JSON: no NaN, unique names), FIPS 180-4
// (SHA-256).
package record
