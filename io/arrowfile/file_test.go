package arrowfile_test

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/decimal128"
	"github.com/apache/arrow/go/v17/arrow/float16"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"

	"drumlin/io/arrowfile"
	"drumlin/io/events"
)

var bg = context.Background()

func write(t testing.TB, opt arrowfile.WriteOptions, names []string, batches ...[][]float64) []byte {
	t.Helper()
	var b bytes.Buffer
	w, err := arrowfile.NewWriter(&b, names, opt)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range batches {
		if err := w.WriteBatch(c); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func saved(t testing.TB, b []byte) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "a.arrow")
	if err := os.WriteFile(path, b, 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

func readAll(f *arrowfile.File, columns ...string) ([][]float64, error) {
	out := make([][]float64, len(columns))
	err := f.Read(bg, 0, columns, func(b events.Batch) error {
		for k, c := range b.Columns {
			out[k] = append(out[k], c...)
		}
		return nil
	})
	return out, err
}

func equal(t *testing.T, what string, got, want [][]float64) {
	t.Helper()
	for k := range want {
		if len(got[k]) != len(want[k]) {
			t.Fatalf("%s: column %d has %d rows, want %d", what, k, len(got[k]), len(want[k]))
		}
		for i, v := range want[k] {
			if math.Float64bits(got[k][i]) != math.Float64bits(v) {
				t.Fatalf("%s: column %d, row %d: %v, want %v", what, k, i, got[k][i], v)
			}
		}
	}
}

// What is written is read back to the bit: nulls, several record batches,
// every packing; the same calls give the same bytes.
func TestReadsBack(t *testing.T) {
	big := make([][]float64, 2)
	for i := range 20_000 {
		big[0], big[1] = append(big[0], math.Sqrt(float64(i))), append(big[1], float64(i%7))
		if i%11 == 0 {
			big[1][i] = events.Null
		}
	}
	small := [][]float64{{math.Inf(1), -0.0}, {events.Null, 1e-300}}
	want := [][]float64{append(append([]float64(nil), big[0]...), small[0]...), append(append([]float64(nil), big[1]...), small[1]...)}
	for what, opt := range map[string]arrowfile.WriteOptions{
		"plain": {}, "zstd": {Zstd: true}, "lz4": {LZ4: true}, "metadata": {Metadata: map[string]string{"b": "2", "a": "1"}},
	} {
		b := write(t, opt, []string{"x", "y"}, big, small)
		if again := write(t, opt, []string{"x", "y"}, big, small); !bytes.Equal(b, again) {
			t.Errorf("%s: other bytes the second time", what)
		}
		f, err := arrowfile.Open(saved(t, b), arrowfile.Options{})
		if err != nil {
			t.Fatal(what, err)
		}
		if i := f.Info(); i.Format != events.FormatArrowFile || i.Rows != -1 || f.Parts() != 1 {
			t.Errorf("%s: %+v", what, i)
		}
		got, err := readAll(f, "y", "x")
		if err != nil {
			t.Fatal(what, err)
		}
		equal(t, what, got, [][]float64{want[1], want[0]})
		if err := f.Close(); err != nil {
			t.Error(err)
		}
	}
}

// stream writes a stream of one record of many types.
func stream(t testing.TB) ([]byte, map[string][]float64) {
	t.Helper()
	mem := memory.DefaultAllocator
	dec := &arrow.Decimal128Type{Precision: 10, Scale: 2}
	schema := arrow.NewSchema([]arrow.Field{
		{Name: "i8", Type: arrow.PrimitiveTypes.Int8}, {Name: "u16", Type: arrow.PrimitiveTypes.Uint16},
		{Name: "i64", Type: arrow.PrimitiveTypes.Int64, Nullable: true}, {Name: "f32", Type: arrow.PrimitiveTypes.Float32},
		{Name: "f16", Type: arrow.FixedWidthTypes.Float16}, {Name: "dec", Type: dec}, {Name: "name", Type: arrow.BinaryTypes.String},
		{Name: "geometry", Nullable: true, Type: arrow.StructOf(
			arrow.Field{Name: "x", Type: arrow.PrimitiveTypes.Float64}, arrow.Field{Name: "y", Type: arrow.PrimitiveTypes.Float64, Nullable: true})},
		{Name: "when", Type: &arrow.TimestampType{Unit: arrow.Microsecond}},
	}, nil)
	r := array.NewRecordBuilder(mem, schema)
	r.Field(0).(*array.Int8Builder).AppendValues([]int8{-5, 7, 100}, nil)
	r.Field(1).(*array.Uint16Builder).AppendValues([]uint16{1, 60000, 3}, nil)
	r.Field(2).(*array.Int64Builder).AppendValues([]int64{1 << 60, 5, -1}, []bool{true, false, true})
	r.Field(3).(*array.Float32Builder).AppendValues([]float32{0.5, 0.1, 3}, nil)
	r.Field(4).(*array.Float16Builder).AppendValues([]float16.Num{float16.New(1.5), float16.New(-2), float16.New(0)}, nil)
	r.Field(5).(*array.Decimal128Builder).AppendValues([]decimal128.Num{decimal128.FromI64(12345), decimal128.FromI64(-1), decimal128.FromI64(0)}, nil)
	r.Field(6).(*array.StringBuilder).AppendValues([]string{"a", "b", "c"}, nil)
	st := r.Field(7).(*array.StructBuilder)
	st.AppendValues([]bool{true, false, true})
	st.FieldBuilder(0).(*array.Float64Builder).AppendValues([]float64{10, 11, 12}, nil)
	st.FieldBuilder(1).(*array.Float64Builder).AppendValues([]float64{20, 21, 22}, []bool{true, true, false})
	r.Field(8).(*array.TimestampBuilder).AppendValues([]arrow.Timestamp{1, 2, 3}, nil)
	var b bytes.Buffer
	w := ipc.NewWriter(&b, ipc.WithSchema(schema), ipc.WithZstd())
	if err := w.Write(r.NewRecord()); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes(), map[string][]float64{
		"i8": {-5, 7, 100}, "u16": {1, 60000, 3}, "i64": {1 << 60, events.Null, -1}, "f32": {0.5, float64(float32(0.1)), 3},
		"f16": {1.5, -2, 0}, "dec": {123.45, -0.01, 0}, "geometry.x": {10, events.Null, 12}, "geometry.y": {20, events.Null, events.Null},
	}
}

// A stream of many types, packed: numbers come out as numbers, a null struct
// makes its members null, text and times are no numbers.
func TestStreamTypes(t *testing.T) {
	b, want := stream(t)
	f, err := arrowfile.Open(saved(t, b), arrowfile.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if f.Info().Format != events.FormatArrowStream {
		t.Error(f.Info())
	}
	for name, w := range want {
		got, err := readAll(f, name)
		if err != nil {
			t.Fatal(err)
		}
		equal(t, name, got, [][]float64{w})
	}
	for name, kind := range map[string]error{"name": events.ErrUnsupported, "when": events.ErrUnsupported, "none": events.ErrSetting, "geometry": events.ErrSetting} {
		if _, err := readAll(f, name); !errors.Is(err, kind) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// However it is cut, an input gives an error, or (a stream cut between
// messages) fewer rows; it never panics.
func TestTruncated(t *testing.T) {
	s, _ := stream(t)
	for what, whole := range map[string][]byte{"stream": s, "file": write(t, arrowfile.WriteOptions{LZ4: true}, []string{"x"}, [][]float64{{1, 2, 3}})} {
		for n := range len(whole) {
			f, err := arrowfile.Open(saved(t, whole[:n]), arrowfile.Options{})
			if err == nil {
				name := f.Fields()[0].Name
				_, err = readAll(f, name)
			}
			if what == "file" && err == nil || err != nil && !errors.Is(err, events.ErrMalformed) && !errors.Is(err, events.ErrUnsupported) {
				t.Fatalf("%s cut at %d of %d: %v", what, n, len(whole), err)
			}
		}
	}
}

// Limits hold before anything is allocated: metadata, body and unpacked size.
func TestLimits(t *testing.T) {
	x := make([]float64, 100_000) // packs to next to nothing
	path := saved(t, write(t, arrowfile.WriteOptions{Zstd: true}, []string{"x"}, [][]float64{x}))
	for _, opt := range []arrowfile.Options{{MaxUnpackedBytes: 1 << 16}, {MaxBodyBytes: 16}, {MaxMetadataBytes: 16}} {
		f, err := arrowfile.Open(path, opt)
		if err == nil {
			_, err = readAll(f, "x")
		}
		if !errors.Is(err, events.ErrUnsupported) {
			t.Errorf("%+v: %v", opt, err)
		}
	}
	if _, err := arrowfile.Open(filepath.Join(t.TempDir(), "none"), arrowfile.Options{}); !errors.Is(err, events.ErrMissing) {
		t.Error(err)
	}
	if _, err := arrowfile.Open(t.TempDir(), arrowfile.Options{}); !errors.Is(err, events.ErrUnsupported) {
		t.Error(err)
	}
	f, err := arrowfile.Open(path, arrowfile.Options{})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(bg)
	cancel()
	if err := f.Read(ctx, 0, []string{"x"}, func(events.Batch) error { return nil }); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
	stop := errors.New("stop")
	if err := f.Read(bg, 0, []string{"x"}, func(events.Batch) error { return stop }); err != stop {
		t.Error(err)
	}
}

// FuzzRead: any bytes give rows or an error of a known kind.
func FuzzRead(f *testing.F) {
	s, _ := stream(f)
	f.Add(s)
	f.Add(write(f, arrowfile.WriteOptions{LZ4: true}, []string{"x", "y"}, [][]float64{{1, 2}, {3, events.Null}}))
	f.Add([]byte("ARROW1\x00\x00\xff\xff\xff\xff\x00\x00\x00\x00\x00\x00\x00\x00ARROW1"))
	f.Fuzz(func(t *testing.T, b []byte) {
		path := saved(t, b)
		opt := arrowfile.Options{MaxUnpackedBytes: 1 << 24}
		a, err := arrowfile.Open(path, opt)
		if err == nil {
			for _, c := range a.Fields() {
				if c.Numeric {
					_, err = readAll(a, c.Name)
					break
				}
			}
		}
		if err != nil && !errors.Is(err, events.ErrMalformed) && !errors.Is(err, events.ErrUnsupported) && !errors.Is(err, events.ErrSetting) {
			t.Fatal(err)
		}
	})
}

func ExampleWriter() {
	var b bytes.Buffer
	w, err := arrowfile.NewWriter(&b, []string{"x", "density"}, arrowfile.WriteOptions{})
	if err != nil {
		panic(err)
	}
	if err := w.WriteBatch([][]float64{{1, 2}, {0.25, 0.5}}); err != nil {
		panic(err)
	}
	fmt.Println(w.Close(), string(b.Bytes()[:6]))
	// Output: <nil> ARROW1
}
