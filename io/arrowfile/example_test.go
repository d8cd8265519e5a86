package arrowfile_test

import (
	"context"
	"fmt"
	"os"
	"path/filepath"

	"drumlin/io/arrowfile"
	"drumlin/io/events"
)

func ExampleFile() {
	dir, err := os.MkdirTemp("", "arrowfile")
	if err != nil {
		panic(err)
	}
	defer os.RemoveAll(dir)
	path := filepath.Join(dir, "a.arrow")
	h, err := os.Create(path)
	if err != nil {
		panic(err)
	}
	w, err := arrowfile.NewWriter(h, []string{"x", "y"}, arrowfile.WriteOptions{LZ4: true})
	if err != nil {
		panic(err)
	}
	if err := w.WriteBatch([][]float64{{1, 2}, {3, events.Null}}); err != nil {
		panic(err)
	}
	if err := w.Close(); err != nil {
		panic(err)
	}
	if err := h.Close(); err != nil {
		panic(err)
	}
	f, err := arrowfile.Open(path, arrowfile.Options{})
	if err != nil {
		panic(err)
	}
	err = f.Read(context.Background(), 0, []string{"y"}, func(b events.Batch) error {
		fmt.Println(b.Columns[0][0], events.IsNull(b.Columns[0][1]))
		return nil
	})
	fmt.Println(err)
	// Output:
	// 3 true
	// <nil>
}
