package bundle

import (
	"errors"
	"fmt"

	"drumlin/io/internal/atomicfile"
)

// Kinds of error, to be told apart with errors.Is. All three are exit status 8.
var (
	// ErrExists: the target is there and may not be replaced.
	ErrExists = errors.New("output exists")
	// ErrLocked: another process is writing the same target.
	ErrLocked = errors.New("output is being written by another process")
	// ErrOutput: the file system refused (full, read-only, no permission, no
	// parent folder, bytes read back differ).
	ErrOutput = errors.New("output refused")
)

// refused wraps an error of the file system.
func refused(what string, err error) error {
	if err == nil || errors.Is(err, ErrOutput) {
		return err
	}
	hint := ""
	if atomicfile.Full(err) {
		hint = "; the disk or the quota is full, make room or choose another place with --out"
	}
	return fmt.Errorf("bundle: %s: %w%s: %w", what, err, hint, ErrOutput)
}
