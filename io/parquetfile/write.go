package parquetfile

import (
	"errors"
	"fmt"
	"io"
	"maps"
	"slices"
	"time"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/metadata"
	"github.com/apache/arrow/go/v17/parquet/schema"
)

// ColumnType is what a written column holds.
type ColumnType uint8

const (
	// Float64 columns are DOUBLE.
	Float64 ColumnType = iota
	// Int64 columns are INT64.
	Int64
	// Text columns are UTF-8 BYTE_ARRAY.
	Text
	// Timestamp columns are INT64 microseconds since 1970 in UTC.
	Timestamp
)

// Column is a named run of values: one of the slices is filled, as Type says.
// All columns are required: no nulls.
type Column struct {
	Name   string
	Type   ColumnType
	Floats []float64
	Ints   []int64 // Int64 and, in microseconds, Timestamp
	Texts  []string
}

// Len returns the number of values.
func (c Column) Len() int {
	switch c.Type {
	case Float64:
		return len(c.Floats)
	case Text:
		return len(c.Texts)
	}
	return len(c.Ints)
}

// Microseconds turns times into the values of a Timestamp column.
func Microseconds(t []time.Time) []int64 {
	out := make([]int64, len(t))
	for i, v := range t {
		out[i] = v.UnixMicro()
	}
	return out
}

// WriteOptions says how a file is written. The zero value is the default:
// zstd, dictionaries for text only, a million rows in a row group.
type WriteOptions struct {
	RowGroupRows int               // rows in a row group of Write; default 1,000,000
	Dictionary   bool              // dictionaries for numbers too
	Uncompressed bool              // no compression
	PageV2       bool              // data pages of version 2
	PageBytes    int               // unpacked bytes of a page; default 1 MiB
	Metadata     map[string]string // of the file, written in the order of the keys
}

// Writer writes a Parquet file row group by row group and holds one row group
// at most. The same calls give the same bytes. It is not safe for sharing.
type Writer struct {
	w     *file.Writer
	names []string
	types []ColumnType
}

// NewWriter starts a file with the columns' names and types; their values are
// not looked at. Nothing is flushed to w before the first row group.
func NewWriter(w io.Writer, columns []Column, opt WriteOptions) (*Writer, error) {
	if len(columns) == 0 {
		return nil, errors.New("parquet: no columns to write")
	}
	props := []parquet.WriterProperty{
		parquet.WithCreatedBy("drumlin"),
		parquet.WithDictionaryDefault(opt.Dictionary),
		parquet.WithVersion(parquet.V2_6),
		parquet.WithBatchSize(1 << 16),
	}
	if !opt.Uncompressed {
		props = append(props, parquet.WithCompression(compress.Codecs.Zstd))
	}
	if opt.PageV2 {
		props = append(props, parquet.WithDataPageVersion(parquet.DataPageV2))
	}
	if opt.PageBytes > 0 {
		props = append(props, parquet.WithDataPageSize(int64(opt.PageBytes)))
	}
	out := &Writer{}
	var nodes schema.FieldList
	for _, c := range columns {
		var n schema.Node
		var err error
		switch c.Type {
		case Float64:
			n = schema.NewFloat64Node(c.Name, parquet.Repetitions.Required, -1)
		case Int64:
			n = schema.NewInt64Node(c.Name, parquet.Repetitions.Required, -1)
		case Text:
			n, err = schema.NewPrimitiveNodeLogical(c.Name, parquet.Repetitions.Required, schema.StringLogicalType{}, parquet.Types.ByteArray, -1, -1)
			props = append(props, parquet.WithDictionaryFor(c.Name, true))
		case Timestamp:
			n, err = schema.NewPrimitiveNodeLogical(c.Name, parquet.Repetitions.Required,
				schema.NewTimestampLogicalType(true, schema.TimeUnitMicros), parquet.Types.Int64, -1, -1)
		default:
			err = fmt.Errorf("parquet: column %q has no type", c.Name)
		}
		if err != nil {
			return nil, err
		}
		nodes = append(nodes, n)
		out.names = append(out.names, c.Name)
		out.types = append(out.types, c.Type)
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, nodes, -1)
	if err != nil {
		return nil, err
	}
	err = noPanic(func() error {
		with := []file.WriteOption{file.WithWriterProps(parquet.NewWriterProperties(props...))}
		if len(opt.Metadata) > 0 {
			kv := metadata.NewKeyValueMetadata()
			for _, k := range slices.Sorted(maps.Keys(opt.Metadata)) {
				if err := kv.Append(k, opt.Metadata[k]); err != nil {
					return err
				}
			}
			with = append(with, file.WithWriteMetadata(kv))
		}
		out.w = file.NewParquetWriter(w, root, with...)
		return nil
	})
	if err != nil {
		return nil, err
	}
	return out, nil
}

// WriteRowGroup writes one row group: the columns in the order of NewWriter,
// all equally long. It does not keep the slices.
func (w *Writer) WriteRowGroup(columns []Column) error {
	if len(columns) != len(w.types) {
		return fmt.Errorf("parquet: %d columns where %d were announced", len(columns), len(w.types))
	}
	for i, c := range columns {
		if c.Type != w.types[i] || c.Name != w.names[i] || c.Len() != columns[0].Len() {
			return fmt.Errorf("parquet: column %q differs in name, type or length from what was announced", c.Name)
		}
	}
	return noPanic(func() error {
		rg := w.w.AppendRowGroup()
		for _, c := range columns {
			cw, err := rg.NextColumn()
			if err != nil {
				return err
			}
			switch t := cw.(type) {
			case *file.Float64ColumnChunkWriter:
				_, err = t.WriteBatch(c.Floats, nil, nil)
			case *file.Int64ColumnChunkWriter:
				_, err = t.WriteBatch(c.Ints, nil, nil)
			case *file.ByteArrayColumnChunkWriter:
				vals := make([]parquet.ByteArray, len(c.Texts))
				for i, s := range c.Texts {
					vals[i] = parquet.ByteArray(s)
				}
				_, err = t.WriteBatch(vals, nil, nil)
			}
			if err != nil {
				return err
			}
			if err := cw.Close(); err != nil {
				return err
			}
		}
		return rg.Close()
	})
}

// Close writes the footer. It does not close the underlying writer unless that
// is an io.Closer, which the library closes.
func (w *Writer) Close() error { return noPanic(w.w.Close) }

// Write writes whole columns as one file.
func Write(w io.Writer, columns []Column, opt WriteOptions) error {
	out, err := NewWriter(w, columns, opt)
	if err != nil {
		return err
	}
	step := opt.RowGroupRows
	if step <= 0 {
		step = 1_000_000
	}
	n := columns[0].Len()
	for _, c := range columns {
		if c.Len() != n {
			return fmt.Errorf("parquet: column %q has %d values, %q has %d", c.Name, c.Len(), columns[0].Name, n)
		}
	}
	for at := 0; at < n; at += step {
		end := min(at+step, n)
		part := make([]Column, len(columns))
		for i, c := range columns {
			part[i] = Column{Name: c.Name, Type: c.Type}
			switch c.Type {
			case Float64:
				part[i].Floats = c.Floats[at:end]
			case Text:
				part[i].Texts = c.Texts[at:end]
			default:
				part[i].Ints = c.Ints[at:end]
			}
		}
		if err := out.WriteRowGroup(part); err != nil {
			return err
		}
	}
	return out.Close()
}

// noPanic turns a panic of the library into an error.
func noPanic(fn func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("parquet: writing failed: %v", r)
		}
	}()
	return fn()
}
