package geoparquet

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/schema"
	"github.com/paulmach/orb/encoding/wkb"

	"drumlin/io/layers"
	"drumlin/spatial"
)

// ErrWrite reports a file that could not be written.
var ErrWrite = errors.New("geoparquet not written")

// column is one leaf of the file: values of the rows that have one, and a
// definition level a row when it may be null.
type column struct {
	node   schema.Node // nil within a group
	levels []int16     // nil: required
	floats []float64
	ints   []int64
	bytes  []parquet.ByteArray
}

// Write writes one layer of a release, by its name in layers.Names.
func Write(w io.Writer, r *spatial.Release, name string, m layers.Meta) error {
	l := layers.Of(r, name, m)
	return write(w, &l)
}

func write(w io.Writer, l *layers.Layer) error {
	cols, fields, err := layerColumns(l)
	if err == nil {
		var meta []byte
		if meta, err = json.Marshal(metadata(l)); err == nil {
			err = writeFile(w, fields, cols, len(l.Features), [2]string{"geo", string(meta)})
		}
	}
	if err != nil {
		return fmt.Errorf("geoparquet: %s: %w", l.Name, err)
	}
	return nil
}

func layerColumns(l *layers.Layer) ([]*column, schema.FieldList, error) {
	var cols []*column
	var fields schema.FieldList
	add := func(n schema.Node) *column {
		c := &column{node: n}
		fields = append(fields, n)
		cols = append(cols, c)
		return c
	}
	str, err := textNode("id", parquet.Repetitions.Required)
	if err != nil {
		return nil, nil, err
	}
	id := add(str)
	geometry := add(schema.NewByteArrayNode("geometry", parquet.Repetitions.Required, -1))
	box := [4]*column{{}, {}, {}, {}}
	var parts schema.FieldList
	for _, name := range []string{"xmin", "ymin", "xmax", "ymax"} {
		parts = append(parts, schema.NewFloat64Node(name, parquet.Repetitions.Required, -1))
	}
	group, err := schema.NewGroupNode("bbox", parquet.Repetitions.Required, parts, -1)
	if err != nil {
		return nil, nil, err
	}
	fields = append(fields, group)
	cols = append(cols, box[:]...)
	var rest []*column
	for _, f := range l.Fields {
		var n schema.Node
		switch f.Kind {
		case layers.Text:
			if n, err = textNode(f.Name, parquet.Repetitions.Optional); err != nil {
				return nil, nil, err
			}
		case layers.Number:
			n = schema.NewFloat64Node(f.Name, parquet.Repetitions.Optional, -1)
		default:
			n = schema.NewInt64Node(f.Name, parquet.Repetitions.Optional, -1)
		}
		rest = append(rest, add(n))
	}
	for _, f := range l.Features {
		b, err := wkb.Marshal(f.Shape)
		if err != nil {
			return nil, nil, fmt.Errorf("%s: %w", f.ID, err)
		}
		id.bytes = append(id.bytes, parquet.ByteArray(f.ID))
		geometry.bytes = append(geometry.bytes, b)
		bound := f.Shape.Bound()
		for k, v := range [4]float64{bound.Min[0], bound.Min[1], bound.Max[0], bound.Max[1]} {
			box[k].floats = append(box[k].floats, v)
		}
		for i, c := range rest {
			c.put(f.Values[i])
		}
	}
	return cols, fields, nil
}

func textNode(name string, r parquet.Repetition) (schema.Node, error) {
	return schema.NewPrimitiveNodeLogical(name, r, schema.StringLogicalType{}, parquet.Types.ByteArray, -1, -1)
}

// put appends a value that may be absent.
func (c *column) put(v any) {
	level := int16(1)
	switch v := v.(type) {
	case float64:
		c.floats = append(c.floats, v)
	case int64:
		c.ints = append(c.ints, v)
	case string:
		c.bytes = append(c.bytes, parquet.ByteArray(v))
	default:
		level = 0
	}
	c.levels = append(c.levels, level)
}

// metadata is the value of the key "geo".
func metadata(l *layers.Layer) map[string]any {
	kind := "MultiPolygon"
	if l.Points {
		kind = "Point"
	}
	path := func(leaf string) []string { return []string{"bbox", leaf} }
	c := map[string]any{
		"encoding": "WKB", "geometry_types": []string{kind}, "edges": "planar", "orientation": "counterclockwise",
		"covering": map[string]any{"bbox": map[string]any{"xmin": path("xmin"), "ymin": path("ymin"), "xmax": path("xmax"), "ymax": path("ymax")}},
	}
	if b, ok := l.Bound(); ok {
		c["bbox"] = []float64{b.Min[0], b.Min[1], b.Max[0], b.Max[1]}
	}
	if l.Plane {
		c["crs"] = nil // not known: metres without a place
	}
	return map[string]any{"version": "1.1.0", "primary_column": "geometry", "columns": map[string]any{"geometry": c}}
}

// rowGroup is the most rows of a row group.
const rowGroup = 1 << 20

// writeFile writes columns of n rows.
func writeFile(w io.Writer, fields schema.FieldList, cols []*column, n int, meta ...[2]string) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("%w: %v", ErrWrite, r)
		}
	}()
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, fields, -1)
	if err != nil {
		return err
	}
	out := file.NewParquetWriter(onlyWriter{w}, root, file.WithWriterProps(parquet.NewWriterProperties(
		parquet.WithCreatedBy("drumlin"), parquet.WithVersion(parquet.V2_6), parquet.WithDictionaryDefault(false),
		parquet.WithCompression(compress.Codecs.Zstd))))
	for _, kv := range meta {
		if err := out.AppendKeyValueMetadata(kv[0], kv[1]); err != nil {
			return err
		}
	}
	for lo := 0; lo < n; lo += rowGroup {
		hi := min(lo+rowGroup, n)
		g := out.AppendRowGroup()
		for _, c := range cols {
			cw, err := g.NextColumn()
			if err != nil {
				return err
			}
			if err := c.write(cw, lo, hi, n); err != nil {
				return err
			}
			if err := cw.Close(); err != nil {
				return err
			}
		}
		if err := g.Close(); err != nil {
			return err
		}
	}
	return out.Close()
}

// write writes the rows [lo, hi). Nullable columns come in one row group only.
func (c *column) write(cw file.ColumnChunkWriter, lo, hi, n int) (err error) {
	levels := c.levels
	from, to := lo, hi
	if levels != nil {
		if hi-lo != n {
			return fmt.Errorf("%w: %d rows with nulls, %d at most", ErrWrite, n, rowGroup)
		}
		from, to = 0, max(len(c.floats), len(c.ints), len(c.bytes))
	}
	switch t := cw.(type) {
	case *file.Float64ColumnChunkWriter:
		_, err = t.WriteBatch(c.floats[from:to], levels, nil)
	case *file.Int64ColumnChunkWriter:
		_, err = t.WriteBatch(c.ints[from:to], levels, nil)
	case *file.ByteArrayColumnChunkWriter:
		_, err = t.WriteBatch(c.bytes[from:to], levels, nil)
	default:
		err = fmt.Errorf("%w: column of type %T", ErrWrite, cw)
	}
	return err
}

// onlyWriter hides Close, which the library would call.
type onlyWriter struct{ io.Writer }

// finite reports whether a value is a number.
func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
