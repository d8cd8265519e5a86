package bundle

import (
	"io"
	"os"
)

// SetSink puts a writer under every file of a bundle until the returned
// function is called.
func SetSink(f func(*os.File) io.Writer) (restore func()) {
	old := sink
	sink = f
	return func() { sink = old }
}

// SetRename replaces the renames of the last step.
func SetRename(f func(from, to string) error) (restore func()) {
	old := rename
	rename = f
	return func() { rename = old }
}
