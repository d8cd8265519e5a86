package arrowfile

import (
	"errors"
	"fmt"
	"io"
	"maps"
	"slices"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/bitutil"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"

	"drumlin/io/events"
)

// WriteOptions says how a file is written. The zero value is the default:
// plain bodies, no metadata.
type WriteOptions struct {
	Zstd, LZ4 bool              // packed bodies
	Metadata  map[string]string // of the schema, written in the order of the keys
}

// Writer writes float64 columns as an Arrow IPC file, one record batch a call,
// and holds one at most. A value events.Null is written as a null. The same
// calls give the same bytes. It is not safe for sharing.
type Writer struct {
	w      *ipc.FileWriter
	schema *arrow.Schema
}

// counted is a writer that knows its place, all the library seeks for.
type counted struct {
	w  io.Writer
	at int64
}

func (c *counted) Write(p []byte) (int, error) {
	n, err := c.w.Write(p)
	c.at += int64(n)
	return n, err
}

// Seek implements io.Seeker for the present place alone.
func (c *counted) Seek(offset int64, whence int) (int64, error) {
	if offset != 0 || whence != io.SeekCurrent {
		return 0, errors.New("arrow: the output cannot be moved back")
	}
	return c.at, nil
}

// NewWriter starts a file with the columns' names.
func NewWriter(w io.Writer, names []string, opt WriteOptions) (*Writer, error) {
	if len(names) == 0 {
		return nil, errors.New("arrow: no columns to write")
	}
	fields := make([]arrow.Field, len(names))
	for i, n := range names {
		fields[i] = arrow.Field{Name: n, Type: arrow.PrimitiveTypes.Float64, Nullable: true}
	}
	keys := slices.Sorted(maps.Keys(opt.Metadata))
	values := make([]string, len(keys))
	for i, k := range keys {
		values[i] = opt.Metadata[k]
	}
	meta := arrow.NewMetadata(keys, values)
	out := &Writer{schema: arrow.NewSchema(fields, &meta)}
	opts := []ipc.Option{ipc.WithSchema(out.schema)}
	switch {
	case opt.Zstd:
		opts = append(opts, ipc.WithZstd())
	case opt.LZ4:
		opts = append(opts, ipc.WithLZ4())
	}
	err := noPanic(func() (err error) {
		out.w, err = ipc.NewFileWriter(&counted{w: w}, opts...)
		return err
	})
	if err != nil {
		return nil, err
	}
	return out, nil
}

// WriteBatch writes one record batch: equally long columns in the order of
// NewWriter. It does not keep the slices.
func (w *Writer) WriteBatch(columns [][]float64) error {
	if len(columns) != w.schema.NumFields() {
		return fmt.Errorf("arrow: %d columns where %d were announced", len(columns), w.schema.NumFields())
	}
	n := len(columns[0])
	cols := make([]arrow.Array, len(columns))
	for i, c := range columns {
		if len(c) != n {
			return fmt.Errorf("arrow: column %d has %d values, column 1 has %d", i+1, len(c), n)
		}
		var valid []byte
		nulls := 0
		for j, v := range c {
			if events.IsNull(v) {
				if valid == nil {
					valid = make([]byte, bitutil.BytesForBits(int64(n)))
					bitutil.SetBitsTo(valid, 0, int64(n), true)
				}
				bitutil.ClearBit(valid, j)
				nulls++
			}
		}
		var mask *memory.Buffer
		if valid != nil {
			mask = memory.NewBufferBytes(valid)
		}
		data := array.NewData(arrow.PrimitiveTypes.Float64, n, []*memory.Buffer{mask, memory.NewBufferBytes(arrow.Float64Traits.CastToBytes(c))}, nil, nulls, 0)
		cols[i] = array.NewFloat64Data(data)
	}
	return noPanic(func() error { return w.w.Write(array.NewRecord(w.schema, cols, int64(n))) })
}

// Close writes the footer. It does not close the underlying writer.
func (w *Writer) Close() error { return noPanic(w.w.Close) }

// noPanic turns a panic of the library into an error.
func noPanic(fn func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("arrow: writing failed: %v", r)
		}
	}()
	return fn()
}
