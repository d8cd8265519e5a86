package bundle

import (
	"bufio"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"hash"
	"io"
	"os"
	"path/filepath"

	"drumlin/io/internal/atomicfile"
)

// file is one file of a bundle while it is written.
type file struct {
	b      *Bundle
	name   string
	path   string
	f      *os.File
	buf    *bufio.Writer
	hash   hash.Hash
	bytes  int64
	sum    string
	err    error // first error, kept
	closed bool
	varies bool
}

// sink lets tests put a failing writer under the buffer.
var sink = func(f *os.File) io.Writer { return f }

// create opens a file in the hidden folder; b.mu is held.
func (b *Bundle) create(name string) (*file, error) {
	path := filepath.Join(b.work, filepath.FromSlash(name))
	if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
		return nil, refused("write "+name, err)
	}
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return nil, refused("write "+name, err)
	}
	return &file{b: b, name: name, path: path, f: f, buf: bufio.NewWriterSize(sink(f), 1<<16), hash: sha256.New()}, nil
}

// Write takes the bytes into the file and its digest.
func (f *file) Write(p []byte) (int, error) {
	if f.err != nil {
		return 0, f.err
	}
	if f.closed {
		return 0, fmt.Errorf("bundle: %s is already closed", f.name)
	}
	if f.b.ctx.Err() != nil {
		return 0, f.fail(context.Cause(f.b.ctx))
	}
	n, err := f.buf.Write(p)
	f.hash.Write(p[:n])
	f.bytes += int64(n)
	if err != nil {
		return n, f.fail(refused("write "+f.name, err))
	}
	return n, nil
}

// Close flushes the file to the disk. It returns the first error of the file.
func (f *file) Close() error {
	if f.closed {
		return f.err
	}
	f.closed = true
	err := f.buf.Flush()
	if err == nil {
		err = f.f.Sync()
	}
	if err2 := f.f.Close(); err == nil {
		err = err2
	}
	if f.err == nil && err != nil {
		if f.b.ctx.Err() != nil {
			return f.fail(context.Cause(f.b.ctx))
		}
		return f.fail(refused("write "+f.name, err))
	}
	f.sum = hex.EncodeToString(f.hash.Sum(nil))
	return f.err
}

func (f *file) fail(err error) error {
	f.err = err
	return err
}

// WriteFile makes a single file appear whole or not at all: write is given a
// buffered writer, and only if it returns nil does the file get its name.
// Without replace an existing file is ErrExists. A cancelled ctx stops before
// the name is given; write should look at it too when it takes long.
func WriteFile(ctx context.Context, path string, replace bool, write func(io.Writer) error) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	f, err := atomicfile.Create(path, replace)
	if err != nil {
		return single(path, err)
	}
	defer f.Abort()
	if err := write(outputErrors{path, f}); err != nil {
		return err
	}
	if ctx.Err() != nil {
		return context.Cause(ctx)
	}
	return single(path, f.Commit())
}

func single(path string, err error) error {
	if isExist(err) {
		return fmt.Errorf("bundle: %s exists; name another file or ask for it to be replaced: %w", path, ErrExists)
	}
	return refused("write "+path, err)
}

// outputErrors marks the errors of the file system, so that they can be told
// from those of the data.
type outputErrors struct {
	path string
	w    io.Writer
}

func (o outputErrors) Write(p []byte) (int, error) {
	n, err := o.w.Write(p)
	return n, refused("write "+o.path, err)
}
