// Package packed opens gzip and zstd streams, and keeps a stream that must be
// read twice in a temporary file.
//
// Units: bytes.
//
// Cost: O(bytes) time; memory is one window of the packer, at most 128 MiB for
// zstd, and one copy buffer. A spooled stream takes its own size on disk, in
// the system's folder for temporary files.
package packed

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"drumlin/io/events"
)

const (
	maxWindow = 128 << 20
	copyBytes = 1 << 20
)

// Reader unpacks a stream of one of the formats events.FormatGzip (with all its
// members) and events.FormatZstd (with all its frames).
func Reader(format string, r io.Reader) (io.ReadCloser, error) {
	switch format {
	case events.FormatGzip:
		z, err := gzip.NewReader(bufio.NewReaderSize(r, 64<<10))
		if err != nil {
			return nil, err
		}
		return z, nil
	case events.FormatZstd:
		z, err := zstd.NewReader(r, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true),
			zstd.WithDecoderMaxWindow(maxWindow), zstd.WithDecoderMaxMemory(2*maxWindow))
		if err != nil {
			return nil, err
		}
		return z.IOReadCloser(), nil
	}
	return nil, fmt.Errorf("packed: %q is no packing that is read", format)
}

// Head returns up to n bytes from the start of what is packed in a file.
func Head(path, format string, n int) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	z, err := Reader(format, f)
	if err != nil {
		return nil, err
	}
	defer z.Close()
	b := make([]byte, n)
	k, err := io.ReadFull(z, b)
	if errors.Is(err, io.ErrUnexpectedEOF) && k > 0 || errors.Is(err, io.EOF) {
		err = nil // the stream's own faults show when it is read whole
	}
	return b[:k], err
}

// ErrSpool: the temporary file could not be written.
var ErrSpool = errors.New("the temporary file cannot be written")

// Spool copies a stream into a new temporary file and returns its path. The
// caller removes it. On error nothing is left. An error of the stream is
// returned as it is, one of the file as ErrSpool. When the context ends Spool
// returns at once, even while the stream waits; the stream must not be used
// afterwards.
func Spool(ctx context.Context, r io.Reader) (path string, err error) {
	f, err := os.CreateTemp("", "drumlin-*")
	if err != nil {
		return "", fmt.Errorf("%w: %w", ErrSpool, err)
	}
	defer func() {
		if e := f.Close(); err == nil && e != nil {
			err = fmt.Errorf("%w: %w", ErrSpool, e)
		}
		if err != nil {
			_ = os.Remove(f.Name()) // the first error is the one to tell
			path = ""
		}
	}()
	done := make(chan error, 1)
	go func() { done <- copyAll(ctx, f, r) }()
	select {
	case err := <-done:
		return f.Name(), err
	case <-ctx.Done():
		return "", ctx.Err()
	}
}

func copyAll(ctx context.Context, f *os.File, r io.Reader) error {
	b := make([]byte, copyBytes)
	for ctx.Err() == nil {
		n, err := r.Read(b)
		if _, e := f.Write(b[:n]); e != nil {
			return fmt.Errorf("%w: %w", ErrSpool, e)
		}
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
	}
	return ctx.Err()
}
