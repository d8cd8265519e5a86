package bundle

import (
	"errors"
	"fmt"
	"os"
	"path"
	"path/filepath"

	"drumlin/io/internal/atomicfile"
	"drumlin/io/record"
)

func isExist(err error) bool { return errors.Is(err, os.ErrExist) }

// recoverLeftovers clears what a killed process left beside target and puts
// back an earlier bundle it had moved aside. The caller holds the lock.
func recoverLeftovers(target string) error {
	partials, err := atomicfile.Leftovers(target, atomicfile.Partial)
	if err != nil {
		return err
	}
	for _, p := range partials {
		if err := os.RemoveAll(p); err != nil {
			return err
		}
	}
	asides, err := atomicfile.Leftovers(target, atomicfile.Aside)
	if err != nil {
		return err
	}
	for _, a := range asides {
		if _, err := os.Lstat(target); errors.Is(err, os.ErrNotExist) {
			err = os.Rename(a, target)
			if err != nil {
				return err
			}
			continue
		}
		if err := os.RemoveAll(a); err != nil {
			return err
		}
	}
	return nil
}

// replaceable returns nil when target is not there, or may be replaced.
func replaceable(target string, replace bool) error {
	info, err := os.Lstat(target)
	switch {
	case errors.Is(err, os.ErrNotExist):
		return nil
	case err != nil:
		return refused("look at "+target, err)
	case !info.IsDir():
		return fmt.Errorf("bundle: %s exists and is not a folder; choose another place: %w", target, ErrExists)
	}
	outline, err := outlineOf(target)
	switch {
	case err != nil:
		return fmt.Errorf("bundle: %s exists and holds no earlier bundle, so it is not replaced; choose another place (%w): %w", target, err, ErrExists)
	case !replace:
		return fmt.Errorf("bundle: %s holds an earlier bundle; choose another place or say --replace: %w", target, ErrExists)
	}
	if extra, err := stranger(target, outline.Files); err != nil {
		return refused("look into "+target, err)
	} else if extra != "" {
		return fmt.Errorf("bundle: %s also holds %s, which its bundle does not list; move it away before it is replaced: %w", target, extra, ErrExists)
	}
	return nil
}

func outlineOf(dir string) (record.Outline, error) {
	f, err := os.Open(filepath.Join(dir, RecordName))
	if err != nil {
		return record.Outline{}, err
	}
	defer f.Close()
	return record.Sniff(f)
}

// stranger returns the first thing in dir, in lexical order, that the bundle
// there does not list, "" when there is none.
func stranger(dir string, listed []string) (string, error) {
	known := map[string]bool{RecordName: true}
	for _, name := range listed {
		for ; name != "." && name != "/" && !known[name]; name = path.Dir(name) {
			known[name] = true
		}
	}
	extra := ""
	err := filepath.WalkDir(dir, func(p string, d os.DirEntry, err error) error {
		if err != nil || p == dir {
			return err
		}
		rel, err := filepath.Rel(dir, p)
		if err != nil {
			return err
		}
		if !known[filepath.ToSlash(rel)] {
			extra = filepath.ToSlash(rel)
			return filepath.SkipAll
		}
		return nil
	})
	return extra, err
}

// rename lets tests fail the last step.
var rename = os.Rename

// swap gives the folder work the name target. An earlier target is moved aside
// first, put back when the rename fails, and removed when it succeeds.
func swap(work, target string) error {
	aside := ""
	if _, err := os.Lstat(target); err == nil {
		aside = atomicfile.Sibling(target, atomicfile.Aside)
		if err := rename(target, aside); err != nil {
			return refused("move the earlier "+target+" aside", err)
		}
	}
	if err := rename(work, target); err != nil {
		if aside != "" {
			if back := rename(aside, target); back != nil {
				return refused("put the earlier bundle back from "+aside+"; rename it by hand", errors.Join(err, back))
			}
		}
		if isExist(err) {
			return fmt.Errorf("bundle: %s appeared while the run was under way; choose another place: %w", target, ErrExists)
		}
		return refused("give the bundle its name", err)
	}
	// The bundle has its name and is complete: should the flush of the parent
	// fail now, undoing the rename could lose both, so it stands.
	_ = atomicfile.SyncDir(filepath.Dir(target))
	if aside != "" {
		_ = os.RemoveAll(aside) // what stays is cleared by the next writer
	}
	return nil
}
