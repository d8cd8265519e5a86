package parquetfile_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"

	"drumlin/io/events"
	"drumlin/io/parquetfile"
)

// conformanceFolder names the folder of files nobody here wrote; they are read
// in place. Without it the run is left out, loudly under DRUMLIN_CI.
func conformanceFolder(t *testing.T) string {
	t.Helper()
	dir := os.Getenv("DRUMLIN_CONFORMANCE")
	if dir == "" {
		if os.Getenv("DRUMLIN_CI") == "1" {
			t.Fatal("DRUMLIN_CONFORMANCE names no folder: the conformance run must not be left out here")
		}
		t.Skip("the conformance run was left out: DRUMLIN_CONFORMANCE names no folder")
	}
	return dir
}

// readColumn reads one column of every part.
func readColumn(f *parquetfile.File, name string) ([]float64, error) {
	var out []float64
	for p := range f.Parts() {
		n := int64(0)
		err := f.Read(context.Background(), p, []string{name}, func(b events.Batch) error {
			out = append(out, b.Columns[0]...)
			n += int64(b.Len())
			return nil
		})
		if err != nil {
			return out, err
		}
		if n != f.PartRows(p) {
			return out, fmt.Errorf("short read: %d of %d", n, f.PartRows(p))
		}
	}
	return out, nil
}

func isFault(err error) bool {
	var f *events.Fault
	return errors.As(err, &f) && !strings.Contains(f.Error(), "\n") &&
		(errors.Is(err, events.ErrMalformed) || errors.Is(err, events.ErrUnsupported) || errors.Is(err, events.ErrSetting))
}

// refused lists the files of which at least one numeric column, or the file
// itself, must be refused, and the kind of the fault. Any other must be read.
var refused = map[string]error{
	"parquet/hadoop_lz4_compressed.parquet":                  events.ErrUnsupported,
	"parquet/hadoop_lz4_compressed_larger.parquet":           events.ErrUnsupported,
	"parquet/non_hadoop_lz4_compressed.parquet":              events.ErrUnsupported,
	"parquet/datapage_v1-corrupt-checksum.parquet":           events.ErrMalformed,
	"parquet/rle-dict-uncompressed-corrupt-checksum.parquet": events.ErrMalformed,
}

func TestConformance(t *testing.T) {
	dir := conformanceFolder(t)
	var files []string
	err := filepath.WalkDir(dir, func(p string, d os.DirEntry, err error) error {
		if err == nil && strings.HasSuffix(p, ".parquet") {
			files = append(files, p)
		}
		return err
	})
	if err != nil || len(files) < 100 {
		t.Fatalf("%d files, %v", len(files), err)
	}
	for _, path := range files {
		rel, _ := filepath.Rel(dir, path)
		rel = filepath.ToSlash(rel)
		t.Run(rel, func(t *testing.T) {
			done := make(chan string, 1)
			go func() { done <- conform(path, rel) }()
			select {
			case msg := <-done:
				if msg != "" {
					t.Error(msg)
				}
			case <-time.After(20 * time.Second):
				t.Fatal("no answer after 20 s")
			}
		})
	}
}

// conform returns what is wrong with the answer to one file.
func conform(path, rel string) string {
	want, mayFail := refused[rel]
	mayFail = mayFail || strings.HasPrefix(rel, "parquet-bad/")
	var first error
	f, err := parquetfile.Open(path, parquetfile.Options{})
	if err != nil {
		first = err
	} else {
		for _, fld := range f.Fields() {
			got, err := readColumn(f, fld.Name)
			if !fld.Readable() {
				if !errors.Is(err, events.ErrUnsupported) && !errors.Is(err, events.ErrSetting) && f.Parts() > 0 {
					return fmt.Sprintf("column %s of %s is read", fld.Name, fld.Type)
				}
				continue
			}
			if err != nil {
				if first == nil {
					first = err
				}
				continue
			}
			if fld.Class != events.Plain {
				continue
			}
			if msg := oracle(path, fld.Name, got); msg != "" {
				return fld.Name + ": " + msg
			}
		}
	}
	switch {
	case first == nil && want != nil:
		return "read where it must be refused"
	case first == nil:
		return ""
	case !isFault(first):
		return fmt.Sprintf("not a fault in one line: %v", first)
	case !mayFail:
		return fmt.Sprintf("refused: %v", first)
	case want != nil && !errors.Is(first, want):
		return fmt.Sprintf("wrong kind: %v", first)
	}
	return ""
}

// oracle reads a plain float or integer column with the library's own reader,
// where that can, and compares. What the library cannot read is not compared.
func oracle(path, name string, got []float64) (msg string) {
	defer func() {
		if recover() != nil {
			msg = ""
		}
	}()
	r, err := file.OpenParquetFile(path, false)
	if err != nil {
		return ""
	}
	defer r.Close()
	col := -1
	for i := range r.MetaData().Schema.NumColumns() {
		if r.MetaData().Schema.Column(i).Path() == name {
			col = i
		}
	}
	d := r.MetaData().Schema.Column(col)
	if lt := d.LogicalType(); lt != nil && strings.Contains(lt.String(), "Decimal") {
		return ""
	}
	unsigned := strings.Contains(d.LogicalType().String(), "isSigned=false")
	at := 0
	for g := range r.NumRowGroups() {
		c, err := r.RowGroup(g).Column(col)
		if err != nil {
			return ""
		}
		n := r.RowGroup(g).NumRows()
		defs := make([]int16, n)
		vals := make([]float64, 0, n)
		total := int64(0)
		for total < n && c.HasNext() {
			var k int64
			var m int
			switch c := c.(type) {
			case *file.Float64ColumnChunkReader:
				b := make([]float64, n)
				k, m, err = c.ReadBatch(n-total, b, defs[total:], nil)
				vals = append(vals, b[:m]...)
			case *file.Float32ColumnChunkReader:
				b := make([]float32, n)
				k, m, err = c.ReadBatch(n-total, b, defs[total:], nil)
				for _, v := range b[:m] {
					vals = append(vals, float64(v))
				}
			case *file.Int32ColumnChunkReader:
				b := make([]int32, n)
				k, m, err = c.ReadBatch(n-total, b, defs[total:], nil)
				for _, v := range b[:m] {
					if unsigned {
						vals = append(vals, float64(uint32(v)))
					} else {
						vals = append(vals, float64(v))
					}
				}
			case *file.Int64ColumnChunkReader:
				b := make([]int64, n)
				k, m, err = c.ReadBatch(n-total, b, defs[total:], nil)
				for _, v := range b[:m] {
					if unsigned {
						vals = append(vals, float64(uint64(v)))
					} else {
						vals = append(vals, float64(v))
					}
				}
			case *file.BooleanColumnChunkReader:
				b := make([]bool, n)
				k, m, err = c.ReadBatch(n-total, b, defs[total:], nil)
				for _, v := range b[:m] {
					x := 0.0
					if v {
						x = 1
					}
					vals = append(vals, x)
				}
			default:
				return ""
			}
			if err != nil || k == 0 {
				return ""
			}
			total += k
		}
		if total != n {
			return ""
		}
		j := 0
		for i := range int(n) {
			want := events.Null
			if d.MaxDefinitionLevel() == 0 || defs[i] == d.MaxDefinitionLevel() {
				want = vals[j]
				j++
			}
			if math.Float64bits(want) != math.Float64bits(got[at]) && !(want != want && got[at] != got[at] && events.IsNull(want) == events.IsNull(got[at])) {
				return fmt.Sprintf("row %d is %v, the library says %v", at, got[at], want)
			}
			at++
		}
	}
	_ = parquet.Types
	return ""
}

// TestSplitTwins compares byte-stream-split columns with their plain twins.
func TestSplitTwins(t *testing.T) {
	dir := conformanceFolder(t)
	f, err := parquetfile.Open(filepath.Join(dir, "parquet", "byte_stream_split_extended.gzip.parquet"), parquetfile.Options{})
	if err != nil {
		t.Fatal(err)
	}
	pairs := 0
	for _, fld := range f.Fields() {
		base, ok := strings.CutSuffix(fld.Name, "_plain")
		if !ok || !fld.Numeric {
			continue
		}
		a, err := readColumn(f, fld.Name)
		if err != nil {
			t.Fatal(err)
		}
		b, err := readColumn(f, base+"_byte_stream_split")
		if err != nil {
			t.Fatal(err)
		}
		if len(a) != len(b) || len(a) == 0 {
			t.Fatalf("%s: %d and %d rows", base, len(a), len(b))
		}
		for i := range a {
			if math.Float64bits(a[i]) != math.Float64bits(b[i]) {
				t.Fatalf("%s row %d: plain %v, split %v", base, i, a[i], b[i])
			}
		}
		pairs++
	}
	if pairs < 5 {
		t.Errorf("only %d pairs compared", pairs)
	}
}
