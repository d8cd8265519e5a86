package arrowfile_test

import (
	"bytes"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"

	"drumlin/io/arrowfile"
	"drumlin/io/events"
)

// TestTyped: text, dictionaries of text, times and truth values, with nulls,
// over several records.
func TestTyped(t *testing.T) {
	dict := &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int8, ValueType: arrow.BinaryTypes.String}
	schema := arrow.NewSchema([]arrow.Field{
		{Name: "text", Type: arrow.BinaryTypes.String, Nullable: true}, {Name: "large", Type: arrow.BinaryTypes.LargeString, Nullable: true},
		{Name: "kind", Type: dict, Nullable: true},
		{Name: "s", Type: &arrow.TimestampType{Unit: arrow.Second, TimeZone: "Europe/Oslo"}, Nullable: true},
		{Name: "ns", Type: &arrow.TimestampType{Unit: arrow.Nanosecond}, Nullable: true},
		{Name: "d32", Type: arrow.FixedWidthTypes.Date32, Nullable: true}, {Name: "d64", Type: arrow.FixedWidthTypes.Date64, Nullable: true},
		{Name: "open", Type: arrow.FixedWidthTypes.Boolean, Nullable: true},
		{Name: "raw", Type: arrow.BinaryTypes.Binary, Nullable: true},
	}, nil)
	r := array.NewRecordBuilder(memory.DefaultAllocator, schema)
	var b bytes.Buffer
	w := ipc.NewWriter(&b, ipc.WithSchema(schema), ipc.WithDictionaryDeltas(true))
	const rows = 20_000
	for range 2 {
		for i := range rows {
			if i%5 == 4 {
				for _, f := range r.Fields() {
					f.AppendNull()
				}
				continue
			}
			word := strings.Repeat("x", i%3)
			r.Field(0).(*array.StringBuilder).Append(word)
			r.Field(1).(*array.LargeStringBuilder).Append(word)
			if err := r.Field(2).(*array.BinaryDictionaryBuilder).AppendString(word); err != nil {
				t.Fatal(err)
			}
			r.Field(3).(*array.TimestampBuilder).Append(arrow.Timestamp(i))
			r.Field(4).(*array.TimestampBuilder).Append(arrow.Timestamp(-i))
			r.Field(5).(*array.Date32Builder).Append(arrow.Date32(i))
			r.Field(6).(*array.Date64Builder).Append(arrow.Date64(i * 86400000))
			r.Field(7).(*array.BooleanBuilder).Append(i%2 == 1)
			r.Field(8).(*array.BinaryBuilder).Append([]byte(word))
		}
		if err := w.Write(r.NewRecord()); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	f, err := arrowfile.Open(saved(t, b.Bytes()), arrowfile.Options{})
	if err != nil {
		t.Fatal(err)
	}
	columns := []string{"text", "open", "large", "kind", "s", "ns", "d32", "d64"}
	classes := map[string]events.Class{"text": events.Text, "large": events.Text, "kind": events.Text, "s": events.Instant, "ns": events.WallClock, "d32": events.WallClock, "d64": events.WallClock, "open": events.Truth}
	for _, field := range f.Fields() {
		if field.Class != classes[field.Name] || field.Numeric != (field.Name == "open") || field.Readable() != (field.Name != "raw") {
			t.Errorf("%+v", field)
		}
	}
	row := 0
	err = f.Read(t.Context(), 0, columns, func(b events.Batch) error {
		for i := range b.Len() {
			n := row % rows
			for k, name := range columns {
				v := b.Columns[k][i]
				if n%5 == 4 {
					if !events.IsNull(v) {
						t.Fatalf("row %d of %s: %v, not null", row, name, v)
					}
					continue
				}
				want := map[string]float64{"open": float64(n % 2), "s": float64(n) * 1e6, "ns": float64((-n - 999) / 1000), "d32": float64(n) * 86400e6, "d64": float64(n) * 86400e6}[name]
				if classes[name] == events.Text {
					if word := b.WordsOf(k)[int(v)]; word != strings.Repeat("x", n%3) {
						t.Fatalf("row %d of %s: %q", row, name, word)
					}
				} else if v != want {
					t.Fatalf("row %d of %s: %v, want %v", row, name, v, want)
				}
			}
			row++
		}
		return nil
	})
	if err != nil || row != 2*rows {
		t.Error(row, err)
	}
}
