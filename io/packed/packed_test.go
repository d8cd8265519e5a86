package packed_test

import (
	"bytes"
	"compress/gzip"
	"context"
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/iotest"
	"time"

	"github.com/klauspost/compress/zstd"

	"drumlin/io/events"
	"drumlin/io/packed"
)

func gz(t testing.TB, parts ...string) []byte {
	t.Helper()
	var b bytes.Buffer
	for _, p := range parts {
		w := gzip.NewWriter(&b)
		if _, err := io.WriteString(w, p); err != nil {
			t.Fatal(err)
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
	}
	return b.Bytes()
}

func zst(t testing.TB, parts ...string) []byte {
	t.Helper()
	w, err := zstd.NewWriter(nil)
	if err != nil {
		t.Fatal(err)
	}
	var b []byte
	for _, p := range parts {
		b = w.EncodeAll([]byte(p), b)
	}
	return b
}

func unpack(format string, b []byte) (string, error) {
	r, err := packed.Reader(format, bytes.NewReader(b))
	if err != nil {
		return "", err
	}
	defer r.Close()
	out, err := io.ReadAll(r)
	return string(out), err
}

func TestReader(t *testing.T) {
	long := strings.Repeat("x,y\n1,2\n", 100000)
	for format, pack := range map[string]func(testing.TB, ...string) []byte{events.FormatGzip: gz, events.FormatZstd: zst} {
		b := pack(t, long, "", "3,4\n")
		if events.Sniff(b[:20], nil) != format {
			t.Errorf("%s is sniffed as %s", format, events.Sniff(b[:20], nil))
		}
		if got, err := unpack(format, b); err != nil || got != long+"3,4\n" {
			t.Errorf("%s: %d bytes, %v", format, len(got), err)
		}
		for n := 0; n < len(b); n += 1 + len(b)/50 {
			if got, err := unpack(format, b[:n]); err == nil && got != long && got != "" {
				t.Errorf("%s cut at %d of %d: %d bytes and no error", format, n, len(b), len(got))
			}
		}
		b[len(b)/3] ^= 0x55
		if _, err := unpack(format, b); err == nil {
			t.Errorf("%s with a broken byte is read", format)
		}
		path := filepath.Join(t.TempDir(), "a")
		if err := os.WriteFile(path, pack(t, "ab", "c"), 0o600); err != nil {
			t.Fatal(err)
		}
		for n, want := range map[int]string{2: "ab", 10: "abc"} {
			if got, err := packed.Head(path, format, n); err != nil || string(got) != want {
				t.Errorf("%s head %d: %q %v", format, n, got, err)
			}
		}
	}
	if _, err := packed.Reader(events.FormatCSV, strings.NewReader("x")); err == nil {
		t.Error("text is unpacked")
	}
}

func TestSpool(t *testing.T) {
	t.Setenv("TMPDIR", t.TempDir())
	path, err := packed.Spool(t.Context(), strings.NewReader("hello"))
	if err != nil {
		t.Fatal(err)
	}
	if b, err := os.ReadFile(path); err != nil || string(b) != "hello" {
		t.Error(string(b), err)
	}
	if err := os.Remove(path); err != nil {
		t.Fatal(err)
	}
	gone := errors.New("gone")
	if _, err := packed.Spool(t.Context(), io.MultiReader(strings.NewReader("ab"), iotest.ErrReader(gone))); !errors.Is(err, gone) || errors.Is(err, packed.ErrSpool) {
		t.Error(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := packed.Spool(ctx, strings.NewReader("ab")); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
	ctx, cancel = context.WithCancel(t.Context())
	waits, w := io.Pipe() // nobody writes
	defer w.Close()
	time.AfterFunc(20*time.Millisecond, cancel)
	if _, err := packed.Spool(ctx, waits); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
	if left, _ := os.ReadDir(os.TempDir()); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
	t.Setenv("TMPDIR", filepath.Join(t.TempDir(), "none"))
	if _, err := packed.Spool(t.Context(), strings.NewReader("ab")); !errors.Is(err, packed.ErrSpool) {
		t.Error(err)
	}
}

func TestRename(t *testing.T) {
	err := packed.Rename(&events.Fault{Kind: events.ErrMalformed, File: "/tmp/x1", What: "broken"}, "/tmp/x1", "calls.gz")
	if err.Error() != "calls.gz: broken" || !errors.Is(err, events.ErrMalformed) {
		t.Error(err)
	}
}

// FuzzUnpack: whatever the bytes, they are unpacked or refused; what a sniffed
// packing yields is bounded here, for it may be large.
func FuzzUnpack(f *testing.F) {
	f.Add(gz(f, "x,y\n1,2\n"))
	f.Add(zst(f, "x,y\n1,2\n"))
	f.Add([]byte("\x1f\x8b"))
	f.Add([]byte("\x28\xb5\x2f\xfd"))
	path := filepath.Join(f.TempDir(), "a")
	f.Fuzz(func(t *testing.T, b []byte) {
		format := events.Sniff(b, nil)
		r, err := packed.Reader(format, bytes.NewReader(b))
		if format != events.FormatGzip && format != events.FormatZstd {
			if err == nil {
				t.Fatalf("%s is unpacked", format)
			}
			return
		}
		if err == nil {
			_, _ = io.CopyN(io.Discard, r, 1<<20)
			r.Close()
		}
		if err := os.WriteFile(path, b, 0o600); err != nil {
			t.Fatal(err)
		}
		if head, err := packed.Head(path, format, 4096); err == nil {
			events.Sniff(head, nil)
		}
	})
}
