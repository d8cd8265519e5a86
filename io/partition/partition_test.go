package partition_test

import (
	"context"
	"os"
	"path/filepath"
	"reflect"
	"testing"

	"drumlin/io/csvfile"
	"drumlin/io/events"
	"drumlin/io/partition"
)

func TestKeys(t *testing.T) {
	for path, want := range map[string][]partition.Key{
		"a.csv":                             nil,
		"data/x=1.csv":                      nil,
		"d/year=2024/kind=a/p.csv":          {{Name: "year", Value: "2024"}, {Name: "kind", Value: "a"}},
		"kind=a%20b%2Fc/p":                  {{Name: "kind", Value: "a b/c"}},
		"kind=100%/p":                       {{Name: "kind", Value: "100%"}},
		"a%3Db=c=d/p":                       {{Name: "a=b", Value: "c=d"}},
		"=x/p":                              nil,
		"k=__HIVE_DEFAULT_PARTITION__/j=/p": {{Name: "k", Null: true}, {Name: "j", Null: true}},
		"k=1/k=2/p":                         {{Name: "k", Value: "2"}},
		"k=\xff/p":                          {{Name: "k", Value: "\uFFFD"}},
	} {
		if got := partition.Keys(filepath.FromSlash(path)); len(got) != len(want) || len(want) > 0 && !reflect.DeepEqual(got, want) {
			t.Errorf("%s: %+v", path, got)
		}
	}
}

func TestWrap(t *testing.T) {
	dir := t.TempDir()
	var sources []events.Source
	names := []string{
		"year=2024/kind=fire/own=9/a.csv", "year=2025/kind=__HIVE_DEFAULT_PARTITION__/own=9/a.csv", "year=2025/kind=7/own=9/a.csv", "b.csv",
	}
	for _, n := range names {
		path := filepath.Join(dir, filepath.FromSlash(n))
		if err := os.MkdirAll(filepath.Dir(path), 0o700); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte("x,own\n1,2\n3,4\n"), 0o600); err != nil {
			t.Fatal(err)
		}
		f, err := csvfile.Open(path)
		if err != nil {
			t.Fatal(err)
		}
		sources = append(sources, f)
	}
	got := partition.Wrap(sources, names)
	if got[3] != sources[3] {
		t.Error("a file without keys is wrapped")
	}
	wantYear, wantKind := []float64{2024, 2025, 2025}, []string{"fire", "", "7"}
	for i, s := range got[:3] {
		f := s.Fields()
		if len(f) != 4 || f[2].Name != "year" || !f[2].Numeric || f[3].Class != events.Text || f[3].Numeric {
			t.Fatalf("%+v", f)
		}
		for _, columns := range [][]string{{"kind", "x", "year", "own"}, {"year", "kind"}} {
			rows := 0
			err := s.Read(context.Background(), 0, columns, func(b events.Batch) error {
				for k, c := range columns {
					for _, v := range b.Columns[k] {
						switch c {
						case "year":
							if v != wantYear[i] || b.WordsOf(k) != nil {
								t.Errorf("year %v", v)
							}
						case "kind":
							if wantKind[i] == "" != events.IsNull(v) || v == v && b.WordsOf(k)[int(v)] != wantKind[i] {
								t.Errorf("kind %v of %v", v, b.WordsOf(k))
							}
						case "own":
							if v != 2 && v != 4 {
								t.Errorf("own %v is not the file's", v)
							}
						}
					}
				}
				rows += b.Len()
				return nil
			})
			if err != nil || rows != 2 {
				t.Errorf("%d rows, %v", rows, err)
			}
		}
		if st, ok := events.StatOf(s, 0, "year"); !ok || st.Lo != wantYear[i] || st.Hi != wantYear[i] {
			t.Errorf("%+v", st)
		}
		if lo, _, ok := s.Bounds("year"); !ok || lo != wantYear[i] {
			t.Error(lo)
		}
	}
}
