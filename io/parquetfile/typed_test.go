package parquetfile_test

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/schema"

	"drumlin/io/events"
	"drumlin/io/parquetfile"
)

// typed writes optional columns of text and times: row i holds number v[i] of
// its unit, or the text of it, or nothing where null[i].
func typed(t *testing.T, v []int64, null []bool, props ...parquet.WriterProperty) []byte {
	t.Helper()
	opt := parquet.Repetitions.Optional
	node := func(name string, lt schema.LogicalType, pt parquet.Type) schema.Node {
		n, err := schema.NewPrimitiveNodeLogical(name, opt, lt, pt, -1, -1)
		if err != nil {
			t.Fatal(err)
		}
		return n
	}
	nodes := schema.FieldList{
		node("text", schema.StringLogicalType{}, parquet.Types.ByteArray),
		node("bare", schema.NoLogicalType{}, parquet.Types.ByteArray),
		node("ms", schema.NewTimestampLogicalType(true, schema.TimeUnitMillis), parquet.Types.Int64),
		node("us", schema.NewTimestampLogicalType(false, schema.TimeUnitMicros), parquet.Types.Int64),
		node("ns", schema.NewTimestampLogicalType(true, schema.TimeUnitNanos), parquet.Types.Int64),
		node("day", schema.DateLogicalType{}, parquet.Types.Int32),
		schema.NewInt96Node("i96", opt, -1),
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, nodes, -1)
	if err != nil {
		t.Fatal(err)
	}
	var buf bytes.Buffer
	props = append([]parquet.WriterProperty{parquet.WithDataPageSize(3000)}, props...)
	w := file.NewParquetWriter(&buf, root, file.WithWriterProps(parquet.NewWriterProperties(props...)))
	rg := w.AppendRowGroup()
	defs := make([]int16, len(null))
	var live []int64
	for i, n := range null {
		if !n {
			defs[i] = 1
			live = append(live, v[i])
		}
	}
	for range nodes {
		c, err := rg.NextColumn()
		if err != nil {
			t.Fatal(err)
		}
		switch c := c.(type) {
		case *file.ByteArrayColumnChunkWriter:
			var b []parquet.ByteArray
			for _, x := range live {
				b = append(b, parquet.ByteArray(textOf(x)))
			}
			_, err = c.WriteBatch(b, defs, nil)
		case *file.Int64ColumnChunkWriter:
			_, err = c.WriteBatch(live, defs, nil)
		case *file.Int32ColumnChunkWriter:
			var b []int32
			for _, x := range live {
				b = append(b, int32(x))
			}
			_, err = c.WriteBatch(b, defs, nil)
		case *file.Int96ColumnChunkWriter:
			var b []parquet.Int96
			for _, x := range live {
				var z parquet.Int96 // x microseconds after noon of 1970-01-02
				for k := range 8 {
					z[k] = byte(uint64((43200e6+x)*1000) >> (8 * k))
				}
				for k := range 4 {
					z[8+k] = byte(uint32(2440589) >> (8 * k))
				}
				b = append(b, z)
			}
			_, err = c.WriteBatch(b, defs, nil)
		}
		if err == nil {
			err = c.Close()
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	if err := rg.Close(); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return buf.Bytes()
}

func textOf(x int64) string { return strings.Repeat("é", int(x&3)) + fmt.Sprint(x) }

func TestTextAndTimes(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 9))
	const n = 6000
	v, null := make([]int64, n), make([]bool, n)
	for i := range v {
		v[i] = int64(r.IntN(400) - 200)
		if i > 3000 && i%3 == 0 {
			v[i] = int64(r.IntN(1 << 20))
		}
		null[i] = r.IntN(5) == 0 || i > 500 && i < 900
	}
	e := parquet.Encodings
	delta := []parquet.WriterProperty{parquet.WithDictionaryDefault(false)}
	for _, c := range []string{"ms", "us", "ns", "day"} {
		delta = append(delta, parquet.WithEncodingFor(c, e.DeltaBinaryPacked))
	}
	for name, props := range map[string][]parquet.WriterProperty{
		"dictionary":      {parquet.WithDictionaryDefault(true)},
		"full dictionary": {parquet.WithDictionaryDefault(true), parquet.WithDictionaryPageSizeLimit(2000)},
		"plain":           {parquet.WithDictionaryDefault(false)},
		"delta":           append(delta, parquet.WithEncodingFor("text", e.DeltaLengthByteArray), parquet.WithDataPageVersion(parquet.DataPageV2)),
		"prefixes":        append(delta, parquet.WithEncodingFor("text", e.DeltaByteArray), parquet.WithDataPageSize(1<<20)),
	} {
		t.Run(name, func(t *testing.T) {
			f, err := parquetfile.Open(put(t, typed(t, v, null, props...)), parquetfile.Options{BatchRows: 777})
			if err != nil {
				t.Fatal(err)
			}
			columns := []string{"text", "ms", "us", "ns", "day", "i96", "bare"}
			want := map[string]func(int64) float64{
				"ms": func(x int64) float64 { return float64(x * 1000) }, "us": func(x int64) float64 { return float64(x) },
				"ns": func(x int64) float64 { return math.Floor(float64(x) / 1000) }, "day": func(x int64) float64 { return float64(x) * 86400e6 },
				"i96": func(x int64) float64 { return float64(x) + 129600e6 },
			}
			class := map[string]events.Class{"text": events.Text, "bare": events.Text, "ms": events.Instant, "us": events.WallClock, "ns": events.Instant, "day": events.WallClock, "i96": events.Instant}
			for _, field := range f.Fields() {
				if field.Numeric || field.Class != class[field.Name] {
					t.Errorf("%+v", field)
				}
			}
			row := 0
			err = f.Read(context.Background(), 0, columns, func(b events.Batch) error {
				for i := range b.Len() {
					for k, c := range columns {
						got := b.Columns[k][i]
						if null[row] {
							if !events.IsNull(got) {
								t.Fatalf("row %d of %s: %v, not null", row, c, got)
							}
							continue
						}
						if class[c] == events.Text {
							if w := b.WordsOf(k)[int(got)]; w != textOf(v[row]) {
								t.Fatalf("row %d of %s: %q, wrote %q", row, c, w, textOf(v[row]))
							}
						} else if got != want[c](v[row]) || b.WordsOf(k) != nil {
							t.Fatalf("row %d of %s: %v, wrote %v", row, c, got, want[c](v[row]))
						}
					}
					row++
				}
				return nil
			})
			if err != nil || row != n {
				t.Fatal(row, err)
			}
			if st, ok := f.Stat(0, "ms"); !ok || st.Lo != -200000 || st.Nulls <= 0 {
				t.Errorf("statistics of ms: %+v %v", st, ok)
			}
			for _, c := range []string{"text", "i96", "none"} {
				if st, ok := f.Stat(0, c); ok {
					t.Errorf("statistics of %s: %+v", c, st)
				}
			}
		})
	}
}

// TestForeignTimes reads times that another program wrote, with the values its
// authors state.
func TestForeignTimes(t *testing.T) {
	dir := conformanceFolder(t)
	f, err := parquetfile.Open(filepath.Join(dir, "parquet", "int96_from_spark.parquet"), parquetfile.Options{})
	if err != nil {
		t.Fatal(err)
	}
	got, err := readColumn(f, "a")
	if err != nil {
		t.Fatal(err)
	}
	// 2024-01-01T20:34:56.123456Z and 2024-01-01T01:00:00Z by the file's description.
	for i, want := range map[int]string{0: "2024-01-01T20:34:56.123456Z", 1: "2024-01-01T01:00:00Z"} {
		if v, utc, ok := events.ParseTime(want); !ok || !utc || got[i] != v {
			t.Errorf("row %d: %v, want %s = %v", i, got[i], want, v)
		}
	}
}

// BenchmarkText reads a column of text with 40 different values.
func BenchmarkText(b *testing.B) {
	const rows = 2_000_000
	col := parquetfile.Column{Name: "kind", Type: parquetfile.Text}
	for i := range rows {
		col.Texts = append(col.Texts, fmt.Sprint("kind ", i*7919%40))
	}
	path := filepath.Join(b.TempDir(), "a.parquet")
	h, err := os.Create(path)
	if err != nil {
		b.Fatal(err)
	}
	if err := parquetfile.Write(h, []parquetfile.Column{col}, parquetfile.WriteOptions{}); err != nil {
		b.Fatal(err)
	}
	f, err := parquetfile.Open(path, parquetfile.Options{})
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		for p := range f.Parts() {
			if err := f.Read(context.Background(), p, []string{"kind"}, func(events.Batch) error { return nil }); err != nil {
				b.Fatal(err)
			}
		}
	}
	b.ReportMetric(float64(rows)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mrows/s")
}
