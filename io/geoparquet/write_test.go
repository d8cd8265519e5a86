package geoparquet_test

import (
	"bytes"
	"encoding/json"
	"os"
	"path/filepath"
	"reflect"
	"regexp"
	"testing"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/paulmach/orb"
	"github.com/paulmach/orb/encoding/wkb"

	"drumlin/io/geoparquet"
	"drumlin/io/layers"
)

// demand skips with a message; where everything must run (DRUMLIN_CI=1) it fails.
func demand(t *testing.T, format string, a ...any) {
	t.Helper()
	if os.Getenv("DRUMLIN_CI") == "1" {
		t.Fatalf(format, a...)
	}
	t.Skipf(format, a...)
}

func square(x, y, d float64) orb.Ring {
	return orb.Ring{{x, y}, {x + d, y}, {x + d, y + d}, {x, y + d}, {x, y}}
}

func sample() *layers.Layer {
	return &layers.Layer{Name: "regions", Fields: []layers.Field{{Name: "content", Kind: layers.Number}, {Name: "events", Kind: layers.Whole}, {Name: "rule", Kind: layers.Text}},
		Features: []layers.Feature{
			{ID: "region-50", Shape: orb.MultiPolygon{{square(1, 2, 3)}}, Values: []any{.5, int64(7), "events"}},
			{ID: "region-95", Shape: orb.MultiPolygon{{square(0, 0, 9)}, {square(20, 0, 1)}}, Values: []any{nil, int64(9), nil}},
		}}
}

func write(t *testing.T, l *layers.Layer) *file.Reader {
	t.Helper()
	var b, again bytes.Buffer
	if err := geoparquet.WriteLayer(&b, l); err != nil {
		t.Fatal(err)
	}
	if err := geoparquet.WriteLayer(&again, l); err != nil || !bytes.Equal(b.Bytes(), again.Bytes()) {
		t.Fatalf("written twice, it differs: %v", err)
	}
	r, err := file.NewParquetReader(bytes.NewReader(b.Bytes()))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { r.Close() })
	return r
}

// Everything comes back: geometry, values, nulls, boxes.
func TestRoundTrip(t *testing.T) {
	l := sample()
	r := write(t, l)
	if r.NumRows() != 2 || r.NumRowGroups() != 1 {
		t.Fatalf("%d rows, %d groups", r.NumRows(), r.NumRowGroups())
	}
	floats, ints, texts, levels := map[string][]float64{}, map[string][]int64{}, map[string][]string{}, map[string][]int16{}
	g := r.RowGroup(0)
	for i := range g.NumColumns() {
		name := r.MetaData().Schema.Column(i).Path()
		c, err := g.Column(i)
		if err != nil {
			t.Fatal(err)
		}
		lv := make([]int16, 2)
		switch c := c.(type) {
		case *file.Float64ColumnChunkReader:
			v := make([]float64, 2)
			_, n, err := c.ReadBatch(2, v, lv, nil)
			if err != nil {
				t.Fatal(err)
			}
			floats[name] = v[:n]
		case *file.Int64ColumnChunkReader:
			v := make([]int64, 2)
			_, n, err := c.ReadBatch(2, v, lv, nil)
			if err != nil {
				t.Fatal(err)
			}
			ints[name] = v[:n]
		case *file.ByteArrayColumnChunkReader:
			v := make([]parquet.ByteArray, 2)
			_, n, err := c.ReadBatch(2, v, lv, nil)
			if err != nil {
				t.Fatal(err)
			}
			for _, s := range v[:n] {
				texts[name] = append(texts[name], string(s))
			}
		}
		levels[name] = lv
	}
	for i, f := range l.Features {
		shape, err := wkb.Unmarshal([]byte(texts["geometry"][i]))
		if err != nil || !reflect.DeepEqual(shape, f.Shape) {
			t.Errorf("geometry %d: %v %v", i, err, shape)
		}
	}
	if !reflect.DeepEqual(texts["id"], []string{"region-50", "region-95"}) || !reflect.DeepEqual(ints["events"], []int64{7, 9}) ||
		!reflect.DeepEqual(floats["content"], []float64{.5}) || !reflect.DeepEqual(levels["content"], []int16{1, 0}) ||
		!reflect.DeepEqual(texts["rule"], []string{"events"}) || !reflect.DeepEqual(levels["rule"], []int16{1, 0}) {
		t.Errorf("values %v %v %v, levels %v", texts, ints, floats, levels)
	}
	if !reflect.DeepEqual(floats["bbox.xmax"], []float64{4, 21}) || !reflect.DeepEqual(floats["bbox.ymin"], []float64{2, 0}) {
		t.Errorf("boxes %v", floats)
	}
}

// The metadata is valid against the format's own schema.
func TestMetadataAgainstSchema(t *testing.T) {
	dir := os.Getenv("DRUMLIN_CONFORMANCE")
	if dir == "" {
		demand(t, "left out: DRUMLIN_CONFORMANCE does not name the conformance folder")
	}
	text, err := os.ReadFile(filepath.Join(dir, "geoparquet-1.1", "schema.json"))
	if err != nil {
		t.Fatal(err)
	}
	var schema map[string]any
	if err := json.Unmarshal(text, &schema); err != nil {
		t.Fatal(err)
	}
	plane := sample()
	plane.Plane = true
	points := &layers.Layer{Name: "peaks", Points: true, Features: []layers.Feature{{ID: "peak-1", Shape: orb.Point{1, 2}}}}
	for _, l := range []*layers.Layer{sample(), plane, points, {Name: "peaks", Points: true}} {
		value := write(t, l).MetaData().KeyValueMetadata().FindValue("geo")
		if value == nil {
			t.Fatal("no key geo")
		}
		var meta any
		if err := json.Unmarshal([]byte(*value), &meta); err != nil {
			t.Fatal(err)
		}
		if fault := check(schema, meta, "geo"); fault != "" {
			t.Errorf("%s: %s\n%s", l.Name, fault, *value)
		}
		meta.(map[string]any)["version"] = "9"
		if check(schema, meta, "geo") == "" {
			t.Error("a wrong version passes")
		}
	}
}

// check judges a value by the keywords that the schema uses; references to
// other schemas accept any object.
func check(s map[string]any, v any, at string) string {
	if c, ok := s["const"]; ok && !reflect.DeepEqual(c, v) {
		return at + " is not the constant"
	}
	if e, ok := s["enum"].([]any); ok {
		found := false
		for _, x := range e {
			found = found || reflect.DeepEqual(x, v)
		}
		if !found {
			return at + " is none of the values"
		}
	}
	if _, ok := s["$ref"]; ok {
		s = map[string]any{"type": "object"}
	}
	if forms, ok := s["oneOf"].([]any); ok {
		n := 0
		for _, x := range forms {
			if check(x.(map[string]any), v, at) == "" {
				n++
			}
		}
		if n != 1 {
			return at + " fits not just one of the forms"
		}
	}
	number := func(key string, bad func(n int) bool) bool {
		n, ok := s[key].(float64)
		return ok && bad(int(n))
	}
	kind, _ := s["type"].(string)
	switch v := v.(type) {
	case map[string]any:
		if kind != "" && kind != "object" || number("minProperties", func(n int) bool { return len(v) < n }) {
			return at + " is no such object"
		}
		required, _ := s["required"].([]any)
		for _, r := range required {
			if _, ok := v[r.(string)]; !ok {
				return at + " lacks " + r.(string)
			}
		}
		properties, _ := s["properties"].(map[string]any)
		patterns, _ := s["patternProperties"].(map[string]any)
		for k, x := range v {
			known := false
			if p, ok := properties[k].(map[string]any); ok {
				known = true
				if f := check(p, x, at+"."+k); f != "" {
					return f
				}
			}
			for re, p := range patterns {
				if regexp.MustCompile(re).MatchString(k) {
					known = true
					if f := check(p.(map[string]any), x, at+"."+k); f != "" {
						return f
					}
				}
			}
			if more, ok := s["additionalProperties"].(bool); ok && !more && !known {
				return at + " has an unknown " + k
			}
		}
	case []any:
		if kind != "" && kind != "array" || number("minItems", func(n int) bool { return len(v) < n }) || number("maxItems", func(n int) bool { return len(v) > n }) {
			return at + " is no such array"
		}
		for i, x := range v {
			one, _ := s["items"].(map[string]any)
			if list, ok := s["items"].([]any); ok && i < len(list) {
				one = list[i].(map[string]any)
			}
			if f := check(one, x, at); f != "" {
				return f
			}
		}
	case string:
		if p, ok := s["pattern"].(string); ok && !regexp.MustCompile(p).MatchString(v) {
			return at + " does not match"
		}
		if kind != "" && kind != "string" || number("minLength", func(n int) bool { return len(v) < n }) {
			return at + " is no such text"
		}
	case float64:
		if kind != "" && kind != "number" {
			return at + " is a number"
		}
	case nil:
		if kind != "" && kind != "null" {
			return at + " is null"
		}
	}
	return ""
}
