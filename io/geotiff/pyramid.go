package geotiff

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"sync"

	"github.com/klauspost/compress/zlib"
)

// nan32 is the one not-a-number that is written, so that bytes do not depend
// on where a NaN came from.
var nan32 = math.Float32frombits(0x7fc00000)

// level is one resolution. Its rows arrive from the north; a full strip of
// tiles is handed to the workers.
type level struct {
	w, h         int
	across, down int       // tiles
	rows         int       // received
	stride       int       // pixels in a row of strip: whole tiles
	strip        []float32 // one row of tiles
	half         []float32 // a row for the level below; nil at the smallest
	tiles        [][]byte  // compressed, row by row
}

// pyramid cuts rows into tiles at every resolution and compresses them.
type pyramid struct {
	ctx    context.Context
	tile   int
	opt    Options
	levels []*level
	jobs   chan job
	free   chan []float32
	wg     sync.WaitGroup
	mu     sync.Mutex
	err    error
}

type job struct {
	out *[]byte
	px  []float32
}

func newPyramid(ctx context.Context, w, h int, opt Options) *pyramid {
	p := &pyramid{ctx: ctx, tile: opt.Tile, opt: opt}
	for {
		l := &level{w: w, h: h, across: (w + p.tile - 1) / p.tile, down: (h + p.tile - 1) / p.tile}
		l.stride = l.across * p.tile
		l.strip = make([]float32, l.stride*p.tile)
		l.tiles = make([][]byte, l.across*l.down)
		p.levels = append(p.levels, l)
		if max(w, h) < 256 {
			return p
		}
		w, h = (w+1)/2, (h+1)/2
		l.half = make([]float32, w)
	}
}

func (p *pyramid) start() {
	n := p.opt.Workers
	p.jobs, p.free = make(chan job, n), make(chan []float32, 2*n)
	for range 2 * n {
		p.free <- make([]float32, p.tile*p.tile)
	}
	for range n {
		p.wg.Go(p.work)
	}
}

// finish waits for the workers and returns their first error.
func (p *pyramid) finish() error {
	close(p.jobs)
	p.wg.Wait()
	return p.err
}

// push takes the next row of a level, hands full strips on, and feeds the mean
// of two rows to the level below.
func (p *pyramid) push(k int, row []float32) error {
	l := p.levels[k]
	at := l.rows % p.tile
	dst := l.strip[at*l.stride : (at+1)*l.stride]
	copy(dst, row)
	fill(dst[l.w:], row[l.w-1]) // beyond the edge: what compresses best
	l.rows++
	last := l.rows == l.h
	if l.half != nil && (l.rows%2 == 0 || last) {
		if above := l.strip[max(at-1, 0)*l.stride:]; l.rows%2 == 0 {
			halve(l.half, above[:l.w], dst[:l.w])
		} else {
			halve(l.half, dst[:l.w], nil)
		}
		if err := p.push(k+1, l.half); err != nil {
			return err
		}
	}
	if at != p.tile-1 && !last {
		return nil
	}
	for r := at + 1; r < p.tile; r++ {
		copy(l.strip[r*l.stride:(r+1)*l.stride], dst)
	}
	return p.cut(l, (l.rows-1)/p.tile)
}

// cut hands the tiles of a full strip to the workers.
func (p *pyramid) cut(l *level, stripe int) error {
	for i := range l.across {
		var px []float32
		select {
		case px = <-p.free:
		case <-p.ctx.Done():
			return context.Cause(p.ctx)
		}
		for r := range p.tile {
			copy(px[r*p.tile:(r+1)*p.tile], l.strip[r*l.stride+i*p.tile:])
		}
		p.jobs <- job{&l.tiles[stripe*l.across+i], px}
	}
	return nil
}

// work compresses tiles until there are no more.
func (p *pyramid) work() {
	var buf bytes.Buffer
	raw := make([]byte, 4*p.tile*p.tile)
	zw, err := zlib.NewWriterLevel(&buf, p.opt.Level)
	for j := range p.jobs {
		if err == nil {
			predict(raw, j.px, p.tile)
			buf.Reset()
			zw.Reset(&buf)
			if _, err = zw.Write(raw); err == nil {
				err = zw.Close()
			}
			*j.out = bytes.Clone(buf.Bytes())
		}
		p.free <- j.px
	}
	if err != nil {
		p.mu.Lock()
		p.err = fmt.Errorf("geotiff: compress: %w", err)
		p.mu.Unlock()
	}
}

func fill(dst []float32, v float32) {
	for i := range dst {
		dst[i] = v
	}
}

// halve writes the mean of the valid pixels among 2 by 2; b is nil below the
// last row of an odd height.
func halve(dst, a, b []float32) {
	for i := range dst {
		x, y := 2*i, min(2*i+1, len(a)-1)
		if b != nil && y != x {
			// four valid pixels, or a sum that is not a number
			if s := float64(a[x]) + float64(a[y]) + float64(b[x]) + float64(b[y]); s == s {
				dst[i] = float32(s / 4)
				continue
			}
		}
		var s, n float64
		add := func(v float32) {
			if v == v {
				s, n = s+float64(v), n+1
			}
		}
		add(a[x])
		if y != x {
			add(a[y])
		}
		if b != nil {
			add(b[x])
			if y != x {
				add(b[y])
			}
		}
		if n == 0 {
			dst[i] = nan32
		} else {
			dst[i] = float32(s / n)
		}
	}
}

// predict is the floating-point predictor: in each row of a tile the bytes are
// sorted into planes, most significant first, and each byte then replaced by
// its difference from the one before.
func predict(dst []byte, px []float32, tile int) {
	for r := range tile {
		row, out := px[r*tile:(r+1)*tile], dst[4*r*tile:4*(r+1)*tile]
		b0, b1, b2, b3 := out[:tile], out[tile:2*tile], out[2*tile:3*tile], out[3*tile:]
		var p0, p1, p2, p3 byte
		if len(row) > 0 { // each plane goes on from the last byte of the plane before
			u := math.Float32bits(row[tile-1])
			p1, p2, p3 = byte(u>>24), byte(u>>16), byte(u>>8)
		}
		for i, v := range row {
			u := math.Float32bits(v)
			c0, c1, c2, c3 := byte(u>>24), byte(u>>16), byte(u>>8), byte(u)
			b0[i], b1[i], b2[i], b3[i] = c0-p0, c1-p1, c2-p2, c3-p3
			p0, p1, p2, p3 = c0, c1, c2, c3
		}
	}
}
