package geoparquet_test

import (
	"encoding/binary"
	"encoding/csv"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"drumlin/io/events"
	"drumlin/io/geoparquet"
	"drumlin/io/parquetfile"
)

func conformanceFolder(t *testing.T) string {
	t.Helper()
	dir := os.Getenv("DRUMLIN_CONFORMANCE")
	if dir == "" {
		if os.Getenv("DRUMLIN_CI") == "1" {
			t.Fatal("DRUMLIN_CONFORMANCE names no folder: the conformance run must not be left out here")
		}
		t.Skip("the conformance run was left out: DRUMLIN_CONFORMANCE names no folder")
	}
	return dir
}

// wkbBytes makes a geometry: its type word, whether little-endian, and numbers.
func wkbBytes(little bool, word uint32, numbers ...float64) []byte {
	b := []byte{0}
	order := binary.AppendByteOrder(binary.BigEndian)
	if little {
		b[0], order = 1, binary.LittleEndian
	}
	b = order.AppendUint32(b, word)
	if word&0x20000000 != 0 {
		b = order.AppendUint32(b, 4326)
	}
	for _, v := range numbers {
		b = order.AppendUint64(b, math.Float64bits(v))
	}
	return b
}

func same(a, b float64) bool { return math.Float64bits(a) == math.Float64bits(b) }

func TestPoint(t *testing.T) {
	nan := math.NaN()
	for name, c := range map[string]struct {
		b    []byte
		x, y float64
	}{
		"little":       {wkbBytes(true, 1, 30, 10), 30, 10},
		"big":          {wkbBytes(false, 1, 30, 10), 30, 10},
		"z":            {wkbBytes(true, 1001, 30, 10, 5), 30, 10},
		"m":            {wkbBytes(true, 2001, 30, 10, 5), 30, 10},
		"zm":           {wkbBytes(false, 3001, 30, 10, 5, 6), 30, 10},
		"z by flag":    {wkbBytes(true, 0x80000001, 30, 10, 5), 30, 10},
		"srid":         {wkbBytes(true, 0x20000001, 30, 10), 30, 10},
		"zm and srid":  {wkbBytes(false, 0xe0000001, 30, 10, 5, 6), 30, 10},
		"empty":        {wkbBytes(true, 1, nan, nan), events.Null, events.Null},
		"half":         {wkbBytes(true, 1, nan, 3), nan, 3},
		"disguised":    {wkbBytes(true, 1, events.OtherShape, 3), nan, 3},
		"infinite":     {wkbBytes(true, 1, math.Inf(1), 3), math.Inf(1), 3},
		"line":         {wkbBytes(true, 2, 1, 2), events.OtherShape, events.OtherShape},
		"multipoint z": {wkbBytes(true, 1004), events.OtherShape, events.OtherShape},
		"collection":   {wkbBytes(false, 7), events.OtherShape, events.OtherShape},
		"short":        {wkbBytes(true, 1, 30), events.NotAValue, events.NotAValue},
		"long":         {wkbBytes(true, 1, 30, 10, 5), events.NotAValue, events.NotAValue},
		"no z":         {wkbBytes(true, 1001, 30, 10), events.NotAValue, events.NotAValue},
		"type 0":       {wkbBytes(true, 0, 30, 10), events.NotAValue, events.NotAValue},
		"type 4001":    {wkbBytes(true, 4001, 30, 10), events.NotAValue, events.NotAValue},
		"order 2":      {append([]byte{2}, wkbBytes(true, 1, 30, 10)[1:]...), events.NotAValue, events.NotAValue},
		"nothing":      {nil, events.NotAValue, events.NotAValue},
	} {
		if x, y := geoparquet.Point(c.b); !same(x, c.x) && !(x != x && c.x != c.x && !events.IsOtherShape(x)) || !same(y, c.y) {
			t.Errorf("%s: %v %v, want %v %v", name, x, y, c.x, c.y)
		}
	}
}

func FuzzPoint(f *testing.F) {
	f.Add(wkbBytes(true, 1, 30, 10))
	f.Add(wkbBytes(false, 0xe0000001, 1, 2, 3, 4))
	f.Add(wkbBytes(true, 3003, 1))
	f.Fuzz(func(t *testing.T, b []byte) {
		x, y := geoparquet.Point(b)
		if (events.IsNull(x) != events.IsNull(y)) || events.IsOtherShape(x) != events.IsOtherShape(y) || events.IsNotAValue(x) != events.IsNotAValue(y) {
			t.Fatalf("%x: %v %v", b, x, y)
		}
	})
}

// pairs reads the geometry's two columns and counts what stands in them.
func pairs(src events.Source, name string) ([]string, error) {
	var out []string
	for p := range src.Parts() {
		n := int64(0)
		err := src.Read(context(), p, []string{name + ".y", name + ".x", name + ".x"}, func(b events.Batch) error {
			for i := range b.Len() {
				x, y := b.Columns[1][i], b.Columns[0][i]
				if !same(x, b.Columns[2][i]) {
					return errors.New("the same column twice differs")
				}
				switch {
				case events.IsNull(x):
					out = append(out, "")
				case events.IsOtherShape(x):
					out = append(out, "other")
				case events.IsNotAValue(x):
					out = append(out, "broken")
				default:
					out = append(out, fmt.Sprintf("POINT (%g %g)", x, y))
				}
			}
			n += int64(b.Len())
			return nil
		})
		if err != nil {
			return out, err
		}
		if n != src.PartRows(p) {
			return out, fmt.Errorf("%d of %d rows", n, src.PartRows(p))
		}
	}
	return out, nil
}

// TestTwins compares files with the text twins that their authors give.
func TestTwins(t *testing.T) {
	dir := conformanceFolder(t)
	points := 0
	for _, folder := range []string{"geoparquet-1.1", "geoparquet-2"} {
		files, _ := filepath.Glob(filepath.Join(dir, folder, "data-*.parquet"))
		if len(files) < 6 {
			t.Fatalf("%s: %d files", folder, len(files))
		}
		for _, path := range files {
			src, err := geoparquet.Open(path, parquetfile.Options{})
			if err != nil {
				t.Fatal(err)
			}
			g := src.Info().Geometries
			if len(g) != 1 || !g[0].Primary || g[0].CRS != "OGC:CRS84" || g[0].Name != "geometry" {
				t.Errorf("%s: %+v", path, g)
				continue
			}
			shape := strings.Split(filepath.Base(path), "-")[1]
			if shape != "point" {
				if _, err := events.ResolveIn("", "", "", src.Info(), src.Fields()); g[0].Refusal == "" || !errors.Is(err, events.ErrUnsupported) {
					t.Errorf("%s: taken for points: %v", path, err)
				}
				continue
			}
			points++
			pair, err := events.ResolveIn("", "", "", src.Info(), src.Fields())
			if err != nil || pair != (events.Pair{X: "geometry.x", Y: "geometry.y", Geometry: "geometry"}) {
				t.Errorf("%s: %+v %v", path, pair, err)
			}
			got, err := pairs(src, "geometry")
			if err != nil {
				t.Fatal(err)
			}
			twin, err := os.Open(filepath.Join(dir, "geoparquet-1.1", "data-point-wkt.csv"))
			if err != nil {
				t.Fatal(err)
			}
			rows, err := csv.NewReader(twin).ReadAll()
			twin.Close()
			if err != nil || len(rows) != len(got)+1 {
				t.Fatalf("%s: %d rows, its twin %d, %v", path, len(got), len(rows)-1, err)
			}
			for i, r := range rows[1:] {
				if want := strings.Replace(r[1], "POINT EMPTY", "", 1); got[i] != want {
					t.Errorf("%s row %d: %q, twin %q", path, i, got[i], r[1])
				}
			}
		}
	}
	if points != 3 {
		t.Errorf("%d files of points", points)
	}
}

// TestNative reads files with Parquet's own geometry types and no "geo" entry.
func TestNative(t *testing.T) {
	dir := conformanceFolder(t)
	for name, crs := range map[string]string{
		"crs-default": "OGC:CRS84", "crs-geography": "OGC:CRS84", "crs-srid": "srid:5070", "crs-arbitrary-value": "EPSG:5070", "crs-projjson": "",
		"geospatial": "OGC:CRS84", "geospatial-with-nan": "OGC:CRS84", "geography-points": "OGC:CRS84", "geography-polygons": "OGC:CRS84",
	} {
		src, err := geoparquet.Open(filepath.Join(dir, "parquet", name+".parquet"), parquetfile.Options{})
		if err != nil {
			t.Fatal(err)
		}
		g := src.Info().Geometries
		if len(g) != 1 || crs != "" && g[0].CRS != crs || !g[0].Primary || g[0].Refusal != "" {
			t.Errorf("%s: %+v", name, g)
			continue
		}
		got, err := pairs(src, g[0].Name)
		if err != nil || len(got) == 0 {
			t.Errorf("%s: %d rows, %v", name, len(got), err)
		}
		kinds := map[string]int{}
		for _, v := range got {
			kind, _, _ := strings.Cut(v, " ")
			kinds[kind]++
		}
		if kinds["broken"] > 0 || strings.HasSuffix(name, "polygons") != (kinds["POINT"] == 0 && kinds["other"] > 0) && strings.HasPrefix(name, "geography-") {
			t.Errorf("%s: %v", name, kinds)
		}
	}
}
