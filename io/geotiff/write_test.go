package geotiff_test

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"testing"

	"drumlin/io/geotiff"
	"drumlin/mv"
	"drumlin/spatial"
)

var laea = spatial.CRS{
	Name: "Lambert azimuthal equal-area, centre 178E 21S, WGS 84", Method: "LAEA", Ellipsoid: "WGS 84",
	Lon0: 178, Lat0: -21,
}

// bumps is a smooth surface with a floor and a corner without values.
func bumps(crs spatial.CRS, w, h int) spatial.Surface {
	l, err := mv.NewLattice([]float64{-31000, 4000}, []float64{64, 128}, []int{w, h})
	if err != nil {
		panic(err)
	}
	s := spatial.Surface{Grid: mv.NewGrid(l), CRS: crs}
	for j := range h {
		for i := range w {
			x, y := float64(i)/float64(w), float64(j)/float64(h)
			v := 40*math.Exp(-60*((x-.3)*(x-.3)+(y-.7)*(y-.7))) + 15*math.Exp(-150*((x-.7)*(x-.7)+(y-.4)*(y-.4)))
			v = max(v, 0.5)
			if x+y > 1.8 {
				v = math.NaN()
			}
			s.Values[j*w+i] = v
		}
	}
	return s
}

func write(t *testing.T, s spatial.Surface, opt geotiff.Options) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := geotiff.WriteSurface(context.Background(), &b, s, opt); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func same(a, b float32) bool { return a == b || a != a && b != b }

func TestPixelsComeBack(t *testing.T) {
	for _, n := range [][2]int{{1, 1}, {5, 3}, {16, 16}, {255, 40}, {256, 256}, {257, 511}, {700, 513}, {2100, 5}} {
		s := bumps(laea, n[0], n[1])
		ims := readTIFF(t, write(t, s, geotiff.Options{}))
		w, h := n[0], n[1]
		want := make([]float32, w*h)
		for j := range h {
			for i := range w {
				want[j*w+i] = float32(s.Values[(h-1-j)*w+i]) // north first
			}
		}
		for k, im := range ims {
			if im.w != w || im.h != h {
				t.Fatalf("%v level %d is %d by %d, want %d by %d", n, k, im.w, im.h, w, h)
			}
			for i, v := range im.px {
				if !same(v, want[i]) {
					t.Fatalf("%v level %d pixel %d is %v, want %v", n, k, i, v, want[i])
				}
			}
			want, w, h = halved(want, w, h), (w+1)/2, (h+1)/2
		}
		if last := ims[len(ims)-1]; max(last.w, last.h) >= 256 {
			t.Errorf("%v: smallest overview is %d by %d", n, last.w, last.h)
		}
	}
}

// halved is the slow oracle of the overviews.
func halved(px []float32, w, h int) []float32 {
	var out []float32
	for j := 0; j < h; j += 2 {
		for i := 0; i < w; i += 2 {
			var s, n float64
			for y := j; y < min(j+2, h); y++ {
				for x := i; x < min(i+2, w); x++ {
					if v := px[y*w+x]; v == v {
						s, n = s+float64(v), n+1
					}
				}
			}
			out = append(out, float32(s/n))
		}
	}
	return out
}

func TestCloudOptimizedOrder(t *testing.T) {
	file := write(t, bumps(laea, 1100, 900), geotiff.Options{})
	ims := readTIFF(t, file)
	if len(ims) != 4 {
		t.Fatalf("%d images", len(ims))
	}
	next := uint32(0)
	for k := len(ims) - 1; k >= 0; k-- {
		im := ims[k]
		if want := uint32(min(k, 1)); im.tags[254].ints()[0] != want {
			t.Errorf("level %d: subfile type %d", k, im.tags[254].ints()[0])
		}
		if k > 0 && im.at <= ims[k-1].at {
			t.Errorf("directory %d lies before that of the larger image", k)
		}
		if string(im.tags[42113].raw) != "nan\x00" {
			t.Errorf("level %d: nodata %q", k, im.tags[42113].raw)
		}
		for i, o := range im.offsets {
			if o < ims[len(ims)-1].at || o < next || next > 0 && o != next {
				t.Fatalf("level %d tile %d at %d, want %d", k, i, o, next)
			}
			next = o + im.sizes[i]
		}
	}
	if int(next) != len(file) {
		t.Errorf("data ends at %d of %d", next, len(file))
	}
	// the corner is half a step outside the north-western node
	tie, scale := ims[0].tags[33922].doubles(), ims[0].tags[33550].doubles()
	if tie[3] != -31000-32 || tie[4] != 4000+128*899.5 || scale[0] != 64 || scale[1] != 128 {
		t.Errorf("tie point %v, scale %v", tie, scale)
	}
}

func TestBytesDoNotDependOnWorkers(t *testing.T) {
	s := bumps(laea, 1300, 1100)
	want := write(t, s, geotiff.Options{Workers: 1})
	for _, n := range []int{1, 2, 3, 8} {
		for range 3 {
			if !bytes.Equal(write(t, s, geotiff.Options{Workers: n}), want) {
				t.Fatalf("%d workers give other bytes", n)
			}
		}
	}
}

// A NaN with another payload must not change the bytes.
func TestOneNaN(t *testing.T) {
	s := bumps(laea, 30, 30)
	want := write(t, s, geotiff.Options{})
	for i, v := range s.Values {
		if v != v {
			s.Values[i] = math.Float64frombits(0xfff8dead00000000)
		}
	}
	if !bytes.Equal(write(t, s, geotiff.Options{}), want) {
		t.Error("bytes depend on the payload of a NaN")
	}
}

func TestGolden(t *testing.T) {
	file := write(t, bumps(laea, 24, 20), geotiff.Options{})
	name := filepath.Join("testdata", "small.tif")
	if os.Getenv("DRUMLIN_GOLDEN") == "1" {
		if err := os.WriteFile(name, file, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(file, want) {
		a, b := sha256.Sum256(file), sha256.Sum256(want)
		t.Errorf("bytes differ from testdata/small.tif (%d and %d bytes, %s and %s): a changed layout is its own commit, made with DRUMLIN_GOLDEN=1",
			len(file), len(want), hex.EncodeToString(a[:4]), hex.EncodeToString(b[:4]))
	}
}

func TestRefusals(t *testing.T) {
	ctx := context.Background()
	good := bumps(laea, 20, 20)
	for name, c := range map[string]struct {
		change func(*spatial.Surface)
		opt    geotiff.Options
		kind   error
	}{
		"values missing":  {change: func(s *spatial.Surface) { s.Values = s.Values[:7] }, kind: geotiff.ErrUnsupported},
		"empty":           {change: func(s *spatial.Surface) { *s = spatial.Surface{} }, kind: geotiff.ErrUnsupported},
		"beyond float32":  {change: func(s *spatial.Surface) { s.Values[5] = 1e39 }, kind: geotiff.ErrUnsupported},
		"infinite":        {change: func(s *spatial.Surface) { s.Values[5] = math.Inf(1) }, kind: geotiff.ErrUnsupported},
		"strange method":  {change: func(s *spatial.Surface) { s.CRS.Method = "Polyconic" }, kind: geotiff.ErrUnsupported},
		"strange ball":    {change: func(s *spatial.Surface) { s.CRS.Ellipsoid = "Clarke 1866" }, kind: geotiff.ErrUnsupported},
		"strange code":    {change: func(s *spatial.Surface) { s.CRS.ID = "ESRI:54009" }, kind: geotiff.ErrUnsupported},
		"beyond 4 GiB":    {change: func(s *spatial.Surface) { s.N = []int{1 << 18, 1 << 18} }, kind: geotiff.ErrTooLarge},
		"tile of 100":     {opt: geotiff.Options{Tile: 100}},
		"level 11":        {opt: geotiff.Options{Level: 11}},
		"everything fine": {kind: nil},
	} {
		s := good
		s.Values = append([]float64(nil), good.Values...)
		if c.change != nil {
			c.change(&s)
		}
		err := geotiff.WriteSurface(ctx, io.Discard, s, c.opt)
		if (err == nil) != (name == "everything fine") || c.kind != nil && !errors.Is(err, c.kind) {
			t.Errorf("%s: %v", name, err)
		}
	}
	stop, cancel := context.WithCancel(ctx)
	cancel()
	if err := geotiff.WriteSurface(stop, io.Discard, bumps(laea, 1200, 1200), geotiff.Options{}); !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled: %v", err)
	}
	broken := errors.New("broken pipe")
	if err := geotiff.WriteSurface(ctx, failing{broken}, good, geotiff.Options{}); !errors.Is(err, broken) {
		t.Errorf("failing writer: %v", err)
	}
}

type failing struct{ err error }

func (f failing) Write([]byte) (int, error) { return 0, f.err }

func BenchmarkWrite(b *testing.B) {
	for _, c := range []struct {
		name string
		n    int
		opt  geotiff.Options
	}{
		{"nodes=1024/workers=1", 1024, geotiff.Options{Workers: 1}},
		{"nodes=1024/workers=2", 1024, geotiff.Options{Workers: 2}},
		{"nodes=1024/workers=2/level=1", 1024, geotiff.Options{Workers: 2, Level: 1}},
		{"nodes=1024/workers=2/level=3", 1024, geotiff.Options{Workers: 2, Level: 3}},
		{"nodes=1024/workers=2/level=7", 1024, geotiff.Options{Workers: 2, Level: 7}},
		{"nodes=4096/workers=2", 4096, geotiff.Options{Workers: 2}},
	} {
		b.Run(c.name, func(b *testing.B) {
			s := bumps(laea, c.n, c.n)
			b.SetBytes(int64(4 * c.n * c.n))
			b.ReportAllocs()
			var n counter
			for b.Loop() {
				n = 0
				if err := geotiff.WriteSurface(context.Background(), &n, s, c.opt); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(n)/1e6, "MB")
		})
	}
}

type counter int

func (c *counter) Write(p []byte) (int, error) { *c += counter(len(p)); return len(p), nil }
