package bundle

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"

	"drumlin/io/internal/atomicfile"
	"drumlin/io/record"
)

// RecordName is the file of the record within a bundle.
const RecordName = "run.json"

// Options of Create. The zero value refuses an existing target.
type Options struct {
	// Replace allows a target that holds an earlier bundle, and nothing but it,
	// to be replaced. Default: refuse.
	Replace bool
}

// Bundle is a folder being written. File may be called from several
// goroutines; each file has one writer. End it with Commit or Abort; Abort
// after Commit does nothing, so it can be deferred.
type Bundle struct {
	ctx    context.Context
	target string
	work   string // hidden folder
	opt    Options
	lock   *atomicfile.Lock
	detach func() bool // stops watching ctx

	mu    sync.Mutex
	state state
	files map[string]*file
}

type state int

const (
	open state = iota
	committed
	aborted
)

// Create locks dir against other writers and starts a bundle for it. The
// parent folder must exist. dir must not exist, or hold an earlier bundle and
// opt.Replace be set (ErrExists). When ctx is cancelled the bundle aborts
// itself; a deferred Abort still makes sure of it before the process ends.
func Create(ctx context.Context, dir string, opt Options) (*Bundle, error) {
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	target := filepath.Clean(dir)
	if base := filepath.Base(target); dir == "" || base == "." || base == ".." || base == string(filepath.Separator) {
		return nil, fmt.Errorf("bundle: %q cannot be an output folder; name one that does not exist yet: %w", dir, ErrExists)
	}
	parent := filepath.Dir(target)
	switch info, err := os.Stat(parent); {
	case err != nil:
		return nil, refused(fmt.Sprintf("the parent folder of %s cannot be used; create it first", target), err)
	case !info.IsDir():
		return nil, fmt.Errorf("bundle: %s is not a folder, so %s cannot be made in it: %w", parent, target, ErrOutput)
	}
	lock, err := atomicfile.Acquire(target)
	if errors.Is(err, atomicfile.ErrLocked) {
		return nil, fmt.Errorf("bundle: %s: %w; wait for it, or remove the lock if no such process runs: %w", target, err, ErrLocked)
	}
	if err != nil {
		return nil, refused("lock "+target, err)
	}
	b := &Bundle{ctx: ctx, target: target, opt: opt, lock: lock, files: map[string]*file{}}
	err = b.start()
	if err != nil {
		_ = lock.Release() // the first error is the one to tell
		return nil, err
	}
	b.mu.Lock()
	b.detach = context.AfterFunc(ctx, func() { b.Abort() })
	b.mu.Unlock()
	return b, nil
}

// start clears leftovers, checks the target and makes the hidden folder.
func (b *Bundle) start() error {
	if err := recoverLeftovers(b.target); err != nil {
		return refused("clear what an interrupted run left beside "+b.target, err)
	}
	if err := replaceable(b.target, b.opt.Replace); err != nil {
		return err
	}
	b.work = atomicfile.Sibling(b.target, atomicfile.Partial)
	return refused("make a folder for "+b.target, os.Mkdir(b.work, 0o777))
}

// FileOption changes how a file is recorded.
type FileOption int

// Varies marks a file that repeats the record's inputs, workers or times (the
// report): its digest goes under times.files, so that files stays the same
// between equal runs.
const Varies FileOption = 1

// File starts a file of the bundle. name is slash-separated and relative
// ("regions.geojson", "groups/may/peaks.geojson"); run.json is the bundle's
// own. The writer is buffered, hashes as it goes, and must be closed; its
// errors are ErrOutput.
func (b *Bundle) File(name string, opts ...FileOption) (io.WriteCloser, error) {
	if !filepath.IsLocal(filepath.FromSlash(name)) || strings.ContainsAny(name, "\\\x00") ||
		filepath.ToSlash(filepath.Clean(filepath.FromSlash(name))) != name || name == RecordName || name == "." {
		return nil, fmt.Errorf("bundle: %q is not a name for a file in a bundle", name)
	}
	b.mu.Lock()
	defer b.mu.Unlock()
	if err := b.usable(); err != nil {
		return nil, err
	}
	if b.files[name] != nil {
		return nil, fmt.Errorf("bundle: %s is written twice", name)
	}
	f, err := b.create(name)
	if err != nil {
		return nil, err
	}
	f.varies = slices.Contains(opts, Varies)
	b.files[name] = f
	return f, nil
}

// usable reports why no file may be written now; b.mu is held.
func (b *Bundle) usable() error {
	switch {
	case b.state == committed:
		return errors.New("bundle: already committed")
	case b.ctx.Err() != nil:
		return context.Cause(b.ctx)
	case b.state == aborted:
		return errors.New("bundle: already aborted")
	}
	return nil
}

// Commit verifies the files against the digests taken while writing, fills
// rec.Files and rec.Times.Files, writes rec as run.json and gives the folder
// its name. Every file must be closed. On any error the bundle is aborted and
// the target is as it was before.
func (b *Bundle) Commit(rec *record.Record) (err error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	defer func() {
		if err != nil && b.state == open {
			_ = b.abort() // the first error is the one to tell
		}
	}()
	if err := b.usable(); err != nil {
		return err
	}
	if err := b.list(rec); err != nil {
		return err
	}
	f, err := b.create(RecordName)
	if err != nil {
		return err
	}
	b.files[RecordName] = f
	if err := record.Write(f, rec); err != nil {
		return err
	}
	if err := f.Close(); err != nil {
		return err
	}
	if err := b.verify(); err != nil {
		return err
	}
	if err := b.publish(); err != nil {
		return err
	}
	b.state = committed
	b.detach()
	_ = b.lock.Release() // the bundle is there; a lock that stays is taken over later
	return nil
}

// list puts the closed files into the record, by name.
func (b *Bundle) list(rec *record.Record) error {
	rec.Files, rec.Times.Files = []record.File{}, nil
	for _, name := range b.names() {
		f := b.files[name]
		if !f.closed {
			return fmt.Errorf("bundle: %s was not closed before the commit", name)
		}
		if f.err != nil {
			return f.err
		}
		e := record.File{Name: name, Bytes: f.bytes, SHA256: f.sum}
		if f.varies {
			rec.Times.Files = append(rec.Times.Files, e)
		} else {
			rec.Files = append(rec.Files, e)
		}
	}
	return nil
}

func (b *Bundle) names() []string {
	var names []string
	for n := range b.files {
		names = append(names, n)
	}
	slices.Sort(names)
	return names
}

// verify reads every file back.
func (b *Bundle) verify() error {
	buf := make([]byte, 1<<18)
	for _, name := range b.names() {
		if err := b.ctx.Err(); err != nil {
			return context.Cause(b.ctx)
		}
		f := b.files[name]
		r, err := os.Open(f.path)
		if err != nil {
			return refused("read back "+name, err)
		}
		h := sha256.New()
		n, err := io.CopyBuffer(h, struct{ io.Reader }{r}, buf)
		r.Close()
		if err != nil {
			return refused("read back "+name, err)
		}
		if n != f.bytes || hex.EncodeToString(h.Sum(nil)) != f.sum {
			return fmt.Errorf("bundle: %s reads back as other bytes than were written; the disk or its file system is at fault: %w", name, ErrOutput)
		}
	}
	return nil
}

// publish flushes the folders and renames the hidden one to the target.
func (b *Bundle) publish() error {
	err := filepath.WalkDir(b.work, func(p string, d os.DirEntry, err error) error {
		if err == nil && d.IsDir() {
			err = atomicfile.SyncDir(p)
		}
		return err
	})
	if err != nil {
		return refused("flush "+b.target, err)
	}
	if b.ctx.Err() != nil {
		return context.Cause(b.ctx)
	}
	if err := replaceable(b.target, b.opt.Replace); err != nil {
		return err
	}
	return swap(b.work, b.target)
}

// Abort removes everything written and gives up the lock. It returns what
// stood in the way of that; the target was never touched.
func (b *Bundle) Abort() error {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.state != open {
		return nil
	}
	return b.abort()
}

func (b *Bundle) abort() error {
	b.state = aborted
	b.detach()
	for _, f := range b.files {
		f.f.Close()
	}
	err := os.RemoveAll(b.work)
	if err2 := b.lock.Release(); err == nil {
		err = err2
	}
	return refused("remove what was written for "+b.target, err)
}
