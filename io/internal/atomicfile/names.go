package atomicfile

import (
	"crypto/rand"
	"encoding/hex"
	"os"
	"path/filepath"
	"strings"
)

const prefix = ".drumlin-"

// Endings of the hidden names.
const (
	Partial = ".partial"
	Aside   = ".aside"
)

// Sibling returns a fresh hidden name beside target with the given ending.
func Sibling(target, ending string) string {
	var b [8]byte
	rand.Read(b[:]) // never fails, by its documentation
	return filepath.Join(filepath.Dir(target), prefix+filepath.Base(target)+"-"+hex.EncodeToString(b[:])+ending)
}

// Leftovers lists the hidden names beside target with the given ending, in
// lexical order. Only exact matches count, so a target "a" never claims what
// belongs to a target "a-b".
func Leftovers(target, ending string) ([]string, error) {
	dir := filepath.Dir(target)
	entries, err := os.ReadDir(dir)
	if err != nil {
		return nil, err
	}
	var out []string
	for _, e := range entries {
		mid, ok := strings.CutPrefix(e.Name(), prefix+filepath.Base(target)+"-")
		if !ok {
			continue
		}
		if mid, ok = strings.CutSuffix(mid, ending); ok && len(mid) == 16 && strings.Trim(mid, "0123456789abcdef") == "" {
			out = append(out, filepath.Join(dir, e.Name()))
		}
	}
	return out, nil
}

// SyncDir flushes a folder's entries to the disk. File systems that cannot
// flush a folder are let off.
func SyncDir(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	defer d.Close()
	if err := d.Sync(); err != nil && !cannotSync(err) {
		return err
	}
	return nil
}
