package arrowfile

import (
	"fmt"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"

	"drumlin/io/events"
)

// numeric tells whether a column's values can be read as float64.
func numeric(t arrow.DataType) bool {
	switch t.ID() {
	case arrow.INT8, arrow.INT16, arrow.INT32, arrow.INT64, arrow.UINT8, arrow.UINT16, arrow.UINT32, arrow.UINT64,
		arrow.FLOAT16, arrow.FLOAT32, arrow.FLOAT64, arrow.DECIMAL128, arrow.DECIMAL256:
		return true
	}
	return false
}

// values writes the leaf's values of rows from on into dst; a null, of the
// leaf or of a struct above it, is events.Null.
func (l leaf) values(dst []float64, rec arrow.Record, from int) error {
	col := rec.Column(l.path[0])
	above := []arrow.Array{}
	for _, i := range l.path[1:] {
		st, ok := col.(*array.Struct)
		if !ok || i >= st.NumField() {
			return fmt.Errorf("column %s is %s where the schema has a struct", rec.ColumnName(l.path[0]), col.DataType())
		}
		above = append(above, col)
		col = st.Field(i)
	}
	if !arrow.TypeEqual(col.DataType(), l.typ) || col.Len() < from+len(dst) {
		return fmt.Errorf("column %s holds %d values of %s where %d of %s are announced", rec.ColumnName(l.path[0]), col.Len(), col.DataType(), rec.NumRows(), l.typ)
	}
	if err := convert(dst, col, from); err != nil {
		return err
	}
	for _, a := range append(above, col) {
		if a.NullN() == 0 {
			continue
		}
		for i := range dst {
			if a.IsNull(from + i) {
				dst[i] = events.Null
			}
		}
	}
	return nil
}

func fill[T int8 | int16 | int32 | int64 | uint8 | uint16 | uint32 | uint64 | float32 | float64](dst []float64, v []T, from int) {
	for i, x := range v[from : from+len(dst)] {
		dst[i] = float64(x)
	}
}

func convert(dst []float64, col arrow.Array, from int) error {
	switch c := col.(type) {
	case *array.Float64:
		copy(dst, c.Float64Values()[from:from+len(dst)])
	case *array.Float32:
		fill(dst, c.Float32Values(), from)
	case *array.Int8:
		fill(dst, c.Int8Values(), from)
	case *array.Int16:
		fill(dst, c.Int16Values(), from)
	case *array.Int32:
		fill(dst, c.Int32Values(), from)
	case *array.Int64:
		fill(dst, c.Int64Values(), from)
	case *array.Uint8:
		fill(dst, c.Uint8Values(), from)
	case *array.Uint16:
		fill(dst, c.Uint16Values(), from)
	case *array.Uint32:
		fill(dst, c.Uint32Values(), from)
	case *array.Uint64:
		fill(dst, c.Uint64Values(), from)
	case *array.Float16:
		for i, x := range c.Values()[from : from+len(dst)] {
			dst[i] = float64(x.Float32())
		}
	case *array.Decimal128:
		scale := c.DataType().(*arrow.Decimal128Type).Scale
		for i, x := range c.Values()[from : from+len(dst)] {
			dst[i] = x.ToFloat64(scale)
		}
	case *array.Decimal256:
		scale := c.DataType().(*arrow.Decimal256Type).Scale
		for i, x := range c.Values()[from : from+len(dst)] {
			dst[i] = x.ToFloat64(scale)
		}
	default:
		return fmt.Errorf("a column of %s holds no numbers", col.DataType())
	}
	return nil
}
