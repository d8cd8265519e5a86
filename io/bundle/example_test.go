package bundle_test

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"drumlin/io/bundle"
)

func ExampleCreate() {
	parent, _ := os.MkdirTemp("", "example")
	defer os.RemoveAll(parent)
	b, err := bundle.Create(context.Background(), filepath.Join(parent, "may"), bundle.Options{})
	if err != nil {
		fmt.Println(err)
		return
	}
	defer b.Abort()
	w, err := b.File("regions.geojson")
	if err != nil {
		fmt.Println(err)
		return
	}
	io.WriteString(w, "{}\n")
	if err := w.Close(); err != nil {
		fmt.Println(err)
		return
	}
	r := rec() // the record of the run
	fmt.Println(b.Commit(r), r.Files[0].Name, r.Files[0].Bytes)
	// Output: <nil> regions.geojson 3
}
