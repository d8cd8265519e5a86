package geoparquet_test

import (
	"bytes"
	stdcontext "context"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/metadata"
	"github.com/apache/arrow/go/v17/parquet/schema"

	"drumlin/io/events"
	"drumlin/io/geoparquet"
	"drumlin/io/parquetfile"
)

func context() stdcontext.Context { return stdcontext.Background() }

// withGeo writes a binary column "geometry" of the cells (nil: null), a number
// "n" a row and the "geo" entry (none if "").
func withGeo(t testing.TB, geo string, cells [][]byte, props ...parquet.WriterProperty) string {
	t.Helper()
	nodes := schema.FieldList{
		schema.NewByteArrayNode("geometry", parquet.Repetitions.Optional, -1),
		schema.NewFloat64Node("n", parquet.Repetitions.Required, -1),
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, nodes, -1)
	if err != nil {
		t.Fatal(err)
	}
	kv := metadata.NewKeyValueMetadata()
	if geo != "" {
		if err := kv.Append("geo", geo); err != nil {
			t.Fatal(err)
		}
	}
	var buf bytes.Buffer
	w := file.NewParquetWriter(&buf, root, file.WithWriterProps(parquet.NewWriterProperties(props...)), file.WithWriteMetadata(kv))
	rg := w.AppendRowGroup()
	var live []parquet.ByteArray
	defs := make([]int16, len(cells))
	n := make([]float64, len(cells))
	for i, c := range cells {
		if c != nil {
			defs[i] = 1
			live = append(live, c)
		}
		n[i] = float64(i)
	}
	for k := range 2 {
		c, err := rg.NextColumn()
		if err != nil {
			t.Fatal(err)
		}
		if k == 0 {
			_, err = c.(*file.ByteArrayColumnChunkWriter).WriteBatch(live, defs, nil)
		} else {
			_, err = c.(*file.Float64ColumnChunkWriter).WriteBatch(n, nil, nil)
		}
		if err != nil {
			t.Fatal(err)
		}
		if err := c.Close(); err != nil {
			t.Fatal(err)
		}
	}
	if err := rg.Close(); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "a.parquet")
	if err := os.WriteFile(path, buf.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

const geoOf = `{"version":"1.0.0","primary_column":"geometry","columns":{"geometry":{"encoding":"WKB","geometry_types":TYPES CRS}}}`

func TestMetadata(t *testing.T) {
	cells := [][]byte{wkbBytes(true, 1, 5, 6), nil, wkbBytes(true, 2), {1, 2, 3}, wkbBytes(false, 1, -7, 8)}
	for name, c := range map[string]struct{ types, crs, want, refusal string }{
		"absent crs":    {"[]", "", "OGC:CRS84", ""},
		"null crs":      {`["Point"]`, `,"crs":null`, "", ""},
		"identified":    {`["Point Z","LineString"]`, `,"crs":{"type":"ProjectedCRS","name":"x","id":{"authority":"EPSG","code":3035}}`, "EPSG:3035", ""},
		"text code":     {"[]", `,"crs":{"name":"x","id":{"authority":"OGC","code":"CRS84"}}`, "OGC:CRS84", ""},
		"named":         {"[]", `,"crs":{"name":"a town's own grid"}`, "a town's own grid", ""},
		"not points":    {`["Polygon","MultiPolygon"]`, "", "OGC:CRS84", "holds Polygon and MultiPolygon, not points"},
		"crs of a word": {"[]", `,"crs":"EPSG:4326"`, "", ""},
	} {
		geo := strings.NewReplacer("TYPES ", c.types, "CRS", c.crs).Replace(geoOf)
		src, err := geoparquet.Open(withGeo(t, geo, cells), parquetfile.Options{})
		if err != nil {
			t.Fatal(err)
		}
		g := src.Info().Geometries
		if len(g) != 1 || g[0].CRS != c.want || g[0].Refusal != c.refusal || !g[0].Primary {
			t.Errorf("%s: %+v", name, g)
		}
		if c.refusal != "" {
			continue
		}
		got, err := pairs(src, "geometry")
		if s := strings.Join(got, "|"); err != nil || s != "POINT (5 6)||other|broken|POINT (-7 8)" {
			t.Errorf("%s: %s %v", name, s, err)
		}
	}
}

// TestCodes: dictionary and plain pages, batches smaller than both, and other
// columns beside, give the same points.
func TestCodes(t *testing.T) {
	var cells [][]byte
	for i := range 5000 {
		switch {
		case i%11 == 0:
			cells = append(cells, nil)
		case i > 2500:
			cells = append(cells, wkbBytes(true, 1, float64(i), -float64(i)))
		default:
			cells = append(cells, wkbBytes(true, 1, float64(i%50), -float64(i%50)))
		}
	}
	for name, props := range map[string][]parquet.WriterProperty{
		"dictionary": {parquet.WithDictionaryDefault(true)}, "full": {parquet.WithDictionaryDefault(true), parquet.WithDictionaryPageSizeLimit(3000), parquet.WithDataPageSize(2000)},
		"plain": {parquet.WithDictionaryDefault(false), parquet.WithDataPageSize(2000)},
	} {
		src, err := geoparquet.Open(withGeo(t, strings.NewReplacer("TYPES ", "[]", "CRS", "").Replace(geoOf), cells, props...), parquetfile.Options{BatchRows: 333})
		if err != nil {
			t.Fatal(err)
		}
		row := 0
		err = src.Read(context(), 0, []string{"geometry.x", "n", "geometry.y"}, func(b events.Batch) error {
			for i := range b.Len() {
				x, n, y := b.Columns[0][i], b.Columns[1][i], b.Columns[2][i]
				want := float64(row)
				if row <= 2500 {
					want = float64(row % 50)
				}
				if n != float64(row) || cells[row] == nil && !events.IsNull(x) || cells[row] != nil && (x != want || y != -want) {
					t.Fatalf("%s row %d: %v %v %v", name, row, x, n, y)
				}
				b.Columns[0][i] = 99 // the receiver may overwrite
				row++
			}
			return nil
		})
		if err != nil || row != len(cells) {
			t.Errorf("%s: %d rows, %v", name, row, err)
		}
	}
}

// FuzzGeo: whatever the "geo" entry says, the file opens and its columns are
// read or refused.
func FuzzGeo(f *testing.F) {
	f.Add(strings.NewReplacer("TYPES ", "[]", "CRS", `,"crs":null`).Replace(geoOf))
	f.Add(`{"primary_column":"n","columns":{"n":{"encoding":"point"},"geometry":{"encoding":"wkb"}}}`)
	f.Add(`{"columns":{"geometry":{"encoding":"WKB","geometry_types":["Point"],"crs":{"id":{"authority":7,"code":[]}}}}}`)
	f.Fuzz(func(t *testing.T, geo string) {
		if !utf8.ValidString(geo) {
			return // the library that writes the file refuses it
		}
		src, err := geoparquet.Open(withGeo(t, geo, [][]byte{wkbBytes(true, 1, 5, 6), nil}), parquetfile.Options{})
		if err != nil {
			t.Fatal(err)
		}
		if !json.Valid([]byte(geo)) && len(src.Info().Geometries) > 0 {
			t.Fatalf("%q declares %v", geo, src.Info().Geometries)
		}
		for _, field := range src.Fields() {
			if field.Readable() {
				if err := src.Read(context(), 0, []string{field.Name}, func(events.Batch) error { return nil }); err != nil {
					t.Fatalf("%q: %v", geo, err)
				}
			}
		}
		_, _ = events.ResolveIn("", "", "", src.Info(), src.Fields())
	})
}
