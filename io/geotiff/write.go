package geotiff

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"runtime"

	"drumlin/spatial"
)

// Kinds of error, to be told apart with errors.Is.
var (
	// ErrTooLarge: the file would pass 4 GiB, which classic TIFF cannot hold.
	ErrTooLarge = errors.New("too large for TIFF")
	// ErrUnsupported: a CRS or surface this format cannot say.
	ErrUnsupported = errors.New("not supported by GeoTIFF")
)

// Options of Write. The zero value is the default.
type Options struct {
	Tile        int    // side of a tile in pixels, a multiple of 16; 0 chooses by size
	Level       int    // deflate level 1 to 9; 0 means 1, within 5 % of the size of 6 at half the time
	Workers     int    // goroutines that compress; 0 means all CPUs; no effect on the bytes
	Unit        string // of the band; "" means "events per km2"
	Description string // of the band; "" means "event intensity"
}

func (o Options) withDefaults(w, h int) (Options, error) {
	if o.Tile == 0 {
		switch long := max(w, h); {
		case long >= 2048:
			o.Tile = 512
		case long > 256:
			o.Tile = 256
		default:
			o.Tile = (long + 15) / 16 * 16
		}
	}
	if o.Level == 0 {
		o.Level = 1
	}
	if o.Workers <= 0 {
		o.Workers = runtime.GOMAXPROCS(0)
	}
	if o.Unit == "" {
		o.Unit = "events per km2"
	}
	if o.Description == "" {
		o.Description = "event intensity"
	}
	var err error
	if o.Tile < 16 || o.Tile%16 != 0 || o.Tile > 4096 {
		err = fmt.Errorf("geotiff: tiles of %d pixels; needs a multiple of 16 up to 4096", o.Tile)
	}
	if o.Level < 1 || o.Level > 9 {
		err = errors.Join(err, fmt.Errorf("geotiff: deflate level %d; needs 1 to 9", o.Level))
	}
	return o, err
}

// Write writes surface.tif from the surface of a release. It holds the
// compressed file in memory, since the directories that come first carry the
// sizes of all tiles. A cancelled ctx stops it; w then may have got nothing or
// a part.
func Write(ctx context.Context, w io.Writer, r *spatial.Release, opt Options) error {
	return writeSurface(ctx, w, r.Surface(), opt)
}

// maxNodes bounds the work before the compressed size is known: beyond it not
// even a surface that compresses to a tenth would fit into 4 GiB.
const maxNodes = 1 << 33

func writeSurface(ctx context.Context, w io.Writer, s spatial.Surface, opt Options) error {
	if s.Dim() == 2 && float64(s.N[0])*float64(s.N[1]) > maxNodes {
		return fmt.Errorf("geotiff: %d by %d nodes; use a coarser lattice: %w", s.N[0], s.N[1], ErrTooLarge)
	}
	if s.Dim() != 2 || len(s.Values) != s.Len() || len(s.Origin) != 2 || len(s.Step) != 2 {
		return fmt.Errorf("geotiff: a surface of %d axes with %d values; needs two axes and a value at every node: %w", s.Dim(), len(s.Values), ErrUnsupported)
	}
	width, height := s.N[0], s.N[1]
	opt, err := opt.withDefaults(width, height)
	if err != nil {
		return err
	}
	keys, err := geoKeys(s.CRS)
	if err != nil {
		return err
	}
	p := newPyramid(ctx, width, height, opt)
	if err := p.feed(s); err != nil {
		return err
	}
	f := layout{levels: p.levels, opt: opt, keys: keys,
		west:  s.Origin[0] - s.Step[0]/2,
		north: s.Origin[1] + s.Step[1]*(float64(height)-0.5),
		step:  [2]float64{s.Step[0], s.Step[1]},
	}
	return f.write(ctx, w)
}

// feed pushes the rows of the surface through the pyramid from the north down.
func (p *pyramid) feed(s spatial.Surface) (err error) {
	p.start()
	defer func() {
		if err2 := p.finish(); err == nil {
			err = err2
		}
	}()
	width, height := s.N[0], s.N[1]
	row := make([]float32, width)
	for j := height - 1; j >= 0; j-- {
		for i, v := range s.Values[j*width : (j+1)*width] {
			x := float32(v)
			if x != x {
				x = nan32
			} else if math.IsInf(float64(x), 0) {
				return fmt.Errorf("geotiff: node (%d, %d) is %g, beyond float32: %w", i, j, v, ErrUnsupported)
			}
			row[i] = x
		}
		if err := p.push(0, row); err != nil {
			return err
		}
	}
	return nil
}
