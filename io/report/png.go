package report

import (
	"fmt"
	"image/color"
	"image/png"
	"io"
	"math"

	"drumlin/io/record"
)

// PNGOptions of WritePNG. The zero value draws 1,600 pixels across, light.
type PNGOptions struct {
	Width int  // pixels, 800 to 6,400; default 1,600
	Dark  bool // light lines on a dark ground
}

// The picture is laid out on 1,200 units across: the map on the left, the
// legend on the right, the title above, the caution below.
const (
	picWidth  = 1200.0
	picMap    = 880.0
	picLeft   = 24.0
	picTop    = 78.0
	picLegend = picLeft + picMap + 24
	picFoot   = 104.0
)

// palette is what is not a band.
type palette struct{ page, land, ink, quiet, grid, halo, line, disc, mark color.NRGBA }

func rgb(v uint32) color.NRGBA { return color.NRGBA{uint8(v >> 16), uint8(v >> 8), uint8(v), 255} }

func paletteFor(dark bool) palette {
	if dark {
		return palette{rgb(0x14161a), rgb(0x20242a), rgb(0xe9e6e0), rgb(0xb3b0a9), rgb(0x7f868f), rgb(0x0d0f12), rgb(0xf7f4ee), rgb(0x14161a), rgb(0xffb3a8)}
	}
	return palette{rgb(0xffffff), rgb(0xfbfaf7), rgb(0x1d2126), rgb(0x525a64), rgb(0x8a8f96), rgb(0xffffff), rgb(0x14181c), rgb(0xffffff), rgb(0x7a1f2b)}
}

// WritePNG draws the page's map as a picture that needs no browser: bands,
// regions, numbered peaks, graticule, scale bar, north, a legend with units, a
// title and the caution. Equal pages and options give equal bytes.
func WritePNG(w io.Writer, p Page, opt PNGOptions) error {
	if err := p.validate(); err != nil {
		return err
	}
	if opt.Width == 0 {
		opt.Width = 1600
	}
	if opt.Width < 800 || opt.Width > 6400 {
		return fmt.Errorf("report: picture of %d pixels across; choose 800 to 6,400", opt.Width)
	}
	s := newScene(&p, mapFrame(&p, mapWidth, mapLeast, mapMost))
	mapHeight := float64(s.f.h) / float64(s.f.w) * picMap
	height := picTop + mapHeight + picFoot
	d, err := newPainter(opt.Width, height, paletteFor(opt.Dark), opt.Dark)
	if err != nil {
		return err
	}
	d.drawMap(s, mapHeight)
	d.drawFoot(&p, s, mapHeight)
	d.drawLegend(&p, mapHeight)
	d.text(picLeft, 36, 25, true, d.ink, shown(p.title()), left)
	d.text(picLeft, 63, 15, false, d.quiet, pictureLine(&p), left)
	return png.Encode(w, d.img)
}

// pictureLine is the second line of the title: what was counted and how it was
// smoothed.
func pictureLine(p *Page) string {
	b := p.Record.Bandwidth
	line := count(float64(p.Record.Rows.Used)) + " recorded events"
	if p.Period != nil {
		line += ", " + shown(p.Period.From) + p.Period.to() + shown(p.Period.Until)
	}
	return line + fmt.Sprintf("; each spread over %s along bearing %.0f° and %s across (%s, %s)", lengthText(b.Major), b.Bearing, lengthText(b.Minor), shown(b.Method), shown(b.Shape))
}

func (d *painter) drawMap(s *scene, mapHeight float64) {
	k := picMap / float64(s.f.w)
	at := func(q point) [2]float64 { return [2]float64{picLeft + float64(q.x)*k, picTop + float64(q.y)*k} }
	lines := func(in [][]point) (out [][][2]float64) {
		for _, r := range in {
			l := make([][2]float64, len(r))
			for i, q := range r {
				l[i] = at(q)
			}
			out = append(out, l)
		}
		return out
	}
	d.rect(picLeft, picTop, picMap, mapHeight, d.land)
	for i, rings := range s.bands {
		d.fill(lines(rings), bandColour(i, len(s.bands), d.dark))
	}
	context, edge, dark := lines(s.context), d.halo, d.ink
	edge.A, dark.A = 140, 190
	d.stroke(context, false, 2.2, edge, nil)
	d.stroke(context, false, 0.9, dark, nil)
	grid := d.grid
	grid.A = 165
	for _, l := range s.grid {
		d.stroke(lines(l.runs), false, 0.7, grid, nil)
	}
	d.stroke(lines(s.study), true, 1.4, d.ink, []float64{8, 3.5, 1.5, 3.5})
	n := len(s.regions)
	for i, r := range s.regions {
		halo := d.halo
		halo.A = 205
		d.stroke(lines(r.rings), true, 3.4, halo, nil)
		d.region(lines(r.rings), true, min(n-1-i, 3))
	}
	for _, l := range s.grid {
		if q := at(l.at); l.label != "" {
			d.textHalo(q[0], q[1], 12, false, d.ink, l.label, l.side)
		}
	}
	if s.spread.on {
		d.ellipse(at(s.spread.at), s.spread, k)
	}
	for _, q := range s.dots {
		d.dot(at(q), 2.4)
	}
	for i := len(s.marks) - 1; i >= 0; i-- {
		m := s.marks[i]
		a, b := at(m.at), at(m.label)
		if m.at != m.label {
			d.stroke([][][2]float64{{a, b}}, false, 1.2, d.mark, nil)
			d.dot(a, 2.4)
		}
		d.disc(b, 9, d.mark)
		d.disc(b, 7.4, d.inDisc)
		d.text(b[0], b[1]+4.1, 11.5, true, d.mark, fmt.Sprint(m.rank), middle)
	}
	d.stroke([][][2]float64{{{picLeft, picTop}, {picLeft + picMap, picTop}, {picLeft + picMap, picTop + mapHeight}, {picLeft, picTop + mapHeight}}}, true, 1, d.ink, nil)
}

// drawFoot draws the scale bar, north, the kernel and the caution.
func (d *painter) drawFoot(p *Page, s *scene, mapHeight float64) {
	k := picMap / float64(s.f.w)
	y := picTop + mapHeight + 16
	w := float64(s.bar.units) * k
	d.stroke([][][2]float64{{{picLeft, y - 4}, {picLeft, y + 4}}, {{picLeft, y}, {picLeft + w, y}}, {{picLeft + w/2, y - 4}, {picLeft + w/2, y + 4}}, {{picLeft + w, y - 4}, {picLeft + w, y + 4}}}, false, 1.2, d.ink, nil)
	d.rect(picLeft, y-3, w/2, 3, d.ink)
	d.text(picLeft, y+18, 12, false, d.ink, "0", left)
	d.text(picLeft+w/2, y+18, 12, false, d.ink, s.bar.half, middle)
	d.text(picLeft+w, y+18, 12, false, d.ink, s.bar.text, middle)
	if s.hasNorth {
		sin, cos := math.Sincos(s.north * math.Pi / 180)
		cx, cy := picLeft+w+70, y+2
		var arrow [][2]float64
		for _, v := range [][2]float64{{0, -14}, {6, 7}, {0, 3}, {-6, 7}} {
			arrow = append(arrow, [2]float64{cx + v[0]*cos - v[1]*sin, cy + v[0]*sin + v[1]*cos})
		}
		d.fill([][][2]float64{arrow}, d.ink)
		d.text(cx+14, cy+6, 13, true, d.ink, "N", left)
	}
	if b := p.Record.CRS.Plane.Name; b != "" {
		d.text(picLeft+picMap, y+18, 12, false, d.quiet, shown(b), right)
	}
	for i, l := range d.wrap(record.Caution, 13, true, picWidth-2*picLeft) {
		d.text(picLeft, y+50+17*float64(i), 13, true, d.mark, l, left)
	}
}

// drawLegend draws the regions' lines, the bands' colours and the spread of one
// event.
func (d *painter) drawLegend(p *Page, mapHeight float64) {
	k := picMap / float64(mapWidth*perPixel)
	x, y := picLegend, picTop+14
	regions := p.Release.Regions()
	if len(regions) > 0 {
		d.text(x, y, 15, true, d.ink, "Regions", left)
		y += 8
	}
	for i, r := range regions {
		y += 19
		d.region([][][2]float64{{{x, y - 4}, {x + 38, y - 4}}}, false, min(i, 3))
		d.text(x+48, y, 13, false, d.ink, fmt.Sprintf("%s: %s events inside,", contentText(r.Content), count(r.Events.Estimate)), left)
		y += 16
		d.text(x+48, y, 13, false, d.ink, areaText(r.AreaKM2)+" in "+partsText(len(r.Plane)), left)
	}
	bands := p.Release.Bands()
	highest := 0.0
	for _, b := range bands {
		highest = max(highest, b.FromPerKM2)
	}
	for _, q := range p.Release.Peaks() {
		highest = max(highest, q.IntensityPerKM2)
	}
	u := unitFor(highest)
	room := picTop + mapHeight - y - 130
	row := 20.0
	if n := float64(len(bands)); n*row > room {
		row = max(6, room/n)
	}
	if len(bands) > 0 {
		y += 36
		d.text(x, y, 15, true, d.ink, capital(p.counted())+" per "+u.name, left)
		y += 10
	}
	every := int(math.Ceil(14 / row))
	for i := len(bands) - 1; i >= 0; i-- {
		d.rect(x, y, 38, row, bandColour(i, len(bands), d.dark))
		if (len(bands)-1-i)%every == 0 {
			text := level(bands[i].FromPerKM2*u.km2) + " to " + level(bands[i].ToPerKM2*u.km2)
			if math.IsInf(bands[i].ToPerKM2, 0) {
				text = "over " + level(bands[i].FromPerKM2*u.km2)
			}
			d.text(x+48, y+row/2+4.5, 13, false, d.ink, text, left)
		}
		y += row
	}
	b := p.Record.Bandwidth
	e := ellipse{major: b.Major / frameUnit(p), minor: b.Minor / frameUnit(p), bearing: b.Bearing}
	if half, high := extent(e); 2*e.major <= stripMost*perPixel {
		y += 40
		d.text(x, y, 15, true, d.ink, "Spread of one event", left)
		y += 14 + high*k
		d.ellipse([2]float64{x + 4 + half*k, y}, e, k)
		d.text(x+20+2*half*k, y+4, 13, false, d.ink, "one scale, to scale", left)
	}
}

func frameUnit(p *Page) float64 {
	f := mapFrame(p, mapWidth, mapLeast, mapMost)
	return f.unit
}

// region strokes a border in the style of its rank, as the page does.
func (d *painter) region(l [][][2]float64, closed bool, rank int) {
	switch rank {
	case 0:
		d.stroke(l, closed, 2.2, d.line, nil)
	case 1:
		d.stroke(l, closed, 1.5, d.line, []float64{7.5, 3.5})
	case 2:
		d.stroke(l, closed, 1.5, d.line, []float64{1.6, 3.4})
	default:
		d.stroke(l, closed, 0.8, d.line, nil)
	}
}

func (d *painter) ellipse(at [2]float64, e ellipse, k float64) {
	var l [][2]float64
	sin, cos := math.Sincos(e.bearing * math.Pi / 180)
	for i := range 96 {
		u, v := math.Sincos(2 * math.Pi * float64(i) / 96)
		u, v = u*e.minor*k, -v*e.major*k
		l = append(l, [2]float64{at[0] + u*cos - v*sin, at[1] + u*sin + v*cos})
	}
	d.stroke([][][2]float64{l}, true, 2, d.mark, nil)
}

func (d *painter) dot(at [2]float64, r float64) {
	d.disc(at, r+1, d.halo)
	d.disc(at, r, d.mark)
}
