package events_test

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"drumlin/io/events"
)

func TestNaNsStayApart(t *testing.T) {
	for _, v := range []float64{0, 1, math.NaN(), math.Inf(1), -math.NaN()} {
		if events.IsNull(v) || events.IsNotAValue(v) {
			t.Errorf("%v taken for a marker", v)
		}
	}
	if !events.IsNull(events.Null) || events.IsNull(events.NotAValue) || !events.IsNotAValue(events.NotAValue) {
		t.Error("markers are not told apart")
	}
	s := []float64{events.Null, events.NotAValue}
	c := append([]float64(nil), s...)
	if !events.IsNull(c[0]) || !events.IsNotAValue(c[1]) || c[0] == c[0] {
		t.Error("markers do not survive a copy")
	}
}

func TestFaultIsOneLineAndUnwraps(t *testing.T) {
	err := error(&events.Fault{Kind: events.ErrMissing, File: "a.csv", Where: "line 3", What: "cannot be read", Remedy: "check it", Cause: fs.ErrPermission})
	if err.Error() != "a.csv: line 3: cannot be read: permission denied; check it" {
		t.Error(err)
	}
	if !errors.Is(err, events.ErrMissing) || !errors.Is(err, fs.ErrPermission) || errors.Is(err, events.ErrMalformed) {
		t.Error("unwraps wrongly")
	}
}

func TestAccount(t *testing.T) {
	var a, b events.Account
	a.Read, a.Used = 10, 7
	a.SetAside[events.Infinite], a.SetAside[events.NullCoordinate] = 2, 1
	b.Read, b.Used = 5, 5
	b.Withdraw(events.OutsideStudyArea, 2)
	ab, ba := a, b
	ab.Add(b)
	ba.Add(a)
	if ab != ba || !ab.Balanced() || ab.SetAsideTotal() != 5 {
		t.Errorf("%+v %+v", ab, ba)
	}
	text, err := json.Marshal(ab)
	want := `{"read":15,"used":10,"set_aside":{"null":1,"infinite":2,"outside-study-area":2}}`
	if err != nil || string(text) != want {
		t.Errorf("%s %v", text, err)
	}
	var back events.Account
	if err := json.Unmarshal(text, &back); err != nil || back != ab {
		t.Errorf("%+v %v", back, err)
	}
	for _, bad := range []string{`{"read":1,"used":1,"set_aside":{"odd":1}}`, `{"read":3,"used":1,"set_aside":{}}`, `[]`} {
		if json.Unmarshal([]byte(bad), &back) == nil {
			t.Errorf("accepted %s", bad)
		}
	}
	for _, r := range events.Reasons() {
		if strings.HasPrefix(r.String(), "reason-") {
			t.Errorf("reason %d has no name", r)
		}
	}
	defer func() {
		if recover() == nil {
			t.Error("withdrew rows that were not there")
		}
	}()
	ab.Withdraw(events.Infinite, 11)
}

func TestScreenJudges(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		s       events.Screen
		x, y, w float64
		want    events.Reason
	}{
		{events.Screen{}, events.Null, inf, 0, events.NullCoordinate},
		{events.Screen{}, nan, events.Null, 0, events.NullCoordinate},
		{events.Screen{}, events.NotAValue, nan, 0, events.NotANumberText},
		{events.Screen{}, 0, nan, 0, events.NotANumber},
		{events.Screen{}, -inf, 100, 0, events.Infinite},
		{events.Screen{}, 360.001, 100, 0, events.LongitudeRange},
		{events.Screen{}, -180.001, 0, 0, events.LongitudeRange},
		{events.Screen{}, 360, 90.5, 0, events.LatitudeRange},
		{events.Screen{}, 0, 0, 0, events.NullIsland},
		{events.Screen{Kind: events.Planar}, 360, -1.1e8, 0, events.BeyondPlane},
		{events.Screen{Weighted: true}, 1, 1, events.Null, events.WeightNull},
		{events.Screen{Weighted: true}, 1, 1, events.NotAValue, events.NotANumberText},
		{events.Screen{Weighted: true}, 1, 1, nan, events.WeightNotFinite},
		{events.Screen{Weighted: true}, 1, 1, inf, events.WeightNotFinite},
		{events.Screen{Weighted: true}, 1, 1, -1, events.WeightNegative},
		{events.Screen{Weighted: true}, 1, 1, 0, events.WeightZero},
	} {
		var a events.Account
		b := events.Batch{Columns: [][]float64{{1, c.x, 2}, {1, c.y, 2}, {1, c.w, 2}, {7, 8, 9}}}
		n := c.s.Apply(b, &a)
		if n != 2 || a.SetAside[c.want] != 1 || !a.Balanced() || b.Columns[0][1] != 2 || b.Columns[3][1] != 9 {
			t.Errorf("%+v: kept %d, %+v", c, n, a)
		}
	}
}

// TestScreenAgainstSlow compares with a row-by-row filter on random rows.
func TestScreenAgainstSlow(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 9))
	odd := []float64{events.Null, events.NotAValue, math.NaN(), math.Inf(-1), 400, -91, 95, -5, 0}
	for trial := range 300 {
		n := r.IntN(200)
		cols := make([][]float64, 4)
		for k := range cols {
			cols[k] = make([]float64, n)
			for i := range cols[k] {
				cols[k][i] = 1 + r.Float64()*80
				if r.IntN(100) < trial%60 && k < 3 {
					cols[k][i] = odd[r.IntN(len(odd))]
				}
			}
		}
		for i := range n {
			cols[3][i] = float64(i)
		}
		s := events.Screen{Weighted: trial%2 == 0}
		var want []float64
		for i := range n {
			x, y, w := cols[0][i], cols[1][i], cols[2][i]
			if x >= -180 && x <= 360 && y >= -90 && y <= 90 && !(x == 0 && y == 0) && (!s.Weighted || w > 0 && w <= math.MaxFloat64) {
				want = append(want, float64(i))
			}
		}
		var a events.Account
		got := s.Apply(events.Batch{Columns: cols}, &a)
		if got != len(want) || a.Read != int64(n) || a.Used != int64(got) || !a.Balanced() {
			t.Fatalf("trial %d: kept %d of %d, want %d: %+v", trial, got, n, len(want), a)
		}
		for i, v := range want {
			if cols[3][i] != v {
				t.Fatalf("trial %d: row %d is %v, want %v", trial, i, cols[3][i], v)
			}
		}
	}
}

func TestSniff(t *testing.T) {
	for want, c := range map[string][2]string{
		"parquet":      {"PAR1\x15\x04", "xxPAR1"},
		"csv":          {"lon;lat\n1;2\xc3", ""},
		"arrow-file":   {"ARROW1\x00\x00", ""},
		"arrow-stream": {"\xff\xff\xff\xff\x10\x00", ""},
		"gzip":         {"\x1f\x8b\x08", ""},
		"zstd":         {"\x28\xb5\x2f\xfd\x00", ""},
		"empty":        {"", ""},
		"unknown":      {"\x00\x01\x02", ""},
	} {
		if got := events.Sniff([]byte(c[0]), []byte(c[1])); got != want {
			t.Errorf("%q: %s, want %s", c[0], got, want)
		}
	}
	if events.Sniff([]byte("\x00\x00\x00\x00"), []byte("PAR1")) != "parquet" {
		t.Error("a tail of PAR1 after a damaged head is not taken for Parquet")
	}
}

// fields makes columns; a leading ! marks text.
func fields(names ...string) []events.Field {
	var out []events.Field
	for _, n := range names {
		f := events.Field{Name: strings.TrimPrefix(n, "!"), Type: "DOUBLE", Numeric: n[0] != '!'}
		if !f.Numeric {
			f.Type = "text"
		}
		out = append(out, f)
	}
	return out
}

func TestResolve(t *testing.T) {
	for i, c := range []struct {
		x, y, g string
		f       []events.Field
		want    events.Pair
		kind    error
		says    string
	}{
		{f: fields("id", "lat", "long"), want: events.Pair{X: "long", Y: "lat", Degrees: true}},
		{f: fields("LON", "Lat", "!name"), want: events.Pair{X: "LON", Y: "Lat", Degrees: true}},
		{f: fields("Easting", "Northing"), want: events.Pair{X: "Easting", Y: "Northing"}},
		{f: fields("x", "y", "!lon", "!lat"), want: events.Pair{X: "x", Y: "y"}},
		{f: fields("x", "y", "lon", "lat"), kind: events.ErrSetting, says: "lon/lat, x/y"},
		{f: fields("lon", "lng", "lat"), kind: events.ErrSetting, says: "lng/lat"},
		{f: fields("lon", "LON", "lat"), kind: events.ErrSetting, says: "more than one column"},
		{f: fields("a", "b", "!c"), kind: events.ErrSetting, says: "numeric columns: a, b"},
		{f: fields("!lon", "lat"), kind: events.ErrUnsupported, says: "is text"},
		{f: nil, kind: events.ErrSetting, says: "none"},
		{x: "a", y: "b", f: fields("a", "b"), want: events.Pair{X: "a", Y: "b"}},
		{x: "lat", y: "lon", f: fields("lon", "lat"), want: events.Pair{X: "lat", Y: "lon", Swapped: true}},
		{x: "longitude", y: "latitude", f: fields("longitude", "latitude"), want: events.Pair{X: "longitude", Y: "latitude", Degrees: true}},
		{x: "longitud", y: "lat", f: fields("Longitude", "lat"), kind: events.ErrSetting, says: `close to it: "Longitude"`},
		{x: "a", f: fields("a", "b"), kind: events.ErrSetting, says: "both"},
		{x: "a", y: "a", f: fields("a", "b"), kind: events.ErrSetting, says: "same column"},
		{x: "a", y: "b", f: fields("a", "b", "b"), kind: events.ErrSetting, says: "2 columns"},
		{x: "a", y: "b", f: fields("a", "!b"), kind: events.ErrUnsupported, says: "is text"},
		{g: "geom", f: fields("geom.x", "geom.y"), want: events.Pair{X: "geom.x", Y: "geom.y"}},
		{g: "geom", f: fields("!geom"), kind: events.ErrUnsupported, says: "geom"},
		{g: "geo", f: fields("geom.x", "a"), kind: events.ErrSetting, says: "no point column"},
		{g: "geom", x: "a", f: fields("a"), kind: events.ErrSetting, says: "twice"},
	} {
		got, err := events.Resolve(c.x, c.y, c.g, c.f)
		if c.kind == nil {
			if err != nil || got != c.want {
				t.Errorf("case %d: %+v %v", i, got, err)
			}
		} else if !errors.Is(err, c.kind) || !strings.Contains(err.Error(), c.says) {
			t.Errorf("case %d: %v", i, err)
		}
	}
}

func ExampleScreen() {
	b := events.Batch{Columns: [][]float64{{179.5, events.Null, 12}, {-17, 3, 120}}}
	var a events.Account
	n := events.Screen{Kind: events.Geographic}.Apply(b, &a)
	text, _ := json.Marshal(a)
	fmt.Println(n, string(text))
	// Output: 1 {"read":3,"used":1,"set_aside":{"null":1,"latitude-out-of-range":1}}
}

func ExampleResolve() {
	p, _ := events.Resolve("", "", "", []events.Field{{Name: "lat", Numeric: true}, {Name: "long", Numeric: true}})
	fmt.Println(p.X, p.Y, p.Degrees)
	// Output: long lat true
}

func BenchmarkScreen(b *testing.B) {
	const n = 32768
	cols := [][]float64{make([]float64, n), make([]float64, n), make([]float64, n)}
	r := rand.New(rand.NewPCG(1, 1))
	for i := range n {
		cols[0][i], cols[1][i], cols[2][i] = r.Float64()*300-150, r.Float64()*160-80, r.Float64()+1
	}
	for _, s := range []events.Screen{{}, {Weighted: true}} {
		b.Run(fmt.Sprintf("weighted=%v", s.Weighted), func(b *testing.B) {
			var a events.Account
			b.ReportAllocs()
			for b.Loop() {
				s.Apply(events.Batch{Columns: cols}, &a)
			}
			b.ReportMetric(b.Elapsed().Seconds()*1e9/float64(b.N)/n, "ns/row")
		})
	}
}
