package main_test

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/metadata"
	"github.com/apache/arrow/go/v17/parquet/schema"

	"drumlin/cmd/drumlin/internal/cli"
)

// geometryFile writes points in WKB, the last odd of them lines, beside columns
// lon and lat that are of no use.
func geometryFile(t *testing.T, path, geo string, x, y []float64, odd int) {
	t.Helper()
	nodes := schema.FieldList{
		schema.NewByteArrayNode("shape", parquet.Repetitions.Required, -1),
		schema.NewFloat64Node("lon", parquet.Repetitions.Required, -1), schema.NewFloat64Node("lat", parquet.Repetitions.Required, -1),
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, nodes, -1)
	if err != nil {
		t.Fatal(err)
	}
	kv := metadata.NewKeyValueMetadata()
	if err := kv.Append("geo", geo); err != nil {
		t.Fatal(err)
	}
	var buf bytes.Buffer
	w := file.NewParquetWriter(&buf, root, file.WithWriteMetadata(kv))
	rg := w.AppendRowGroup()
	for range nodes {
		c, err := rg.NextColumn()
		if err != nil {
			t.Fatal(err)
		}
		switch c := c.(type) {
		case *file.ByteArrayColumnChunkWriter:
			var cells []parquet.ByteArray
			for i := range x {
				b := []byte{1, 1, 0, 0, 0}
				if i >= len(x)-odd {
					b[1] = 2
				}
				b = binary.LittleEndian.AppendUint64(b, math.Float64bits(x[i]))
				cells = append(cells, binary.LittleEndian.AppendUint64(b, math.Float64bits(y[i])))
			}
			_, err = c.WriteBatch(cells, nil, nil)
		case *file.Float64ColumnChunkWriter:
			_, err = c.WriteBatch(make([]float64, len(x)), nil, nil)
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
	if err := os.WriteFile(path, buf.Bytes(), 0o666); err != nil {
		t.Fatal(err)
	}
}

// TestGeometry: the points of a geometry column give the map of the same
// coordinates in columns of numbers, in the CRS that the file states.
func TestGeometry(t *testing.T) {
	dir := t.TempDir()
	geo := func(crs string) string {
		return `{"version":"1.1.0","primary_column":"shape","columns":{"shape":{"encoding":"WKB","geometry_types":[]` + crs + `}}}`
	}
	run := func(status int, args ...string) string {
		t.Helper()
		var out, errs bytes.Buffer
		if got := cli.Main(args, &out, &errs); got != status {
			t.Fatalf("%v: status %d, want %d: %s", args, got, status, errs.String())
		}
		return out.String() + errs.String()
	}
	read := func(name string) string {
		t.Helper()
		b, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		return string(b)
	}
	for name, c := range map[string]struct {
		crs, flag, want string
		plane           bool
	}{
		"absent":  {"", "", "OGC:CRS84", false},
		"null":    {`,"crs":null`, "EPSG:4326", "EPSG:4326", false},
		"metres":  {`,"crs":{"type":"ProjectedCRS","name":"ETRS89-extended / LAEA Europe","id":{"authority":"EPSG","code":3035}}`, "", "EPSG:3035", true},
		"unknown": {`,"crs":{"name":"the town's own grid"}`, "plane", "plane", true},
	} {
		tb := cloud(300, 3, 10, 50, 1, false, false)
		if c.plane {
			tb = cloud(300, 3, 4_321_000, 3_210_000, 20_000, true, false)
		}
		x, y := tb.cols[0], tb.cols[1]
		path, twin := filepath.Join(dir, name+".parquet"), filepath.Join(dir, name+".csv")
		geometryFile(t, path, geo(c.crs), append(append([]float64{}, x...), 1, 2), append(append([]float64{}, y...), 1, 2), 2)
		if err := tb.write(twin, 0); err != nil {
			t.Fatal(err)
		}
		args := []string{"--lattice", "64", "--quiet", "--formats", "geojson", "--sensitivity=false"}
		if c.flag != "" {
			if said := run(4, append([]string{"map", path, "--out", filepath.Join(dir, "no")}, args...)...); !strings.Contains(said, "CRS") && !strings.Contains(said, "crs") {
				t.Errorf("%s: %s", name, said)
			}
			args = append(args, "--crs", c.flag)
		}
		run(0, append([]string{"map", path, "--out", filepath.Join(dir, name)}, args...)...)
		run(0, append([]string{"map", twin, "--out", filepath.Join(dir, name+"-twin"), "--crs", c.want}, args...)...)
		for _, f := range []string{"regions.geojson", "peaks.geojson", "contours.geojson"} {
			if read(name+"/"+f) != read(name+"-twin/"+f) {
				t.Errorf("%s: %s differs from its twin's", name, f)
			}
		}
		var rec struct {
			CRS  struct{ Input string }
			Rows struct {
				Read, Used int
				SetAside   []struct {
					Reason string
					Rows   int
				} `json:"set_aside"`
			}
		}
		if err := json.Unmarshal([]byte(read(name+"/run.json")), &rec); err != nil {
			t.Fatal(err)
		}
		if rec.CRS.Input != c.want || rec.Rows.Read != 302 || rec.Rows.Used != 300 || len(rec.Rows.SetAside) != 1 || rec.Rows.SetAside[0].Reason != "not-a-point" {
			t.Errorf("%s: %+v", name, rec)
		}
		if said := run(6, append([]string{"map", path, "--geometry", "lon", "--out", filepath.Join(dir, "no")}, args...)...); !strings.Contains(said, "lon") {
			t.Error(said)
		}
	}
}
