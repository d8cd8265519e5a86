package csvfile_test

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"drumlin/io/csvfile"
	"drumlin/io/events"
)

// What is written is read back to the bit, nulls as nulls, odd names as names.
func TestWriteReadsBack(t *testing.T) {
	names := []string{"x", `a "quoted, name`}
	cols := [][]float64{{0.1, -1e-300, 1e22, 123456.75, 5}, {events.Null, math.MaxFloat64, -0.0, 1.0 / 3, math.Inf(-1)}}
	var b bytes.Buffer
	w, err := csvfile.NewWriter(&b, names)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.WriteBatch(cols); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "a.csv")
	if err := os.WriteFile(path, b.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	f, err := csvfile.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	err = f.Read(context.Background(), 0, names, func(got events.Batch) error {
		for k := range cols {
			for i, v := range cols[k] {
				if g := got.Columns[k][i]; math.Float64bits(g) != math.Float64bits(v) && g != v {
					t.Errorf("column %d, row %d: %v, want %v", k, i, g, v)
				}
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if err := w.WriteBatch(cols[:1]); err == nil {
		t.Error("too few columns were taken")
	}
	if _, err := csvfile.NewWriter(&b, nil); err == nil {
		t.Error("no columns were taken")
	}
}

func ExampleWriter() {
	w, err := csvfile.NewWriter(os.Stdout, []string{"x", "density"})
	if err != nil {
		panic(err)
	}
	if err := w.WriteBatch([][]float64{{1, 2.5}, {0.25, 1e-9}}); err != nil {
		panic(err)
	}
	fmt.Println(w.Close())
	// Output:
	// x,density
	// 1,0.25
	// 2.5,1e-09
	// <nil>
}
