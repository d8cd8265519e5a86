package flatgeobuf_test

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"testing"

	"github.com/paulmach/orb"

	"drumlin/io/flatgeobuf"
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

func points(n int) *layers.Layer {
	r := rand.New(rand.NewPCG(1, 2))
	l := &layers.Layer{Name: "points", Title: "points, each with a number", Points: true, Fields: []layers.Field{{Name: "rank", Kind: layers.Whole}, {Name: "value", Kind: layers.Number}, {Name: "rule", Kind: layers.Text}}}
	for i := range n {
		f := layers.Feature{ID: fmt.Sprint("p-", i), Shape: orb.Point{-10 + 20*r.Float64(), 40 + 5*r.Float64()}, Values: []any{int64(i), r.Float64(), "of «" + fmt.Sprint(i) + "»"}}
		if i%3 == 0 {
			f.Values[1] = nil
		}
		l.Features = append(l.Features, f)
	}
	return l
}

func write(t *testing.T, l *layers.Layer) string {
	t.Helper()
	var b, again bytes.Buffer
	if err := flatgeobuf.WriteLayer(&b, l); err != nil {
		t.Fatal(err)
	}
	if err := flatgeobuf.WriteLayer(&again, l); err != nil || !bytes.Equal(b.Bytes(), again.Bytes()) {
		t.Fatalf("written twice, it differs: %v", err)
	}
	path := filepath.Join(t.TempDir(), l.Name+".fgb")
	if err := os.WriteFile(path, b.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

func ogrinfo(t *testing.T, args ...string) string {
	t.Helper()
	tool, err := exec.LookPath("ogrinfo")
	if err != nil {
		demand(t, "left out: ogrinfo (Debian: gdal-bin) is not installed")
	}
	out, err := exec.Command(tool, args...).CombinedOutput()
	if err != nil || bytes.Contains(out, []byte("ERROR")) {
		t.Fatalf("ogrinfo %v: %v\n%s", args, err, out)
	}
	return string(out)
}

func count(t *testing.T, out string) int {
	t.Helper()
	m := regexp.MustCompile(`Feature Count: (\d+)`).FindStringSubmatch(out)
	if m == nil {
		t.Fatalf("no count in\n%s", out)
	}
	n, _ := strconv.Atoi(m[1])
	return n
}

// GDAL reads every number of features, and its use of the index finds what a
// plain search finds.
func TestIndexAgainstGDAL(t *testing.T) {
	for _, n := range []int{0, 1, 2, 15, 16, 17, 256, 257, 300, 5000} {
		l := points(n)
		path := write(t, l)
		if got := count(t, ogrinfo(t, "-ro", "-so", "-al", path)); got != n {
			t.Errorf("%d features: GDAL counts %d", n, got)
		}
		want := 0
		for _, f := range l.Features {
			p := f.Shape.(orb.Point)
			if p[0] >= -3 && p[0] <= 2 && p[1] >= 41 && p[1] <= 43 {
				want++
			}
		}
		out := ogrinfo(t, "-ro", "-al", "-spat", "-3", "41", "2", "43", path)
		if got := len(regexp.MustCompile(`(?m)^OGRFeature`).FindAllString(out, -1)); got != want {
			t.Errorf("%d features: GDAL finds %d in the box, want %d", n, got, want)
		}
	}
}

func TestValuesAgainstGDAL(t *testing.T) {
	l := points(4)
	out := ogrinfo(t, "-ro", "-al", write(t, l))
	for _, want := range []string{`id \(String\) = p-3`, `rank \(Integer64\) = 2`, `rule \(String\) = of «1»`, `ID\["EPSG",4326\]`} {
		if !regexp.MustCompile(want).MatchString(out) {
			t.Errorf("no %s in\n%s", want, out)
		}
	}
	if n := len(regexp.MustCompile(`value \(Real\)`).FindAllString(out, -1)); n != 2 {
		t.Errorf("%d values where 2 of 4 are known", n)
	}
	square := func(x, y, d float64) orb.Ring {
		return orb.Ring{{x, y}, {x + d, y}, {x + d, y + d}, {x, y + d}, {x, y}}
	}
	hole := square(2, 2, 1)
	hole.Reverse()
	l = &layers.Layer{Name: "parts", Plane: true, Features: []layers.Feature{{ID: "a", Shape: orb.MultiPolygon{{square(0, 0, 9), hole}, {square(20, 0, 1)}}}}}
	out = ogrinfo(t, "-ro", "-al", write(t, l))
	for _, want := range []string{`MULTIPOLYGON \(\(\(0 0,9 0,9 9,0 9,0 0\),\(2 2,2 3,3 3,3 2,2 2\)\),\(\(20 0,21 0,21 1,20 1,20 0\)\)\)`, `Extent: \(0.0+, 0.0+\) - \(21.0+, 9.0+\)`} {
		if !regexp.MustCompile(want).MatchString(out) {
			t.Errorf("no %s in\n%s", want, out)
		}
	}
	if regexp.MustCompile(`EPSG`).MatchString(out) {
		t.Errorf("a plane without a place has a CRS:\n%s", out)
	}
}
