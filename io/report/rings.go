package report

import (
	"math"
	"strconv"

	"drumlin/spatial"
)

// point is a place in drawing units, x to the right, y down.
type point struct{ x, y int }

// frame takes metres on the plane to drawing units.
type frame struct {
	left, top float64 // metres of the upper left corner
	unit      float64 // metres a drawing unit
	w, h      int     // size in drawing units
}

const (
	perPixel  = 4   // drawing units a pixel
	mapWidth  = 960 // pixels
	mapLeast  = 400 // pixels of height
	mapMost   = 880
	mapMargin = 0.035 // of the longer extent, around what is drawn
)

// newFrame fits a frame of the given width and bounds of height, in pixels,
// around a box in metres.
func newFrame(lo, hi spatial.XY, width, least, most int) frame {
	dx, dy := hi.X-lo.X, hi.Y-lo.Y
	m := mapMargin * max(dx, dy)
	dx, dy = dx+2*m, dy+2*m
	f := frame{w: width * perPixel}
	aspect := min(max(dy/dx, float64(least)/float64(width)), float64(most)/float64(width))
	if dy/dx > aspect {
		dx = dy / aspect
	}
	f.unit = dx / float64(f.w)
	f.h = int(math.Round(aspect*float64(width))) * perPixel
	f.left = (lo.X+hi.X)/2 - dx/2
	f.top = (lo.Y+hi.Y)/2 + float64(f.h)*f.unit/2
	return f
}

func (f *frame) at(p spatial.XY) (x, y float64) {
	return (p.X - f.left) / f.unit, (f.top - p.Y) / f.unit
}

func (f *frame) point(p spatial.XY) point {
	x, y := f.at(p)
	return point{int(math.Round(x)), int(math.Round(y))}
}

// back takes drawing units to metres.
func (f *frame) back(x, y float64) spatial.XY {
	return spatial.XY{X: f.left + x*f.unit, Y: f.top - y*f.unit}
}

// bounds grows a box by rings.
func bounds(lo, hi *spatial.XY, shapes spatial.MultiPolygon) {
	for _, poly := range shapes {
		for _, ring := range poly {
			for _, p := range ring {
				lo.X, lo.Y = min(lo.X, p.X), min(lo.Y, p.Y)
				hi.X, hi.Y = max(hi.X, p.X), max(hi.Y, p.Y)
			}
		}
	}
}

// ring thins a closed ring to within one unit and rounds it. What is smaller
// than a unit becomes a square of one, so that no part vanishes.
func (f *frame) ring(r spatial.Ring) []point {
	v := make([][2]float64, len(r), len(r)+1)
	far, most := 0, -1.0
	for i, p := range r {
		v[i][0], v[i][1] = f.at(p)
		if d := math.Hypot(v[i][0]-v[0][0], v[i][1]-v[0][1]); d > most {
			far, most = i, d
		}
	}
	if len(v) == 0 {
		return nil
	}
	v = append(v, v[0])
	keep := make([]bool, len(v))
	thin(v, 0, far, keep)
	thin(v, far, len(v)-1, keep)
	out := rounded(v[:len(v)-1], keep)
	for len(out) > 1 && out[0] == out[len(out)-1] {
		out = out[:len(out)-1]
	}
	if len(out) < 3 {
		p := out[0]
		out = []point{p, {p.x + 1, p.y}, {p.x + 1, p.y + 1}, {p.x, p.y + 1}}
	}
	return out
}

// line thins an open line.
func (f *frame) line(l []spatial.XY) []point {
	if len(l) == 0 {
		return nil
	}
	v := make([][2]float64, len(l))
	for i, p := range l {
		v[i][0], v[i][1] = f.at(p)
	}
	keep := make([]bool, len(v))
	thin(v, 0, len(v)-1, keep)
	return rounded(v, keep)
}

func rounded(v [][2]float64, keep []bool) []point {
	var out []point
	for i, p := range v {
		if !keep[i] {
			continue
		}
		q := point{int(math.Round(p[0])), int(math.Round(p[1]))}
		if len(out) == 0 || out[len(out)-1] != q {
			out = append(out, q)
		}
	}
	return out
}

// thin marks the vertices between i and j that a line within one unit needs,
// and both ends.
func thin(v [][2]float64, i, j int, keep []bool) {
	keep[i], keep[j] = true, true
	todo := [][2]int{{i, j}}
	for len(todo) > 0 {
		i, j := todo[len(todo)-1][0], todo[len(todo)-1][1]
		todo = todo[:len(todo)-1]
		most, at := 1.0, -1
		ax, ay := v[i][0], v[i][1]
		dx, dy := v[j][0]-ax, v[j][1]-ay
		l2 := dx*dx + dy*dy
		for k := i + 1; k < j; k++ {
			px, py := v[k][0]-ax, v[k][1]-ay
			t := 0.0
			if l2 > 0 {
				t = min(max((px*dx+py*dy)/l2, 0), 1)
			}
			if d := math.Hypot(px-t*dx, py-t*dy); d > most {
				most, at = d, k
			}
		}
		if at >= 0 {
			keep[at] = true
			todo = append(todo, [2]int{i, at}, [2]int{at, j})
		}
	}
}

// shape thins all rings of polygons.
func (f *frame) shape(m spatial.MultiPolygon) (out [][]point) {
	for _, poly := range m {
		for _, r := range poly {
			out = append(out, f.ring(r))
		}
	}
	return out
}

// ringKey tells rings apart whatever their direction and first vertex.
type ringKey struct {
	least, before, after spatial.XY
	n                    int
}

func less(a, b spatial.XY) bool { return a.X < b.X || a.X == b.X && a.Y < b.Y }

func keyOf(r spatial.Ring) ringKey {
	m := 0
	for i := range r {
		if less(r[i], r[m]) {
			m = i
		}
	}
	k := ringKey{least: r[m], before: r[(m+len(r)-1)%len(r)], after: r[(m+1)%len(r)], n: len(r)}
	if less(k.after, k.before) {
		k.before, k.after = k.after, k.before
	}
	return k
}

// above returns, for each band, the rings around everything from that band
// upwards. A border that two bands share has the same vertices in both and so
// cancels; each ring is then drawn once, and bands lie on each other without
// gaps.
func above(bands []spatial.Band) [][]spatial.Ring {
	out := make([][]spatial.Ring, len(bands))
	var rings []spatial.Ring
	place := map[ringKey]int{}
	for k := len(bands) - 1; k >= 0; k-- {
		for _, poly := range bands[k].Plane {
			for _, r := range poly {
				if len(r) < 3 {
					continue
				}
				key := keyOf(r)
				if n, ok := place[key]; ok {
					rings[n] = nil
					delete(place, key)
				} else {
					place[key] = len(rings)
					rings = append(rings, r)
				}
			}
		}
		for _, r := range rings {
			if r != nil {
				out[k] = append(out[k], r)
			}
		}
	}
	return out
}

// pathData writes rings as SVG path data with whole relative coordinates.
func pathData(b []byte, rings [][]point, closed bool) []byte {
	for _, r := range rings {
		b = append(b, 'M')
		b = strconv.AppendInt(b, int64(r[0].x), 10)
		b = pair(b, r[0].y)
		b = append(b, 'l')
		for i := 1; i < len(r); i++ {
			dx, dy := r[i].x-r[i-1].x, r[i].y-r[i-1].y
			if i > 1 {
				b = pair(b, dx)
			} else {
				b = strconv.AppendInt(b, int64(dx), 10)
			}
			b = pair(b, dy)
		}
		if closed {
			b = append(b, 'z')
		}
	}
	return b
}

// pair appends a further number; a minus sign parts it from the one before.
func pair(b []byte, v int) []byte {
	if v >= 0 {
		b = append(b, ' ')
	}
	return strconv.AppendInt(b, int64(v), 10)
}
