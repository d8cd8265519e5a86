package report

import (
	"fmt"
	"image"
	"image/color"
	"image/draw"
	"math"
	"strings"

	"golang.org/x/image/font"
	"golang.org/x/image/font/gofont/gobold"
	"golang.org/x/image/font/gofont/goregular"
	"golang.org/x/image/font/opentype"
	"golang.org/x/image/math/fixed"
	"golang.org/x/image/vector"
)

// painter draws shapes given in layout units.
type painter struct {
	palette
	inDisc color.NRGBA // ground of a numbered disc
	dark   bool
	img    *image.RGBA
	scale  float64 // pixels a unit
	ras    *vector.Rasterizer
	fonts  [2]*opentype.Font // regular, bold
	faces  map[faceKey]font.Face
}

type faceKey struct {
	size float64
	bold bool
}

// Sides on which text stands.
const (
	left = iota
	middle
	right
)

func newPainter(width int, height float64, c palette, dark bool) (*painter, error) {
	scale := float64(width) / picWidth
	d := &painter{palette: c, inDisc: c.disc, dark: dark, scale: scale, faces: map[faceKey]font.Face{}}
	for i, ttf := range [][]byte{goregular.TTF, gobold.TTF} {
		f, err := opentype.Parse(ttf)
		if err != nil {
			return nil, fmt.Errorf("report: font: %w", err)
		}
		d.fonts[i] = f
	}
	d.img = image.NewRGBA(image.Rect(0, 0, width, int(math.Ceil(height*scale))))
	draw.Draw(d.img, d.img.Bounds(), image.NewUniform(c.page), image.Point{}, draw.Src)
	d.ras = vector.NewRasterizer(1, 1)
	return d, nil
}

// shape rasterises closed outlines within their bounds only.
func (d *painter) shape(rings [][][2]float64, c color.NRGBA) {
	lo, hi := [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
	for _, r := range rings {
		for _, p := range r {
			for k := range 2 {
				lo[k], hi[k] = min(lo[k], p[k]*d.scale), max(hi[k], p[k]*d.scale)
			}
		}
	}
	box := image.Rect(int(math.Floor(lo[0])), int(math.Floor(lo[1])), int(math.Ceil(hi[0]))+1, int(math.Ceil(hi[1]))+1).Intersect(d.img.Bounds())
	if box.Empty() {
		return
	}
	d.ras.Reset(box.Dx(), box.Dy())
	x0, y0 := float64(box.Min.X), float64(box.Min.Y)
	for _, r := range rings {
		for i, p := range r {
			x, y := float32(p[0]*d.scale-x0), float32(p[1]*d.scale-y0)
			if i == 0 {
				d.ras.MoveTo(x, y)
			} else {
				d.ras.LineTo(x, y)
			}
		}
		d.ras.ClosePath()
	}
	d.ras.Draw(d.img, box, image.NewUniform(c), image.Point{})
}

func (d *painter) fill(rings [][][2]float64, c color.NRGBA) {
	if len(rings) > 0 {
		d.shape(rings, c)
	}
}

func (d *painter) rect(x, y, w, h float64, c color.NRGBA) {
	d.shape([][][2]float64{{{x, y}, {x + w, y}, {x + w, y + h}, {x, y + h}}}, c)
}

func (d *painter) disc(at [2]float64, r float64, c color.NRGBA) {
	d.shape([][][2]float64{circle(at, r)}, c)
}

func circle(at [2]float64, r float64) (out [][2]float64) {
	n := 8 + int(4*r)
	for i := range n {
		s, c := math.Sincos(2 * math.Pi * float64(i) / float64(n))
		out = append(out, [2]float64{at[0] + r*c, at[1] + r*s})
	}
	return out
}

// stroke draws lines as boxes with round joins. All outlines run the same way
// round, so where they overlap the cover stays one.
func (d *painter) stroke(lines [][][2]float64, closed bool, width float64, c color.NRGBA, dashes []float64) {
	var out [][][2]float64
	r := width / 2
	add := func(a, b [2]float64) {
		dx, dy := b[0]-a[0], b[1]-a[1]
		l := math.Hypot(dx, dy)
		if l == 0 {
			return
		}
		dx, dy = dx/l*r, dy/l*r
		out = append(out, [][2]float64{{a[0] + dy, a[1] - dx}, {b[0] + dy, b[1] - dx}, {b[0] - dy, b[1] + dx}, {a[0] - dy, a[1] + dx}})
	}
	for _, l := range lines {
		if closed && len(l) > 1 {
			l = append(append([][2]float64{}, l...), l[0])
		}
		parts := [][][2]float64{l}
		if dashes != nil {
			parts = dashed(l, dashes)
		}
		for _, part := range parts {
			for i := 1; i < len(part); i++ {
				add(part[i-1], part[i])
				if width > 1 && i < len(part)-1 {
					out = append(out, circle(part[i], r))
				}
			}
		}
	}
	d.fill(out, c)
}

// dashed cuts a line into dashes: lengths drawn and skipped in turn.
func dashed(l [][2]float64, pattern []float64) (out [][][2]float64) {
	k, rest := 0, pattern[0]
	var run [][2]float64
	if len(l) > 0 {
		run = [][2]float64{l[0]}
	}
	for i := 1; i < len(l); i++ {
		a, b := l[i-1], l[i]
		length := math.Hypot(b[0]-a[0], b[1]-a[1])
		for done := 0.0; done < length; {
			step := min(rest, length-done)
			done += step
			rest -= step
			t := done / length
			at := [2]float64{a[0] + t*(b[0]-a[0]), a[1] + t*(b[1]-a[1])}
			run = append(run, at)
			if rest <= 0 {
				if k%2 == 0 {
					out = append(out, run)
				}
				k = (k + 1) % len(pattern)
				rest = pattern[k]
				run = [][2]float64{at}
			}
		}
	}
	if k%2 == 0 && len(run) > 1 {
		out = append(out, run)
	}
	return out
}

func (d *painter) face(size float64, bold bool) font.Face {
	key := faceKey{size, bold}
	if f, ok := d.faces[key]; ok {
		return f
	}
	which := d.fonts[0]
	if bold {
		which = d.fonts[1]
	}
	f, err := opentype.NewFace(which, &opentype.FaceOptions{Size: size * d.scale, DPI: 72, Hinting: font.HintingNone})
	if err != nil {
		panic("report: face of the built-in font: " + err.Error())
	}
	d.faces[key] = f
	return f
}

// text draws one line with its baseline at y.
func (d *painter) text(x, y, size float64, bold bool, c color.NRGBA, s string, side int) {
	f := d.face(size, bold)
	w := font.MeasureString(f, s)
	at := fixed.Point26_6{X: fixed.Int26_6(math.Round(x * d.scale * 64)), Y: fixed.Int26_6(math.Round(y * d.scale * 64))}
	switch side {
	case middle:
		at.X -= w / 2
	case right:
		at.X -= w
	}
	(&font.Drawer{Dst: d.img, Src: image.NewUniform(c), Face: f, Dot: at}).DrawString(s)
}

// textHalo draws a line of text over a pale edge.
func (d *painter) textHalo(x, y, size float64, bold bool, c color.NRGBA, s string, side int) {
	for i := range 12 {
		sin, cos := math.Sincos(2 * math.Pi * float64(i) / 12)
		d.text(x+1.6*cos, y+1.6*sin, size, bold, d.halo, s, side)
	}
	d.text(x, y, size, bold, c, s, side)
}

// wrap breaks a text into lines of at most width units.
func (d *painter) wrap(s string, size float64, bold bool, width float64) (lines []string) {
	f := d.face(size, bold)
	most := fixed.Int26_6(width * d.scale * 64)
	line := ""
	for _, word := range strings.Fields(s) {
		try := strings.TrimSpace(line + " " + word)
		if line != "" && font.MeasureString(f, try) > most {
			lines = append(lines, line)
			try = word
		}
		line = try
	}
	return append(lines, line)
}
