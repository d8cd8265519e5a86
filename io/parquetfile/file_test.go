package parquetfile_test

import (
	"bytes"
	"context"
	"encoding/binary"
	"encoding/csv"
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"drumlin/io/events"
	"drumlin/io/parquetfile"
)

const quakes = "../../testdata/events/fiji-quakes.parquet"

// put writes bytes to a file of its own.
func put(tb testing.TB, data []byte) string {
	tb.Helper()
	path := filepath.Join(tb.TempDir(), "a.parquet")
	if err := os.WriteFile(path, data, 0o600); err != nil {
		tb.Fatal(err)
	}
	return path
}

func open(tb testing.TB, path string) *parquetfile.File {
	tb.Helper()
	f, err := parquetfile.Open(path, parquetfile.Options{})
	if err != nil {
		tb.Fatal(err)
	}
	return f
}

func TestQuakesEqualTheirText(t *testing.T) {
	f := open(t, quakes)
	h, err := os.Open("../../testdata/events/fiji-quakes.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer h.Close()
	rows, err := csv.NewReader(h).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if got := f.Info(); got.Rows != 1000 || got.Format != "parquet" || got.Bytes != 10581 || got.CRS != "" {
		t.Errorf("info %+v", got)
	}
	for c, name := range rows[0] {
		got, err := readColumn(f, name)
		if err != nil {
			t.Fatal(err)
		}
		if len(got) != len(rows)-1 {
			t.Fatalf("%s: %d rows", name, len(got))
		}
		lo, hi := math.Inf(1), math.Inf(-1)
		for i, v := range got {
			want, _ := strconv.ParseFloat(rows[i+1][c], 64)
			if v != want {
				t.Fatalf("%s row %d: %v, text says %v", name, i, v, want)
			}
			lo, hi = min(lo, v), max(hi, v)
		}
		if blo, bhi, ok := f.Bounds(name); ok && (blo != lo || bhi != hi) {
			t.Errorf("%s: bounds %v %v, values %v %v", name, blo, bhi, lo, hi)
		} else if !ok && name == "long" {
			t.Error("no bounds for long")
		}
	}
}

// sample is a small file of every written type in three row groups.
func sample(tb testing.TB, opt parquetfile.WriteOptions) ([]byte, []parquetfile.Column) {
	tb.Helper()
	const n = 1000
	cols := []parquetfile.Column{
		{Name: "x", Floats: make([]float64, n)}, {Name: "y", Floats: make([]float64, n)},
		{Name: "count", Type: parquetfile.Int64, Ints: make([]int64, n)},
		{Name: "kind", Type: parquetfile.Text, Texts: make([]string, n)},
		{Name: "when", Type: parquetfile.Timestamp, Ints: make([]int64, n)},
	}
	r := rand.New(rand.NewPCG(7, 7))
	for i := range n {
		cols[0].Floats[i], cols[1].Floats[i] = r.NormFloat64(), math.Round(r.Float64()*100)/100
		cols[2].Ints[i] = r.Int64N(50) - 10
		cols[3].Texts[i] = strings.Repeat("k", r.IntN(4))
		cols[4].Ints[i] = time.Date(2025, 3, 1, 0, i, 0, 0, time.UTC).UnixMicro()
	}
	opt.RowGroupRows = 400
	var b bytes.Buffer
	if err := parquetfile.Write(&b, cols, opt); err != nil {
		tb.Fatal(err)
	}
	return b.Bytes(), cols
}

func TestWrittenIsReadBack(t *testing.T) {
	for _, opt := range []parquetfile.WriteOptions{{}, {Dictionary: true}, {Uncompressed: true}, {PageV2: true}, {PageBytes: 512}, {PageV2: true, Dictionary: true, PageBytes: 700}} {
		data, cols := sample(t, opt)
		again, _ := sample(t, opt)
		if !bytes.Equal(data, again) {
			t.Errorf("%+v: two runs wrote different bytes", opt)
		}
		f := open(t, put(t, data))
		if f.Parts() != 3 || f.PartRows(2) != 200 || f.PartRows(3) != -1 || f.Info().Rows != 1000 {
			t.Fatalf("%+v: %d parts", opt, f.Parts())
		}
		for _, c := range cols[:3] {
			got, err := readColumn(f, c.Name)
			if err != nil {
				t.Fatalf("%+v: %v", opt, err)
			}
			for i, v := range got {
				want := 0.0
				if c.Floats != nil {
					want = c.Floats[i]
				} else {
					want = float64(c.Ints[i])
				}
				if v != want {
					t.Fatalf("%+v: %s row %d: %v, wrote %v", opt, c.Name, i, v, want)
				}
			}
		}
		if lo, hi, ok := f.Bounds("count"); !ok || lo != -10 || hi != 39 {
			t.Errorf("bounds of count %v %v %v", lo, hi, ok)
		}
		for _, name := range []string{"kind", "when"} {
			if err := events.CheckNumeric(name, f.Fields()); !errors.Is(err, events.ErrUnsupported) {
				t.Errorf("%s taken for numbers: %v", name, err)
			}
			if _, _, ok := f.Bounds(name); ok {
				t.Errorf("%s has bounds", name)
			}
		}
		if _, err := readColumn(f, "lat"); !errors.Is(err, events.ErrSetting) {
			t.Errorf("missing column: %v", err)
		}
	}
}

func TestReadStops(t *testing.T) {
	data, _ := sample(t, parquetfile.WriteOptions{})
	path := put(t, data)
	f, err := parquetfile.Open(path, parquetfile.Options{BatchRows: 64})
	if err != nil {
		t.Fatal(err)
	}
	stop := errors.New("enough")
	if err := f.Read(t.Context(), 0, []string{"x", "y", "x"}, func(b events.Batch) error {
		if b.Len() != 64 || len(b.Columns) != 3 || !slices.Equal(b.Columns[0], b.Columns[2]) {
			t.Errorf("batch of %d", b.Len())
		}
		return stop
	}); err != stop {
		t.Errorf("yield's error came out as %v", err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	n := 0
	err = f.Read(ctx, 0, []string{"x"}, func(events.Batch) error { n++; cancel(); return nil })
	if err != context.Canceled || n != 1 {
		t.Errorf("cancelled: %v after %d batches", err, n)
	}
	for _, bad := range []int{-1, 3} {
		if err := f.Read(t.Context(), bad, []string{"x"}, nil); !errors.Is(err, events.ErrSetting) {
			t.Errorf("part %d: %v", bad, err)
		}
	}
	if err := f.Read(t.Context(), 0, nil, nil); !errors.Is(err, events.ErrSetting) {
		t.Error("no columns:", err)
	}
	if err := os.WriteFile(path, append(data, 0), 0o600); err != nil {
		t.Fatal(err)
	}
	if err := f.Read(t.Context(), 0, []string{"x"}, nil); !errors.Is(err, events.ErrMalformed) {
		t.Error("changed file:", err)
	}
}

func TestPanicInYieldIsNotHidden(t *testing.T) {
	f := open(t, quakes)
	defer func() {
		if recover() == nil {
			t.Error("the receiver's panic was swallowed")
		}
	}()
	_ = f.Read(t.Context(), 0, []string{"lat"}, func(events.Batch) error { panic("receiver") })
}

func TestRefusals(t *testing.T) {
	data, _ := sample(t, parquetfile.WriteOptions{})
	encrypted := append(slices.Clone(data[:len(data)-4]), "PARE"...)
	huge := slices.Clone(data)
	binary.LittleEndian.PutUint32(huge[len(huge)-8:], 1<<31)
	for name, c := range map[string]struct {
		data []byte
		kind error
		says string
	}{
		"empty":     {nil, events.ErrMalformed, "empty"},
		"text":      {[]byte("lon,lat\n1,2\n3,4\n"), events.ErrMalformed, "text"},
		"cut":       {data[:len(data)/2], events.ErrMalformed, "cut short"},
		"encrypted": {encrypted, events.ErrUnsupported, "encrypted"},
		"footer":    {huge, events.ErrMalformed, "footer"},
		"magic":     {[]byte("PAR1PAR1PAR1"), events.ErrMalformed, ""},
	} {
		_, err := parquetfile.Open(put(t, c.data), parquetfile.Options{})
		if !errors.Is(err, c.kind) || !strings.Contains(err.Error(), c.says) || !isFault(err) {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := parquetfile.Open(filepath.Join(t.TempDir(), "none"), parquetfile.Options{}); !errors.Is(err, events.ErrMissing) {
		t.Error("missing:", err)
	}
	if _, err := parquetfile.Open(t.TempDir(), parquetfile.Options{}); !errors.Is(err, events.ErrUnsupported) {
		t.Error("folder:", err)
	}
	path := put(t, data)
	if _, err := parquetfile.Open(path, parquetfile.Options{MaxFooterBytes: 10}); !errors.Is(err, events.ErrUnsupported) {
		t.Error("footer limit:", err)
	}
	for _, opt := range []parquetfile.Options{{MaxPageBytes: 100}, {MaxChunkBytes: 100}} {
		f, err := parquetfile.Open(path, opt)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := readColumn(f, "x"); !errors.Is(err, events.ErrUnsupported) {
			t.Errorf("%+v: %v", opt, err)
		}
	}
}

// drain opens and reads every numeric column; any failure must be a fault.
func drain(tb testing.TB, path string, opt parquetfile.Options) {
	f, err := parquetfile.Open(path, opt)
	if err != nil {
		if !isFault(err) {
			tb.Fatalf("open: %v", err)
		}
		return
	}
	if f.Info().Rows > 1<<16 {
		return // a broken count; the rows would only be counted off in nulls
	}
	for _, c := range f.Fields() {
		f.Bounds(c.Name)
		if !c.Readable() {
			continue
		}
		if _, err := readColumn(f, c.Name); err != nil && !isFault(err) {
			tb.Fatalf("%s: %v", c.Name, err)
		}
	}
}

var tight = parquetfile.Options{MaxPageBytes: 1 << 20, MaxChunkBytes: 1 << 24, MaxFooterBytes: 1 << 20}

func TestTruncatedAnywhere(t *testing.T) {
	data, _ := sample(t, parquetfile.WriteOptions{})
	path := filepath.Join(t.TempDir(), "a.parquet")
	for n := 0; n < len(data); n += 37 {
		if err := os.WriteFile(path, data[:n], 0o600); err != nil {
			t.Fatal(err)
		}
		if _, err := parquetfile.Open(path, tight); !errors.Is(err, events.ErrMalformed) || !isFault(err) {
			t.Fatalf("%d of %d bytes: %v", n, len(data), err)
		}
	}
	// A footer that survives but whose data lie elsewhere.
	for n := 4; n < len(data)/2; n += 101 {
		if err := os.WriteFile(path, append([]byte("PAR1"), data[n:]...), 0o600); err != nil {
			t.Fatal(err)
		}
		drain(t, path, tight)
	}
}

func TestFlippedBits(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a.parquet")
	quake, err := os.ReadFile(quakes)
	if err != nil {
		t.Fatal(err)
	}
	plain, _ := sample(t, parquetfile.WriteOptions{Dictionary: true})
	v2, _ := sample(t, parquetfile.WriteOptions{PageV2: true, Uncompressed: true})
	tries := 4000
	if testing.Short() {
		tries = 500
	}
	r := rand.New(rand.NewPCG(3, 5))
	for _, data := range [][]byte{quake, plain, v2} {
		foot := int(binary.LittleEndian.Uint32(data[len(data)-8:])) + 8
		for k := range tries {
			b := slices.Clone(data)
			for range 1 + r.IntN(3) {
				at := r.IntN(len(b))
				if k%2 == 0 {
					at = len(b) - 1 - r.IntN(foot)
				}
				b[at] ^= 1 << r.IntN(8)
			}
			if err := os.WriteFile(path, b, 0o600); err != nil {
				t.Fatal(err)
			}
			drain(t, path, tight)
		}
	}
}

func TestConcurrentPartsAreIndependent(t *testing.T) {
	path := pointFile(t, 40_000, 10_000, parquetfile.WriteOptions{PageBytes: 4096})
	f := open(t, path)
	want, err := readColumn(f, "y")
	if err != nil {
		t.Fatal(err)
	}
	done := make(chan error, 4)
	for p := range 4 {
		go func() {
			at := p * 10_000
			done <- f.Read(context.Background(), p, []string{"y"}, func(b events.Batch) error {
				for _, v := range b.Columns[0] {
					if v != want[at] {
						return errors.New("a value of another part")
					}
					at++
				}
				return nil
			})
		}()
	}
	for range 4 {
		if err := <-done; err != nil {
			t.Error(err)
		}
	}
}
