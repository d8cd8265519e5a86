package csvfile_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"drumlin/io/csvfile"
	"drumlin/io/events"
)

func put(tb testing.TB, text string) string {
	tb.Helper()
	path := filepath.Join(tb.TempDir(), "a.csv")
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		tb.Fatal(err)
	}
	return path
}

func read(tb testing.TB, path string, columns ...string) ([][]float64, error) {
	tb.Helper()
	f, err := csvfile.Open(path)
	if err != nil {
		return nil, err
	}
	out := make([][]float64, len(columns))
	err = f.Read(tb.Context(), 0, columns, func(b events.Batch) error {
		for k, c := range b.Columns {
			out[k] = append(out[k], c...)
		}
		return nil
	})
	return out, err
}

func same(a, b float64) bool { return math.Float64bits(a) == math.Float64bits(b) }

func TestForms(t *testing.T) {
	for name, text := range map[string]string{
		"comma":     "x,y,name\n1,2,a\n3.5,-4e2,b\n",
		"semicolon": "x;y;name\n1;2;a,b,c\n3.5;-4e2;b\n",
		"tab":       "x\ty\tname\n1\t2\ta\n3.5\t-4e2\tb\n",
		"crlf":      "x,y,name\r\n1,2,a\r\n3.5,-4e2,b\r\n",
		"mark":      "\xef\xbb\xbfx,y,name\n1,2,a\n3.5,-4e2,b\n",
		"quotes":    "\"x\",\"y\",\"na,me\"\n\"1\",2,\"a\nb\"\n3.5,-4e2,\"say \"\"b\"\"\"\n",
		"blanks":    "\n x , y ,name\n\n 1, 2,a\n\n3.5 ,-4e2,b",
	} {
		got, err := read(t, put(t, text), "x", "y")
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if len(got[0]) != 2 || got[0][0] != 1 || got[0][1] != 3.5 || got[1][0] != 2 || got[1][1] != -400 {
			t.Errorf("%s: %v", name, got)
		}
	}
}

func TestCells(t *testing.T) {
	text := "x,y,w\n" + strings.Repeat("1,1,\n", 40) + ",NA,\nnull,abc,\nNaN,inf,\n1e999,0x10,\n1_0,\"1,5\",\n"
	got, err := read(t, put(t, text), "x", "y", "w")
	if err != nil {
		t.Fatal(err)
	}
	x, y := got[0][40:], got[1][40:]
	wantX := []float64{events.Null, events.Null, math.NaN(), math.Inf(1), events.NotAValue}
	wantY := []float64{events.Null, events.NotAValue, math.Inf(1), events.NotAValue, events.NotAValue}
	for i := range wantX {
		if i == 2 {
			if x[i] == x[i] || events.IsNull(x[i]) || events.IsNotAValue(x[i]) {
				t.Errorf("NaN read as %v", x[i])
			}
		} else if !same(x[i], wantX[i]) {
			t.Errorf("x row %d: %x", i, math.Float64bits(x[i]))
		}
		if !same(y[i], wantY[i]) {
			t.Errorf("y row %d: %x", i, math.Float64bits(y[i]))
		}
	}
	if !events.IsNull(got[2][0]) {
		t.Error("an empty column is not null")
	}
	var a events.Account
	kept := events.Screen{}.Apply(events.Batch{Columns: got[:2]}, &a)
	if kept != 40 || a.SetAside[events.NotANumberText] != 2 || a.SetAside[events.NullCoordinate] != 2 ||
		a.SetAside[events.NotANumber] != 1 || !a.Balanced() {
		t.Errorf("kept %d, %+v", kept, a)
	}
}

func TestFaults(t *testing.T) {
	long := "x,y\n1,\"" + strings.Repeat("a\n", 800_000) + "\"\n"
	for name, c := range map[string]struct {
		text string
		kind error
		says string
	}{
		"empty":    {"", events.ErrMalformed, "empty"},
		"blank":    {"\n\n", events.ErrMalformed, "empty"},
		"few":      {"x,y\n1,2\n3\n", events.ErrMalformed, "line 3"},
		"many":     {"x,y\n1,2\n3,4\n5,6,7\n", events.ErrMalformed, "line 4"},
		"quote":    {"x,y\n1,2\n3,a\"b\n", events.ErrMalformed, "line 3"},
		"open":     {"x,y\n1,\"2\n3,4\n", events.ErrMalformed, "quote"},
		"long":     {long, events.ErrMalformed, "longer than"},
		"utf-16":   {"\xff\xfex\x00,\x00y\x00", events.ErrUnsupported, "UTF-16"},
		"binary":   {"PAR1\x00\x00\x00", events.ErrMalformed, "not text"},
		"none":     {"x\n1\n", events.ErrSetting, "no column \"y\""},
		"twice":    {"x,y,y\n1,2,3\n", events.ErrSetting, "2 columns"},
		"name":     {"x,\xff\xfe\xfd\n1,2\n", events.ErrMalformed, "UTF-8"},
		"deep row": {"x,y\n" + strings.Repeat("1,2\n", 5000) + "1\n", events.ErrMalformed, "line 5002"},
	} {
		_, err := read(t, put(t, c.text), "x", "y")
		if !errors.Is(err, c.kind) || !strings.Contains(err.Error(), c.says) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := csvfile.Open(filepath.Join(t.TempDir(), "none")); !errors.Is(err, events.ErrMissing) {
		t.Error("missing:", err)
	}
	if _, err := csvfile.Open(t.TempDir()); !errors.Is(err, events.ErrUnsupported) {
		t.Error("folder:", err)
	}
}

func TestDuplicateNamesMatterOnlyWhenAskedFor(t *testing.T) {
	got, err := read(t, put(t, "x,y,z,z\n1,2,3,4\n"), "x", "y")
	if err != nil || got[0][0] != 1 {
		t.Error(got, err)
	}
}

func TestQuakes(t *testing.T) {
	f, err := csvfile.Open("../../testdata/events/fiji-quakes.csv")
	if err != nil {
		t.Fatal(err)
	}
	p, err := events.Resolve("", "", "", f.Fields())
	if err != nil || p.X != "long" || p.Y != "lat" || !p.Degrees {
		t.Fatalf("%+v %v", p, err)
	}
	n, sum := 0, 0.0
	err = f.Read(t.Context(), 0, []string{p.X, p.Y, "stations"}, func(b events.Batch) error {
		n += b.Len()
		for _, v := range b.Columns[0] {
			sum += v
		}
		return nil
	})
	if err != nil || n != 1000 || math.Abs(sum/1000-179.46202) > 1e-9 {
		t.Errorf("%d rows, mean %.6f, %v", n, sum/1000, err)
	}
}

func FuzzCSV(f *testing.F) {
	for _, s := range []string{"x,y\n1,2\n", "\"a\";b\n1;\"2\n\"\n", "\xef\xbb\xbfx\ty\r\n1\tNA\r\n", "x,y\n1\n", "\"", "x\n\n\n"} {
		f.Add([]byte(s))
	}
	path := filepath.Join(f.TempDir(), "a.csv")
	f.Fuzz(func(t *testing.T, data []byte) {
		if err := os.WriteFile(path, data, 0o600); err != nil {
			t.Fatal(err)
		}
		check := func(err error) {
			var fault *events.Fault
			if err != nil && (!errors.As(err, &fault) || strings.Contains(fault.What, "\n")) {
				t.Fatalf("%v", err)
			}
		}
		s, err := csvfile.Open(path)
		check(err)
		if err != nil {
			return
		}
		for _, c := range s.Fields() {
			check(s.Read(t.Context(), 0, []string{c.Name}, func(b events.Batch) error {
				for _, v := range b.Columns[0] {
					if c.Class == events.Text && v == v && b.WordsOf(0)[int(v)] == "" {
						t.Fatal("an empty word")
					}
				}
				return nil
			}))
		}
	})
}

func BenchmarkScan(b *testing.B) {
	var s strings.Builder
	s.WriteString("id,lon,lat\n")
	r := rand.New(rand.NewPCG(1, 1))
	for range 200_000 {
		s.WriteString("abc,")
		s.WriteString(strings.Repeat("1", 1+r.IntN(2)) + ".12345,45.98765\n")
	}
	path := put(b, s.String())
	f, err := csvfile.Open(path)
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if err := f.Read(b.Context(), 0, []string{"lon", "lat"}, func(events.Batch) error { return nil }); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(200_000*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mrows/s")
}

func TestText(t *testing.T) {
	f, err := csvfile.Open(put(t, "x,kind,when\n1, a ,2024-01-01\n2,,\n3,b\xff,na\n4,a,2024-01-02T03:04:05Z\n"))
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	err = f.Read(t.Context(), 0, []string{"kind", "x", "when"}, func(b events.Batch) error {
		if b.WordsOf(1) != nil {
			t.Error("numbers have words")
		}
		for i := range b.Len() {
			for _, k := range []int{0, 2} {
				if v := b.Columns[k][i]; events.IsNull(v) {
					got = append(got, "-")
				} else {
					got = append(got, b.WordsOf(k)[int(v)])
				}
			}
		}
		return nil
	})
	if want := "a 2024-01-01 - - b\uFFFD - a 2024-01-02T03:04:05Z"; err != nil || strings.Join(got, " ") != want {
		t.Errorf("%q %v", got, err)
	}
}
