package bundle_test

import (
	"context"
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"drumlin/io/bundle"
	"drumlin/io/record"
)

func rec() *record.Record {
	h := []float64{4, 0, 0, 4}
	at := time.Date(2026, 1, 1, 0, 0, 0, 0, time.UTC)
	return &record.Record{
		Program: record.Program{Name: "drumlin", Version: "v0", Go: "go1.26"},
		CRS:     record.CRS{Input: "plane", Plane: record.Plane{Name: "plane", Method: "plane"}},
		Lattice: record.Lattice{Origin: []float64{0, 0}, Step: []float64{1, 1}, Nodes: []int{2, 2}},
		Bandwidth: record.Bandwidth{Method: "fixed", Shape: "full", Kernel: "gaussian", Matrix: h, MatrixHex: record.HexFloats(h),
			Status: "fixed"},
		Regions:  record.Regions{Rule: "events"},
		Cautions: record.Cautions(),
		Workers:  1,
		Times:    record.Times{Started: at, Finished: at},
	}
}

func create(t *testing.T, dir string, opt bundle.Options) *bundle.Bundle {
	t.Helper()
	b, err := bundle.Create(context.Background(), dir, opt)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { b.Abort() })
	return b
}

func put(b *bundle.Bundle, name, content string, opts ...bundle.FileOption) error {
	w, err := b.File(name, opts...)
	if err != nil {
		return err
	}
	if _, err := io.WriteString(w, content); err != nil {
		w.Close()
		return err
	}
	return w.Close()
}

func make1(t *testing.T, dir, content string, opt bundle.Options) {
	t.Helper()
	b := create(t, dir, opt)
	if err := errors.Join(put(b, "regions.geojson", content), put(b, "groups/may/peaks.geojson", "p"), put(b, "report.html", "r", bundle.Varies)); err != nil {
		t.Fatal(err)
	}
	if err := b.Commit(rec()); err != nil {
		t.Fatal(err)
	}
}

// tree lists what is in a folder, hidden names included.
func tree(t *testing.T, dir string) string {
	t.Helper()
	var out []string
	filepath.WalkDir(dir, func(p string, d os.DirEntry, err error) error {
		if err == nil && !d.IsDir() {
			rel, _ := filepath.Rel(dir, p)
			b, _ := os.ReadFile(p)
			out = append(out, filepath.ToSlash(rel)+"="+string(b[:min(len(b), 10)]))
		}
		return err
	})
	return strings.Join(out, " ")
}

const record0 = "run.json={\n  \"recor"

func TestCommit(t *testing.T) {
	parent := t.TempDir()
	dir := filepath.Join(parent, "out")
	make1(t, dir, "v1", bundle.Options{})
	want := "out/groups/may/peaks.geojson=p out/regions.geojson=v1 out/report.html=r out/" + record0
	if got := tree(t, parent); got != want {
		t.Errorf("%q", got)
	}
	f, _ := os.Open(filepath.Join(dir, bundle.RecordName))
	defer f.Close()
	r, err := record.Read(f)
	if err != nil || len(r.Files) != 2 || r.Files[1].Name != "regions.geojson" || r.Files[1].Bytes != 2 || len(r.Times.Files) != 1 {
		t.Error(r, err)
	}
	// FIPS 180-4 by coreutils: printf v1 | sha256sum
	if r.Files[1].SHA256 != "3bfc269594ef649228e9a74bab00f042efc91d5acc6fbee31a382e80d42388fe" {
		t.Error(r.Files[1].SHA256)
	}
}

func TestReplace(t *testing.T) {
	parent := t.TempDir()
	dir := filepath.Join(parent, "out")
	make1(t, dir, "v1", bundle.Options{Replace: true}) // nothing there: fine
	refuse := func(why string, opt bundle.Options) {
		t.Helper()
		before := tree(t, parent)
		b, err := bundle.Create(context.Background(), dir, opt)
		if !errors.Is(err, bundle.ErrExists) || !strings.Contains(err.Error(), why) {
			t.Errorf("%q: %v", why, err)
			if b != nil {
				b.Abort()
			}
		}
		if got := tree(t, parent); got != before {
			t.Errorf("%q before, %q after a refusal", before, got)
		}
	}
	refuse("--replace", bundle.Options{})
	make1(t, dir, "v2", bundle.Options{Replace: true})
	if got := tree(t, parent); !strings.Contains(got, "out/regions.geojson=v2") || strings.Contains(got, ".drumlin") {
		t.Error(got)
	}
	notes := filepath.Join(dir, "groups", "notes.txt")
	os.WriteFile(notes, nil, 0o666)
	refuse("groups/notes.txt", bundle.Options{Replace: true})
	os.Remove(notes)
	os.WriteFile(filepath.Join(dir, "run.json"), []byte(`{"record":"other"}`), 0o666)
	refuse("no earlier bundle", bundle.Options{Replace: true})
	os.RemoveAll(dir)
	os.Mkdir(dir, 0o777)
	refuse("no earlier bundle", bundle.Options{Replace: true}) // not even an empty folder
	os.Remove(dir)
	os.WriteFile(dir, nil, 0o666)
	refuse("not a folder", bundle.Options{Replace: true})
}

func TestTargetAppearsMeanwhile(t *testing.T) {
	parent := t.TempDir()
	dir := filepath.Join(parent, "out")
	b := create(t, dir, bundle.Options{})
	if err := put(b, "a", "a"); err != nil {
		t.Fatal(err)
	}
	os.Mkdir(dir, 0o777)
	if err := b.Commit(rec()); !errors.Is(err, bundle.ErrExists) {
		t.Error(err)
	}
	if got := tree(t, parent); got != "" {
		t.Error(got)
	}
}

func TestNothingIsLeft(t *testing.T) {
	parent := t.TempDir()
	dir := filepath.Join(parent, "out")
	check := func(name string) {
		t.Helper()
		if got := tree(t, parent); got != "" {
			t.Errorf("%s leaves %q", name, got)
		}
		if e, _ := os.ReadDir(parent); len(e) != 0 {
			t.Errorf("%s leaves %v", name, e)
		}
	}
	b := create(t, dir, bundle.Options{})
	put(b, "a/b", "x")
	if err := errors.Join(b.Abort(), b.Abort()); err != nil {
		t.Error(err)
	}
	check("abort")
	if err := put(b, "c", "x"); err == nil {
		t.Error("file after abort")
	}
	if err := b.Commit(rec()); err == nil {
		t.Error("commit after abort")
	}

	b = create(t, dir, bundle.Options{})
	if _, err := b.File("open"); err != nil {
		t.Fatal(err)
	}
	if err := b.Commit(rec()); err == nil || !strings.Contains(err.Error(), "open was not closed") {
		t.Error(err)
	}
	check("an open file at the commit")

	b = create(t, dir, bundle.Options{})
	if err := b.Commit(&record.Record{}); err == nil {
		t.Error("a faulty record was committed")
	}
	check("a faulty record")

	ctx, cancel := context.WithCancel(context.Background())
	b, err := bundle.Create(ctx, dir, bundle.Options{})
	if err != nil {
		t.Fatal(err)
	}
	w, err := b.File("a")
	if err != nil {
		t.Fatal(err)
	}
	cancel()
	if _, err := w.Write([]byte("x")); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
	w.Close()
	if err := b.Commit(rec()); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
	check("cancel")
	if _, err := bundle.Create(ctx, dir, bundle.Options{}); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}

	// a cancel alone is enough
	ctx, cancel = context.WithCancel(context.Background())
	if _, err := bundle.Create(ctx, dir, bundle.Options{}); err != nil {
		t.Fatal(err)
	}
	cancel()
	for range 200 {
		if e, _ := os.ReadDir(parent); len(e) == 0 {
			break
		}
		time.Sleep(10 * time.Millisecond)
	}
	check("cancel without abort")
}

func TestFileNames(t *testing.T) {
	b := create(t, filepath.Join(t.TempDir(), "out"), bundle.Options{})
	for _, name := range []string{"", ".", "..", "../x", "/x", "a/../../x", "a//b", "a/", "./a", `a\b`, "run.json", "a\x00"} {
		if _, err := b.File(name); err == nil {
			t.Errorf("%q passed", name)
		}
	}
	if err := put(b, "a", ""); err != nil {
		t.Error(err)
	}
	if err := put(b, "a", ""); err == nil {
		t.Error("twice")
	}
}

func TestParent(t *testing.T) {
	parent := t.TempDir()
	os.WriteFile(filepath.Join(parent, "file"), nil, 0o666)
	for dir, kind := range map[string]error{
		filepath.Join(parent, "none", "out"): bundle.ErrOutput,
		filepath.Join(parent, "file", "out"): bundle.ErrOutput,
		"":                                   bundle.ErrExists,
		".":                                  bundle.ErrExists,
		"..":                                 bundle.ErrExists,
		"/":                                  bundle.ErrExists,
	} {
		if _, err := bundle.Create(context.Background(), dir, bundle.Options{}); !errors.Is(err, kind) {
			t.Errorf("%q: %v", dir, err)
		}
	}
}

func TestOneWriter(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	var wg sync.WaitGroup
	var mu sync.Mutex
	var got []*bundle.Bundle
	for range 16 {
		wg.Go(func() {
			b, err := bundle.Create(context.Background(), dir, bundle.Options{})
			if err != nil {
				if !errors.Is(err, bundle.ErrLocked) || !strings.Contains(err.Error(), "process") {
					t.Error(err)
				}
				return
			}
			mu.Lock()
			got = append(got, b)
			mu.Unlock()
		})
	}
	wg.Wait()
	if len(got) != 1 {
		t.Fatalf("%d writers", len(got))
	}
	got[0].Abort()
	create(t, dir, bundle.Options{})
	create(t, dir+"-b", bundle.Options{}) // another target is free
}

func TestWriteFile(t *testing.T) {
	ctx := context.Background()
	dir := t.TempDir()
	name := filepath.Join(dir, "x.tally")
	say := func(s string) func(io.Writer) error {
		return func(w io.Writer) error { _, err := io.WriteString(w, s); return err }
	}
	if err := bundle.WriteFile(ctx, name, false, say("one")); err != nil {
		t.Fatal(err)
	}
	if err := bundle.WriteFile(ctx, name, false, say("two")); !errors.Is(err, bundle.ErrExists) {
		t.Error(err)
	}
	broken := errors.New("broken")
	if err := bundle.WriteFile(ctx, name, true, func(io.Writer) error { return broken }); !errors.Is(err, broken) {
		t.Error(err)
	}
	if got := tree(t, dir); got != "x.tally=one" {
		t.Error(got)
	}
	if err := bundle.WriteFile(ctx, name, true, say("three")); err != nil {
		t.Error(err)
	}
	if err := bundle.WriteFile(ctx, dir, true, say("")); !errors.Is(err, bundle.ErrExists) {
		t.Error(err)
	}
	if err := bundle.WriteFile(ctx, filepath.Join(dir, "none", "x"), true, say("")); !errors.Is(err, bundle.ErrOutput) {
		t.Error(err)
	}
	if got := tree(t, dir); got != "x.tally=three" {
		t.Error(got)
	}
}
