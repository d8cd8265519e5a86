package mv

import "errors"

// Kinds of error that mv returns, to be told apart with errors.Is. The message
// around them gives the numbers.
var (
	// ErrShape: lengths or dimensions that do not go together.
	ErrShape = errors.New("shape mismatch")
	// ErrNotFinite: NaN or an infinity where a number is needed.
	ErrNotFinite = errors.New("not finite")
	// ErrNotPositiveDefinite: a bandwidth matrix without a Cholesky factor.
	ErrNotPositiveDefinite = errors.New("not positive definite")
	// ErrDegenerate: events that no density can be estimated from (too few,
	// all at one place, all on a line).
	ErrDegenerate = errors.New("degenerate sample")
	// ErrTooLarge: a lattice or tally beyond the stated memory limit.
	ErrTooLarge = errors.New("too large for memory")
	// ErrIncompatible: tallies that cannot be added (grain or dimension differ).
	ErrIncompatible = errors.New("incompatible tallies")
)
