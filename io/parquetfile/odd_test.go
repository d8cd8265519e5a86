package parquetfile_test

import (
	"bytes"
	"encoding/binary"
	"errors"
	"math"
	"math/big"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/schema"

	"drumlin/io/events"
	"drumlin/io/parquetfile"
)

// nullable writes one row group of optional columns of every numeric kind; the
// row i holds unscaled whole number v[i], or nothing where null[i].
func nullable(t *testing.T, v []int32, null []bool, props ...parquet.WriterProperty) []byte {
	t.Helper()
	opt := parquet.Repetitions.Optional
	must := func(n schema.Node, err error) schema.Node {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return n
	}
	logical := func(name string, lt schema.LogicalType, pt parquet.Type, length int) schema.Node {
		return must(schema.NewPrimitiveNodeLogical(name, opt, lt, pt, length, -1))
	}
	nodes := schema.FieldList{
		schema.NewFloat64Node("f64", opt, -1), schema.NewFloat32Node("f32", opt, -1),
		schema.NewInt32Node("i32", opt, -1), schema.NewInt64Node("i64", opt, -1),
		logical("u32", schema.NewIntLogicalType(32, false), parquet.Types.Int32, -1),
		logical("i8", schema.NewIntLogicalType(8, true), parquet.Types.Int32, -1),
		logical("d32", schema.NewDecimalLogicalType(9, 2), parquet.Types.Int32, -1),
		logical("d64", schema.NewDecimalLogicalType(18, 2), parquet.Types.Int64, -1),
		logical("dfl", schema.NewDecimalLogicalType(20, 2), parquet.Types.FixedLenByteArray, 9),
		logical("dba", schema.NewDecimalLogicalType(20, 2), parquet.Types.ByteArray, -1),
		must(schema.NewGroupNode("at", opt, schema.FieldList{schema.NewFloat64Node("x", opt, -1)}, -1)),
		schema.NewBooleanNode("flag", opt, -1),
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, nodes, -1)
	if err != nil {
		t.Fatal(err)
	}
	var buf bytes.Buffer
	props = append([]parquet.WriterProperty{parquet.WithCompression(compress.Codecs.Snappy), parquet.WithDataPageSize(2000)}, props...)
	w := file.NewParquetWriter(&buf, root, file.WithWriterProps(parquet.NewWriterProperties(props...)))
	rg := w.AppendRowGroup()
	var live []int32
	for i, n := range null {
		if !n {
			live = append(live, v[i])
		}
	}
	for range len(nodes) {
		c, err := rg.NextColumn()
		if err != nil {
			t.Fatal(err)
		}
		top := c.Descr().MaxDefinitionLevel()
		defs := make([]int16, len(null))
		for i, n := range null {
			if defs[i] = top; n {
				defs[i] = int16(i) % top // any level below the top is a null
			}
		}
		scaled := func(k int) []parquet.ByteArray {
			out := make([]parquet.ByteArray, len(live))
			for i, x := range live {
				b := make([]byte, 16)
				binary.BigEndian.PutUint64(b[8:], uint64(int64(x)))
				if x < 0 {
					for j := range 8 {
						b[j] = 0xff
					}
				}
				out[i] = b[16-k:]
			}
			return out
		}
		switch c := c.(type) {
		case *file.Float64ColumnChunkWriter:
			_, err = c.WriteBatch(convert[float64](live), defs, make([]int16, len(defs)))
		case *file.Float32ColumnChunkWriter:
			_, err = c.WriteBatch(convert[float32](live), defs, nil)
		case *file.Int32ColumnChunkWriter:
			_, err = c.WriteBatch(live, defs, nil)
		case *file.Int64ColumnChunkWriter:
			_, err = c.WriteBatch(convert[int64](live), defs, nil)
		case *file.ByteArrayColumnChunkWriter:
			_, err = c.WriteBatch(scaled(12), defs, nil)
		case *file.FixedLenByteArrayColumnChunkWriter:
			var fl []parquet.FixedLenByteArray
			for _, b := range scaled(9) {
				fl = append(fl, parquet.FixedLenByteArray(b))
			}
			_, err = c.WriteBatch(fl, defs, nil)
		case *file.BooleanColumnChunkWriter:
			var bs []bool
			for _, x := range live {
				bs = append(bs, x%2 != 0)
			}
			_, err = c.WriteBatch(bs, defs, nil)
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
	return buf.Bytes()
}

func convert[T float64 | float32 | int64](v []int32) []T {
	out := make([]T, len(v))
	for i, x := range v {
		out[i] = T(x)
	}
	return out
}

func TestNullsAndKinds(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 4))
	const n = 5000
	v, null := make([]int32, n), make([]bool, n)
	for i := range v {
		v[i] = int32(r.IntN(200) - 100)
		if i%7 == 0 {
			v[i] = int32(r.Uint32())
		}
		null[i] = r.IntN(4) == 0 || i > 1000 && i < 1900 // runs and mixtures
	}
	e := parquet.Encodings
	for name, props := range map[string][]parquet.WriterProperty{
		"dictionary": {parquet.WithDictionaryDefault(true)},
		"plain":      {parquet.WithDictionaryDefault(false)},
		"v2":         {parquet.WithDictionaryDefault(false), parquet.WithDataPageVersion(parquet.DataPageV2)},
		"delta": {parquet.WithDictionaryDefault(false), parquet.WithEncodingFor("i32", e.DeltaBinaryPacked), parquet.WithEncodingFor("i64", e.DeltaBinaryPacked),
			parquet.WithEncodingFor("u32", e.DeltaBinaryPacked), parquet.WithEncodingFor("d64", e.DeltaBinaryPacked), parquet.WithEncodingFor("dba", e.DeltaByteArray),
			parquet.WithDataPageSize(1 << 20)}, // one page: the library's writer carries prefixes over a page's edge
		"delta v2": {parquet.WithDictionaryDefault(false), parquet.WithDataPageVersion(parquet.DataPageV2), parquet.WithEncodingFor("i64", e.DeltaBinaryPacked), parquet.WithEncodingFor("flag", e.RLE),
			parquet.WithEncodingFor("dba", e.DeltaLengthByteArray)},
	} {
		t.Run(name, func(t *testing.T) {
			f, err := parquetfile.Open(put(t, nullable(t, v, null, props...)), parquetfile.Options{BatchRows: 777})
			if err != nil {
				t.Fatal(err)
			}
			for _, fld := range f.Fields() {
				if !fld.Numeric {
					t.Fatalf("%s is not numeric: %s", fld.Name, fld.Type)
				}
				got, err := readColumn(f, fld.Name)
				if err != nil {
					t.Fatal(err)
				}
				for i, x := range got {
					want := float64(v[i])
					switch {
					case null[i]:
						want = events.Null
					case fld.Name == "f32":
						want = float64(float32(v[i]))
					case fld.Name == "u32":
						want = float64(uint32(v[i]))
					case fld.Name[0] == 'd':
						want = float64(v[i]) / 100
					case fld.Name == "flag":
						want = math.Abs(float64(v[i] % 2))
					}
					if math.Float64bits(x) != math.Float64bits(want) {
						t.Fatalf("%s row %d: %v, wrote %v", fld.Name, i, x, want)
					}
				}
			}
			if _, _, ok := f.Bounds("u32"); ok {
				t.Error("unsigned statistics are trusted")
			}
			want := math.Inf(1)
			for i, x := range v {
				if !null[i] {
					want = min(want, float64(x))
				}
			}
			if lo, _, ok := f.Bounds("i64"); !ok || lo != want {
				t.Errorf("bounds of i64: %v %v, want %v", lo, ok, want)
			}
		})
	}
}

// TestWideDelta: differences that wrap around 64 bits.
func TestWideDelta(t *testing.T) {
	ints := []int64{math.MinInt64, math.MaxInt64, 0, -1, math.MinInt64 + 1, 1 << 62, -(1 << 62)}
	for range 6 {
		ints = append(ints, ints...)
	}
	root, _ := schema.NewGroupNode("schema", parquet.Repetitions.Required, schema.FieldList{schema.NewInt64Node("n", parquet.Repetitions.Required, -1)}, -1)
	var buf bytes.Buffer
	w := file.NewParquetWriter(&buf, root, file.WithWriterProps(parquet.NewWriterProperties(parquet.WithDictionaryDefault(false),
		parquet.WithEncodingFor("n", parquet.Encodings.DeltaBinaryPacked))))
	rg := w.AppendRowGroup()
	c, err := rg.NextColumn()
	if err != nil {
		t.Fatal(err)
	}
	if _, err := c.(*file.Int64ColumnChunkWriter).WriteBatch(ints, nil, nil); err != nil {
		t.Fatal(err)
	}
	for _, fn := range []func() error{c.Close, rg.Close, w.Close} {
		if err := fn(); err != nil {
			t.Fatal(err)
		}
	}
	got, err := readColumn(open(t, put(t, buf.Bytes())), "n")
	if err != nil {
		t.Fatal(err)
	}
	for i, x := range got {
		if x != float64(ints[i]) {
			t.Fatalf("row %d: %v, wrote %d", i, x, ints[i])
		}
	}
}

// TestLongDecimals: unscaled values beyond 53 bits round to the nearest float64.
func TestLongDecimals(t *testing.T) {
	root, _ := schema.NewGroupNode("schema", parquet.Repetitions.Required, schema.FieldList{func() schema.Node {
		n, err := schema.NewPrimitiveNodeLogical("d", parquet.Repetitions.Required, schema.NewDecimalLogicalType(38, 9), parquet.Types.FixedLenByteArray, 16, -1)
		if err != nil {
			t.Fatal(err)
		}
		return n
	}()}, -1)
	texts := []string{"12345678901234567890123456789", "-12345678901234567890123456789", "-1", "9007199254740993", "0"}
	var vals []parquet.FixedLenByteArray
	var want []float64
	for _, s := range texts {
		n, _ := new(big.Int).SetString(s, 10)
		x, _ := new(big.Rat).SetFrac(n, big.NewInt(1_000_000_000)).Float64()
		want = append(want, x)
		if n.Sign() < 0 {
			n.Add(n, new(big.Int).Lsh(big.NewInt(1), 128))
		}
		vals = append(vals, parquet.FixedLenByteArray(n.FillBytes(make([]byte, 16))))
	}
	var buf bytes.Buffer
	w := file.NewParquetWriter(&buf, root)
	rg := w.AppendRowGroup()
	c, err := rg.NextColumn()
	if err != nil {
		t.Fatal(err)
	}
	if _, err := c.(*file.FixedLenByteArrayColumnChunkWriter).WriteBatch(vals, nil, nil); err != nil {
		t.Fatal(err)
	}
	for _, fn := range []func() error{c.Close, rg.Close, w.Close} {
		if err := fn(); err != nil {
			t.Fatal(err)
		}
	}
	got, err := readColumn(open(t, put(t, buf.Bytes())), "d")
	if err != nil || !slices.Equal(got, want) {
		t.Errorf("%v, wrote %v, %v", got, want, err)
	}
}

// TestUnknownLogicalTypes turns the text column's logical type into one the
// library does not know; the other columns must stay readable.
func TestUnknownLogicalTypes(t *testing.T) {
	data, cols := sample(t, parquetfile.WriteOptions{})
	n := int(binary.LittleEndian.Uint32(data[len(data)-8:]))
	front, foot := data[:len(data)-8-n], data[len(data)-8-n:len(data)-8]
	at := bytes.Index(foot, []byte("\x04kind"))
	at += bytes.Index(foot[at:], []byte{0x1c, 0, 0, 0}) // union member 1, an empty struct
	for want, member := range map[string][]byte{
		"GEOMETRY":        append([]byte{0x0c, 34, 0x18, 9}, "EPSG:3857\x00\x00\x00"...),
		"GEOGRAPHY":       {0x0c, 36, 0, 0, 0},
		"VARIANT":         {0x0c, 32, 0, 0, 0},
		"logical type 99": {0x0c, 0xc6, 0x01, 0, 0, 0},
		"logical type 9":  {0x9c, 0, 0, 0},
	} {
		b := slices.Concat(front, foot[:at], member, foot[at+4:])
		b = binary.LittleEndian.AppendUint32(b, uint32(n-4+len(member)))
		f, err := parquetfile.Open(put(t, append(b, "PAR1"...)), parquetfile.Options{})
		if err != nil {
			t.Errorf("%s: %v", want, err)
			continue
		}
		if got := f.Fields()[3]; got.Type != want || got.Numeric || got.Name != "kind" {
			t.Errorf("%s: %+v", want, got)
		}
		crs := map[string]string{"GEOMETRY": "EPSG:3857", "GEOGRAPHY": "OGC:CRS84"}[want]
		if f.Info().CRS != crs || len(f.Geometries()) > 1 {
			t.Errorf("%s: CRS %q", want, f.Info().CRS)
		}
		if got, err := readColumn(f, "x"); err != nil || !slices.Equal(got, cols[0].Floats) {
			t.Errorf("%s: %v", want, err)
		}
	}
}

// TestCountsAreHeldAgainstTheFooter changes the row count of the only row
// group, or of its chunks, and expects a refusal.
func TestCountsAreHeldAgainstTheFooter(t *testing.T) {
	var buf bytes.Buffer
	if err := parquetfile.Write(&buf, []parquetfile.Column{{Name: "x", Floats: make([]float64, 1000)}}, parquetfile.WriteOptions{}); err != nil {
		t.Fatal(err)
	}
	good := binary.AppendUvarint(nil, 2000) // zigzag of 1000
	hits := 0
	data := buf.Bytes()
	n := int(binary.LittleEndian.Uint32(data[len(data)-8:])) + 8
	for mask := 1; mask < 8; mask++ {
		for _, count := range []uint64{1998, 2002} {
			b := slices.Clone(data)
			foot := b[len(b)-n:]
			k := 0
			for at := 0; ; {
				i := bytes.Index(foot[at:], good)
				if i < 0 {
					break
				}
				if mask>>k&1 == 1 {
					copy(foot[at+i:], binary.AppendUvarint(nil, count))
				}
				at += i + 2
				k++
			}
			if k != 3 {
				t.Fatalf("%d counts in the footer", k)
			}
			hits++
			f, err := parquetfile.Open(put(t, b), parquetfile.Options{})
			if err == nil {
				_, err = readColumn(f, "x")
			}
			if !errors.Is(err, events.ErrMalformed) {
				t.Errorf("mask %d, count %d: %v", mask, count/2, err)
			}
		}
	}
	if hits != 14 {
		t.Error(hits)
	}
}
